//! Errors as answers: problem+json (RFC 9457) for programs, a page for browsers.

use std::any::Any;

use askama::Template;
use askama_web::WebTemplate;
use axum::Json;
use axum::extract::{Request, State};
use axum::http::{HeaderValue, StatusCode, header};
use axum::middleware::Next;
use axum::response::{IntoResponse, Redirect, Response};
use serde::Serialize;

use super::App;
use super::layout::{self, Page};
use super::queued;
use crate::error::Error;
use crate::people::{Member, Place};

/// What went wrong, as RFC 9457 lays it out.
#[derive(Clone, Debug, Serialize, utoipa::ToSchema)]
pub struct Problem {
    /// A name for this kind of problem.
    #[serde(rename = "type")]
    pub kind: &'static str,
    /// The kind in words.
    pub title: &'static str,
    /// The HTTP status.
    pub status: u16,
    /// What to do about it.
    pub detail: String,
    /// Each wrong field.
    #[serde(skip_serializing_if = "Vec::is_empty")]
    pub errors: Vec<ProblemField>,
    /// What to quote when asking for help.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub request_id: Option<String>,
}

/// One wrong field.
#[derive(Clone, Debug, Serialize, utoipa::ToSchema)]
pub struct ProblemField {
    /// Where it is: a JSON Pointer (RFC 6901) into the body sent.
    pub pointer: String,
    /// What is wrong with it and what would be accepted.
    pub detail: String,
}

impl Problem {
    fn of(error: &Error) -> Self {
        let (status, kind, title) = match error {
            Error::Invalid(_) => (422, "/problems/invalid", "Some fields need mending"),
            Error::NotFound(_) => (404, "/problems/not-found", "Not found"),
            Error::Conflict(_) => (
                409,
                "/problems/conflict",
                "It has changed or cannot be done now",
            ),
            Error::SignIn => (401, "/problems/sign-in", "Sign in first"),
            Error::Forbidden(_) => (403, "/problems/forbidden", "Not allowed"),
            Error::TooMany { .. } => (429, "/problems/too-many", "Too many attempts"),
            Error::Repeated => (409, "/problems/repeated", "Applied already"),
            Error::Internal { .. } => (500, "/problems/internal", "Something failed here"),
        };
        let (detail, errors) = match error {
            Error::Invalid(fields) => (
                fields.first().map(|f| f.message.clone()).unwrap_or_default(),
                fields
                    .iter()
                    .map(|f| ProblemField { pointer: pointer(&f.field), detail: f.message.clone() })
                    .collect(),
            ),
            Error::Internal { .. } => {
                ("Nothing was saved. Try again; if it stays, give the request id to whoever runs this server.".into(), vec![])
            }
            other => (format!("{other}."), vec![]),
        };
        Self {
            kind,
            title,
            status,
            detail: detail.replace("..", "."),
            errors,
            request_id: None,
        }
    }
}

/// `readings.3.value` as a JSON Pointer: `/readings/3/value`.
fn pointer(field: &str) -> String {
    if field.is_empty() {
        String::new()
    } else {
        format!(
            "/{}",
            field
                .replace('~', "~0")
                .replace('/', "~1")
                .replace('.', "/")
        )
    }
}

impl IntoResponse for Error {
    fn into_response(self) -> Response {
        if let Self::Internal { context, source } = &self {
            let mut chain = source.to_string();
            let mut cause = source.source();
            while let Some(next) = cause {
                chain.push_str(": ");
                chain.push_str(&next.to_string());
                cause = next.source();
            }
            tracing::error!(cause = %chain, "{context}");
        }
        respond(Problem::of(&self))
    }
}

fn respond(problem: Problem) -> Response {
    let status = StatusCode::from_u16(problem.status).unwrap_or(StatusCode::INTERNAL_SERVER_ERROR);
    let mut response = (status, Json(&problem)).into_response();
    response.headers_mut().insert(
        header::CONTENT_TYPE,
        HeaderValue::from_static("application/problem+json"),
    );
    if status == StatusCode::UNAUTHORIZED {
        response
            .headers_mut()
            .insert(header::WWW_AUTHENTICATE, HeaderValue::from_static("Bearer"));
    }
    response.extensions_mut().insert(problem);
    response
}

