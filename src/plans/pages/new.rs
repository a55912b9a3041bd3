//! Drafting a plan.

use askama::Template;
use askama_web::WebTemplate;
use axum::extract::State;
use axum::response::{IntoResponse, Redirect, Response};
use chemistry::plan::Way;

use crate::beers;
use crate::db::Db;
use crate::error::Error;
use crate::people::Permission;
use crate::plans::asked::NewPlanBody;
use crate::plans::operations::{self, NewPlan};
use crate::plans::words;
use crate::sources;
use crate::web::form::{Choice, Form};
use crate::web::format;
use crate::web::layout::{Framer, Page};

#[derive(Template, WebTemplate)]
#[template(path = "plans/new.html")]
pub(super) struct NewPage {
    page: Page,
    typed: Form,
    beers: Vec<Choice>,
    ways: Vec<Choice>,
    sources: Vec<NewSource>,
}

struct NewSource {
    id: String,
    name: String,
    detail: String,
    usable: bool,
}

async fn new_page(db: &Db, framer: &Framer, typed: Form) -> Result<NewPage, Error> {
    let page = framer.page("New plan", "plans").await;
    let beers = beers::operations::list(db, &framer.member, true).await?;
    let mut offered = Vec::new();
    for source in sources::operations::list(db, &framer.member)
        .await?
        .into_iter()
        .filter(|source| source.in_use)
    {
        let (detail, usable) =
            match sources::operations::todays_water(db, &framer.member, source.id).await {
                Ok(water) => (
                    format!(
                        "alkalinity {} mg/L as CaCO₃, last tested {}",
                        format::figure(water.water.alkalinity_as_caco3().get()),
                        water.latest
                    ),
                    true,
                ),
                Err(Error::Conflict(_)) => ("no water test yet".to_owned(), false),
                Err(error) => return Err(error),
            };
        offered.push(NewSource {
            id: source.id.to_string(),
            name: source.name,
            detail,
            usable,
        });
    }
    Ok(NewPage {
        beers: Choice::list(
            beers
                .into_iter()
                .map(|beer| (beer.id.to_string(), beer.name)),
            typed.value("beer_id"),
        ),
        ways: Choice::list(
            Way::ALL.map(|way| (way.key(), words::way(way))),
            typed.value("way"),
        ),
        sources: offered,
        page,
        typed,
    })
}

pub(super) async fn new(
    State(db): State<Db>,
    framer: Framer,
    asked: Form,
) -> Result<NewPage, Error> {
    framer.member.may(Permission::DraftPlans)?;
    let zone = crate::brewery::operations::settings(&db).await?.time_zone;
    let mut typed = Form::empty()
        .with("beer_id", asked.value("beer_id"))
        .with("brewed_on", format::today(&zone).to_string())
        .with("way", Way::ClosestToPreferred.key());
    for index in 0..40 {
        typed = typed.with(format!("sources.{index}.used"), "yes");
    }
    new_page(&db, &framer, typed).await
}

pub(super) async fn create(
    State(db): State<Db>,
    framer: Framer,
    typed: Form,
) -> Result<Response, Error> {
    let drafted = async {
        framer.member.may(Permission::DraftPlans)?;
        let mut body: NewPlanBody = typed.body()?;
        // An unticked box sends nothing.
        for source in &mut body.sources {
            source.used.get_or_insert_default();
        }
        operations::draft(&db, &framer.member, NewPlan::try_from(body)?).await
    };
    match drafted.await {
        Ok(plan) => Ok(Redirect::to(&format!("/plans/{}", plan.id)).into_response()),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            Ok((status, new_page(&db, &framer, typed).await?).into_response())
        }
    }
}
