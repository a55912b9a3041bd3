//! What to do about a reading anywhere but in the mash: against its window, and in the
//! kettle against the pH wished for at cast-out.

use chemistry::kettle::{self, Buffering, KnownBy, Observed, Wort};
use chemistry::material::{Role, Vessel};
use chemistry::put_right::{Advice, Aim};
use chemistry::quantity::{Litres, Meq, NINETY_PERCENT, Ph};
use chemistry::stages::{
    ALE_END, Evidence, LAGER_END, SAFE_PACKAGE, STOP_RUNNINGS, StageWindow, Standing,
};

use super::repeats::Counted;
use super::said::Told;
use super::{Taken, in_numbers, remedies, said};
use crate::error::Error;
use crate::plans::{Advised, Dose, MashCheck, Plan, Stage, Step, compute};
use crate::web::format;

/// What to do about a reading of another stage.
pub(super) fn advise(taken: &Taken<'_>, counted: Counted) -> Result<Advised, Error> {
    let stage = taken.new.stage;
    let window = stage.window(taken.plan.inputs.problem.spec.mash_ph);
    let judged = stage != Stage::Liquor || sparge_is_acidified(taken.plan);
    let standing = window.standing(counted.reading);
    let (mut step, mut others) = (None, Vec::new());
    let told = match stage {
        Stage::KettleFull | Stage::EndOfBoil => {
            let late = late_acid(taken, counted)?;
            (step, others) = (late.step, late.others);
            late.told
        }
        _ if !judged => noted(
            "Written down",
            "Liquor that is not acidified has no window of pH: its alkalinity tells more.",
        ),
        _ => at_its_window(taken, counted, standing),
    };
    let mut words = said::repeats(&counted);
    words.extend(told.words);
    if judged {
        words.push(founded(&window));
    }
    let edge = |edge: Option<Ph>| edge.filter(|_| judged).map(Ph::get);
    Ok(Advised {
        reading_ph: counted.reading.value.get(),
        reading_sd: counted.reading.sd,
        single_ph: (counted.readings > 1).then_some(counted.single.value.get()),
        readings: counted.readings,
        expected_ph: None,
        expected_sd: None,
        expected_now_ph: None,
        expected_now_sd: None,
        window_low: edge(window.low),
        window_high: edge(window.high),
        window_source: if judged {
            window.source.into()
        } else {
            String::new()
        },
        verdict: match standing {
            _ if !judged => "noted",
            Standing::Inside => "inside",
            Standing::CannotBeTold => "cannot_be_told",
            Standing::Below => "below",
            Standing::Above => "above",
        }
        .into(),
        advice: told.advice.into(),
        why: told.why.into(),
        title: told.title,
        words,
        step,
        others,
    })
}

fn noted(title: &str, words: &str) -> Told {
    Told {
        advice: "leave",
        why: "noted",
        title: title.into(),
        words: vec![words.into()],
        alarms: false,
    }
}

/// Whether the plan acidifies liquor that runs over the grains.
fn sparge_is_acidified(plan: &Plan) -> bool {
    let shelf = &plan.inputs.problem.shelf;
    plan.doses.iter().any(|dose| {
        matches!(dose.vessel, Vessel::LiquorTank | Vessel::SpargeLiquor)
            && shelf
                .get(dose.material)
                .is_some_and(|item| item.material.substance().role() == Role::Acid)
    })
}

/// The window in words, and how well it is founded.
fn founded(window: &StageWindow) -> String {
    let between = match (window.low, window.high) {
        (Some(low), Some(high)) => {
            format!("{} to {}", format::ph(low.get()), format::ph(high.get()))
        }
        (None, Some(high)) => format!("up to {}", format::ph(high.get())),
        (Some(low), None) => format!("from {}", format::ph(low.get())),
        (None, None) => "open".into(),
    };
    let how_well = match window.evidence {
        Evidence::Spec => "",
        Evidence::Published => " It is assumed for this beer.",
        Evidence::Custom => {
            " The evidence is thin and it is assumed for this beer: what your own beers do comes first."
        }
    };
    format!("Window {between}: {}.{how_well}", window.source)
}

