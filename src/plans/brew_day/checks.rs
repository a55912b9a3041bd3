//! Reading the mash on the tablet, and what to do about it.

use askama::Template;
use askama_web::WebTemplate;
use axum::Router;
use axum::extract::State;
use axum::response::{IntoResponse, Redirect, Response};
use axum::routing::{get, post};

use crate::db::Db;
use crate::error::Error;
use crate::id::{DoseId, MashCheckId, PlanId};
use crate::input::Problems;
use crate::people::Permission;
use crate::plans::asked::{METER_SD, NewMashCheckBody};
use crate::plans::mash_checks::{self, NewMashCheck};
use crate::plans::pages::check_address;
use crate::plans::{
    MashCheck, Plan, Prediction, Stage, State as PlanState, compute, operations, sheet, words,
};
use crate::web::App;
use crate::web::chart::IntervalBar;
use crate::web::extract::At;
use crate::web::form::{Choice, Form};
use crate::web::format;
use crate::web::layout::{Framer, Page};
use crate::web::units::{Measure, typed_in_si};

/// The pages.
pub(super) fn routes() -> Router<App> {
    Router::new()
        .route("/plans/{id}/mash-checks/new", get(new_check).post(read))
        .route("/plans/{id}/mash-checks/{check_id}", get(show_check))
        .route(
            "/plans/{id}/mash-checks/{check_id}/withdrawal",
            post(withdraw_check),
        )
}

#[derive(Template, WebTemplate)]
#[template(path = "plans/new_check.html")]
struct NewCheckPage {
    page: Page,
    plan: Plan,
    typed: Form,
    stages: Vec<Choice>,
    temperature_unit: &'static str,
    expected: String,
    not_in: Vec<String>,
}

async fn new_check_page(
    db: &Db,
    framer: &Framer,
    id: PlanId,
    typed: Form,
) -> Result<NewCheckPage, Error> {
    let plan = operations::find(db, &framer.member, id).await?;
    let page = framer
        .page(
            format!("Read the mash of {} {}", plan.batch, plan.beer_name),
            "brew-day",
        )
        .await;
    let expected = compute::as_weighed(&plan)
        .ok()
        .and_then(|outcome| compute::prediction(&outcome));
    // After a first step the reading before it foretells more than the plan does.
    let after_step = mash_checks::list(db, &framer.member, id)
        .await?
        .into_iter()
        .rev()
        .filter(|check| check.withdrawn.is_none())
        .find(|check| check.stage == Stage::Mash)
        .filter(|check| {
            plan.doses
                .iter()
                .any(|dose| dose.mash_check == Some(check.id) && dose.weighed.is_some())
        })
        .and_then(|check| check.advised.step)
        .map(|step| {
            format!(
                "{} ± {} after the step that went in",
                format::ph(step.expected_ph),
                format::ph(step.expected_sd)
            )
        });
    let not_in = plan
        .doses
        .iter()
        .filter(|dose| dose.weighed.is_none())
        .filter_map(|dose| plan.inputs.problem.shelf.get(dose.material))
        .map(|item| item.name.clone())
        .collect();
    Ok(NewCheckPage {
        stages: Choice::list(
            Stage::ALL.map(|stage| (stage.key(), stage.name())),
            typed.value("stage"),
        ),
        temperature_unit: page.settings.units.label(Measure::Temperature),
        expected: after_step.unwrap_or_else(|| {
            expected.map_or_else(String::new, |it| {
                format!(
                    "{}, 90 % between {} and {}",
                    format::ph(it.ph.get()),
                    format::ph(it.low.get()),
                    format::ph(it.high.get())
                )
            })
        }),
        not_in,
        page,
        plan,
        typed,
    })
}

async fn new_check(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<PlanId>,
) -> Result<NewCheckPage, Error> {
    let last = mash_checks::list(&db, &framer.member, id).await?.pop();
    let units = crate::brewery::operations::settings(&db).await?.units;
    let typed = Form::empty()
        .with("stage", Stage::Mash.key())
        .with(
            "sample_c",
            format::decimals(units.shown(Measure::Temperature, 20.0), 0),
        )
        .with(
            "meter",
            last.as_ref()
                .map(|check| check.meter.clone())
                .unwrap_or_default(),
        )
        .with(
            "meter_sd",
            last.map_or(METER_SD, |check| check.meter_sd.get())
                .to_string(),
        );
    new_check_page(&db, &framer, id, typed).await
}

async fn read(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<PlanId>,
    typed: Form,
) -> Result<Response, Error> {
    let read = async {
        framer.member.may(Permission::BrewBatches)?;
        let units = crate::brewery::operations::settings(&db).await?.units;
        let si = typed_in_si(
            &typed,
            units,
            &[("sample_c".to_owned(), Measure::Temperature)],
        );
        let new = NewMashCheck::try_from(si.body::<NewMashCheckBody>()?)?;
        mash_checks::read(&db, &framer.member, id, new).await
    };
    match read.await {
        Ok(check) => Ok(Redirect::to(&check_address(id, check.id)).into_response()),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            Ok((status, new_check_page(&db, &framer, id, typed).await?).into_response())
        }
    }
}

