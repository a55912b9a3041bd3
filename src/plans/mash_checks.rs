//! Reading the pH of a batch, and what to do about a mash that is not where it should be.

use chemistry::mash::MashInputs;
use chemistry::material::{DoseUnit, Role, Vessel};
use chemistry::plan::Preference;
use chemistry::put_right::{
    self, Advice, Corrected, Direction, LeaveIt, ReadAgain, Remedy, Situation, Stop, Verdict,
};
use chemistry::quantity::{Celsius, DoseAmount, Meq, Minutes, Ph, PhShift};
use chemistry::reading::cooled;
use serde_json::json;

use super::operations::{batch, title};
use super::{Advised, Deed, Dose, MashCheck, Plan, Stage, State, Step, compute, store};
use crate::db::Db;
use crate::error::Error;
use crate::id::{DoseId, MashCheckId, PlanId, UtcTime};
use crate::people::{Member, Permission};
use crate::record;
use crate::web::format;

/// A reading as it was taken.
#[derive(Clone, Debug, PartialEq)]
pub struct NewMashCheck {
    /// When in the making of the beer.
    pub stage: Stage,
    /// Minutes since strike.
    pub minute: Minutes,
    /// As the meter showed it.
    pub ph: Ph,
    /// Temperature of the sample in the meter's cup.
    pub sample: Celsius,
    /// Which meter.
    pub meter: String,
    /// One standard deviation of the meter at its last calibration.
    pub meter_sd: PhShift,
    /// Whether the meter was checked in buffer after a surprising reading.
    pub meter_checked: bool,
}

/// Writes a reading down and says what to do. A first step becomes a line of the
/// weigh-out.
pub async fn read(
    db: &Db,
    by: &Member,
    plan_id: PlanId,
    new: NewMashCheck,
) -> Result<MashCheck, Error> {
    by.may(Permission::BrewBatches)?;
    let mut tx = db.begin().await?;
    let plan = store::find(&mut tx, plan_id)
        .await?
        .ok_or(Error::NotFound("plan"))?;
    if !matches!(plan.state, State::Approved | State::Dosed) {
        return Err(Error::Conflict(format!(
            "This plan is {}: only the mash of an approved plan is read",
            plan.state.name().to_lowercase()
        )));
    }
    let earlier = store::checks(&mut tx, plan_id).await?;
    let advised = advise(&plan, &earlier, &new)?;
    let check = MashCheck {
        id: MashCheckId::new(),
        plan_id,
        stage: new.stage,
        read_at: UtcTime::now(),
        minute: new.minute,
        ph: new.ph,
        sample: new.sample,
        meter: new.meter,
        meter_sd: new.meter_sd,
        meter_checked: new.meter_checked,
        advised,
        read_by: by.name.clone(),
        withdrawn: None,
    };
    store::insert_check(&mut tx, &check).await?;
    if let Some(step) = &check.advised.step {
        let dose = Dose {
            id: DoseId::new(),
            position: plan
                .doses
                .iter()
                .map(|dose| dose.position)
                .max()
                .unwrap_or(0)
                + 1,
            vessel: Vessel::Mash,
            material: step.material,
            planned: DoseAmount::clamped(step.amount),
            mash_check: Some(check.id),
            weighed: None,
        };
        // A step advised before and never given is overtaken by this one.
        store::drop_open_steps(&mut tx, plan_id).await?;
        store::add_dose(&mut tx, plan_id, &dose).await?;
    }
    let name = format!("{} pH of {}", check.stage.name(), title(&plan));
    record::append(
        &mut tx,
        by,
        record::Change::created("mash check", check.id, &name, &describe(&check))
            .about_each(batch(&plan)),
    )
    .await?;
    tx.commit().await?;
    Ok(check)
}

/// Every reading of a batch, the earliest first.
pub async fn list(db: &Db, by: &Member, plan_id: PlanId) -> Result<Vec<MashCheck>, Error> {
    by.may(Permission::Read)?;
    store::checks(&mut *db.reader().await?, plan_id).await
}

