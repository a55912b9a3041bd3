//! A reading on the tablet, and what to do about it.

use askama::Template;
use askama_web::WebTemplate;
use axum::extract::State;
use axum::response::{IntoResponse, Redirect, Response};
use chemistry::put_right::Aim;
use chemistry::quantity::{NINETY_PERCENT, Ph, PhShift};
use chemistry::reading::WARMEST_SAMPLE;

use crate::brewery::Units;
use crate::db::Db;
use crate::error::Error;
use crate::id::{DoseId, MashCheckId, PlanId};
use crate::input::{Number, Problems};
use crate::plans::pages::check_address;
use crate::plans::weigh_out::needs_second_person;
use crate::plans::{
    Added, Advised, MashCheck, Plan, Prediction, Stage, State as PlanState, Step, mash_checks,
    operations, sheet, words,
};
use crate::web::chart::{DoseCurve, IntervalBar};
use crate::web::extract::At;
use crate::web::form::Form;
use crate::web::format;
use crate::web::layout::{Framer, Page};
use crate::web::units::Measure;

#[derive(Template, WebTemplate)]
#[template(path = "plans/check.html")]
pub(super) struct CheckPage {
    page: Page,
    plan: Plan,
    check: MashCheck,
    typed: Form,
    reading: String,
    sample: String,
    /// What is known about a hot sample, and what Leat does; empty for a cool one.
    hot: Vec<String>,
    interval: Option<IntervalBar>,
    curve: Option<DoseCurve>,
    verdict: (&'static str, &'static str),
    chance: String,
    step: Option<StepWords>,
    others: Vec<StepWords>,
    kind: &'static str,
    /// When to read again, once the step is in: the moment and the brewery's clock.
    again: Option<(String, String)>,
    /// Whether a tablet without network may keep the tick of the step.
    queued: bool,
    open: bool,
    weigh_in_first: bool,
    withdrawn: String,
}

/// A step with one material.
struct StepWords {
    material: usize,
    amount: String,
    unit: &'static str,
    name: String,
    vessel: &'static str,
    detail: String,
    expected: String,
    chance: String,
    adds: Vec<AddedWords>,
    dose: Option<DoseId>,
    weighed: bool,
    lot: String,
    cautions: Vec<&'static str>,
}

/// One figure of the whole liquor before and after a step.
struct AddedWords {
    figure: String,
    before: String,
    after: String,
    window: String,
    state: &'static str,
    state_words: &'static str,
}

fn added(added: &Added) -> AddedWords {
    let (low, high) = (added.low, added.high);
    let (state, state_words) = if high.is_some_and(|high| added.after > high + 0.05) {
        ("above", "above")
    } else if low.is_some_and(|low| added.after < low - 0.05) {
        ("below", "below")
    } else if low.is_none() && high.is_none() {
        ("unknown", "no window")
    } else {
        ("within", "within")
    };
    AddedWords {
        figure: added.figure.clone(),
        before: format::figure(added.before),
        after: format!("{} mg/L", format::figure(added.after)),
        window: match (low, high) {
            (Some(low), Some(high)) => {
                format!("{} to {} mg/L", format::figure(low), format::figure(high))
            }
            (Some(low), None) => format!("from {} mg/L", format::figure(low)),
            (None, Some(high)) => format!("up to {} mg/L", format::figure(high)),
            (None, None) => "none".into(),
        },
        state,
        state_words,
    }
}

fn step_words(plan: &Plan, check: &MashCheck, step: &Step, units: Units) -> StepWords {
    let dose = plan
        .doses
        .iter()
        .find(|dose| dose.mash_check == Some(check.id) && dose.material == step.material);
    let (amount, unit) = words::dose(units, &plan.inputs, step.material, step.amount);
    let item = plan.inputs.problem.shelf.get(step.material);
    let vessel = chemistry::material::Vessel::from_key(&step.vessel);
    StepWords {
        material: step.material,
        amount,
        unit,
        name: step.name.clone(),
        vessel: vessel.map_or("mash", |vessel| vessel.name()),
        detail: words::material_detail(&plan.inputs, step.material),
        expected: with_doubt(step.expected_ph, step.expected_sd),
        chance: step.chance.map_or_else(String::new, sheet::chance_words),
        adds: step.adds.iter().map(added).collect(),
        dose: dose.map(|dose| dose.id),
        weighed: dose.is_some_and(|dose| dose.weighed.is_some()),
        lot: plan
            .inputs
            .shelf
            .get(step.material)
            .map(|label| label.lot.clone())
            .unwrap_or_default(),
        cautions: item.map_or_else(Vec::new, |item| item.material.substance().cautions()),
    }
}

