//! Who is asking: a session cookie on pages, a bearer token on the API.

use axum::extract::{FromRequestParts, Request, State};
use axum::http::header;
use axum::http::request::Parts;
use axum::middleware::Next;
use axum::response::{IntoResponse, Response};
use axum_extra::extract::cookie::{Cookie, CookieJar, SameSite};

use super::App;
use crate::error::Error;
use crate::people::{Member, operations};

/// Name of the session cookie.
pub const COOKIE: &str = "leat_session";

/// The cookie that carries a session.
pub fn cookie(secret: String, secure: bool) -> Cookie<'static> {
    Cookie::build((COOKIE, secret))
        .path("/")
        .http_only(true)
        .same_site(SameSite::Lax)
        .secure(secure)
        .build()
}

/// Finds out who holds the session cookie. Pages without a session go on without.
pub async fn cookie_layer(State(app): State<App>, mut request: Request, next: Next) -> Response {
    let jar = CookieJar::from_headers(request.headers());
    let mut member = None;
    if let Some(cookie) = jar.get(COOKIE) {
        match operations::by_session(&app.db, cookie.value()).await {
            Ok(found) => member = found,
            Err(error) => return error.into_response(),
        }
    }
    if let Some(member) = &member {
        request.extensions_mut().insert(member.clone());
    }
    let mut response = next.run(request).await;
    if let Some(member) = member {
        response.extensions_mut().insert(member);
    }
    response
}

/// Finds out who holds the bearer token. A cookie is never accepted here.
pub async fn token_layer(State(app): State<App>, mut request: Request, next: Next) -> Response {
    let token = request
        .headers()
        .get(header::AUTHORIZATION)
        .and_then(|value| value.to_str().ok())
        .and_then(|value| value.strip_prefix("Bearer "))
        .map(|token| token.trim().to_owned());
    if let Some(token) = token {
        match operations::by_token(&app.db, &token).await {
            Ok(Some(member)) => {
                request.extensions_mut().insert(member);
            }
            Ok(None) => return Error::SignIn.into_response(),
            Err(error) => return error.into_response(),
        }
    }
    next.run(request).await
}

impl<S: Send + Sync> FromRequestParts<S> for Member {
    type Rejection = Error;

    async fn from_request_parts(parts: &mut Parts, _: &S) -> Result<Self, Error> {
        parts.extensions.get::<Self>().cloned().ok_or(Error::SignIn)
    }
}
