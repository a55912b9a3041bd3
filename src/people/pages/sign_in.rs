//! Signing in and out: by password, and on an enrolled tablet by name and PIN; the first
//! account, and one that somebody was invited to make.

use askama::Template;
use askama_web::WebTemplate;
use axum::extract::State;
use axum::http::StatusCode;
use axum::response::{IntoResponse, Redirect, Response};
use axum_extra::extract::cookie::{Cookie, CookieJar};

use super::new_account;
use crate::error::Error;
use crate::id::MemberId;
use crate::people::operations::{self, Secret};
use crate::people::{Invitation, Member, Person, Place};
use crate::web::App;
use crate::web::form::{Form, percent};
use crate::web::format;
use crate::web::layout::Page;
use crate::web::session;

#[derive(Template, WebTemplate)]
#[template(path = "people/sign_in.html")]
struct SignInPage {
    page: Page,
    typed: Form,
    nobody: bool,
    names: Option<String>,
}

#[derive(Template, WebTemplate)]
#[template(path = "people/names.html")]
struct NamesPage {
    page: Page,
    names: Vec<Person>,
    next: String,
    by_password: String,
}

#[derive(Template, WebTemplate)]
#[template(path = "people/pin.html")]
struct PinPage {
    page: Page,
    person: Person,
    typed: Form,
    /// What is wrong, beside the one field: a summary above it would take the focus.
    problem: Option<String>,
    names: String,
}

pub(super) async fn show(
    State(app): State<App>,
    place: Place,
    typed: Form,
) -> Result<Response, Error> {
    if place.tablet.is_none() || typed.value("with") == "password" {
        return by_password(&app, &place, StatusCode::OK, typed).await;
    }
    let names = operations::names(&app.db).await?;
    let chosen = typed.value("who").parse::<MemberId>().ok();
    if let Some(person) = names.iter().find(|person| Some(person.id) == chosen) {
        let person = person.clone();
        return Ok(pin(&app, &place, StatusCode::OK, person, typed).await);
    }
    let next = safe_next(typed.value("next")).to_owned();
    Ok(NamesPage {
        page: frame(&app, &place, "Who is here?", &typed).await,
        by_password: format!("/sign-in?with=password&next={}", percent(&next)),
        names,
        next,
    }
    .into_response())
}

async fn frame(app: &App, place: &Place, title: &str, typed: &Form) -> Page {
    let mut page = Page::load(&app.db, None, title, "").await;
    page.flash = format::done_sentence(typed.value("done")).map(str::to_owned);
    page.at(place, "/".into())
}

async fn by_password(
    app: &App,
    place: &Place,
    status: StatusCode,
    typed: Form,
) -> Result<Response, Error> {
    let nobody = operations::nobody_yet(&app.db).await?;
    let page = frame(app, place, "Sign in", &typed).await;
    let names = place.tablet.is_some().then(|| back_to_names(&typed));
    let page = SignInPage {
        page,
        typed,
        nobody,
        names,
    };
    Ok((status, page).into_response())
}

async fn pin(
    app: &App,
    place: &Place,
    status: StatusCode,
    person: Person,
    typed: Form,
) -> Response {
    let page = frame(app, place, &person.name, &typed).await;
    let names = back_to_names(&typed);
    let page = PinPage {
        page,
        person,
        problem: typed.problems.first().map(|it| it.message.clone()),
        typed,
        names,
    };
    (status, page).into_response()
}

fn back_to_names(typed: &Form) -> String {
    format!("/sign-in?next={}", percent(safe_next(typed.value("next"))))
}

/// Only a path on this server: an address could be made by anybody.
fn safe_next(next: &str) -> &str {
    let local = next.starts_with('/')
        && !next.starts_with("//")
        && !next.starts_with("/sign-in")
        && !next.contains('\\')
        && !next.chars().any(char::is_control);
    if local { next } else { "/" }
}

pub(super) async fn sign_in(
    State(app): State<App>,
    place: Place,
    jar: CookieJar,
    typed: Form,
) -> Result<Response, Error> {
    let (login, password) = (typed.value("login"), typed.value("password"));
    let previous = jar.get(session::COOKIE).map(Cookie::value);
    match operations::sign_in(&app.db, app.gate(&place), previous, login, password).await {
        Ok((_, secret)) => Ok(begun(&app, jar, secret, safe_next(typed.value("next")))),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            by_password(&app, &place, status, typed).await
        }
    }
}

/// Leads on with the cookie of the new session; a tablet's own is kept for longer again.
fn begun(app: &App, jar: CookieJar, secret: Secret, next: &str) -> Response {
    let secure = app.door.secure_cookies;
    let tablet = jar
        .get(session::TABLET_COOKIE)
        .map(|it| it.value().to_owned());
    let mut jar = jar.add(session::cookie(secret.0, secure));
    if let Some(tablet) = tablet {
        jar = jar.add(session::tablet_cookie(tablet, secure));
    }
    (jar, Redirect::to(next)).into_response()
}

