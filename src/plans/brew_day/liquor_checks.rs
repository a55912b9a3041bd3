//! Testing sparge liquor on the tablet, and what to do about it.

use askama::Template;
use askama_web::WebTemplate;
use axum::Router;
use axum::extract::State;
use axum::response::{IntoResponse, Redirect, Response};
use axum::routing::{get, post};

use crate::db::Db;
use crate::error::Error;
use crate::id::{LiquorCheckId, PlanId};
use crate::input::Problems;
use crate::people::Permission;
use crate::plans::liquor_checks::api::NewLiquorCheckBody;
use crate::plans::liquor_checks::{self, LiquorCheck, NewLiquorCheck};
use crate::plans::{Plan, State as PlanState, operations, words};
use crate::web::App;
use crate::web::extract::At;
use crate::web::form::Form;
use crate::web::format;
use crate::web::layout::{Framer, Page};
use crate::web::units::{Measure, shown_in, typed_in_si};

/// The pages.
pub(super) fn routes() -> Router<App> {
    Router::new()
        .route("/plans/{id}/liquor-checks/new", get(new_check).post(check))
        .route("/plans/{id}/liquor-checks/{check_id}", get(show))
        .route(
            "/plans/{id}/liquor-checks/{check_id}/withdrawal",
            post(withdraw),
        )
}

#[derive(Template, WebTemplate)]
#[template(path = "plans/new_liquor_check.html")]
struct NewPage {
    page: Page,
    plan: Plan,
    typed: Form,
    lead: String,
    volume_unit: &'static str,
}

async fn new_page(db: &Db, framer: &Framer, id: PlanId, typed: Form) -> Result<NewPage, Error> {
    let plan = operations::find(db, &framer.member, id).await?;
    let title = format!("Sparge liquor of {} {}", plan.batch, plan.beer_name);
    let page = framer.page(title, "brew-day").await;
    let (limit, assumed) = liquor_checks::limit(&plan);
    Ok(NewPage {
        lead: format!(
            "At most {} mg/L as CaCO₃{}.",
            format::entered(limit.get()),
            if assumed { ", assumed" } else { "" }
        ),
        volume_unit: page.settings.units.label(Measure::Volume),
        page,
        plan,
        typed,
    })
}

fn volume_field() -> [(String, Measure); 1] {
    [("volume_l".to_owned(), Measure::Volume)]
}

async fn new_check(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<PlanId>,
) -> Result<NewPage, Error> {
    let plan = operations::find(&db, &framer.member, id).await?;
    let units = crate::brewery::operations::settings(&db).await?.units;
    let last = liquor_checks::list(&db, &framer.member, id).await?.pop();
    let sparge = plan.inputs.problem.volumes.sparge.get();
    let mut typed = Form::empty();
    if sparge > 0.0 {
        typed = typed.with("volume_l", sparge.to_string());
    }
    // A kit's drop is worth what it was the last time.
    if let Some((_, per_drop)) = last.and_then(|check| check.drops) {
        typed = typed.with("mg_per_l_as_caco3_per_drop", per_drop.get().to_string());
    }
    new_page(&db, &framer, id, shown_in(&typed, units, &volume_field())).await
}

async fn check(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<PlanId>,
    typed: Form,
) -> Result<Response, Error> {
    let checked = async {
        framer.member.may(Permission::BrewBatches)?;
        let units = crate::brewery::operations::settings(&db).await?.units;
        let body: NewLiquorCheckBody = typed_in_si(&typed, units, &volume_field()).body()?;
        let new = NewLiquorCheck::try_from(body)?;
        liquor_checks::check(&db, &framer.member, id, new).await
    };
    match checked.await {
        Ok(check) => {
            Ok(Redirect::to(&format!("/plans/{id}/liquor-checks/{}", check.id)).into_response())
        }
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            Ok((status, new_page(&db, &framer, id, typed).await?).into_response())
        }
    }
}

