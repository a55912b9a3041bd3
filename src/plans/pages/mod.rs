//! Plans at the desk: the list, drafting, moving amounts, approving, closing.

use askama::Template;
use askama_web::WebTemplate;
use axum::Router;
use axum::extract::State;
use axum::response::{IntoResponse, Redirect, Response};
use axum::routing::{get, post};
use chemistry::material::Vessel;
use chemistry::plan::{Outcome, Way};

use crate::brewery::Units;
use crate::db::Db;
use crate::error::Error;
use crate::id::{LiquorCheckId, MashCheckId, PlanId};
use crate::input::Problems;
use crate::people::Permission;
use crate::plans::asked::TreatmentBody;
use crate::plans::bodies::InputsBody;
use crate::plans::brew_day::{MissingRow, missing_rows, read_again};
use crate::plans::closing::lesson;
use crate::plans::decisions;
use crate::plans::inputs::Inputs;
use crate::plans::liquor_checks::{self, LiquorCheck};
use crate::plans::operations::{self, Treatment};
use crate::plans::sheet::{self, DoseRow, Facts, Group, WayCard, consequences};
use crate::plans::{MashCheck, Plan, State as PlanState, mash_checks, readiness, words};
use crate::record;
use crate::record::pages::Line;
use crate::web::App;
use crate::web::extract::At;
use crate::web::form::Form;
use crate::web::format;
use crate::web::layout::{Framer, Page};
use crate::web::units::{Measure, shown_in, typed_in_si};

mod account;
mod batch_sheet;
mod closing;
mod list;
mod new;

pub use list::{ListRow, of_beer};

/// The pages.
pub fn routes() -> Router<App> {
    Router::new()
        .route("/plans", get(list::list))
        .route("/plans/new", get(new::new).post(new::create))
        .route("/plans/{id}", get(show))
        .route("/plans/{id}/treatment", post(move_amounts))
        .route("/plans/{id}/consequences", post(show_consequences))
        .route("/plans/{id}/trial", post(show_trial))
        .route("/plans/{id}/inputs.json", get(show_inputs))
        .route("/plans/{id}/way", post(take_way))
        .route("/plans/{id}/inputs", post(refresh))
        .route("/plans/{id}/schedule", post(reschedule))
        .route("/plans/{id}/approval", post(approve))
        .route("/plans/{id}/approval/taking-back", post(take_back_approval))
        .route("/plans/{id}/withdrawal", post(withdraw))
        .route("/plans/{id}/revisions", post(revise))
        .route(
            "/plans/{id}/closing",
            get(closing::show_closing).post(closing::close),
        )
        .route("/plans/{id}/corrections", post(closing::correct))
        .route("/plans/{id}/sheet", get(batch_sheet::show))
        .merge(crate::plans::brew_day::routes())
}

