//! Closing a batch, and what is corrected about it afterwards.

use askama::Template;
use askama_web::WebTemplate;
use axum::extract::State;
use axum::response::{IntoResponse, Redirect, Response};

use super::account::{self, CorrectionLine, DeviationLine, DoseLine};
use super::{OutcomeRow, outcome_row};
use crate::db::Db;
use crate::error::Error;
use crate::id::PlanId;
use crate::input::Number;
use crate::people::Permission;
use crate::plans::asked::ClosingBody;
use crate::plans::closing::corrections::NewCorrectionBody;
use crate::plans::closing::{self, Closing, corrections, deviations};
use crate::plans::{MashCheck, Plan, Stage, State as PlanState, mash_checks, operations, words};
use crate::web::chart::IntervalBar;
use crate::web::extract::At;
use crate::web::form::{Choice, Form};
use crate::web::format;
use crate::web::layout::{Framer, Page};

#[derive(Template, WebTemplate)]
#[template(path = "plans/closing.html")]
pub(super) struct ClosingPage {
    page: Page,
    plan: Plan,
    typed: Form,
    closed: bool,
    may_correct: bool,
    checks: Vec<Choice>,
    doses: Vec<DoseLine>,
    interval: Option<IntervalBar>,
    outcome: Option<OutcomeRow>,
    deviations: Vec<DeviationLine>,
    corrections: Vec<CorrectionLine>,
    subjects: Vec<Choice>,
    note: String,
    units_of_doses: String,
}

fn counts(check: &&MashCheck) -> bool {
    check.stage == Stage::Mash && check.withdrawn.is_none()
}

async fn closing_page(
    db: &Db,
    framer: &Framer,
    id: PlanId,
    typed: Form,
) -> Result<ClosingPage, Error> {
    let by = &framer.member;
    let plan = operations::find(db, by, id).await?;
    let closed = plan.state == PlanState::Closed;
    let name = format!("{} {}", plan.batch, plan.beer_name);
    let title = if closed {
        format!("{name}, closed")
    } else {
        format!("Close {name}")
    };
    let page = framer.page(title, "plans").await;
    let checks = mash_checks::list(db, by, id).await?;
    let checks: Vec<&MashCheck> = checks.iter().filter(counts).collect();
    let chosen = checks
        .iter()
        .find(|check| check.id.to_string() == typed.value("mash_check_id"))
        .copied();
    let choices = checks.iter().map(|check| {
        let words = format!(
            "minute {}: {} ± {}",
            format::decimals(check.minute.get(), 0),
            format::ph(check.advised.reading_ph),
            format::ph(check.advised.reading_sd)
        );
        (check.id.to_string(), words)
    });
    let tolerances = deviations::tolerances(db, by).await?;
    let later = corrections::list(db, by, id).await?;
    let deviations = deviations::list(db, by, id).await?;
    let units = page.settings.units;
    Ok(ClosingPage {
        checks: Choice::list(choices, typed.value("mash_check_id")),
        doses: account::doses(&plan, &tolerances, &later, &page.settings),
        interval: account::interval(&plan, chosen.filter(|_| !closed)),
        outcome: plan.outcome.as_ref().map(outcome_row),
        deviations: account::deviations(deviations),
        corrections: account::corrections(&plan, &later, &page.settings),
        subjects: Choice::list(subjects(&plan), typed.value("subject")),
        note: plan
            .closed
            .as_ref()
            .map_or_else(String::new, |deed| deed.reason.clone()),
        units_of_doses: format!(
            "{} or {}",
            units.label(crate::web::units::Measure::DoseMass),
            units.label(crate::web::units::Measure::DoseVolume)
        ),
        may_correct: page.can(Permission::ApprovePlans),
        closed,
        page,
        plan,
        typed,
    })
}