/// Withdraws a reading that was not what it said: a wrong batch, a slip of the finger.
pub async fn withdraw(
    db: &Db,
    by: &Member,
    plan_id: PlanId,
    id: MashCheckId,
    reason: String,
) -> Result<(), Error> {
    by.may(Permission::BrewBatches)?;
    let mut tx = db.begin().await?;
    let plan = store::find(&mut tx, plan_id)
        .await?
        .ok_or(Error::NotFound("plan"))?;
    if plan.state == State::Closed {
        return Err(Error::Conflict(
            "This batch is closed: nothing of it can change".into(),
        ));
    }
    let checks = store::checks(&mut tx, plan_id).await?;
    let check = checks
        .iter()
        .find(|check| check.id == id)
        .ok_or(Error::NotFound("mash check of this plan"))?;
    if check.withdrawn.is_some() {
        return Err(Error::Conflict("This reading is withdrawn already".into()));
    }
    let deed = Deed {
        at: UtcTime::now(),
        by: by.name.clone(),
        reason: reason.clone(),
    };
    store::withdraw_check(&mut tx, id, &deed).await?;
    if check.advised.step.is_some() {
        store::drop_open_steps(&mut tx, plan_id).await?;
    }
    let name = format!("{} pH of {}", check.stage.name(), title(&plan));
    record::append(
        &mut tx,
        by,
        record::Change::event("withdrawn", "mash check", id, &name)
            .because(Some(reason))
            .about_each(batch(&plan)),
    )
    .await?;
    tx.commit().await?;
    Ok(())
}

fn describe(check: &MashCheck) -> serde_json::Value {
    json!({
        "stage": check.stage.key(),
        "minute": check.minute.get(),
        "ph": check.ph.get(),
        "sample_c": check.sample.get(),
        "meter": check.meter,
        "meter_sd": check.meter_sd.get(),
        "advice": check.advised.title,
    })
}

