//! The help page, and the page to read the API. Both are open to anybody who can
//! reach the server: whoever cannot sign in needs help most.

use askama::Template;
use askama_web::WebTemplate;
use axum::http::header;
use axum::response::IntoResponse;
use axum::routing::get;
use axum::{Extension, Router, extract::State};
use chemistry::material::{Role, Substance};
use chemistry::references::{self, Reference};

use super::App;
use super::format::decimals;
use super::layout::Page;
use crate::db::Db;
use crate::people::{Member, Place};

/// The pages.
pub fn routes() -> Router<App> {
    Router::new()
        .route("/help", get(help))
        .route("/help/api", get(api))
}

#[derive(Template, WebTemplate)]
#[template(path = "help/help.html")]
struct HelpPage {
    page: Page,
    calcium_share: String,
    calcium_share_sd: String,
    co2_lost_share: String,
    co2_lost_share_sd: String,
    cautions: Vec<Cautions>,
    references: &'static [Reference],
}

/// What to be careful of with some substances.
struct Cautions {
    substances: String,
    sentences: Vec<&'static str>,
}

/// Every substance that can burn, those with the same sentences together.
fn cautions() -> Vec<Cautions> {
    let mut groups: Vec<(Vec<&'static str>, Vec<&'static str>)> = Vec::new();
    for substance in Substance::ALL {
        let burns = match substance.role() {
            Role::Acid => true,
            Role::Base => substance != Substance::SodiumBicarbonate,
            Role::Salt => false,
        };
        if !burns {
            continue;
        }
        let sentences = substance.cautions();
        match groups.iter_mut().find(|(_, same)| *same == sentences) {
            Some((names, _)) => names.push(substance.name()),
            None => groups.push((vec![substance.name()], sentences)),
        }
    }
    groups
        .into_iter()
        .map(|(names, sentences)| Cautions {
            substances: names.join("; "),
            sentences,
        })
        .collect()
}

async fn help(State(db): State<Db>, place: Place, member: Option<Extension<Member>>) -> HelpPage {
    let member = member.map(|Extension(member)| member);
    let page = Page::load(&db, member.as_ref(), "Help", "help").await;
    let page = page.at(&place, "/help".into());
    let mash = &page.settings.mash;
    let share = |value: f64| decimals(value, 2);
    HelpPage {
        calcium_share: share(mash.calcium_release.value.get()),
        calcium_share_sd: share(mash.calcium_release.sd),
        co2_lost_share: share(mash.carbon_dioxide_lost.value.get()),
        co2_lost_share_sd: share(mash.carbon_dioxide_lost.sd),
        cautions: cautions(),
        references: &references::ALL,
        page,
    }
}

#[derive(Template, WebTemplate)]
#[template(path = "help/api.html")]
struct ApiPage {
    page: Page,
}

/// The reader styles its parts inline and draws its arrows as data: it alone may.
const READER_POLICY: &str = "default-src 'none'; style-src 'self' 'unsafe-inline'; script-src 'self'; \
    img-src 'self' data:; connect-src 'self'; form-action 'self'; base-uri 'none'; frame-ancestors 'none'";

async fn api(
    State(db): State<Db>,
    place: Place,
    member: Option<Extension<Member>>,
) -> impl IntoResponse {
    let member = member.map(|Extension(member)| member);
    let page = Page::load(&db, member.as_ref(), "The API", "help").await;
    let page = page.at(&place, "/help/api".into());
    (
        [(header::CONTENT_SECURITY_POLICY, READER_POLICY)],
        ApiPage { page },
    )
}