fn at_its_window(taken: &Taken<'_>, counted: Counted, standing: Standing) -> Told {
    let (ph, reach) = (
        counted.reading.value.get(),
        NINETY_PERCENT * counted.reading.sd,
    );
    let simply = |standing: Standing| match standing {
        Standing::Inside => ("leave", "inside", "Inside its window"),
        Standing::CannotBeTold => ("leave", "cannot_be_told", "Near the edge of its window"),
        Standing::Below => ("leave", "outside", "Below its window"),
        Standing::Above => ("leave", "outside", "Above its window"),
    };
    let (mut advice, mut why, mut title) = simply(standing);
    let words = match (taken.new.stage, standing) {
        (Stage::Liquor, Standing::Inside) => {
            "The liquor is acidified as it should be, as far as a pH tells."
        }
        (Stage::Liquor, _) => {
            "The pH of acidified liquor drifts for hours as carbon dioxide leaves it. Count its alkalinity before \
             anything is added."
        }
        (Stage::FirstRunnings, Standing::Inside) => {
            "The first runnings read about as the mash should."
        }
        (Stage::FirstRunnings, _) => {
            "First runnings read about as the mash does: read the mash, and look whether it is mixed."
        }
        (Stage::LastRunnings, Standing::Inside | Standing::Below) => "Go on collecting.",
        (Stage::LastRunnings, Standing::CannotBeTold) => {
            "They are near the limit. Read again in a few minutes, and be ready to stop."
        }
        (Stage::LastRunnings, Standing::Above) => {
            (advice, why) = ("stop", "outside");
            title = if ph - reach > STOP_RUNNINGS.get() {
                "Stop collecting"
            } else {
                "Stop collecting, or acidify the sparge"
            };
            "What runs now brings harshness more than extract. Stop, or bring the alkalinity of what is left of the \
             sparge liquor down: check it and Leat says how much acid."
        }
        (Stage::EndOfFermentation, _) => {
            let within = |(low, high): (Ph, Ph)| (low.get()..=high.get()).contains(&ph);
            match (within(ALE_END), within(LAGER_END)) {
                (true, _) => "That is where ales end.",
                (false, true) => "That is where lagers end. For an ale it is high: is it finished?",
                (false, false) if ph < ALE_END.0.get() => {
                    "That is lower than yeast alone takes a beer. Taste it, and think of souring."
                }
                (false, false) => "That is higher than beers end. Is it finished?",
            }
        }
        (Stage::Package, _) if ph > SAFE_PACKAGE.get() => {
            (advice, why, title) = ("stop", "unsafe", "Hold it: above pH 4.6");
            "Above 4.6 a beer no longer protects itself. Hold it, read again on a calibrated meter, and ask whoever \
             answers for food safety here before it leaves."
        }
        (Stage::Package, _) if ph + reach > SAFE_PACKAGE.get() => {
            (advice, why, title) = (
                "read_again",
                "unsafe",
                "Read again: 4.6 cannot be ruled out",
            );
            "Above 4.6 a beer no longer protects itself, and the meter’s own error reaches there. Read again on a \
             calibrated meter before it leaves."
        }
        (Stage::Package, Standing::Below) => "That is lower than beers as a rule are. Taste it.",
        (Stage::Package, _) => "It is below 4.6, and safe as far as pH tells.",
        (Stage::Mash | Stage::KettleFull | Stage::EndOfBoil, _) => "",
    };
    let mut words = vec![words.to_owned()];
    if !taken.meter.unfit.is_empty() {
        words.push(format!(
            "{} Calibrate it and read again before anything rests on this.",
            taken.meter.unfit
        ));
    }
    Told {
        advice,
        why,
        title: title.into(),
        words,
        alarms: advice == "stop",
    }
}

struct LateAcid {
    told: Told,
    step: Option<Step>,
    others: Vec<Step>,
}