pub(super) async fn sign_in_with_pin(
    State(app): State<App>,
    place: Place,
    jar: CookieJar,
    typed: Form,
) -> Result<Response, Error> {
    let who = typed.value("who").parse::<MemberId>().ok();
    let previous = jar.get(session::COOKIE).map(Cookie::value);
    let signed_in = async {
        let who = who.ok_or_else(|| Error::field("who", "Choose a name."))?;
        let gate = app.gate(&place);
        operations::sign_in_with_pin(&app.db, gate, previous, who, typed.value("pin")).await
    };
    match signed_in.await {
        Ok(secret) => Ok(begun(&app, jar, secret, safe_next(typed.value("next")))),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            let mut names = operations::names(&app.db).await?.into_iter();
            match names.find(|person| Some(person.id) == who) {
                Some(person) => Ok(pin(&app, &place, status, person, typed).await),
                None => Ok(Redirect::to(&back_to_names(&typed)).into_response()),
            }
        }
    }
}

pub(super) async fn sign_out(
    State(app): State<App>,
    jar: CookieJar,
) -> Result<(CookieJar, Redirect), Error> {
    Ok((end(&app, jar).await?, Redirect::to("/sign-in")))
}

async fn end(app: &App, jar: CookieJar) -> Result<CookieJar, Error> {
    if let Some(cookie) = jar.get(session::COOKIE) {
        operations::sign_out(&app.db, cookie.value()).await?;
    }
    Ok(jar.remove(Cookie::build(session::COOKIE).path("/")))
}

/// Back to the names; whoever is next goes on where this person was.
pub(super) async fn switch(
    State(app): State<App>,
    jar: CookieJar,
    typed: Form,
) -> Result<(CookieJar, Redirect), Error> {
    let names = back_to_names(&typed);
    Ok((end(&app, jar).await?, Redirect::to(&names)))
}

/// Says that somebody is still at the tablet, and whether the session is good.
pub(super) async fn stay(_: Member) -> StatusCode {
    StatusCode::NO_CONTENT
}

#[derive(Template, WebTemplate)]
#[template(path = "people/first_account.html")]
pub(super) struct FirstPage {
    page: Page,
    typed: Form,
}

fn check_first(app: &App, typed: &Form) -> Result<(), Error> {
    let given = typed.value("token").as_bytes();
    let wanted = app.door.first_token.as_bytes();
    // Every byte is looked at, so that time tells nothing.
    let same = given.len() == wanted.len()
        && given
            .iter()
            .zip(wanted)
            .fold(0, |sum, (a, b)| sum | (a ^ b))
            == 0;
    if same {
        Ok(())
    } else {
        Err(Error::Forbidden(
            "Open the address that the server printed when it started.".into(),
        ))
    }
}

pub(super) async fn show_first(State(app): State<App>, typed: Form) -> Result<Response, Error> {
    if !operations::nobody_yet(&app.db).await? {
        return Ok(Redirect::to("/sign-in").into_response());
    }
    check_first(&app, &typed)?;
    let page = Page::load(&app.db, None, "The first account", "").await;
    Ok(FirstPage { page, typed }.into_response())
}

pub(super) async fn create_first(
    State(app): State<App>,
    place: Place,
    jar: CookieJar,
    typed: Form,
) -> Result<Response, Error> {
    check_first(&app, &typed)?;
    let created = async {
        let new = new_account(&typed, typed.value("name"), "manager")?;
        operations::create_first(&app.db, &app.passwords, new).await?;
        operations::sign_in(
            &app.db,
            app.gate(&place),
            jar.get(session::COOKIE).map(Cookie::value),
            typed.value("login"),
            typed.value("password"),
        )
        .await
    };
    match created.await {
        Ok((_, secret)) => Ok(begun(&app, jar, secret, "/settings")),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            let page = Page::load(&app.db, None, "The first account", "").await;
            Ok((status, FirstPage { page, typed }).into_response())
        }
    }
}

#[derive(Template, WebTemplate)]
#[template(path = "people/invitation.html")]
pub(super) struct InvitationPage {
    page: Page,
    invitation: Invitation,
    typed: Form,
}

async fn invitation_page(app: &App, typed: Form) -> Result<InvitationPage, Error> {
    Ok(InvitationPage {
        invitation: operations::invitation(&app.db, typed.value("token")).await?,
        page: Page::load(&app.db, None, "Your account", "").await,
        typed,
    })
}

pub(super) async fn show_invitation(
    State(app): State<App>,
    typed: Form,
) -> Result<InvitationPage, Error> {
    invitation_page(&app, typed).await
}

pub(super) async fn accept_invitation(
    State(app): State<App>,
    place: Place,
    jar: CookieJar,
    typed: Form,
) -> Result<Response, Error> {
    let (token, login, password) = (
        typed.value("token"),
        typed.value("login"),
        typed.value("password"),
    );
    let accepted = async {
        let invitation = operations::invitation(&app.db, token).await?;
        let new = new_account(&typed, &invitation.name, invitation.role.key())?;
        operations::accept(&app.db, &app.passwords, token, new).await?;
        let previous = jar.get(session::COOKIE).map(Cookie::value);
        operations::sign_in(&app.db, app.gate(&place), previous, login, password).await
    };
    match accepted.await {
        Ok((_, secret)) => Ok(begun(&app, jar, secret, "/")),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            Ok((status, invitation_page(&app, typed).await?).into_response())
        }
    }
}
