//! The tablet by the mash tun: what is on today, the weigh-out line by line, the mash
//! check and what to do about it.

use askama::Template;
use askama_web::WebTemplate;
use axum::Router;
use axum::extract::State;
use axum::response::{IntoResponse, Redirect, Response};
use axum::routing::{get, post};
use chemistry::quantity::DoseAmount;

use super::asked::{METER_SD, NewMashCheckBody, WeighedBody};
use super::mash_checks::{self, NewMashCheck};
use super::pages::{ListRow, check_address};
use super::store::{Filter, Order};
use super::{
    Dose, MashCheck, Plan, Stage, State as PlanState, compute, operations, sheet, weigh_out, words,
};
use crate::brewery::Units;
use crate::db::Db;
use crate::error::Error;
use crate::id::{DoseId, MashCheckId, PlanId};
use crate::input::Problems;
use crate::people::Permission;
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
        .route("/", get(brew_day))
        .route("/plans/{id}/weigh-out", get(weigh_out_page))
        .route("/plans/{id}/doses/{dose_id}", post(weigh))
        .route("/plans/{id}/doses/{dose_id}/taking-back", post(take_back))
        .route("/plans/{id}/mash-checks/new", get(new_check).post(read))
        .route("/plans/{id}/mash-checks/{check_id}", get(show_check))
        .route(
            "/plans/{id}/mash-checks/{check_id}/withdrawal",
            post(withdraw_check),
        )
}

#[derive(Template, WebTemplate)]
#[template(path = "plans/brew_day.html")]
struct BrewDayPage {
    page: Page,
    approved: Vec<ListRow>,
    dosed: Vec<ListRow>,
    drafts: Vec<ListRow>,
    may_draft: bool,
    nothing: bool,
    /// Whether there is no beer yet to plan.
    beginning: bool,
}

async fn brew_day(State(db): State<Db>, framer: Framer) -> Result<BrewDayPage, Error> {
    let page = framer.page("Brew day", "brew-day").await;
    let mut lists = Vec::new();
    for state in [PlanState::Approved, PlanState::Dosed, PlanState::Draft] {
        let filter = Filter {
            state: Some(state),
            ..Filter::default()
        };
        let found = operations::list(&db, &framer.member, &filter, Order::Earliest, 0, 20).await?;
        lists.push(found.into_iter().map(ListRow::from).collect::<Vec<_>>());
    }
    let mut lists = lists.into_iter();
    let (approved, dosed, drafts) = (
        lists.next().unwrap_or_default(),
        lists.next().unwrap_or_default(),
        lists.next().unwrap_or_default(),
    );
    let nothing = approved.is_empty() && dosed.is_empty() && drafts.is_empty();
    let beginning = nothing
        && crate::beers::operations::list(&db, &framer.member, true)
            .await?
            .is_empty();
    Ok(BrewDayPage {
        may_draft: page.can(Permission::DraftPlans),
        nothing,
        beginning,
        page,
        approved,
        dosed,
        drafts,
    })
}

/// One stone of the way through the weigh-out.
struct StepMark {
    words: String,
    state: &'static str,
}

/// A line of the weigh-out as the bench shows it.
struct Line {
    id: DoseId,
    vessel: &'static str,
    name: String,
    detail: String,
    amount: String,
    unit: &'static str,
    lot: String,
    cautions: Vec<&'static str>,
    step: bool,
    state: &'static str,
    weighed: String,
}

#[derive(Template, WebTemplate)]
#[template(path = "plans/weigh_out.html")]
struct WeighOutPage {
    page: Page,
    plan: Plan,
    typed: Form,
    now: Option<Line>,
    next: Option<Line>,
    done: Vec<Line>,
    steps: Vec<StepMark>,
    steps_words: String,
    waters: Vec<String>,
    open: bool,
    may_brew: bool,
    actual_field: String,
    lot_field: String,
}

impl Line {
    fn is(&self, id: &str) -> bool {
        self.id.to_string() == id
    }
}

