//! Taking a reading on the tablet: which stage, what the meter showed.

use askama::Template;
use askama_web::WebTemplate;
use axum::Router;
use axum::extract::State;
use axum::response::{IntoResponse, Redirect, Response};
use axum::routing::{get, post};
use chemistry::kettle;
use chemistry::material::Vessel;
use chemistry::reading::WARMEST_SAMPLE;

use super::{check_page, read_again};
use crate::brewery::Units;
use crate::db::Db;
use crate::error::Error;
use crate::id::{PlanId, UtcTime};
use crate::meters::{Meter, Standing};
use crate::people::Permission;
use crate::plans::asked::{METER_SD, NewMashCheckBody};
use crate::plans::mash_checks::{self, NewMashCheck, expected};
use crate::plans::pages::check_address;
use crate::plans::{MashCheck, Plan, Stage, State as PlanState, compute, operations, readiness};
use crate::web::App;
use crate::web::extract::At;
use crate::web::form::{Choice, Form};
use crate::web::format;
use crate::web::layout::{Framer, Page};
use crate::web::units::{Measure, shown_in, typed_in_si};

/// The pages.
pub(super) fn routes() -> Router<App> {
    Router::new()
        .route("/plans/{id}/mash-checks/new", get(new_check).post(read))
        .route(
            "/plans/{id}/mash-checks/{check_id}",
            get(check_page::show_check),
        )
        .route(
            "/plans/{id}/mash-checks/{check_id}/material",
            post(check_page::choose_material),
        )
        .route(
            "/plans/{id}/mash-checks/{check_id}/withdrawal",
            post(check_page::withdraw_check),
        )
}

#[derive(Template, WebTemplate)]
#[template(path = "plans/new_check.html")]
struct NewCheckPage {
    page: Page,
    plan: Plan,
    typed: Form,
    stage: Stage,
    /// The other stages that can be read now: key and name.
    stages: Vec<(&'static str, &'static str)>,
    meters: Vec<Choice>,
    temperature_unit: &'static str,
    volume_unit: &'static str,
    /// What is expected or where the window lies.
    lead: String,
    not_in: Vec<String>,
    /// When the mash is to be read again: the moment, and the brewery's clock.
    again: Option<(String, String)>,
    /// Whether something looks mistyped and may be confirmed.
    asked: bool,
    /// What a hot sample would be worth.
    warmest: String,
    usual_cast_out: String,
}

/// What stands for a meter that is not among those of the brewery.
const ANOTHER: &str = "another";

async fn new_check_page(
    db: &Db,
    framer: &Framer,
    id: PlanId,
    typed: Form,
) -> Result<NewCheckPage, Error> {
    let plan = operations::find(db, &framer.member, id).await?;
    let stage = Stage::from_key(typed.value("stage")).unwrap_or(Stage::Mash);
    let title = match stage {
        Stage::Mash => format!("Read the mash of {} {}", plan.batch, plan.beer_name),
        other => format!("{} of {} {}", other.name(), plan.batch, plan.beer_name),
    };
    let page = framer.page(title, "brew-day").await;
    let units = page.settings.units;
    let checks = mash_checks::list(db, &framer.member, id).await?;
    let mut meters: Vec<(String, String)> = mash_checks::meters_to_choose_from(db, &framer.member)
        .await?
        .iter()
        .map(|(meter, standing)| (meter.id.to_string(), meter_words(meter, standing)))
        .collect();
    meters.push((ANOTHER.into(), "Another meter".into()));
    let chosen = match typed.value("meter_id") {
        "" => meters[0].0.clone(),
        chosen => chosen.to_owned(),
    };
    let again = readiness::of_plan(db, &framer.member, id)
        .await?
        .and_then(|open| read_again(&open, &page.settings.time_zone));
    let closed = plan.state == PlanState::Closed;
    let not_in = plan
        .doses
        .iter()
        .filter(|dose| dose.weighed.is_none())
        .filter(|dose| matches!(dose.vessel, Vessel::LiquorTank | Vessel::Mash))
        .filter_map(|dose| plan.inputs.problem.shelf.get(dose.material))
        .map(|item| item.name.clone())
        .collect();
    Ok(NewCheckPage {
        stages: Stage::ALL
            .into_iter()
            .filter(|other| *other != stage && (!closed || mash_checks::late(*other)))
            .map(|stage| (stage.key(), stage.name()))
            .collect(),
        meters: Choice::list(meters, &chosen),
        temperature_unit: units.label(Measure::Temperature),
        volume_unit: units.label(Measure::Volume),
        lead: lead(&plan, stage, &checks),
        again: again.filter(|_| stage == Stage::Mash),
        not_in: if stage == Stage::Mash {
            not_in
        } else {
            Vec::new()
        },
        asked: typed.problem("confirmed").is_some() || typed.ticked("confirmed"),
        warmest: format!(
            "{} {}",
            format::decimals(units.shown(Measure::Temperature, WARMEST_SAMPLE.get()), 0),
            units.label(Measure::Temperature)
        ),
        usual_cast_out: format::ph(kettle::USUAL_TARGET.get()),
        stage,
        page,
        plan,
        typed,
    })
}