#[derive(Template, WebTemplate)]
#[template(path = "plans/check.html")]
struct CheckPage {
    page: Page,
    plan: Plan,
    check: MashCheck,
    typed: Form,
    reading: String,
    sample: String,
    interval: Option<IntervalBar>,
    verdict: (&'static str, &'static str),
    step: Option<StepWords>,
    kind: &'static str,
    wait_seconds: i64,
    wait_words: String,
    open: bool,
    withdrawn: String,
}

struct StepWords {
    amount: String,
    unit: &'static str,
    name: String,
    detail: String,
    expected: String,
    dose: Option<DoseId>,
    weighed: bool,
    lot: String,
    cautions: Vec<&'static str>,
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
        .into_iter()
        .find(|check| check.id == check_id)
        .ok_or(Error::NotFound("mash check of this plan"))?;
    let page = framer
        .page(
            format!("Mash of {} {}", plan.batch, plan.beer_name),
            "brew-day",
        )
        .await;
    let units = page.settings.units;
    let advised = &check.advised;
    let interval = match (advised.expected_ph, advised.expected_sd) {
        (Some(ph), Some(sd)) => {
            let expected = Prediction {
                ph: chemistry::quantity::Ph::clamped(ph),
                sd: chemistry::quantity::PhShift::clamped(sd),
                low: chemistry::quantity::Ph::clamped(
                    ph - chemistry::quantity::NINETY_PERCENT * sd,
                ),
                high: chemistry::quantity::Ph::clamped(
                    ph + chemistry::quantity::NINETY_PERCENT * sd,
                ),
            };
            let reading = Some((advised.reading_ph, advised.reading_sd));
            Some(sheet::interval(
                expected,
                plan.inputs.problem.spec.mash_ph,
                reading,
            ))
        }
        _ => None,
    };
    let step = advised.step.as_ref().map(|step| {
        let dose = plan
            .doses
            .iter()
            .find(|dose| dose.mash_check == Some(check.id));
        let (amount, unit) = words::dose(units, &plan.inputs, step.material, step.amount);
        let item = plan.inputs.problem.shelf.get(step.material);
        StepWords {
            amount,
            unit,
            name: step.name.clone(),
            detail: words::material_detail(&plan.inputs, step.material),
            expected: format!(
                "{} ± {}",
                format::ph(step.expected_ph),
                format::ph(step.expected_sd)
            ),
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
    });
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
    let wait_seconds = given.map_or(-1, |at| {
        (wait as i64 - crate::id::UtcTime::now().seconds_since(at)).max(0)
    });
    Ok(CheckPage {
        reading: format!(
            "{} ± {}",
            format::ph(advised.reading_ph),
            format::ph(advised.reading_sd)
        ),
        sample: format!(
            "The meter showed {} in a sample of {} {}, {} minutes after strike.",
            format::ph(check.ph.get()),
            format::decimals(units.shown(Measure::Temperature, check.sample.get()), 0),
            units.label(Measure::Temperature),
            format::decimals(check.minute.get(), 0)
        ),
        verdict: match advised.verdict.as_str() {
            "inside" => ("within", "inside the window"),
            "cannot_be_told" => ("within", "cannot be told from the target"),
            "below" => ("below", "below the window"),
            "above" => ("above", "above the window"),
            _ => ("unknown", "written down"),
        },
        kind: match advised.advice.as_str() {
            "step" => "step",
            "stop" => "stop",
            _ => "leave",
        },
        wait_words: if wait_seconds > 0 {
            format!("in {} minutes", (wait_seconds + 59) / 60)
        } else {
            "now".into()
        },
        open: matches!(plan.state, PlanState::Approved | PlanState::Dosed)
            && check.withdrawn.is_none(),
        withdrawn: check.withdrawn.as_ref().map_or_else(String::new, |deed| {
            format!(
                "{}, {}: {}",
                deed.by,
                format::moment(deed.at, &page.settings.time_zone),
                deed.reason
            )
        }),
        wait_seconds,
        interval,
        step,
        page,
        plan,
        check,
        typed,
    })
}

async fn show_check(
    State(db): State<Db>,
    framer: Framer,
    At((id, check)): At<(PlanId, MashCheckId)>,
) -> Result<CheckPage, Error> {
    check_page(&db, &framer, id, check, Form::empty()).await
}

async fn withdraw_check(
    State(db): State<Db>,
    framer: Framer,
    At((id, check)): At<(PlanId, MashCheckId)>,
    typed: Form,
) -> Result<Response, Error> {
    let withdrawn = async {
        let mut problems = Problems::new();
        let reason = problems.text("reason", typed.value("reason"), 500);
        problems.finish()?;
        mash_checks::withdraw(&db, &framer.member, id, check, reason.unwrap_or_default()).await
    };
    match withdrawn.await {
        Ok(()) => Ok(Redirect::to(&format!("/plans/{id}?done=withdrawn")).into_response()),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            Ok((status, check_page(&db, &framer, id, check, typed).await?).into_response())
        }
    }
}
