//! The weigh-out on the tablet: one vessel, one line at a time.

use askama::Template;
use askama_web::WebTemplate;
use axum::Router;
use axum::extract::State;
use axum::response::{IntoResponse, Redirect, Response};
use axum::routing::{get, post};
use chemistry::quantity::DoseAmount;

use crate::brewery::Units;
use crate::db::Db;
use crate::error::Error;
use crate::id::{DoseId, PlanId};
use crate::input::Problems;
use crate::people::Permission;
use crate::plans::asked::WeighedBody;
use crate::plans::pages::check_address;
use crate::plans::weigh_out::NewWeighed;
use crate::plans::{Dose, Plan, State as PlanState, operations, weigh_out, words};
use crate::web::App;
use crate::web::extract::At;
use crate::web::form::Form;
use crate::web::format;
use crate::web::layout::{Framer, Page};
use crate::web::queued;
use crate::web::units::{Measure, typed_in_si};

/// The pages.
pub(super) fn routes() -> Router<App> {
    Router::new()
        .route(
            "/plans/{id}/weigh-out",
            get(weigh_out_page).layer(queued::may_be_kept()),
        )
        .route("/plans/{id}/doses/{dose_id}", post(weigh))
        .route("/plans/{id}/doses/{dose_id}/taking-back", post(take_back))
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
            Some(weighed) => weighed.lot.code.clone(),
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
        let body: WeighedBody = typed_in_si(&typed, units, &fields).body()?;
        let new: NewWeighed = body.try_into()?;
        if !typed.ticked("sure") {
            near_the_plan(&plan, dose, new.actual, units)?;
        }
        weigh_out::weigh(&db, &framer.member, id, dose, new).await
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
