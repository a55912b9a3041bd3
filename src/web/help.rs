//! The help page, and the page to read the API. Both are open to anybody who can
//! reach the server: whoever cannot sign in needs help most.

use askama::Template;
use askama_web::WebTemplate;
use axum::http::header;
use axum::response::IntoResponse;
use axum::routing::get;
use axum::{Extension, Router, extract::State};
use chemistry::material::{Role, Substance};
use chemistry::put_right::Aim;
use chemistry::quantity::Ph;
use chemistry::references::{self, Reference};
use chemistry::stages::Stage;

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
    /// Stage, window and where it comes from.
    stages: Vec<(&'static str, String, &'static str)>,
    cautions: Vec<Cautions>,
    references: &'static [Reference],
}

/// What to be careful of with some substances.
struct Cautions {
    substances: String,
    sentences: Vec<&'static str>,
}

/// Where the pH should be at each stage. The mash has the window of each beer.
fn stages() -> Vec<(&'static str, String, &'static str)> {
    let any = Aim {
        target: Ph::constant(5.4),
        low: Ph::constant(5.2),
        high: Ph::constant(5.6),
    };
    let later = Stage::ALL
        .into_iter()
        .filter(|stage| !matches!(stage, Stage::Mash | Stage::FirstRunnings));
    later
        .map(|stage| {
            let window = stage.window(any);
            let edge = |edge: Option<Ph>| edge.map(|ph| decimals(ph.get(), 1));
            let between = match (edge(window.low), edge(window.high)) {
                (Some(low), Some(high)) => format!("{low} to {high}"),
                (Some(low), None) => format!("from {low}"),
                (None, Some(high)) => format!("up to {high}"),
                (None, None) => String::new(),
            };
            (stage.name(), between, window.source)
        })
        .collect()
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
        stages: stages(),
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
