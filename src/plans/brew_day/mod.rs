//! The tablet by the mash tun: what is on today, the weigh-out line by line, the mash
//! check and what to do about it.

use askama::Template;
use askama_web::WebTemplate;
use axum::Router;
use axum::extract::State;
use axum::routing::get;

use super::pages::ListRow;
use super::store::{Filter, Order};
use super::{State as PlanState, operations};
use crate::db::Db;
use crate::error::Error;
use crate::people::Permission;
use crate::web::App;
use crate::web::layout::{Framer, Page};

mod checks;
mod weigh_out;

/// The pages.
pub(super) fn routes() -> Router<App> {
    Router::new()
        .route("/", get(brew_day))
        .merge(weigh_out::routes())
        .merge(checks::routes())
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