/// What of a closed batch may be corrected.
fn subjects(plan: &Plan) -> Vec<(String, String)> {
    let mut subjects = Vec::new();
    for dose in plan.doses.iter().filter(|dose| dose.weighed.is_some()) {
        let line = account::line(plan, dose);
        subjects.push((format!("lot:{}", dose.id), format!("Lot of {line}")));
        subjects.push((format!("amount:{}", dose.id), format!("Amount of {line}")));
    }
    let outcome = plan.outcome.as_ref();
    if outcome.is_some_and(|outcome| outcome.measured_ph.is_some()) {
        subjects.push(("reading".into(), "The reading that counts".into()));
    }
    subjects.push(("other".into(), "Something else".into()));
    subjects
}

pub(super) async fn show_closing(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<PlanId>,
) -> Result<ClosingPage, Error> {
    let plan = operations::find(&db, &framer.member, id).await?;
    let checks = mash_checks::list(&db, &framer.member, id).await?;
    let good = checks
        .iter()
        .filter(counts)
        .find(|check| check.advised.advice != "read_again");
    let typed = Form::empty()
        .with("version", plan.version.to_string())
        .with(
            "mash_check_id",
            good.map(|check| check.id.to_string()).unwrap_or_default(),
        )
        .with("counts", "yes");
    closing_page(&db, &framer, id, typed).await
}

pub(super) async fn close(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<PlanId>,
    typed: Form,
) -> Result<Response, Error> {
    let closed = async {
        let mut body: ClosingBody = typed.body()?;
        body.counts.get_or_insert_default();
        closing::close(
            &db,
            &framer.member,
            id,
            typed.version(),
            Closing::try_from(body)?,
        )
        .await
    };
    match closed.await {
        Ok(plan) => Ok(Redirect::to(&format!("/plans/{}?done=closed", plan.id)).into_response()),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            Ok((status, closing_page(&db, &framer, id, typed).await?).into_response())
        }
    }
}

pub(super) async fn correct(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<PlanId>,
    typed: Form,
) -> Result<Response, Error> {
    let corrected = async {
        framer.member.may(Permission::ApprovePlans)?;
        let body = correction(&db, &framer, id, &typed).await?;
        corrections::correct(&db, &framer.member, id, body.try_into()?).await
    };
    let error = match corrected.await {
        Ok(_) => {
            let to = format!("/plans/{id}/closing?done=corrected");
            return Ok(Redirect::to(&to).into_response());
        }
        // The form has one field for what is right, and one for what it is about.
        Err(error) => error.renamed(|field| match field {
            "lot" | "amount" | "ph" | "words" => "says".to_owned(),
            "what" | "dose_id" => "subject".to_owned(),
            other => other.to_owned(),
        }),
    };
    let (status, typed) = typed.refused(error)?;
    Ok((status, closing_page(&db, &framer, id, typed).await?).into_response())
}

/// The correction a form sends, an amount in grams or millilitres.
async fn correction(
    db: &Db,
    framer: &Framer,
    id: PlanId,
    typed: &Form,
) -> Result<NewCorrectionBody, Error> {
    let says = typed.value("says").to_owned();
    let (what, dose_id) = typed
        .value("subject")
        .split_once(':')
        .unwrap_or((typed.value("subject"), ""));
    let mut body = NewCorrectionBody {
        what: what.to_owned(),
        dose_id: dose_id.to_owned(),
        stop_learning: crate::input::Flag(typed.ticked("stop_learning")),
        reason: typed.value("reason").to_owned(),
        ..NewCorrectionBody::default()
    };
    match what {
        "lot" => body.lot = says,
        "amount" => {
            let plan = operations::find(db, &framer.member, id).await?;
            let units = crate::brewery::operations::settings(db).await?.units;
            let mut doses = plan.doses.iter();
            let dose = doses.find(|dose| dose.id.to_string() == dose_id);
            let number = Number::Typed(says);
            body.amount = match (number.parse(), dose) {
                (Ok(shown), Some(dose)) => {
                    let measure = words::dose_measure(&plan.inputs, dose.material);
                    Number::Given(units.stored(measure, shown))
                }
                _ => number,
            };
        }
        "reading" => body.ph = Number::Typed(says),
        _ => body.words = says,
    }
    Ok(body)
}