#[derive(Template, WebTemplate)]
#[template(path = "plans/liquor_check.html")]
struct ShowPage {
    page: Page,
    plan: Plan,
    check: LiquorCheck,
    typed: Form,
    alkalinity: String,
    how: String,
    verdict: (&'static str, &'static str),
    kind: &'static str,
    /// Amount, unit, name and detail of the acid.
    acid: Option<(String, &'static str, String, String)>,
    cautions: Vec<&'static str>,
    /// Whether the line is still to go in.
    to_go_in: bool,
    open: bool,
    withdrawn: String,
}

async fn show_page(
    db: &Db,
    framer: &Framer,
    id: PlanId,
    check: LiquorCheckId,
    typed: Form,
) -> Result<ShowPage, Error> {
    let plan = operations::find(db, &framer.member, id).await?;
    let check = liquor_checks::list(db, &framer.member, id)
        .await?
        .into_iter()
        .find(|it| it.id == check)
        .ok_or(Error::NotFound("liquor check of this plan"))?;
    let title = format!("Sparge liquor of {} {}", plan.batch, plan.beer_name);
    let page = framer.page(title, "brew-day").await;
    let units = page.settings.units;
    let volume = units.show(Measure::Volume, check.volume.get());
    let acid = check.advised.acid.as_ref().map(|acid| {
        let (amount, unit) = words::dose(units, &plan.inputs, acid.material, acid.amount);
        let detail = words::material_detail(&plan.inputs, acid.material);
        (amount, unit, acid.name.clone(), detail)
    });
    let item = check.advised.acid.as_ref();
    let item = item.and_then(|acid| plan.inputs.problem.shelf.get(acid.material));
    let line = plan.doses.iter().find(|dose| Some(dose.id) == check.dose);
    Ok(ShowPage {
        alkalinity: format!(
            "{} ± {}",
            format::figure(check.alkalinity.value.get()),
            format::doubt(check.alkalinity.sd)
        ),
        how: match check.drops {
            Some((drops, per_drop)) => format!(
                "{} drops of {} mg/L each; {volume} to run.",
                format::entered(drops.get()),
                format::entered(per_drop.get())
            ),
            None => format!("Tested on the spot; {volume} to run."),
        },
        verdict: match check.advised.why.as_str() {
            "below" => ("within", "below the limit"),
            "cannot_be_told" => ("unknown", "cannot be told from the limit"),
            _ => ("above", "above the limit"),
        },
        kind: match check.advised.advice.as_str() {
            "acidify" => "step",
            "stop" => "stop",
            _ => "leave",
        },
        acid,
        cautions: item.map_or_else(Vec::new, |item| item.material.substance().cautions()),
        to_go_in: line.is_some_and(|dose| dose.weighed.is_none()),
        open: matches!(plan.state, PlanState::Approved | PlanState::Dosed)
            && check.withdrawn.is_none(),
        withdrawn: check.withdrawn.as_ref().map_or_else(String::new, |deed| {
            let at = format::moment(deed.at, &page.settings.time_zone);
            format!("{}, {at}: {}", deed.by, deed.reason)
        }),
        page,
        plan,
        check,
        typed,
    })
}

async fn show(
    State(db): State<Db>,
    framer: Framer,
    At((id, check)): At<(PlanId, LiquorCheckId)>,
) -> Result<ShowPage, Error> {
    show_page(&db, &framer, id, check, Form::empty()).await
}

async fn withdraw(
    State(db): State<Db>,
    framer: Framer,
    At((id, check)): At<(PlanId, LiquorCheckId)>,
    typed: Form,
) -> Result<Response, Error> {
    let withdrawn = async {
        let mut problems = Problems::new();
        let reason = problems.text("reason", typed.value("reason"), 500);
        problems.finish()?;
        liquor_checks::withdraw(&db, &framer.member, id, check, reason.unwrap_or_default()).await
    };
    match withdrawn.await {
        Ok(()) => Ok(Redirect::to(&format!("/plans/{id}?done=withdrawn")).into_response()),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            Ok((status, show_page(&db, &framer, id, check, typed).await?).into_response())
        }
    }
}