fn late_acid(taken: &Taken<'_>, counted: Counted) -> Result<LateAcid, Error> {
    let (plan, new) = (taken.plan, taken.new);
    let spec = plan.inputs.problem.spec.mash_ph;
    let boiled = Stage::EndOfBoil.window(spec);
    let target = new.cast_out.unwrap_or(kettle::USUAL_TARGET);
    let edge = |edge: Option<Ph>| edge.map_or(target.get(), Ph::get);
    let aim = Aim {
        target,
        low: Ph::clamped(edge(boiled.low).min(target.get())),
        high: Ph::clamped(edge(boiled.high).max(target.get())),
    };
    let volume = new.wort.unwrap_or(plan.inputs.batch);
    let outcome = compute::as_weighed(plan)?;
    let buffering = buffering(taken, volume, target)?;
    let acids = remedies::at_hand(taken, Role::Acid, Vessel::Kettle, None);
    let check = in_numbers(taken, counted);
    let with = |acid| {
        let wort = Wort {
            volume,
            aim,
            boil_to_come: new.stage == Stage::KettleFull,
            buffering,
            acid,
        };
        kettle::assess(&check, &wort)
    };
    let first = acids
        .first()
        .and_then(|index| remedies::remedy(plan, &outcome, *index));
    let late = with(first);
    let (mut step, mut others) = (None, Vec::new());
    if let Advice::FirstStep(_) | Advice::Stop { .. } = late.advice {
        (step, others) =
            remedies::steps(
                plan,
                &outcome,
                Vessel::Kettle,
                &acids,
                |remedy| match with(Some(remedy)).advice {
                    Advice::FirstStep(first) => Some(first),
                    _ => None,
                },
            )?;
    }
    let mut told = match &step {
        Some(step) => said::first_step(step, late.advice),
        None => said::advice(late.advice, &taken.meter.unfit),
    };
    if new.stage == Stage::KettleFull {
        told.words.push(format!(
            "At cast-out {} ± {} is expected without acid: the boil takes {} ± {}, and sources disagree about it.",
            format::ph(late.at_cast_out.value.get()),
            format::ph(late.at_cast_out.sd),
            format::ph(kettle::BOIL_DROP.value.get()),
            format::ph(kettle::BOIL_DROP.sd)
        ));
    }
    if step.is_some() {
        told.words.push(known_by(&buffering));
        if new.wort.is_none() {
            told.words.push(format!(
                "The volume of the wort was not told: {} L is assumed, the beer of this batch.",
                format::figure(volume.get())
            ));
        }
    }
    told.words.push(format!(
        "Target at cast-out {}{}.",
        format::ph(target.get()),
        if new.cast_out.is_some() {
            ""
        } else {
            ", assumed"
        }
    ));
    Ok(LateAcid { told, step, others })
}

fn known_by(buffering: &Buffering) -> String {
    let how = match buffering.known_by {
        KnownBy::KettleStep => "learned from the step into this kettle",
        KnownBy::MashStep => {
            "learned from the steps into this batch’s mash and scaled to its wort; the scale is assumed"
        }
        KnownBy::MashModel => "the model of the mash scaled to its wort; the scale is assumed",
    };
    format!(
        "The wort buffers {} meq per litre and pH, give or take {}: {how}.",
        format::figure(buffering.value.get()),
        format::percent(buffering.relative_sd.get())
    )
}

fn buffering(taken: &Taken<'_>, wort: Litres, at: Ph) -> Result<Buffering, Error> {
    let mash = compute::mash_as_weighed(taken.plan);
    let in_mash = observed(taken, &[Stage::Mash], Vessel::Mash, |material| {
        mash.acid_given(at, material).get()
    });
    let in_kettle = observed(taken, &[taken.new.stage], Vessel::Kettle, |material| {
        material.acid_meq(at, chemistry::mash::BASIS).get()
    });
    kettle::buffering(&mash, at, wort, in_kettle, in_mash)
        .map_err(|error| Error::Conflict(error.to_string()))
}

/// What steps into a vessel did to the readings before and after them.
fn observed(
    taken: &Taken<'_>,
    stages: &[Stage],
    vessel: Vessel,
    acid: impl Fn(&chemistry::material::Contribution) -> f64,
) -> Option<Observed> {
    let given: Vec<&Dose> = taken
        .plan
        .doses
        .iter()
        .filter(|dose| dose.vessel == vessel && dose.mash_check.is_some())
        .filter(|dose| dose.weighed.is_some())
        .collect();
    let at = |dose: &&Dose| dose.weighed.as_ref().map(|weighed| weighed.at);
    let (first, last) = (
        given.iter().filter_map(at).min()?,
        given.iter().filter_map(at).max()?,
    );
    let readings = |check: &&MashCheck| stages.contains(&check.stage) && check.stands();
    let before = taken
        .earlier
        .iter()
        .filter(readings)
        .rfind(|check| check.read_at <= first)?;
    let to = if stages.contains(&taken.new.stage) {
        super::repeats::counted(taken).reading.value
    } else {
        let after = taken.earlier.iter().filter(readings);
        let after = after.rev().find(|check| check.read_at > last)?;
        Ph::clamped(after.advised.reading_ph)
    };
    let sum: f64 = given
        .iter()
        .filter_map(|dose| {
            let item = taken.plan.inputs.problem.shelf.get(dose.material)?;
            Some(acid(&item.material.contribution(dose.amount())))
        })
        .sum();
    Some(Observed {
        acid: Meq::clamped(sum),
        from: Ph::clamped(before.advised.reading_ph),
        to,
    })
}
