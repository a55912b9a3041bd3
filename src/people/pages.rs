//! Signing in and out, the first account, accounts and API tokens.

use askama::Template;
use askama_web::WebTemplate;
use axum::Router;
use axum::extract::State;
use axum::response::{IntoResponse, Redirect, Response};
use axum::routing::{get, post};
use axum_extra::extract::cookie::{Cookie, CookieJar};

use super::operations::{self, NewAccount};
use super::{Account, ApiToken, Place, Role, Scope};
use crate::error::Error;
use crate::id::{ApiTokenId, MemberId};
use crate::input::Problems;
use crate::web::App;
use crate::web::extract::At;
use crate::web::form::{Choice, Form};
use crate::web::format;
use crate::web::layout::{Framer, Page};
use crate::web::session;

/// The pages.
pub fn routes() -> Router<App> {
    Router::new()
        .route("/sign-in", get(show_sign_in).post(sign_in))
        .route("/sign-out", post(sign_out))
        .route("/first-account", get(show_first).post(create_first))
        .route("/people", get(list))
        .route("/people/new", get(new).post(create))
        .route("/people/{id}", get(show).post(revise))
        .route("/people/{id}/password", post(change_password))
        .route("/tokens", post(create_token))
        .route("/tokens/{id}/revocation", post(revoke_token))
        .route("/my-account", get(my_account))
}

#[derive(Template, WebTemplate)]
#[template(path = "people/sign_in.html")]
struct SignInPage {
    page: Page,
    typed: Form,
    nobody: bool,
}

async fn show_sign_in(State(app): State<App>, typed: Form) -> Result<SignInPage, Error> {
    let nobody = operations::nobody_yet(&app.db).await?;
    let mut page = Page::load(&app.db, None, "Sign in", "").await;
    page.flash = format::done_sentence(typed.value("done")).map(str::to_owned);
    Ok(SignInPage {
        page,
        typed,
        nobody,
    })
}

/// Only a path on this server: an address could be made by anybody.
fn safe_next(next: &str) -> &str {
    let local = next.starts_with('/')
        && !next.starts_with("//")
        && !next.contains('\\')
        && !next.chars().any(char::is_control);
    if local { next } else { "/" }
}

async fn sign_in(
    State(app): State<App>,
    place: Place,
    jar: CookieJar,
    typed: Form,
) -> Result<Response, Error> {
    let (login, password) = (typed.value("login"), typed.value("password"));
    let previous = jar.get(session::COOKIE).map(Cookie::value);
    match operations::sign_in(&app.db, app.gate(&place), previous, login, password).await {
        Ok((_, secret)) => {
            let jar = jar.add(session::cookie(secret.0, app.door.secure_cookies));
            Ok((jar, Redirect::to(safe_next(typed.value("next")))).into_response())
        }
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            let nobody = operations::nobody_yet(&app.db).await?;
            let page = Page::load(&app.db, None, "Sign in", "").await;
            Ok((
                status,
                SignInPage {
                    page,
                    typed,
                    nobody,
                },
            )
                .into_response())
        }
    }
}

async fn sign_out(State(app): State<App>, jar: CookieJar) -> Result<Response, Error> {
    if let Some(cookie) = jar.get(session::COOKIE) {
        operations::sign_out(&app.db, cookie.value()).await?;
    }
    let jar = jar.remove(Cookie::build(session::COOKIE).path("/"));
    Ok((jar, Redirect::to("/sign-in")).into_response())
}

#[derive(Template, WebTemplate)]
#[template(path = "people/first_account.html")]
struct FirstPage {
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

async fn show_first(State(app): State<App>, typed: Form) -> Result<Response, Error> {
    if !operations::nobody_yet(&app.db).await? {
        return Ok(Redirect::to("/sign-in").into_response());
    }
    check_first(&app, &typed)?;
    let page = Page::load(&app.db, None, "The first account", "").await;
    Ok(FirstPage { page, typed }.into_response())
}

async fn create_first(
    State(app): State<App>,
    place: Place,
    jar: CookieJar,
    typed: Form,
) -> Result<Response, Error> {
    check_first(&app, &typed)?;
    let created = async {
        let new = new_account(&typed, "manager")?;
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
        Ok((_, secret)) => {
            let jar = jar.add(session::cookie(secret.0, app.door.secure_cookies));
            Ok((jar, Redirect::to("/settings")).into_response())
        }
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            let page = Page::load(&app.db, None, "The first account", "").await;
            Ok((status, FirstPage { page, typed }).into_response())
        }
    }
}

