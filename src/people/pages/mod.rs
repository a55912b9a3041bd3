//! The people: accounts, invitations, API tokens, and in files of their own one account,
//! signing in, and the tablets.

use askama::Template;
use askama_web::WebTemplate;
use axum::Router;
use axum::extract::State;
use axum::http::{HeaderMap, header};
use axum::response::{IntoResponse, Redirect, Response};
use axum::routing::{get, post};

use super::operations::{self, NewAccount};
use super::{Account, Permission, Role};
use crate::error::Error;
use crate::id::InvitationId;
use crate::input::Problems;
use crate::web::App;
use crate::web::extract::At;
use crate::web::form::{Choice, Form};
use crate::web::format;
use crate::web::layout::{Framer, Page};

mod account;
mod sign_in;
mod tablets;
mod tokens;

use tokens::{ScopeBox, TokenRow};

/// The pages.
pub fn routes() -> Router<App> {
    Router::new()
        .route("/sign-in", get(sign_in::show).post(sign_in::sign_in))
        .route("/sign-in/pin", post(sign_in::sign_in_with_pin))
        .route("/sign-out", post(sign_in::sign_out))
        .route("/switch", post(sign_in::switch))
        .route("/session", get(sign_in::stay))
        .route(
            "/first-account",
            get(sign_in::show_first).post(sign_in::create_first),
        )
        .route(
            "/invitation",
            get(sign_in::show_invitation).post(sign_in::accept_invitation),
        )
        .route("/people", get(list))
        .route("/people/new", get(new).post(create))
        .route("/people/invite", get(new_invitation).post(invite))
        .route("/people/{id}", get(account::show).post(account::revise))
        .route("/people/{id}/password", post(account::change_password))
        .route("/people/{id}/pin", post(account::set_pin))
        .route("/people/{id}/pin/removal", post(account::remove_pin))
        .route("/people/{id}/sign-out", post(account::sign_out_everywhere))
        .route("/my-account", get(account::my_account))
        .route("/invitations/{id}/revocation", post(revoke_invitation))
        .route("/tablets", get(tablets::list).post(tablets::enrol))
        .route("/tablets/{id}/revocation", post(tablets::revoke))
        .route("/tokens", post(tokens::create))
        .route("/tokens/{id}/revocation", post(tokens::revoke))
}

fn new_account(typed: &Form, name: &str, role: &str) -> Result<NewAccount, Error> {
    let mut problems = Problems::new();
    let (login, password) = (typed.value("login"), typed.value("password"));
    let new = NewAccount::check(login, name, role, password, &mut problems);
    problems.finish()?;
    new.ok_or_else(|| Error::field("", "Fill in every field."))
}

#[derive(Template, WebTemplate)]
#[template(path = "people/list.html")]
struct ListPage {
    page: Page,
    accounts: Vec<Account>,
    invitations: Vec<InvitationRow>,
    tokens: Vec<TokenRow>,
    typed: Form,
    scopes: Vec<ScopeBox>,
    shown_once: Option<ShownOnce>,
}

/// A secret just made: on this answer and on no other.
enum ShownOnce {
    Token(String),
    Invitation { name: String, link: String },
}

struct InvitationRow {
    id: InvitationId,
    name: String,
    role: &'static str,
    until: String,
}

async fn list_page(
    app: &App,
    framer: &Framer,
    typed: Form,
    shown_once: Option<ShownOnce>,
) -> Result<ListPage, Error> {
    let page = framer.page("People", "people").await;
    let accounts = operations::list(&app.db, &framer.member).await?;
    let invitations = operations::invitations(&app.db, &framer.member).await?;
    let tokens = operations::tokens(&app.db, &framer.member).await?;
    let time_zone = &page.settings.time_zone;
    let invitations = invitations.into_iter().map(|invitation| InvitationRow {
        id: invitation.id,
        role: invitation.role.name(),
        until: format::moment(invitation.expires_at, time_zone),
        name: invitation.name,
    });
    let tokens = tokens
        .into_iter()
        .map(|token| TokenRow::of(token, time_zone));
    Ok(ListPage {
        invitations: invitations.collect(),
        tokens: tokens.collect(),
        accounts,
        scopes: ScopeBox::all(&typed),
        typed,
        shown_once,
        page,
    })
}

async fn list(State(app): State<App>, framer: Framer) -> Result<ListPage, Error> {
    list_page(&app, &framer, Form::empty(), None).await
}

#[derive(Template, WebTemplate)]
#[template(path = "people/new.html")]
struct NewPage {
    page: Page,
    typed: Form,
    roles: Vec<Choice>,
    /// Whether its owner makes the account.
    invite: bool,
    days: i64,
}

async fn new_page(framer: &Framer, invite: bool, typed: Form) -> NewPage {
    let title = if invite {
        "Invite somebody"
    } else {
        "New account"
    };
    NewPage {
        page: framer.page(title, "people").await,
        roles: roles(typed.value("role")),
        typed,
        invite,
        days: operations::INVITATION_DAYS,
    }
}

fn roles(chosen: &str) -> Vec<Choice> {
    Choice::list(Role::ALL.map(|role| (role.key(), role.name())), chosen)
}

async fn new(framer: Framer) -> Result<NewPage, Error> {
    framer.member.may(Permission::KeepPeople)?;
    Ok(new_page(&framer, false, Form::empty().with("role", "brewer")).await)
}

async fn create(State(app): State<App>, framer: Framer, typed: Form) -> Result<Response, Error> {
    let created = async {
        framer.member.may(Permission::KeepPeople)?;
        let new = new_account(&typed, typed.value("name"), typed.value("role"))?;
        operations::create(&app.db, &framer.member, &app.passwords, new).await
    };
    match created.await {
        Ok(_) => Ok(Redirect::to("/people?done=created").into_response()),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            Ok((status, new_page(&framer, false, typed).await).into_response())
        }
    }
}

async fn new_invitation(framer: Framer) -> Result<NewPage, Error> {
    framer.member.may(Permission::KeepPeople)?;
    Ok(new_page(&framer, true, Form::empty().with("role", "brewer")).await)
}

async fn invite(
    State(app): State<App>,
    framer: Framer,
    headers: HeaderMap,
    typed: Form,
) -> Result<Response, Error> {
    let invited = async {
        framer.member.may(Permission::KeepPeople)?;
        let mut problems = Problems::new();
        let name = problems.text("name", typed.value("name"), 80);
        let role = problems.choice("role", typed.value("role"), Role::from_key);
        problems.finish()?;
        match (name, role) {
            (Some(name), Some(role)) => {
                operations::invite(&app.db, &framer.member, name, role).await
            }
            _ => Err(Error::field("", "Fill in every field.")),
        }
    };
    match invited.await {
        Ok((invitation, secret)) => {
            let scheme = if app.door.secure_cookies {
                "https"
            } else {
                "http"
            };
            let host = headers
                .get(header::HOST)
                .and_then(|host| host.to_str().ok());
            let host = host.unwrap_or_default();
            let shown_once = ShownOnce::Invitation {
                name: invitation.name,
                link: format!("{scheme}://{host}/invitation?token={}", secret.0),
            };
            let page = list_page(&app, &framer, Form::empty(), Some(shown_once)).await?;
            Ok(page.into_response())
        }
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            Ok((status, new_page(&framer, true, typed).await).into_response())
        }
    }
}

async fn revoke_invitation(
    State(app): State<App>,
    framer: Framer,
    At(id): At<InvitationId>,
) -> Result<Redirect, Error> {
    operations::revoke_invitation(&app.db, &framer.member, id).await?;
    Ok(Redirect::to("/people?done=revoked"))
}
