//! API tokens, on the page of the people.

use axum::extract::State;
use axum::response::{IntoResponse, Redirect, Response};

use super::{ShownOnce, list_page};
use crate::error::Error;
use crate::id::{ApiTokenId, UtcTime};
use crate::input::Problems;
use crate::people::{ApiToken, Scope, operations};
use crate::web::App;
use crate::web::extract::At;
use crate::web::form::Form;
use crate::web::format;
use crate::web::layout::Framer;

/// Something a token may be used for.
pub(super) struct ScopeBox {
    pub(super) name: String,
    pub(super) words: &'static str,
    pub(super) ticked: bool,
}

impl ScopeBox {
    pub(super) fn all(typed: &Form) -> Vec<Self> {
        let boxes = Scope::ALL.map(|scope| {
            let name = format!("scope_{}", scope.key());
            Self {
                ticked: typed.ticked(&name),
                name,
                words: scope.words(),
            }
        });
        boxes.into()
    }
}

pub(super) struct TokenRow {
    pub(super) token: ApiToken,
    pub(super) scopes: String,
    pub(super) state: String,
    pub(super) living: bool,
    pub(super) last_used: String,
}

impl TokenRow {
    pub(super) fn of(token: ApiToken, time_zone: &str) -> Self {
        let now = UtcTime::now();
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
        Self {
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
}

pub(super) async fn create(
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
        Ok((_, secret)) => Ok(list_page(
            &app,
            &framer,
            Form::empty(),
            Some(ShownOnce::Token(secret.0)),
        )
        .await?
        .into_response()),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            Ok((status, list_page(&app, &framer, typed, None).await?).into_response())
        }
    }
}

pub(super) async fn revoke(
    State(app): State<App>,
    framer: Framer,
    At(id): At<ApiTokenId>,
) -> Result<Redirect, Error> {
    operations::revoke_token(&app.db, &framer.member, id).await?;
    Ok(Redirect::to("/people?done=revoked"))
}