fn line(plan: &Plan, dose: &Dose, units: Units, time_zone: &str) -> Line {
    let inputs = &plan.inputs;
    let item = inputs.problem.shelf.get(dose.material);
    let (amount, unit) = words::dose(units, inputs, dose.material, dose.amount().get());
    Line {
        id: dose.id,
        vessel: dose.vessel.name(),
        name: item.map_or_else(String::new, |item| item.name.clone()),
        detail: words::material_detail(inputs, dose.material),
        amount,
        unit,
        lot: match &dose.weighed {
            Some(weighed) => weighed.lot.clone(),
            None => inputs
                .shelf
                .get(dose.material)
                .map(|label| label.lot.clone())
                .unwrap_or_default(),
        },
        cautions: item.map_or_else(Vec::new, |item| item.material.substance().cautions()),
        step: dose.mash_check.is_some(),
        state: if dose.weighed.is_some() {
            "done"
        } else {
            "next"
        },
        weighed: dose.weighed.as_ref().map_or_else(String::new, |weighed| {
            format!("{}, {}", weighed.by, format::moment(weighed.at, time_zone))
        }),
    }
}

async fn weigh_out_page_of(
    db: &Db,
    framer: &Framer,
    id: PlanId,
    typed: Form,
) -> Result<WeighOutPage, Error> {
    let plan = operations::find(db, &framer.member, id).await?;
    let page = framer
        .page(
            format!("Weigh out {} {}", plan.batch, plan.beer_name),
            "brew-day",
        )
        .await;
    let (units, zone) = (page.settings.units, page.settings.time_zone.as_str());
    let lines: Vec<Line> = plan
        .doses
        .iter()
        .map(|dose| line(&plan, dose, units, zone))
        .collect();
    // A line asked for by the address, where somebody weighs out of order.
    let wanted = typed.value("dose");
    let at = lines
        .iter()
        .position(|line| line.state == "next" && line.is(wanted))
        .or_else(|| lines.iter().position(|line| line.state == "next"));
    let steps: Vec<StepMark> = lines
        .iter()
        .enumerate()
        .map(|(index, line)| StepMark {
            words: format!("{} into the {}", line.name, line.vessel),
            state: if Some(index) == at { "now" } else { line.state },
        })
        .collect();
    let steps_words = match at {
        Some(index) => format!("Line {} of {}", index + 1, lines.len()),
        None => format!("All {} lines are in", lines.len()),
    };
    let open = matches!(plan.state, PlanState::Approved | PlanState::Dosed);
    let (mut now, mut next, mut done) = (None, None, Vec::new());
    for (index, line) in lines.into_iter().enumerate() {
        if line.state == "done" {
            done.push(line);
        } else if Some(index) == at {
            now = Some(line);
        } else if next.is_none() {
            next = Some(line);
        }
    }
    // What was typed belongs to the line it was typed for, never to the one after it.
    let same = now.as_ref().is_some_and(|line| line.is(wanted));
    let field = |name: &str, planned: fn(&Line) -> &String| {
        if same && typed.holds(name) {
            typed.value(name).to_owned()
        } else {
            now.as_ref().map(planned).cloned().unwrap_or_default()
        }
    };
    let actual = field("actual", |line| &line.amount);
    let lot = field("lot", |line| &line.lot);
    let liquor = plan.inputs.problem.volumes.liquor.get();
    let waters = plan
        .inputs
        .sources
        .iter()
        .zip(&plan.shares)
        .filter(|(_, share)| share.get() > 0.0)
        .map(|(source, share)| {
            let volume = units.show(Measure::Volume, share.get() * liquor);
            format!("{volume} {}", source.name)
        })
        .collect();
    Ok(WeighOutPage {
        waters,
        may_brew: page.can(Permission::BrewBatches),
        actual_field: actual,
        lot_field: lot,
        page,
        plan,
        typed,
        now,
        next,
        done,
        steps,
        steps_words,
        open,
    })
}