fn new_account(typed: &Form, role: &str) -> Result<NewAccount, Error> {
    let mut problems = Problems::new();
    let new = NewAccount::check(
        typed.value("login"),
        typed.value("name"),
        role,
        typed.value("password"),
        &mut problems,
    );
    problems.finish()?;
    new.ok_or_else(|| Error::field("", "Fill in every field."))
}

#[derive(Template, WebTemplate)]
#[template(path = "people/list.html")]
struct ListPage {
    page: Page,
    accounts: Vec<Account>,
    tokens: Vec<TokenRow>,
    typed: Form,
    scopes: Vec<ScopeBox>,
    secret: Option<String>,
}

struct ScopeBox {
    name: String,
    words: &'static str,
    ticked: bool,
}

struct TokenRow {
    token: ApiToken,
    scopes: String,
    state: String,
    living: bool,
    last_used: String,
}

fn token_row(token: ApiToken, time_zone: &str) -> TokenRow {
    let now = crate::id::UtcTime::now();
    let (state, living) = match token.revoked_at {
        Some(at) => (format!("revoked {}", format::moment(at, time_zone)), false),
        None if token.expires_at < now => (
            format!("ended {}", format::moment(token.expires_at, time_zone)),
            false,
        ),
        None => (
            format!("until {}", format::moment(token.expires_at, time_zone)),
            true,
        ),
    };
    TokenRow {
        scopes: token
            .scopes
            .iter()
            .map(|s| s.key())
            .collect::<Vec<_>>()
            .join(", "),
        last_used: token.last_used_at.map_or_else(
            || "never used".into(),
            |at| format!("last used {}", format::moment(at, time_zone)),
        ),
        state,
        living,
        token,
    }
}

async fn list_page(
    app: &App,
    framer: &Framer,
    typed: Form,
    secret: Option<String>,
) -> Result<ListPage, Error> {
    let page = framer.page("People", "people").await;
    let accounts = operations::list(&app.db, &framer.member).await?;
    let tokens = operations::tokens(&app.db, &framer.member).await?;
    Ok(ListPage {
        tokens: tokens
            .into_iter()
            .map(|token| token_row(token, &page.settings.time_zone))
            .collect(),
        accounts,
        page,
        secret,
        scopes: Scope::ALL
            .map(|scope| {
                let name = format!("scope_{}", scope.key());
                ScopeBox {
                    ticked: typed.ticked(&name),
                    name,
                    words: scope.words(),
                }
            })
            .into(),
        typed,
    })
}

async fn list(State(app): State<App>, framer: Framer) -> Result<ListPage, Error> {
    list_page(&app, &framer, Form::empty(), None).await
}

#[derive(Template, WebTemplate)]
#[template(path = "people/edit.html")]
struct EditPage {
    page: Page,
    typed: Form,
    account: Option<Account>,
    roles: Vec<Choice>,
    own: bool,
    is_manager: bool,
}

async fn edit_page(framer: &Framer, account: Option<Account>, typed: Form) -> EditPage {
    let title = account
        .as_ref()
        .map_or_else(|| "New account".to_owned(), |account| account.name.clone());
    let own = account
        .as_ref()
        .is_some_and(|account| account.id == framer.member.id);
    let section = if own { "" } else { "people" };
    EditPage {
        page: framer.page(title, section).await,
        roles: Choice::list(
            Role::ALL.map(|role| (role.key(), role.name())),
            typed.value("role"),
        ),
        own,
        is_manager: framer.member.role == Role::Manager,
        typed,
        account,
    }
}

async fn new(framer: Framer) -> Result<EditPage, Error> {
    framer.member.may(super::Permission::KeepPeople)?;
    Ok(edit_page(&framer, None, Form::empty().with("role", "brewer")).await)
}

async fn create(State(app): State<App>, framer: Framer, typed: Form) -> Result<Response, Error> {
    let created = async {
        framer.member.may(super::Permission::KeepPeople)?;
        let new = new_account(&typed, typed.value("role"))?;
        operations::create(&app.db, &framer.member, &app.passwords, new).await
    };
    match created.await {
        Ok(_) => Ok(Redirect::to("/people?done=created").into_response()),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            Ok((status, edit_page(&framer, None, typed).await).into_response())
        }
    }
}

