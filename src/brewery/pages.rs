//! The settings page.

use askama::Template;
use askama_web::WebTemplate;
use axum::Router;
use axum::extract::State;
use axum::response::{IntoResponse, Redirect, Response};
use axum::routing::get;
use chemistry::report::LimitSet;

use super::api::SettingsBody;
use super::{Settings, Units, operations};
use crate::db::Db;
use crate::error::Error;
use crate::people::Permission;
use crate::web::App;
use crate::web::form::{Choice, Form};
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
}

async fn render(framer: &Framer, typed: Form) -> SettingsPage {
    let page = framer.page("Settings", "settings").await;
    SettingsPage {
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