fn advise(plan: &Plan, earlier: &[MashCheck], new: &NewMashCheck) -> Result<Advised, Error> {
    let reading = cooled(new.ph, new.sample, new.meter_sd);
    let check = put_right::MashCheck {
        reading,
        sample: new.sample,
        minute: new.minute,
        calibrated: true,
        agrees: true,
        meter_checked: new.meter_checked,
    };
    if new.stage != Stage::Mash {
        return Ok(Advised {
            reading_ph: reading.value.get(),
            reading_sd: reading.sd,
            expected_ph: None,
            expected_sd: None,
            verdict: "noted".into(),
            advice: "leave".into(),
            title: "Written down".into(),
            words: vec![
                "Leat predicts the mash; a reading of another stage is kept beside it.".into(),
            ],
            step: None,
        });
    }
    let outcome = compute::as_weighed(plan)?;
    let mash = compute::mash_as_weighed(plan);
    let corrected = corrected(plan, &mash, earlier);
    let used = corrected.as_ref().map(|(_, material)| *material);
    let acid = remedy(plan, Role::Acid, used);
    let base = remedy(plan, Role::Base, used);
    let shelf = &plan.inputs.problem.shelf;
    let at_hand = |index: Option<usize>| {
        let item = shelf.get(index?)?;
        Some(Remedy {
            material: &item.material,
            cap: *outcome.room.get(index?)?,
        })
    };
    let assessment = put_right::assess(
        &check,
        &Situation {
            mash: &mash,
            aim: plan.inputs.problem.spec.mash_ph,
            acid: at_hand(acid),
            base: at_hand(base),
            corrected: corrected.map(|(corrected, _)| corrected),
        },
    );
    let foreseen_amiss = matches!(
        assessment.advice,
        Advice::FirstStep(_)
            | Advice::Stop { .. }
            | Advice::ReadAgain {
                why: ReadAgain::CheckTheMeter
            }
    );
    let (advice, heading, mut words, step) = match assessment.advice {
        Advice::LeaveIt { why } => ("leave", "Leave it", vec![leave_words(why)], None),
        Advice::ReadAgain { why } => (
            "read_again",
            read_again_title(why),
            vec![read_again_words(why)],
            None,
        ),
        Advice::Stop { why } => ("stop", "Stop: add nothing", vec![stop_words(why)], None),
        Advice::FirstStep(first) => {
            let material = match first.direction {
                Direction::Lower => acid,
                Direction::Raise => base,
            };
            match material.and_then(|index| Some((index, shelf.get(index)?))) {
                None => (
                    "stop",
                    "Stop: add nothing",
                    vec![stop_words(Stop::NoRemedy)],
                    None,
                ),
                Some((index, item)) => {
                    let amount = on_step(first.dose.get(), item.step.get());
                    let unit = match first.unit {
                        DoseUnit::Grams => "g",
                        DoseUnit::Millilitres => "mL",
                    };
                    let mut words = vec![format!(
                        "This is half of what the balance asks for. Stir it in, wait {} minutes and read again.",
                        format::decimals(first.reread_after.get(), 0)
                    )];
                    if first.capped {
                        words.push(
                            "It is less than half because of the limit on this batch.".into(),
                        );
                    }
                    let step = Step {
                        material: index,
                        name: item.name.clone(),
                        amount,
                        unit: unit.into(),
                        full_dose: first.full_dose.get(),
                        direction: match first.direction {
                            Direction::Lower => "lower".into(),
                            Direction::Raise => "raise".into(),
                        },
                        expected_ph: first.expected_ph.value.get(),
                        expected_sd: first.expected_ph.sd,
                        reread_after_minutes: first.reread_after.get(),
                    };
                    if amount > 0.0 {
                        ("step", "A first step", words, Some(step))
                    } else {
                        let words = vec!["What is missing is less than the scale can tell.".into()];
                        ("leave", "Leave it", words, None)
                    }
                }
            }
        }
    };
    let mut not_in: Vec<&str> = plan
        .doses
        .iter()
        .filter(|dose| {
            dose.mash_check.is_none()
                && dose.weighed.is_none()
                && dose.vessel != Vessel::Kettle
                && dose.vessel != Vessel::SpargeLiquor
        })
        .filter_map(|dose| shelf.get(dose.material))
        .map(|item| item.name.as_str())
        .collect();
    not_in.dedup();
    let (mut advice, mut heading, mut step) = (advice, heading, step);
    if !not_in.is_empty() {
        // The reading is compared with a mash that is not there yet, and a step now would
        // come on top of what is still to go in.
        if foreseen_amiss {
            (advice, heading, step) = ("stop", "Weigh in first what is planned", None);
            words = vec!["Then wait 10 minutes and read again. Add nothing else before.".into()];
        }
        words.push(format!(
            "Planned and not weighed in yet: {}. The prediction counts it as if it were in.",
            not_in.join(", ")
        ));
    }
    let verdict = match assessment.verdict {
        Verdict::Inside => "inside",
        Verdict::CannotBeTold => "cannot_be_told",
        Verdict::Outside(Direction::Raise) => "below",
        Verdict::Outside(Direction::Lower) => "above",
    };
    Ok(Advised {
        reading_ph: assessment.reading.value.get(),
        reading_sd: assessment.reading.sd,
        expected_ph: Some(assessment.expected.value.get()),
        expected_sd: Some(assessment.expected.sd),
        verdict: verdict.into(),
        advice: advice.into(),
        title: heading.into(),
        words,
        step,
    })
}

/// To the step of the scale below: a first step errs on the small side.
fn on_step(amount: f64, step: f64) -> f64 {
    if step > 0.0 {
        (amount / step + 1e-9).floor() * step
    } else {
        amount
    }
}