/// A status that no handler explained, as a problem.
fn unexplained(status: StatusCode) -> Problem {
    let (kind, title, detail) = match status {
        StatusCode::PAYLOAD_TOO_LARGE => (
            "/problems/too-large",
            "Too large",
            "Send at most 1 MB, or a file of at most 5 MB.",
        ),
        StatusCode::METHOD_NOT_ALLOWED => (
            "/problems/method",
            "Method not allowed",
            "This address does not take that method.",
        ),
        StatusCode::NOT_FOUND => (
            "/problems/not-found",
            "Not found",
            "There is nothing at this address.",
        ),
        StatusCode::UNSUPPORTED_MEDIA_TYPE => (
            "/problems/media-type",
            "Unsupported media type",
            "Send the body as application/json with that Content-Type.",
        ),
        StatusCode::FORBIDDEN => (
            "/problems/cross-site",
            "Refused",
            "This request came from another site, so it was not carried out. Open the page from Leat itself and try again.",
        ),
        StatusCode::SERVICE_UNAVAILABLE => (
            "/problems/busy",
            "Took too long",
            "The server is busy. Wait a moment and try again.",
        ),
        status if status.is_client_error() => (
            "/problems/request",
            "The request could not be read",
            "Check the address and the body.",
        ),
        _ => (
            "/problems/internal",
            "Something failed here",
            "Nothing was saved. Try again.",
        ),
    };
    Problem {
        kind,
        title,
        status: status.as_u16(),
        detail: detail.into(),
        errors: vec![],
        request_id: None,
    }
}

/// Any refusal of the API as problem+json, with the request's id.
pub async fn api_layer(request: Request, next: Next) -> Response {
    let id = request_id(&request);
    let mut response = next.run(request).await;
    if !(response.status().is_client_error() || response.status().is_server_error()) {
        return response;
    }
    let mut problem = response
        .extensions_mut()
        .remove::<Problem>()
        .unwrap_or_else(|| unexplained(response.status()));
    problem.request_id = id;
    respond(problem)
}

fn request_id(request: &Request) -> Option<String> {
    request
        .headers()
        .get("x-request-id")
        .and_then(|id| id.to_str().ok())
        .map(str::to_owned)
}

#[derive(Template, WebTemplate)]
#[template(path = "problem.html")]
struct ProblemPage {
    page: Page,
    problem: Problem,
}

/// Any refusal of a page as a page; without a session, the way to sign in. A script that
/// asked for JSON is answered as a program is.
pub async fn page_layer(State(app): State<App>, request: Request, next: Next) -> Response {
    let id = request_id(&request);
    let here = layout::here(request.method(), request.uri(), request.headers());
    let by_script = queued::by_script(request.headers());
    let mut response = next.run(request).await;
    if !(response.status().is_client_error() || response.status().is_server_error()) {
        return response;
    }
    let is_html = response
        .headers()
        .get(header::CONTENT_TYPE)
        .and_then(|value| value.to_str().ok())
        .is_some_and(|value| value.starts_with("text/html"));
    if is_html {
        return response;
    }
    let problem = response.extensions_mut().remove::<Problem>();
    if by_script {
        let mut problem = problem.unwrap_or_else(|| unexplained(response.status()));
        problem.request_id = id;
        return respond(problem);
    }
    if response.status() == StatusCode::UNAUTHORIZED {
        let next = super::form::percent(&here);
        return Redirect::to(&format!("/sign-in?next={next}")).into_response();
    }
    let mut problem = problem.unwrap_or_else(|| unexplained(response.status()));
    problem.request_id = id;
    let member = response.extensions_mut().remove::<Member>();
    let mut page = Page::load(&app.db, member.as_ref(), problem.title, "").await;
    if let Some(place) = response.extensions_mut().remove::<Place>() {
        page = page.at(&place, here);
    }
    let status = StatusCode::from_u16(problem.status).unwrap_or(StatusCode::INTERNAL_SERVER_ERROR);
    (status, ProblemPage { page, problem }).into_response()
}

/// No page at this address.
pub async fn no_such_page() -> Error {
    Error::NotFound("page")
}

/// No endpoint at this address.
pub async fn no_such_endpoint() -> Error {
    Error::NotFound("endpoint")
}

/// A handler panicked: the same answer as any failure of ours.
pub fn panicked(cause: Box<dyn Any + Send + 'static>) -> Response {
    let words = cause
        .downcast_ref::<String>()
        .map(String::as_str)
        .or_else(|| cause.downcast_ref::<&str>().copied())
        .unwrap_or("unknown");
    tracing::error!(cause = %words, "A handler panicked");
    respond(unexplained(StatusCode::INTERNAL_SERVER_ERROR))
}
