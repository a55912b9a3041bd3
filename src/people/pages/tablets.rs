//! The tablets that several people share: enrolled from the device itself.

use askama::Template;
use askama_web::WebTemplate;
use axum::extract::State;
use axum::response::{IntoResponse, Redirect, Response};
use axum_extra::extract::cookie::{Cookie, CookieJar};

use crate::error::Error;
use crate::id::TabletId;
use crate::input::Problems;
use crate::people::{Permission, Place, Tablet, operations};
use crate::web::App;
use crate::web::extract::At;
use crate::web::form::Form;
use crate::web::format;
use crate::web::layout::{Framer, Page};
use crate::web::session;

#[derive(Template, WebTemplate)]
#[template(path = "people/tablets.html")]
pub(super) struct TabletsPage {
    page: Page,
    rows: Vec<Row>,
    this_one: Option<String>,
    nobody_has_a_pin: bool,
    idle_minutes: u64,
    typed: Form,
}

struct Row {
    tablet: Tablet,
    enrolled: String,
    seen: String,
    revoked: Option<String>,
    this_one: bool,
}

async fn page(
    app: &App,
    framer: &Framer,
    place: &Place,
    typed: Form,
) -> Result<TabletsPage, Error> {
    let tablets = operations::tablets(&app.db, &framer.member).await?;
    let names = operations::names(&app.db).await?;
    let page = framer.page("Tablets", "people").await;
    let moment = |at| format::moment(at, &page.settings.time_zone);
    let this_one = place.tablet.as_ref().map(|tablet| tablet.id);
    let rows = tablets.into_iter().map(|tablet| Row {
        enrolled: moment(tablet.enrolled_at),
        seen: moment(tablet.last_seen_at),
        revoked: tablet.revoked_at.map(moment),
        this_one: Some(tablet.id) == this_one,
        tablet,
    });
    Ok(TabletsPage {
        rows: rows.collect(),
        this_one: place.tablet.as_ref().map(|tablet| tablet.name.clone()),
        nobody_has_a_pin: names.is_empty(),
        idle_minutes: page.settings.tablet_idle.as_secs() / 60,
        page,
        typed,
    })
}

pub(super) async fn list(
    State(app): State<App>,
    framer: Framer,
    place: Place,
) -> Result<TabletsPage, Error> {
    page(&app, &framer, &place, Form::empty()).await
}

/// Makes this device a shared tablet. Whoever enrolled it is signed out of it: it belongs to
/// everybody now.
pub(super) async fn enrol(
    State(app): State<App>,
    framer: Framer,
    place: Place,
    jar: CookieJar,
    typed: Form,
) -> Result<Response, Error> {
    let enrolled = async {
        framer.member.may(Permission::KeepPeople)?;
        let mut problems = Problems::new();
        let name = problems.text("tablet_name", typed.value("tablet_name"), 80);
        problems.finish()?;
        let name = name.unwrap_or_default();
        operations::enrol(&app.db, &framer.member, &place, name).await
    };
    match enrolled.await {
        Ok((_, secret)) => {
            if let Some(cookie) = jar.get(session::COOKIE) {
                operations::sign_out(&app.db, cookie.value()).await?;
            }
            let jar = jar
                .remove(Cookie::build(session::COOKIE).path("/"))
                .add(session::tablet_cookie(secret.0, app.door.secure_cookies));
            Ok((jar, Redirect::to("/sign-in?done=enrolled")).into_response())
        }
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            Ok((status, page(&app, &framer, &place, typed).await?).into_response())
        }
    }
}

pub(super) async fn revoke(
    State(app): State<App>,
    framer: Framer,
    At(id): At<TabletId>,
) -> Result<Redirect, Error> {
    operations::revoke_tablet(&app.db, &framer.member, id).await?;
    Ok(Redirect::to("/tablets?done=revoked"))
}