async fn weigh_out_page(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<PlanId>,
    asked: Form,
) -> Result<WeighOutPage, Error> {
    let asked = Form::empty().with("dose", asked.value("dose"));
    weigh_out_page_of(&db, &framer, id, asked).await
}

async fn weigh(
    State(db): State<Db>,
    framer: Framer,
    At((id, dose)): At<(PlanId, DoseId)>,
    typed: Form,
) -> Result<Response, Error> {
    let weighed = async {
        framer.member.may(Permission::BrewBatches)?;
        let plan = operations::find(&db, &framer.member, id).await?;
        let material = plan
            .doses
            .iter()
            .find(|line| line.id == dose)
            .map(|line| line.material);
        let material = material.ok_or(Error::NotFound("dose of this plan"))?;
        let units = crate::brewery::operations::settings(&db).await?.units;
        let fields = [(
            "actual".to_owned(),
            words::dose_measure(&plan.inputs, material),
        )];
        let (actual, lot) = typed_in_si(&typed, units, &fields)
            .body::<WeighedBody>()?
            .check()?;
        if !typed.ticked("sure") {
            near_the_plan(&plan, dose, actual, units)?;
        }
        weigh_out::weigh(&db, &framer.member, id, dose, actual, lot).await
    };
    match weighed.await {
        Ok(plan) => {
            // After a first step the wait begins, and the page of the reading counts it.
            let step_of = plan
                .doses
                .iter()
                .find(|line| line.id == dose)
                .and_then(|line| line.mash_check);
            let to = step_of.map_or_else(
                || format!("/plans/{}/weigh-out", plan.id),
                |check| check_address(plan.id, check),
            );
            Ok(Redirect::to(&format!("{to}?done=dosed")).into_response())
        }
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            let typed = typed.with("dose", dose.to_string());
            Ok((status, weigh_out_page_of(&db, &framer, id, typed).await?).into_response())
        }
    }
}

/// Asks once more about an amount that is far from the planned one: most are a digit too
/// many. Nothing at all is a line left out on purpose, and is taken as said.
///
/// Source: assumed. A tenth is more than any scale or cylinder errs.
fn near_the_plan(plan: &Plan, id: DoseId, actual: DoseAmount, units: Units) -> Result<(), Error> {
    let Some(dose) = plan.doses.iter().find(|dose| dose.id == id) else {
        return Ok(());
    };
    // That it is in already matters more, and is said by the operation.
    if dose.weighed.is_some() {
        return Ok(());
    }
    let item = plan.inputs.problem.shelf.get(dose.material);
    let step = item.map_or(0.0, |item| item.step.get());
    let (actual, planned) = (actual.get(), dose.planned.get());
    if actual == 0.0 || (actual - planned).abs() <= (0.1 * planned).max(1.01 * step) {
        return Ok(());
    }
    let (shown, unit) = words::dose(units, &plan.inputs, dose.material, planned);
    let mut problems = Problems::new();
    problems.add(
        "actual",
        format!("{shown} {unit} is planned. Mend the figure, or tick below that this went in."),
    );
    problems.finish()
}

async fn take_back(
    State(db): State<Db>,
    framer: Framer,
    At((id, dose)): At<(PlanId, DoseId)>,
    typed: Form,
) -> Result<Response, Error> {
    let taken = async {
        let mut problems = Problems::new();
        let reason = problems.text("reason", typed.value("reason"), 500);
        problems.finish()?;
        weigh_out::take_back(&db, &framer.member, id, dose, reason.unwrap_or_default()).await
    };
    match taken.await {
        Ok(plan) => Ok(
            Redirect::to(&format!("/plans/{}/weigh-out?done=taken_back", plan.id)).into_response(),
        ),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            let typed = typed.with("slip", dose.to_string());
            Ok((status, weigh_out_page_of(&db, &framer, id, typed).await?).into_response())
        }
    }
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
            let expected = super::Prediction {
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
