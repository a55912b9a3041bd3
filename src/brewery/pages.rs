//! The settings page.

use askama::Template;
use askama_web::WebTemplate;
use axum::Router;
use axum::extract::State;
use axum::response::{IntoResponse, Redirect, Response};
use axum::routing::get;
use chemistry::material::Vessel;
use chemistry::report::LimitSet;

use super::api::SettingsBody;
use super::{SecondPerson, Settings, Units, operations};
use crate::db::Db;
use crate::error::Error;
use crate::people::Permission;
use crate::web::App;
use crate::web::form::{Choice, Form};
use crate::web::format;
use crate::web::layout::{Framer, Page};

/// The pages.
pub fn routes() -> Router<App> {
    Router::new().route("/settings", get(show).post(revise))
}

#[derive(Template, WebTemplate)]
#[template(path = "brewery/settings.html")]
struct SettingsPage {
    page: Page,
    typed: Form,
    may_change: bool,
    units: Vec<Choice>,
    limits: Vec<Choice>,
    places: Vec<Place>,
    second_person: Vec<Choice>,
    /// The settings in force, in words.
    in_force: Vec<(&'static str, String)>,
}

/// A place in the order of weighing out.
struct Place {
    name: String,
    label: &'static str,
    problem: Option<String>,
    choices: Vec<Choice>,
}

const PLACES: [&str; 4] = ["First", "Second", "Third", "Fourth"];

fn places(typed: &Form) -> Vec<Place> {
    let place = |(index, label)| {
        let name = format!("vessel_order.{index}");
        Place {
            label,
            problem: typed.problem(&name).map(str::to_owned),
            choices: Choice::list(
                Vessel::ALL.map(|vessel| (vessel.key(), vessel.name())),
                typed.value(&name),
            ),
            name,
        }
    };
    PLACES.into_iter().enumerate().map(place).collect()
}

fn in_force(settings: &Settings) -> Vec<(&'static str, String)> {
    let share = |it: chemistry::quantity::Estimate<chemistry::quantity::Fraction>| {
        format!(
            "{} ± {}",
            format::decimals(it.value.get(), 2),
            format::doubt(it.sd)
        )
    };
    vec![
        ("Name of the brewery", settings.name.clone()),
        ("Units on pages", settings.units.name().into()),
        ("Time zone", settings.time_zone.clone()),
        ("How prices are written", settings.currency.clone()),
        (
            "Limits for drinking water",
            settings.potable_limits.name().into(),
        ),
        (
            "Order of the vessels",
            settings.vessel_order.map(Vessel::name).join(", "),
        ),
        (
            "A second person looks on",
            settings.second_person.name().into(),
        ),
        (
            "A shared tablet goes back to the names after",
            format!("{} min", settings.idle_minutes()),
        ),
        (
            "Acid set free per equivalent of calcium, assumed",
            share(settings.mash.calcium_release),
        ),
        (
            "Share of the carbon dioxide that escapes before the mash is read, assumed",
            share(settings.mash.carbon_dioxide_lost),
        ),
    ]
}

async fn render(framer: &Framer, typed: Form) -> SettingsPage {
    let page = framer.page("Settings", "settings").await;
    SettingsPage {
        places: places(&typed),
        second_person: Choice::list(
            SecondPerson::ALL.map(|it| (it.key(), it.name())),
            typed.value("second_person"),
        ),
        in_force: in_force(&page.settings),
        may_change: page.can(Permission::KeepSettings),
        units: Choice::list(
            Units::ALL.map(|u| (u.key(), u.name())),
            typed.value("units"),
        ),
        limits: Choice::list(
            LimitSet::ALL.map(|l| (l.key(), l.name())),
            typed.value("potable_limits"),
        ),
        page,
        typed,
    }
}

async fn show(State(db): State<Db>, framer: Framer) -> Result<SettingsPage, Error> {
    let settings = operations::settings(&db).await?;
    let typed =
        Form::of(&SettingsBody::from(&settings)).with("version", settings.version.to_string());
    Ok(render(&framer, typed).await)
}

async fn revise(State(db): State<Db>, framer: Framer, typed: Form) -> Result<Response, Error> {
    let saved = async {
        framer.member.may(Permission::KeepSettings)?;
        let new: Settings = typed.body::<SettingsBody>()?.try_into()?;
        operations::revise(&db, &framer.member, new, typed.version()).await
    };
    match saved.await {
        Ok(_) => Ok(Redirect::to("/settings?done=saved").into_response()),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            Ok((status, render(&framer, typed).await).into_response())
        }
    }
}