#[derive(Template, WebTemplate)]
#[template(path = "plans/show.html")]
struct ShowPage {
    page: Page,
    plan: Plan,
    typed: Form,
    may_draft: bool,
    may_approve: bool,
    may_brew: bool,
    successor: Option<(PlanId, i64)>,
    facts: Facts,
    shares: Vec<ShareRow>,
    groups: Vec<Group>,
    rows: Vec<DoseRow>,
    ways: Vec<WayCard>,
    outside_potable: Vec<String>,
    assumed: Vec<String>,
    checks: Vec<CheckRow>,
    /// Tests of the sparge liquor: identifier, when and by whom, what they say, what to do.
    liquor: Vec<(LiquorCheckId, String, String, String)>,
    outcome: Option<OutcomeRow>,
    learned: Option<sheet::LearnedWords>,
    history: Vec<Line>,
    read_at: String,
    deeds: Vec<(String, String)>,
    grist: Vec<(String, String, String)>,
    volumes: Vec<(&'static str, String)>,
    unweighed_steps: bool,
    /// Where the mash is by its readings, in a sentence; empty before the first.
    mash_now: String,
    cautions: Vec<(String, Vec<&'static str>)>,
    trial: bool,
    /// What it lacks, under these words.
    missing: (&'static str, Vec<MissingRow>),
    /// When the mash is to be read again: the moment, and the brewery's clock.
    again: Option<(String, String)>,
}

struct ShareRow {
    name: String,
    field: String,
    percent: String,
    litres: String,
    tested: String,
}

struct CheckRow {
    check: MashCheck,
    at: String,
    reading: String,
    sample: String,
    /// By the plan.
    expected: String,
    /// After the reading before and what went in since.
    now: String,
    minute: String,
}

struct OutcomeRow {
    predicted: String,
    measured: String,
    difference: String,
    inside: &'static str,
}

fn check_row(check: MashCheck, time_zone: &str, units: Units) -> CheckRow {
    CheckRow {
        at: format::moment(check.read_at, time_zone),
        reading: format!(
            "{} ± {}",
            format::ph(check.advised.reading_ph),
            format::ph(check.advised.reading_sd)
        ),
        sample: format!(
            "{} at {} {}",
            format::ph(check.ph.get()),
            format::decimals(units.shown(Measure::Temperature, check.sample.get()), 0),
            units.label(Measure::Temperature)
        ),
        expected: check
            .advised
            .expected_ph
            .map_or_else(String::new, format::ph),
        now: check
            .advised
            .expected_now_ph
            .map_or_else(String::new, |ph| {
                format!("{} after the step", format::ph(ph))
            }),
        minute: check
            .since_strike()
            .map_or_else(String::new, |it| format::decimals(it.get(), 0)),
        check,
    }
}

/// Where the mash is by its readings and what went in since.
fn mash_now(plan: &Plan, checks: &[MashCheck], zone: &str) -> String {
    let aim = &plan.inputs.problem.spec.mash_ph;
    let figure = |ph: f64, sd: f64| {
        format!(
            "{} ± {}, {} the window",
            format::ph(ph),
            format::ph(sd),
            sheet::chance(aim, ph, sd)
        )
    };
    if let Some(now) = mash_checks::expected::now(plan, checks) {
        return format!(
            "After what went in at {} the mash is expected at {}. The prediction below is the plan’s own.",
            format::clock(now.since, zone),
            figure(now.ph.value.get(), now.ph.sd)
        );
    }
    mash_checks::expected::last_reading(checks).map_or_else(String::new, |last| {
        format!(
            "The mash was last read at {}. The prediction below is the plan’s own.",
            figure(last.advised.reading_ph, last.advised.reading_sd)
        )
    })
}

fn liquor_row(check: &LiquorCheck, zone: &str) -> (LiquorCheckId, String, String, String) {
    let when = format!(
        "{}, {}",
        format::moment(check.checked_at, zone),
        check.checked_by
    );
    let says = format!(
        "{} ± {} mg/L as CaCO₃",
        format::figure(check.alkalinity.value.get()),
        format::doubt(check.alkalinity.sd)
    );
    let advised = match check.withdrawn {
        Some(_) => "withdrawn".into(),
        None => check.advised.title.clone(),
    };
    (check.id, when, says, advised)
}

fn outcome_row(outcome: &crate::plans::Outcome) -> OutcomeRow {
    let predicted = format!(
        "{} ± {}",
        format::ph(outcome.predicted_ph),
        format::ph(outcome.predicted_sd)
    );
    match (outcome.measured_ph, outcome.measured_sd) {
        (Some(measured), Some(sd)) => {
            let difference = measured - outcome.predicted_ph;
            let within = difference.abs()
                <= chemistry::quantity::NINETY_PERCENT * outcome.predicted_sd.hypot(sd);
            OutcomeRow {
                predicted,
                measured: format!("{} ± {}", format::ph(measured), format::ph(sd)),
                difference: format!(
                    "{} {}",
                    format::decimals(difference.abs(), 2),
                    if difference < 0.0 { "below" } else { "above" }
                ),
                inside: if within {
                    "inside the 90 % interval"
                } else {
                    "outside the 90 % interval"
                },
            }
        }
        _ => OutcomeRow {
            predicted,
            measured: "not read".into(),
            difference: String::new(),
            inside: "",
        },
    }
}

/// Which amounts of a treatment form are typed in the brewery's units.
fn local_fields(inputs: &Inputs, typed: &Form) -> Vec<(String, Measure)> {
    (0..typed.rows("doses"))
        .map(|index| {
            let material = typed
                .row("doses", &index, "material")
                .parse()
                .unwrap_or(usize::MAX);
            (
                format!("doses.{index}.amount"),
                words::dose_measure(inputs, material),
            )
        })
        .collect()
}

/// The treatment of a draft as its form begins: every material in every vessel it may go
/// to, with the amount that is planned.
fn treatment_form(plan: &Plan, units: Units) -> Form {
    let mut typed = Form::empty()
        .with("version", plan.version.to_string())
        .with("batch", plan.batch.clone())
        .with("brewed_on", plan.brewed_on.to_string());
    for (index, share) in plan.shares.iter().enumerate() {
        typed = typed.with(
            format!("shares_percent.{index}"),
            // At most two decimals, none that say nothing.
            ((share.get() * 10_000.0).round() / 100.0).to_string(),
        );
    }
    let mut index = 0;
    for vessel in Vessel::ALL {
        for (material, item) in plan.inputs.problem.shelf.iter().enumerate() {
            let planned = plan.doses.iter().find(|dose| {
                dose.material == material && dose.vessel == vessel && dose.weighed.is_none()
            });
            if !item.vessels.contains(&vessel) && planned.is_none() {
                continue;
            }
            let amount = planned.map_or_else(String::new, |dose| dose.planned.get().to_string());
            typed = typed
                .with(format!("doses.{index}.material"), material.to_string())
                .with(format!("doses.{index}.vessel"), vessel.key())
                .with(format!("doses.{index}.amount"), amount);
            index += 1;
        }
    }
    let fields = local_fields(&plan.inputs, &typed);
    shown_in(&typed, units, &fields)
}

async fn show_page(
    db: &Db,
    framer: &Framer,
    id: PlanId,
    refused: Option<Form>,
    tried: Option<(Plan, Outcome)>,
) -> Result<ShowPage, Error> {
    let mut shown = operations::show(db, &framer.member, id).await?;
    if let Some((plan, outcome)) = &tried {
        shown.plan = plan.clone();
        shown.outcome = outcome.clone();
    }
    let plan = shown.plan;
    let page = framer
        .page(format!("{} {}", plan.batch, plan.beer_name), "plans")
        .await;
    let units = page.settings.units;
    let zone = page.settings.time_zone.clone();
    let lesson = lesson(db, &framer.member, &plan).await?;
    let open = readiness::of_plan(db, &framer.member, id).await?;
    let again = open.as_ref().and_then(|open| read_again(open, &zone));
    let missing = match open {
        Some(open) if open.lines_in > 0 => ("Before it goes on", missing_rows(&open, &page)),
        Some(open) => ("Before it can start", missing_rows(&open, &page)),
        None => ("", Vec::new()),
    };
    let checks = mash_checks::list(db, &framer.member, id).await?;
    let liquor_tests = liquor_checks::list(db, &framer.member, id).await?;
    let liquor_tests = liquor_tests
        .iter()
        .map(|it| liquor_row(it, &zone))
        .collect();
    let history =
        record::operations::of_subject(db, &framer.member, "plan", &id.to_string(), 20).await?;
    let typed = match refused {
        Some(typed) if typed.rows("doses") > 0 => typed
            .with("batch", plan.batch.clone())
            .with("brewed_on", plan.brewed_on.to_string()),
        Some(typed) => {
            let mut begun = treatment_form(&plan, units);
            for name in ["reason", "withdrawal_reason", "batch", "brewed_on"] {
                if typed.holds(name) {
                    begun = begun.with(name, typed.value(name));
                }
            }
            begun.problems.clone_from(&typed.problems);
            begun
        }
        None => treatment_form(&plan, units),
    };
    let liquor = plan.inputs.problem.volumes.liquor.get();
    let shares = plan
        .inputs
        .sources
        .iter()
        .zip(&plan.shares)
        .enumerate()
        .map(|(index, (source, share))| ShareRow {
            name: source.name.clone(),
            field: format!("shares_percent.{index}"),
            percent: format::decimals(share.get() * 100.0, 1),
            litres: units.show(Measure::Volume, share.get() * liquor),
            tested: source
                .tested_on
                .map_or_else(String::new, |date| format!("last tested {date}")),
        })
        .collect();
    let mut deeds = vec![(
        "Drafted".to_owned(),
        format!(
            "{}, {}",
            plan.drafted.by,
            format::moment(plan.drafted.at, &zone)
        ),
    )];
    for (what, deed) in [
        ("Approved", &plan.approved),
        ("Closed", &plan.closed),
        ("Withdrawn", &plan.withdrawn),
    ] {
        if let Some(deed) = deed {
            let reason = if deed.reason.is_empty() {
                String::new()
            } else {
                format!(": {}", deed.reason)
            };
            deeds.push((
                what.to_owned(),
                format!("{}, {}{reason}", deed.by, format::moment(deed.at, &zone)),
            ));
        }
    }
    Ok(ShowPage {
        may_draft: page.can(Permission::DraftPlans),
        may_approve: page.can(Permission::ApprovePlans),
        may_brew: page.can(Permission::BrewBatches),
        successor: shown.successor,
        facts: consequences(&plan, &shown.outcome, &page.settings),
        groups: sheet::groups(&plan.inputs, &typed, units),
        rows: sheet::dose_rows(&plan, units, &zone),
        ways: sheet::way_cards(&plan, &shown.ways, &page.settings),
        outside_potable: plan.inputs.outside_potable(&plan.shares),
        assumed: sheet::assumed(&plan.inputs),
        outcome: plan.outcome.as_ref().map(outcome_row),
        learned: sheet::learned(&plan, &shown.outcome, &lesson)?,
        history: history.iter().map(|entry| Line::of(entry, &zone)).collect(),
        read_at: format::moment(plan.inputs_read_at, &zone),
        grist: sheet::grist(&plan.inputs, units),
        volumes: sheet::volumes(&plan.inputs, units),
        cautions: sheet::cautions(&plan),
        trial: tried.is_some(),
        missing,
        again,
        mash_now: mash_now(&plan, &checks, &zone),
        unweighed_steps: plan
            .doses
            .iter()
            .any(|dose| dose.mash_check.is_some() && dose.weighed.is_none()),
        liquor: liquor_tests,
        checks: checks
            .into_iter()
            .map(|check| check_row(check, &zone, units))
            .collect(),
        shares,
        deeds,
        page,
        typed,
        plan,
    })
}

async fn show(State(db): State<Db>, framer: Framer, At(id): At<PlanId>) -> Result<ShowPage, Error> {
    show_page(&db, &framer, id, None, None).await
}

/// To the plan once it is `changed`, saying what was `done`; its page again when that was
/// refused.
async fn answer(
    db: &Db,
    framer: &Framer,
    id: PlanId,
    typed: Form,
    changed: Result<Plan, Error>,
    done: &str,
) -> Result<Response, Error> {
    match changed {
        Ok(plan) => Ok(Redirect::to(&format!("/plans/{}?done={done}", plan.id)).into_response()),
        Err(error) => refused(db, framer, id, typed, error).await,
    }
}

/// The page of the plan as typed, with what stood in the way.
async fn refused(
    db: &Db,
    framer: &Framer,
    id: PlanId,
    typed: Form,
    error: Error,
) -> Result<Response, Error> {
    let (status, typed) = typed.refused(error)?;
    let page = show_page(db, framer, id, Some(typed), None).await?;
    Ok((status, page).into_response())
}

async fn move_amounts(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<PlanId>,
    typed: Form,
) -> Result<Response, Error> {
    let moved = async {
        framer.member.may(Permission::DraftPlans)?;
        let treatment = typed_treatment(&db, &framer, id, &typed).await?;
        operations::move_amounts(&db, &framer.member, id, typed.version(), &treatment).await
    };
    let moved = moved.await;
    answer(&db, &framer, id, typed, moved, "saved").await
}

async fn typed_treatment(
    db: &Db,
    framer: &Framer,
    id: PlanId,
    typed: &Form,
) -> Result<Treatment, Error> {
    let plan = operations::find(db, &framer.member, id).await?;
    let units = crate::brewery::operations::settings(db).await?.units;
    let fields = local_fields(&plan.inputs, typed);
    typed_in_si(typed, units, &fields)
        .body::<TreatmentBody>()?
        .try_into()
}

#[derive(Template, WebTemplate)]
#[template(path = "plans/consequences.html")]
struct ConsequencesPart {
    facts: Facts,
    problems: Vec<String>,
}

async fn show_consequences(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<PlanId>,
    typed: Form,
) -> Result<Response, Error> {
    let tried = async {
        let treatment = typed_treatment(&db, &framer, id, &typed).await?;
        operations::try_out(&db, &framer.member, id, &treatment).await
    };
    let settings = crate::brewery::operations::settings(&db).await?;
    match tried.await {
        Ok((plan, outcome)) => Ok(ConsequencesPart {
            facts: consequences(&plan, &outcome, &settings),
            problems: Vec::new(),
        }
        .into_response()),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            let shown = operations::show(&db, &framer.member, id).await?;
            let problems = typed
                .problems
                .iter()
                .map(|problem| problem.message.clone())
                .collect();
            let facts = consequences(&shown.plan, &shown.outcome, &settings);
            Ok((status, ConsequencesPart { facts, problems }).into_response())
        }
    }
}

/// The page with what the typed amounts would do, for those without scripts.
async fn show_trial(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<PlanId>,
    typed: Form,
) -> Result<Response, Error> {
    let tried = async {
        let treatment = typed_treatment(&db, &framer, id, &typed).await?;
        operations::try_out(&db, &framer.member, id, &treatment).await
    };
    match tried.await {
        Ok(tried) => Ok(show_page(&db, &framer, id, Some(typed), Some(tried))
            .await?
            .into_response()),
        Err(error) => refused(&db, &framer, id, typed, error).await,
    }
}

async fn show_inputs(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<PlanId>,
) -> Result<axum::Json<InputsBody>, Error> {
    let plan = operations::find(&db, &framer.member, id).await?;
    Ok(axum::Json(InputsBody::from(&plan.inputs)))
}

async fn take_way(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<PlanId>,
    typed: Form,
) -> Result<Response, Error> {
    let taken = async {
        let mut problems = Problems::new();
        let way = problems.choice("way", typed.value("way"), Way::from_key);
        problems.finish()?;
        operations::take_way(
            &db,
            &framer.member,
            id,
            typed.version(),
            way.unwrap_or(Way::ClosestToPreferred),
        )
        .await
    };
    let taken = taken.await;
    answer(&db, &framer, id, typed, taken, "saved").await
}

async fn refresh(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<PlanId>,
    typed: Form,
) -> Result<Response, Error> {
    let read = operations::refresh(&db, &framer.member, id, typed.version()).await;
    answer(&db, &framer, id, typed, read, "read").await
}

async fn reschedule(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<PlanId>,
    typed: Form,
) -> Result<Response, Error> {
    let moved = async {
        let mut problems = Problems::new();
        let batch = problems.text("batch", typed.value("batch"), 40);
        let day = problems.date("brewed_on", typed.value("brewed_on"));
        problems.finish()?;
        match (batch, day) {
            (Some(batch), Some(day)) => {
                operations::reschedule(&db, &framer.member, id, typed.version(), batch, day).await
            }
            _ => Err(Error::field("", "Fill in every field.")),
        }
    };
    let moved = moved.await;
    answer(&db, &framer, id, typed, moved, "saved").await
}

async fn approve(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<PlanId>,
    typed: Form,
) -> Result<Response, Error> {
    let approved = async {
        let mut problems = Problems::new();
        let reason = problems.optional_text("reason", typed.value("reason"), 500);
        problems.finish()?;
        decisions::approve(&db, &framer.member, id, typed.version(), reason).await
    };
    let approved = approved.await;
    answer(&db, &framer, id, typed, approved, "approved").await
}

async fn take_back_approval(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<PlanId>,
    typed: Form,
) -> Result<Response, Error> {
    let taken = decisions::take_back_approval(&db, &framer.member, id, typed.version()).await;
    answer(&db, &framer, id, typed, taken, "unapproved").await
}

async fn withdraw(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<PlanId>,
    typed: Form,
) -> Result<Response, Error> {
    let withdrawn = async {
        let mut problems = Problems::new();
        let reason = problems.text("withdrawal_reason", typed.value("withdrawal_reason"), 500);
        problems.finish()?;
        decisions::withdraw(
            &db,
            &framer.member,
            id,
            typed.version(),
            reason.unwrap_or_default(),
        )
        .await
    };
    let withdrawn = withdrawn.await;
    answer(&db, &framer, id, typed, withdrawn, "withdrawn").await
}

async fn revise(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<PlanId>,
    typed: Form,
) -> Result<Response, Error> {
    let revised = decisions::revise(&db, &framer.member, id).await;
    answer(&db, &framer, id, typed, revised, "revised").await
}

/// Where a check's page returns to.
pub(in crate::plans) fn check_address(plan: PlanId, check: MashCheckId) -> String {
    format!("/plans/{plan}/mash-checks/{check}")
}
