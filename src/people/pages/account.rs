//! One account: its owner's, or for a manager anybody's.

use askama::Template;
use askama_web::WebTemplate;
use axum::extract::State;
use axum::response::{IntoResponse, Redirect, Response};
use axum_extra::extract::cookie::CookieJar;

use super::roles;
use crate::error::Error;
use crate::id::MemberId;
use crate::input::Problems;
use crate::people::{Account, Permission, Place, Role, operations};
use crate::web::App;
use crate::web::extract::At;
use crate::web::form::{Choice, Form};
use crate::web::format;
use crate::web::layout::{Framer, Page};
use crate::web::session;

#[derive(Template, WebTemplate)]
#[template(path = "people/account.html")]
pub(super) struct AccountPage {
    page: Page,
    typed: Form,
    account: Account,
    roles: Vec<Choice>,
    own: bool,
    keeps_people: bool,
    has_pin: bool,
    on_tablet: bool,
    sessions: Vec<SessionRow>,
}

struct SessionRow {
    device: String,
    began: String,
    seen: String,
    this_one: bool,
}

async fn page(
    app: &App,
    framer: &Framer,
    jar: &CookieJar,
    id: MemberId,
    typed: Option<Form>,
) -> Result<AccountPage, Error> {
    let by = &framer.member;
    let account = operations::find(&app.db, by, id).await?;
    let own = account.id == by.id;
    let secret = jar.get(session::COOKIE).map_or("", |cookie| cookie.value());
    let sessions = operations::open_sessions(&app.db, by, id, secret).await?;
    let section = if own { "" } else { "people" };
    let page = framer.page(&account.name, section).await;
    let moment = |at| format::moment(at, &page.settings.time_zone);
    let sessions = sessions.into_iter().map(|it| SessionRow {
        device: match (it.device.as_str(), it.on_tablet) {
            ("", _) => "Unknown browser".into(),
            (name, true) => format!("Tablet “{name}”"),
            (words, false) => words.into(),
        },
        began: moment(it.created_at),
        seen: moment(it.last_seen_at),
        this_one: it.this_one,
    });
    let typed = match typed {
        Some(typed) if typed.holds("role") => typed,
        other => {
            let mut typed = typed_account(&account);
            typed.problems = other.map(|form| form.problems).unwrap_or_default();
            typed
        }
    };
    Ok(AccountPage {
        sessions: sessions.collect(),
        roles: roles(typed.value("role")),
        own,
        keeps_people: by.can(Permission::KeepPeople),
        has_pin: operations::has_pin(&app.db, by, id).await?,
        on_tablet: page.tablet.is_some(),
        typed,
        account,
        page,
    })
}

fn typed_account(account: &Account) -> Form {
    let open = account.disabled_at.is_none();
    Form::empty()
        .with("name", &account.name)
        .with("role", account.role.key())
        .with("open", if open { "yes" } else { "" })
}

pub(super) async fn show(
    State(app): State<App>,
    framer: Framer,
    jar: CookieJar,
    At(id): At<MemberId>,
) -> Result<AccountPage, Error> {
    page(&app, &framer, &jar, id, None).await
}

pub(super) async fn my_account(framer: Framer) -> Redirect {
    Redirect::to(&format!("/people/{}", framer.member.id))
}

pub(super) async fn revise(
    State(app): State<App>,
    framer: Framer,
    jar: CookieJar,
    At(id): At<MemberId>,
    typed: Form,
) -> Result<Response, Error> {
    let by = &framer.member;
    let saved = async {
        let mut problems = Problems::new();
        let name = problems.text("name", typed.value("name"), 80);
        let role = problems.choice("role", typed.value("role"), Role::from_key);
        problems.finish()?;
        match (name, role) {
            (Some(name), Some(role)) => {
                operations::revise(&app.db, by, id, name, role, typed.ticked("open")).await
            }
            _ => Err(Error::field("", "Fill in every field.")),
        }
    };
    match saved.await {
        Ok(_) => Ok(Redirect::to("/people?done=saved").into_response()),
        Err(error) => refused(&app, &framer, &jar, id, typed, error).await,
    }
}

async fn refused(
    app: &App,
    framer: &Framer,
    jar: &CookieJar,
    id: MemberId,
    typed: Form,
    error: Error,
) -> Result<Response, Error> {
    let (status, typed) = typed.refused(error)?;
    Ok((status, page(app, framer, jar, id, Some(typed)).await?).into_response())
}

pub(super) async fn change_password(
    State(app): State<App>,
    framer: Framer,
    place: Place,
    jar: CookieJar,
    At(id): At<MemberId>,
    typed: Form,
) -> Result<Response, Error> {
    let (present, wanted) = (typed.value("present"), typed.value("password"));
    let gate = app.gate(&place);
    match operations::change_password(&app.db, &framer.member, gate, id, present, wanted).await {
        Ok(()) if framer.member.id == id => {
            Ok(Redirect::to("/sign-in?done=password").into_response())
        }
        Ok(()) => Ok(Redirect::to(&format!("/people/{id}?done=password")).into_response()),
        Err(error) => refused(&app, &framer, &jar, id, typed, error).await,
    }
}

/// The fields of the PIN's form have names of their own: one page holds several forms.
pub(super) async fn set_pin(
    State(app): State<App>,
    framer: Framer,
    place: Place,
    jar: CookieJar,
    At(id): At<MemberId>,
    typed: Form,
) -> Result<Response, Error> {
    let (present, pin) = (typed.value("present_for_pin"), typed.value("pin"));
    let set = operations::set_pin(&app.db, &framer.member, app.gate(&place), id, present, pin);
    match set.await {
        Ok(()) => Ok(Redirect::to(&format!("/people/{id}?done=pin")).into_response()),
        Err(error) => {
            let error = error.renamed(|field| match field {
                "present" => "present_for_pin".into(),
                other => other.into(),
            });
            refused(&app, &framer, &jar, id, typed, error).await
        }
    }
}

pub(super) async fn remove_pin(
    State(app): State<App>,
    framer: Framer,
    At(id): At<MemberId>,
) -> Result<Redirect, Error> {
    operations::remove_pin(&app.db, &framer.member, id).await?;
    Ok(Redirect::to(&format!("/people/{id}?done=removed")))
}

pub(super) async fn sign_out_everywhere(
    State(app): State<App>,
    framer: Framer,
    At(id): At<MemberId>,
) -> Result<Redirect, Error> {
    operations::sign_out_everywhere(&app.db, &framer.member, id).await?;
    if framer.member.id == id {
        return Ok(Redirect::to("/sign-in?done=signed_out"));
    }
    Ok(Redirect::to(&format!("/people/{id}?done=signed_out")))
}
