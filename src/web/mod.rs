//! The front door: what every request passes through before a domain sees it.
//!
//! [`router`] puts the two doors together. Pages carry a session cookie and are
//! guarded against cross-site posts; the API under `/api/v1` carries a bearer
//! token. Both meet in the same operations.

use std::sync::Arc;
use std::time::Duration;

use axum::Router;
use axum::extract::FromRef;
use axum::http::{HeaderValue, StatusCode, header};
use axum::middleware::{from_fn, from_fn_with_state};
use tower_http::catch_panic::CatchPanicLayer;
use tower_http::compression::CompressionLayer;
use tower_http::csrf::CsrfLayer;
use tower_http::limit::RequestBodyLimitLayer;
use tower_http::request_id::{MakeRequestUuid, PropagateRequestIdLayer, SetRequestIdLayer};
use tower_http::set_header::SetResponseHeaderLayer;
use tower_http::timeout::TimeoutLayer;
use tower_http::trace::TraceLayer;
use utoipa_axum::router::OpenApiRouter;

use crate::db::Db;
use crate::people::Place;
use crate::people::operations::Gate;
use crate::people::passwords::Passwords;
use crate::shelf::attachments;

pub mod api;
pub mod assets;
pub mod chart;
pub mod extract;
pub mod form;
pub mod format;
pub mod help;
pub mod layout;
pub mod list;
pub mod problem;
pub mod queued;
pub mod repeat;
pub mod session;
pub mod throttle;
pub mod units;

/// Largest request body, bytes.
pub const BODY_LIMIT: usize = 1024 * 1024;

/// What handlers may ask for.
#[derive(Clone)]
pub struct App {
    /// The database.
    pub db: Db,
    /// The hashing thread.
    pub passwords: Passwords,
    /// Limits on attempts to sign in.
    pub throttle: Arc<throttle::Throttle>,
    /// Cookies and the first account.
    pub door: Arc<Door>,
}

/// How people get in.
#[derive(Debug)]
pub struct Door {
    /// Cookies over https only.
    pub secure_cookies: bool,
    /// The one-time token that makes the first account, printed at the start.
    pub first_token: String,
}

impl App {
    /// What stands between a secret typed at this place and what it opens.
    pub fn gate<'a>(&'a self, place: &'a Place) -> Gate<'a> {
        Gate {
            passwords: &self.passwords,
            throttle: &self.throttle,
            place,
        }
    }
}

impl FromRef<App> for Db {
    fn from_ref(app: &App) -> Self {
        app.db.clone()
    }
}

/// Everything Leat answers.
pub fn router(app: App) -> Router {
    let pages = Router::new()
        .merge(crate::record::pages::routes())
        .merge(crate::brewery::pages::routes())
        .merge(crate::shelf::pages::routes())
        .merge(crate::shelf::stock::pages::routes())
        .merge(crate::malts::pages::routes())
        .merge(crate::beers::pages::routes())
        .merge(crate::plans::pages::routes())
        .merge(crate::meters::pages::routes())
        .merge(crate::sources::pages::routes())
        .merge(help::routes())
        .fallback(problem::no_such_page);
    // Passwords, cookies and new tokens pass outside the layer that keeps answers.
    let pages = guarded(pages)
        .layer(from_fn_with_state(app.clone(), repeat::layer))
        .merge(guarded(crate::people::pages::routes()))
        .merge(guarded_up_to(
            attachments::upload::READ_TO_THE_END,
            attachments::pages::routes(),
        ))
        .layer(from_fn(queued::layer))
        .layer(from_fn_with_state(app.clone(), session::cookie_layer))
        .layer(CsrfLayer::new())
        .layer(from_fn_with_state(app.clone(), problem::page_layer))
        .layer(never_kept());

    let (files, of_files) = attachments::api::routes().split_for_parts();
    let (api, mut description) = OpenApiRouter::with_openapi(api::description())
        .merge(crate::people::api::routes())
        .merge(crate::record::api::routes())
        .merge(crate::brewery::api::routes())
        .merge(crate::beers::api::routes())
        .merge(crate::plans::api::routes())
        .merge(crate::meters::api::routes())
        .merge(crate::shelf::api::routes())
        .merge(crate::shelf::stock::api::routes())
        .merge(crate::sources::api::routes())
        .merge(crate::malts::api::routes())
        .split_for_parts();
    description.merge(of_files);
    let api = guarded(api.fallback(problem::no_such_endpoint))
        .layer(from_fn_with_state(app.clone(), repeat::layer))
        .merge(guarded_up_to(attachments::upload::READ_TO_THE_END, files))
        .layer(from_fn_with_state(app.clone(), session::token_layer))
        .layer(from_fn(problem::api_layer))
        .layer(never_kept());

    Router::new()
        .nest("/api/v1", api)
        .merge(pages)
        .merge(api::reading_room(description))
        .merge(assets::routes())
        .layer(CompressionLayer::new())
        .layer(SetResponseHeaderLayer::if_not_present(
            header::CONTENT_SECURITY_POLICY,
            HeaderValue::from_static(
                "default-src 'none'; style-src 'self'; script-src 'self'; img-src 'self'; connect-src 'self'; \
                 worker-src 'self'; form-action 'self'; base-uri 'none'; frame-ancestors 'none'",
            ),
        ))
        .layer(SetResponseHeaderLayer::overriding(
            header::REFERRER_POLICY,
            HeaderValue::from_static("same-origin"),
        ))
        .layer(SetResponseHeaderLayer::overriding(
            header::X_CONTENT_TYPE_OPTIONS,
            HeaderValue::from_static("nosniff"),
        ))
        .layer(TraceLayer::new_for_http().make_span_with(|request: &axum::http::Request<axum::body::Body>| {
            let id = request.headers().get("x-request-id").and_then(|id| id.to_str().ok()).unwrap_or("-");
            tracing::info_span!("request", id = %id, method = %request.method(), path = %request.uri().path())
        }))
        .layer(PropagateRequestIdLayer::x_request_id())
        .layer(SetRequestIdLayer::x_request_id(MakeRequestUuid))
        .with_state(app)
}

/// What one person is shown is kept by no browser and no proxy for the next.
fn never_kept() -> SetResponseHeaderLayer<HeaderValue> {
    SetResponseHeaderLayer::if_not_present(
        header::CACHE_CONTROL,
        HeaderValue::from_static("no-store"),
    )
}

/// What keeps one request from harming the others. It stands inside the layers that turn
/// refusals into problem+json or a page, so that its answers are explained as well.
fn guarded(router: Router<App>) -> Router<App> {
    guarded_up_to(BODY_LIMIT, router)
}

/// The same for requests up to a size of their own, bytes.
fn guarded_up_to(limit: usize, router: Router<App>) -> Router<App> {
    router
        .layer(CatchPanicLayer::custom(problem::panicked))
        .layer(TimeoutLayer::with_status_code(
            StatusCode::SERVICE_UNAVAILABLE,
            Duration::from_secs(30),
        ))
        .layer(RequestBodyLimitLayer::new(limit))
}