fn with_doubt(ph: f64, sd: f64) -> String {
    format!("{} ± {}", format::ph(ph), format::ph(sd))
}

/// The step that was taken or is to be taken, and the others it may be exchanged for.
fn steps(plan: &Plan, check: &MashCheck, units: Units) -> (Option<StepWords>, Vec<StepWords>) {
    let dose = plan
        .doses
        .iter()
        .find(|dose| dose.mash_check == Some(check.id));
    let advised = &check.advised;
    let mut offered: Vec<&Step> = advised.step.iter().chain(&advised.others).collect();
    // What stands in the weigh-out comes first, whatever was advised first.
    offered.sort_by_key(|step| dose.is_none_or(|dose| dose.material != step.material));
    let mut offered = offered
        .into_iter()
        .map(|step| step_words(plan, check, step, units));
    (offered.next(), offered.collect())
}

fn interval(plan: &Plan, advised: &Advised) -> Option<IntervalBar> {
    let (ph, sd) = (advised.expected_ph?, advised.expected_sd?);
    let expected = Prediction {
        ph: Ph::clamped(ph),
        sd: PhShift::clamped(sd),
        low: Ph::clamped(ph - NINETY_PERCENT * sd),
        high: Ph::clamped(ph + NINETY_PERCENT * sd),
    };
    Some(sheet::interval(
        expected,
        plan.inputs.problem.spec.mash_ph,
        Some((advised.reading_ph, advised.reading_sd)),
        Option::zip(advised.expected_now_ph, advised.expected_now_sd),
    ))
}

/// The chance that what was read lies in the window, in words.
fn chance(advised: &Advised) -> String {
    if advised.window_low.is_none() && advised.window_high.is_none() {
        return String::new();
    }
    let (low, high) = (
        advised.window_low.unwrap_or(Ph::LOW),
        advised.window_high.unwrap_or(Ph::HIGH),
    );
    let aim = Aim {
        target: Ph::clamped(f64::midpoint(low, high)),
        low: Ph::clamped(low),
        high: Ph::clamped(high),
    };
    sheet::chance(&aim, advised.reading_ph, advised.reading_sd)
}

/// What is known of hot samples, aloud.
fn hot(check: &MashCheck) -> Vec<String> {
    if check.sample <= WARMEST_SAMPLE {
        return Vec::new();
    }
    let shown = check.ph.get();
    let alone = check.advised.single_ph.unwrap_or(check.advised.reading_ph);
    vec![
        format!(
            "The sample was hot. The meter’s {} stays as it is in the records; Leat reckons {} for the same sample cooled, {} more.",
            format::ph(shown),
            format::ph(alone),
            format::ph(alone - shown)
        ),
        "Sources disagree about how far pH falls from 20 to 65 °C: 0.34 and 0.35 by two, about 0.2 by another, 0.21 to 0.26 in \
         nineteen worts measured one by one. Leat goes by those worts and allows ± 0.1 for the others."
            .into(),
    ]
}