/// What was given as first steps so far, and the material of the first.
fn corrected(plan: &Plan, mash: &MashInputs, earlier: &[MashCheck]) -> Option<(Corrected, usize)> {
    let target = plan.inputs.problem.spec.mash_ph.target;
    let given: Vec<&Dose> = plan
        .doses
        .iter()
        .filter(|dose| dose.mash_check.is_some() && dose.weighed.is_some())
        .collect();
    let first = given.first()?;
    let step = earlier
        .iter()
        .find(|check| Some(check.id) == first.mash_check)?
        .advised
        .step
        .as_ref()?;
    let meq = |material: usize, amount: DoseAmount| {
        let item = plan.inputs.problem.shelf.get(material)?;
        Some(put_right::strength(mash, target, &item.material.contribution(amount)).get())
    };
    let sum: f64 = given
        .iter()
        .filter_map(|dose| meq(dose.material, dose.amount()))
        .sum();
    let full = meq(step.material, DoseAmount::clamped(step.full_dose))?;
    let corrected = Corrected {
        direction: if step.direction == "lower" {
            Direction::Lower
        } else {
            Direction::Raise
        },
        given: Meq::clamped(sum),
        first_full: Meq::clamped(full),
    };
    Some((corrected, first.material))
}

/// The material to put a mash right with: what was used for it before, else what the plan
/// doses, else the first on the shelf that may go into the mash.
fn remedy(plan: &Plan, role: Role, used: Option<usize>) -> Option<usize> {
    let shelf = &plan.inputs.problem.shelf;
    let fits = |index: &usize| {
        shelf.get(*index).is_some_and(|item| {
            item.material.substance().role() == role
                && item.vessels.contains(&Vessel::Mash)
                && item.preference != Preference::Avoided
        })
    };
    let planned = plan.doses.iter().map(|dose| dose.material);
    let usual = (0..shelf.len()).filter(|index| shelf[*index].preference == Preference::Usual);
    used.into_iter()
        .chain(planned)
        .chain(usual)
        .chain(0..shelf.len())
        .find(fits)
}

fn leave_words(why: LeaveIt) -> String {
    match why {
        LeaveIt::InsideWindow => "The mash is inside its window.".into(),
        LeaveIt::CannotBeTold => {
            "The reading is so near the target that the meter's own error covers the difference."
                .into()
        }
        LeaveIt::NeverRaised => {
            "It is below its window, and wort is not raised. Write it down and brew on.".into()
        }
    }
}

const fn read_again_title(why: ReadAgain) -> &'static str {
    match why {
        ReadAgain::TooEarly => "Too early: read again",
        ReadAgain::CoolTheSample => "Cool the sample and read again",
        ReadAgain::Calibrate => "Calibrate the meter and read again",
        ReadAgain::ReadingsDisagree => "Read once more",
        ReadAgain::CheckTheMeter => "Check the meter first",
    }
}

fn read_again_words(why: ReadAgain) -> String {
    match why {
        ReadAgain::TooEarly => "The mash is still settling. Read it from minute ten on.".into(),
        ReadAgain::CoolTheSample => {
            "The sample was hot, so its pH when cooled is only an estimate. Cool it to room temperature and read it again."
                .into()
        }
        ReadAgain::Calibrate => "The meter was not calibrated within a day, or is not fit for use. The reading is kept; nothing is \
             advised on it."
            .into(),
        ReadAgain::ReadingsDisagree => {
            "It contradicts another reading taken within minutes. Take a third sample; the two that agree count.".into()
        }
        ReadAgain::CheckTheMeter => "The reading is further from the prediction than chance explains. Check the meter in \
             fresh buffer, take a new sample, and say so when you enter it."
            .into(),
    }
}

fn stop_words(why: Stop) -> String {
    match why {
        Stop::NotThePlannedMash => "The meter is right, so this is not the mash that was planned. Look for a wrong malt, a \
             wrong dose or changed water before anything goes in."
            .into(),
        Stop::CapReached => "The first steps have reached what this batch may take. Brew on and write it down.".into(),
        Stop::AlreadyCorrectedTheOtherWay => {
            "A step the other way was given before. Another would only chase the meter.".into()
        }
        Stop::NoRemedy => "Nothing on this plan's shelf may go into the mash for that, or it cannot reach the target.".into(),
        Stop::NoPrediction(error) => error.to_string(),
    }
}