fn typed_account(account: &Account) -> Form {
    Form::empty()
        .with("login", &account.login)
        .with("name", &account.name)
        .with("role", account.role.key())
        .with(
            "open",
            if account.disabled_at.is_none() {
                "yes"
            } else {
                ""
            },
        )
}

async fn show(
    State(app): State<App>,
    framer: Framer,
    At(id): At<MemberId>,
) -> Result<EditPage, Error> {
    let account = operations::find(&app.db, &framer.member, id).await?;
    let typed = typed_account(&account);
    Ok(edit_page(&framer, Some(account), typed).await)
}

async fn my_account(framer: Framer) -> Redirect {
    Redirect::to(&format!("/people/{}", framer.member.id))
}

async fn revise(
    State(app): State<App>,
    framer: Framer,
    At(id): At<MemberId>,
    typed: Form,
) -> Result<Response, Error> {
    let saved = async {
        let mut problems = Problems::new();
        let name = problems.text("name", typed.value("name"), 80);
        let role = problems.choice("role", typed.value("role"), Role::from_key);
        problems.finish()?;
        match (name, role) {
            (Some(name), Some(role)) => {
                operations::revise(
                    &app.db,
                    &framer.member,
                    id,
                    name,
                    role,
                    typed.ticked("open"),
                )
                .await
            }
            _ => Err(Error::field("", "Fill in every field.")),
        }
    };
    match saved.await {
        Ok(_) => Ok(Redirect::to("/people?done=saved").into_response()),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            let account = operations::find(&app.db, &framer.member, id).await?;
            Ok((status, edit_page(&framer, Some(account), typed).await).into_response())
        }
    }
}

async fn change_password(
    State(app): State<App>,
    framer: Framer,
    At(id): At<MemberId>,
    place: Place,
    typed: Form,
) -> Result<Response, Error> {
    let (present, wanted) = (typed.value("present"), typed.value("password"));
    let gate = app.gate(&place);
    match operations::change_password(&app.db, &framer.member, gate, id, present, wanted).await {
        Ok(()) if framer.member.id == id => {
            Ok(Redirect::to("/sign-in?done=password").into_response())
        }
        Ok(()) => Ok(Redirect::to(&format!("/people/{id}?done=password")).into_response()),
        Err(error) => {
            let (status, refused) = typed.refused(error)?;
            let account = operations::find(&app.db, &framer.member, id).await?;
            let mut typed = typed_account(&account);
            typed.problems = refused.problems;
            Ok((status, edit_page(&framer, Some(account), typed).await).into_response())
        }
    }
}

async fn create_token(
    State(app): State<App>,
    framer: Framer,
    typed: Form,
) -> Result<Response, Error> {
    let created = async {
        let mut problems = Problems::new();
        let name = problems.text("token_name", typed.value("token_name"), 80);
        let scopes: Vec<Scope> = Scope::ALL
            .into_iter()
            .filter(|scope| typed.ticked(&format!("scope_{}", scope.key())))
            .collect();
        if scopes.is_empty() {
            problems.add("scope_read", "Choose at least one thing the token may do.");
        }
        let days = typed
            .value("days")
            .trim()
            .parse::<i64>()
            .ok()
            .filter(|days| (1..=operations::TOKEN_DAYS).contains(days));
        if days.is_none() {
            problems.add(
                "days",
                format!("Enter whole days, 1 to {}.", operations::TOKEN_DAYS),
            );
        }
        problems.finish()?;
        operations::create_token(
            &app.db,
            &framer.member,
            name.unwrap_or_default(),
            scopes,
            days.unwrap_or(1),
        )
        .await
    };
    match created.await {
        Ok((_, secret)) => Ok(list_page(&app, &framer, Form::empty(), Some(secret.0))
            .await?
            .into_response()),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            Ok((status, list_page(&app, &framer, typed, None).await?).into_response())
        }
    }
}

async fn revoke_token(
    State(app): State<App>,
    framer: Framer,
    At(id): At<ApiTokenId>,
) -> Result<Redirect, Error> {
    operations::revoke_token(&app.db, &framer.member, id).await?;
    Ok(Redirect::to("/people?done=revoked"))
}
