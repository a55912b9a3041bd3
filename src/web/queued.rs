//! What the queue of a tablet needs of the server.
//!
//! A tablet without network keeps its ticks and sends the same forms again later, by
//! script (`templates/assets/queue.js`). Such a request asks for JSON: it is answered
//! with what became of it instead of a page. It names the person who made the tick,
//! because meanwhile another may have signed in on that tablet, and how long ago that was.

use std::convert::Infallible;

use axum::Json;
use axum::extract::{FromRequestParts, Request};
use axum::http::request::Parts;
use axum::http::{HeaderMap, HeaderName, HeaderValue, StatusCode, header};
use axum::middleware::Next;
use axum::response::{IntoResponse, Response};
use serde_json::json;
use tower_http::set_header::SetResponseHeaderLayer;

use crate::error::Error;
use crate::id::UtcTime;
use crate::people::Member;

/// Who made what is sent; nobody else's session may carry it.
const MADE_BY: HeaderName = HeaderName::from_static("x-leat-member");

/// How long ago it was made, whole seconds. Not a moment: the clock of a tablet may be
/// wrong.
const MADE_AGO: HeaderName = HeaderName::from_static("x-leat-made-ago");

/// A week: after that the key of the request is forgotten as well.
const LONGEST_AGO_SECONDS: i64 = 7 * 24 * 3600;

/// Whether a script reads the answer.
pub fn by_script(headers: &HeaderMap) -> bool {
    headers
        .get(header::ACCEPT)
        .and_then(|value| value.to_str().ok())
        .is_some_and(|value| value.contains("application/json") && !value.contains("text/html"))
}

/// Refuses what another person made, and tells a script that reads no pages that its form
/// was saved. It stands outside the layer that replays answers, so that a form sent once
/// by the browser and again by the script is answered to each in its own way.
pub async fn layer(request: Request, next: Next) -> Response {
    let headers = request.headers();
    let by_script = by_script(headers);
    let made_by = headers
        .get(MADE_BY)
        .map(|it| it.to_str().unwrap_or_default());
    let member = request.extensions().get::<Member>();
    if let Some(made_by) = made_by
        && member.is_none_or(|member| member.id.to_string() != made_by)
    {
        return Error::SignIn.into_response();
    }
    let response = next.run(request).await;
    if !by_script || response.status() != StatusCode::SEE_OTHER {
        return response;
    }
    let next = response.headers().get(header::LOCATION);
    let next = next.and_then(|it| it.to_str().ok());
    Json(json!({"state": "saved", "next": next})).into_response()
}

/// For a page that a tablet may keep and show when there is no network.
pub fn may_be_kept() -> SetResponseHeaderLayer<HeaderValue> {
    SetResponseHeaderLayer::overriding(
        HeaderName::from_static("x-leat-keep"),
        HeaderValue::from_static("weigh-out"),
    )
}

/// When something was done at the bench: now, or when the tablet without network was told.
#[derive(Clone, Copy, Debug)]
pub struct Made(pub UtcTime);

impl<S: Send + Sync> FromRequestParts<S> for Made {
    type Rejection = Infallible;

    async fn from_request_parts(parts: &mut Parts, _: &S) -> Result<Self, Infallible> {
        let ago = parts
            .headers
            .get(MADE_AGO)
            .and_then(|value| value.to_str().ok())
            .and_then(|value| value.parse::<i64>().ok())
            .unwrap_or(0)
            .clamp(0, LONGEST_AGO_SECONDS);
        Ok(Self(UtcTime::now().plus_seconds(-ago)))
    }
}