/// What is to be expected: of the mash by its last reading or the plan, elsewhere the window.
fn lead(plan: &Plan, stage: Stage, checks: &[MashCheck]) -> String {
    let between = |low: f64, high: f64| format!("{} and {}", format::ph(low), format::ph(high));
    if stage != Stage::Mash {
        let window = stage.window(plan.inputs.problem.spec.mash_ph);
        return match (window.low, window.high) {
            (Some(low), Some(high)) => {
                format!("Usual: between {}.", between(low.get(), high.get()))
            }
            (None, Some(high)) => format!("Usual: up to {}.", format::ph(high.get())),
            _ => String::new(),
        };
    }
    if let Some(now) = expected::now(plan, checks) {
        return format!(
            "Expected {} ± {} after the step that went in.",
            format::ph(now.ph.value.get()),
            format::ph(now.ph.sd)
        );
    }
    let prediction = compute::as_weighed(plan)
        .ok()
        .and_then(|outcome| compute::prediction(&outcome));
    prediction.map_or_else(String::new, |it| {
        format!(
            "Expected {}, 90 % between {}.",
            format::ph(it.ph.get()),
            between(it.low.get(), it.high.get())
        )
    })
}

/// A meter and what its readings are worth now.
fn meter_words(meter: &Meter, standing: &Standing) -> String {
    let Some(at) = standing.calibrated_at else {
        return format!("{}: not calibrated", meter.name);
    };
    let slope = standing.slope_percent.map_or_else(String::new, |slope| {
        format!(", slope {} %", format::decimals(slope.get(), 0))
    });
    let verdict = if standing.may_be_acted_on() {
        ""
    } else {
        ": calibrate it first"
    };
    format!(
        "{}: calibrated {}{slope}, ± {}{verdict}",
        meter.name,
        ago(UtcTime::now().seconds_since(at)),
        format::ph(standing.sd.get())
    )
}

/// How long ago, in the largest unit that says something.
fn ago(seconds: i64) -> String {
    let minutes = seconds.max(0) / 60;
    match minutes {
        0..=1 => "just now".into(),
        2..=90 => format!("{minutes} min ago"),
        91..=2880 => format!("{} h ago", (minutes + 30) / 60),
        _ => format!("{} days ago", minutes / 1440),
    }
}

async fn new_check(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<PlanId>,
    asked: Form,
) -> Result<NewCheckPage, Error> {
    let units = crate::brewery::operations::settings(&db).await?.units;
    let stage = Stage::from_key(asked.value("stage")).unwrap_or(Stage::Mash);
    let last = mash_checks::list(&db, &framer.member, id).await?.pop();
    let mut typed = Form::empty().with("stage", stage.key()).with(
        "sample_c",
        format::decimals(units.shown(Measure::Temperature, 20.0), 0),
    );
    if let Some(last) = last.filter(|check| check.meter_id.is_none()) {
        typed = typed
            .with("meter_id", ANOTHER)
            .with("meter", last.meter)
            .with("meter_sd", last.meter_sd.get().to_string());
    } else {
        typed = typed.with("meter_sd", METER_SD.to_string());
    }
    if matches!(stage, Stage::KettleFull | Stage::EndOfBoil) {
        let plan = operations::find(&db, &framer.member, id).await?;
        let litres = plan.inputs.batch.get().to_string();
        let fields = [("wort_l".to_owned(), Measure::Volume)];
        typed = shown_in(&typed.with("wort_l", litres), units, &fields);
    }
    new_check_page(&db, &framer, id, typed).await
}

fn body(typed: &Form, units: Units) -> Result<NewMashCheck, Error> {
    let fields = [
        ("sample_c".to_owned(), Measure::Temperature),
        ("wort_l".to_owned(), Measure::Volume),
    ];
    let mut body: NewMashCheckBody = typed_in_si(typed, units, &fields).body()?;
    if body.meter_id == ANOTHER {
        body.meter_id.clear();
    } else {
        body.meter.clear();
        body.meter_sd = crate::input::Number::Missing;
    }
    body.try_into()
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
        let new = body(&typed, units)?;
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