async fn check_page(
    db: &Db,
    framer: &Framer,
    id: PlanId,
    check_id: MashCheckId,
    typed: Form,
) -> Result<CheckPage, Error> {
    let plan = operations::find(db, &framer.member, id).await?;
    let checks = mash_checks::list(db, &framer.member, id).await?;
    let check = checks
        .iter()
        .find(|check| check.id == check_id)
        .cloned()
        .ok_or(Error::NotFound("mash check of this plan"))?;
    let page = framer
        .page(
            format!(
                "{} of {} {}",
                check.stage.name(),
                plan.batch,
                plan.beer_name
            ),
            "brew-day",
        )
        .await;
    let units = page.settings.units;
    let zone = page.settings.time_zone.as_str();
    let advised = &check.advised;
    // The wait begins when the step goes in; until then it has not begun.
    let given = plan
        .doses
        .iter()
        .find(|dose| dose.mash_check == Some(check.id))
        .and_then(|dose| dose.weighed.as_ref().map(|weighed| weighed.at));
    let wait = advised
        .step
        .as_ref()
        .map_or(600.0, |step| step.reread_after_minutes * 60.0);
    // Whole seconds of a few minutes: no digit is lost.
    let ends = given.map(|at| at.plus_seconds(wait as i64));
    let again = advised.advice == "read_again";
    let (step, others) = steps(&plan, &check, units);
    let meter = match check.meter.as_str() {
        "" => "The meter".to_owned(),
        name => name.to_owned(),
    };
    let minute = check.since_strike().map_or_else(String::new, |minute| {
        format!(
            ", {} minutes after strike",
            format::decimals(minute.get(), 0)
        )
    });
    Ok(CheckPage {
        reading: with_doubt(advised.reading_ph, advised.reading_sd),
        sample: format!(
            "{meter} showed {} in a sample of {} {}{minute}.",
            format::ph(check.ph.get()),
            format::decimals(units.shown(Measure::Temperature, check.sample.get()), 0),
            units.label(Measure::Temperature),
        ),
        hot: hot(&check),
        verdict: match (advised.verdict.as_str(), check.stage) {
            // Nothing rests on it, so it is shown as no more than what was read.
            ("inside", _) if again => ("unknown", "inside, if it holds"),
            ("cannot_be_told", _) if again => ("unknown", "near, if it holds"),
            ("below", _) if again => ("unknown", "below, if it holds"),
            ("above", _) if again => ("unknown", "above, if it holds"),
            ("inside", _) => ("within", "inside the window"),
            ("cannot_be_told", Stage::Mash) => ("within", "cannot be told from the target"),
            ("cannot_be_told", _) => ("unknown", "cannot be told: near an edge"),
            ("below", _) => ("below", "below the window"),
            ("above", _) => ("above", "above the window"),
            _ => ("unknown", "written down"),
        },
        chance: if again {
            String::new()
        } else {
            chance(advised)
        },
        kind: match advised.advice.as_str() {
            "step" => "step",
            "stop" => "stop",
            "read_again" => "again",
            _ => "leave",
        },
        queued: step
            .as_ref()
            .and_then(|step| plan.inputs.problem.shelf.get(step.material))
            .is_some_and(|item| !needs_second_person(&page.settings, item.material.substance())),
        again: ends.map(|ends| (ends.to_string(), format::clock(ends, zone))),
        open: matches!(plan.state, PlanState::Approved | PlanState::Dosed)
            && check.withdrawn.is_none(),
        weigh_in_first: advised.why == "weigh_in_first",
        withdrawn: check.withdrawn.as_ref().map_or_else(String::new, |deed| {
            format!(
                "{}, {}: {}",
                deed.by,
                format::moment(deed.at, zone),
                deed.reason
            )
        }),
        interval: interval(&plan, advised),
        curve: sheet::dose_curve(&plan, &checks, &check, units),
        step,
        others,
        page,
        plan,
        check,
        typed,
    })
}

pub(super) async fn show_check(
    State(db): State<Db>,
    framer: Framer,
    At((id, check)): At<(PlanId, MashCheckId)>,
) -> Result<CheckPage, Error> {
    check_page(&db, &framer, id, check, Form::empty()).await
}

/// The page of the reading once something is `done`; as typed when that was refused.
async fn answer(
    db: &Db,
    framer: &Framer,
    id: PlanId,
    check: MashCheckId,
    typed: Form,
    done: Result<String, Error>,
) -> Result<Response, Error> {
    match done {
        Ok(to) => Ok(Redirect::to(&to).into_response()),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            Ok((status, check_page(db, framer, id, check, typed).await?).into_response())
        }
    }
}

pub(super) async fn choose_material(
    State(db): State<Db>,
    framer: Framer,
    At((id, check)): At<(PlanId, MashCheckId)>,
    typed: Form,
) -> Result<Response, Error> {
    let chosen = async {
        let material = Number::Typed(typed.value("material").to_owned());
        let place = |value: f64| {
            if (0.0..1000.0).contains(&value) && value.fract() == 0.0 {
                Ok(value as usize)
            } else {
                Err("Choose one of the materials offered")
            }
        };
        let mut problems = Problems::new();
        let material = problems.quantity("material", &material, place);
        problems.finish()?;
        let material = material.unwrap_or(usize::MAX);
        mash_checks::choose(&db, &framer.member, id, check, material).await?;
        Ok(check_address(id, check))
    };
    let chosen = chosen.await;
    answer(&db, &framer, id, check, typed, chosen).await
}

pub(super) async fn withdraw_check(
    State(db): State<Db>,
    framer: Framer,
    At((id, check)): At<(PlanId, MashCheckId)>,
    typed: Form,
) -> Result<Response, Error> {
    let withdrawn = async {
        let mut problems = Problems::new();
        let reason = problems.text("reason", typed.value("reason"), 500);
        problems.finish()?;
        mash_checks::withdraw(&db, &framer.member, id, check, reason.unwrap_or_default()).await?;
        Ok(format!("/plans/{id}?done=withdrawn"))
    };
    let withdrawn = withdrawn.await;
    answer(&db, &framer, id, check, typed, withdrawn).await
}
