//! The pages of the shelf: the [list](list), one [material](material) with its lots, one
//! [lot](lot), and their forms.

use axum::Router;
use axum::routing::{get, post};
use chemistry::material::{Form as Solidity, Substance};
use jiff::civil::Date;

use super::warnings::Warning;
use super::{Material, words};
use crate::web::App;

mod labels;
mod list;
mod lot;
mod material;

/// Materials, and lots of one material, on one page.
const PAGE: usize = 40;

/// The pages.
pub fn routes() -> Router<App> {
    Router::new()
        .route("/shelf", get(list::list))
        .route("/shelf/usual", post(list::create_usual))
        .route("/shelf/labels", get(labels::labels))
        .route("/shelf/new", get(material::new).post(material::create))
        .route("/shelf/{id}", get(material::show))
        .route(
            "/shelf/{id}/edit",
            get(material::edit).post(material::revise),
        )
        .route("/shelf/{id}/lots/new", get(lot::new).post(lot::create))
        .route("/shelf/{id}/lots/{lot_id}", get(lot::show))
        .route(
            "/shelf/{id}/lots/{lot_id}/edit",
            get(lot::edit).post(lot::revise),
        )
}

fn day(date: Option<Date>) -> String {
    date.map(|date| date.to_string()).unwrap_or_default()
}

/// Something to look after, as a badge.
struct WarningRow {
    badge: &'static str,
    words: String,
}

impl WarningRow {
    fn of(warning: Warning) -> Self {
        Self {
            badge: warning.badge(),
            words: warning.words(),
        }
    }
}

/// What a form says of the substance it is about.
struct SubstanceWords {
    what: String,
    key: &'static str,
    liquid: bool,
    blended: bool,
    /// What is assumed where nothing is entered.
    usual: String,
    cautions: Vec<&'static str>,
}

impl SubstanceWords {
    fn of(substance: Substance) -> Self {
        let usual = Material::usual(substance).map(|usual| usual.label());
        let usual = usual.or_else(|| chemistry::material::Material::usual(substance));
        Self {
            what: words::what(substance),
            key: substance.key(),
            liquid: substance.form() == Solidity::Liquid,
            blended: substance == Substance::BlendedAcid,
            usual: usual
                .map(|usual| words::strength(&usual))
                .unwrap_or_default(),
            cautions: substance.cautions(),
        }
    }
}
