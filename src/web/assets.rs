//! Style sheets, scripts and pictures, embedded in the binary.

use axum::Router;
use axum::extract::Path;
use axum::http::{HeaderValue, StatusCode, header};
use axum::response::{IntoResponse, Response};
use axum::routing::get;
use rust_embed::RustEmbed;

use super::App;

#[derive(RustEmbed)]
#[folder = "templates/assets/"]
struct Assets;

/// Everything under `/assets`, and the service worker, which has a say only in what lies
/// below its own address.
pub fn routes() -> Router<App> {
    Router::new()
        .route("/assets/{*path}", get(asset))
        .route("/service-worker.js", get(service_worker))
}

/// Asked for anew each time, so that no tablet is held by an old one.
async fn service_worker() -> Response {
    let mut response = asset(Path("service-worker.js".into())).await;
    response
        .headers_mut()
        .insert(header::CACHE_CONTROL, HeaderValue::from_static("no-cache"));
    response
}

async fn asset(Path(path): Path<String>) -> Response {
    let Some(file) = Assets::get(&path) else {
        return StatusCode::NOT_FOUND.into_response();
    };
    let kind = match path.rsplit('.').next().unwrap_or_default() {
        "css" => "text/css; charset=utf-8",
        "js" => "text/javascript; charset=utf-8",
        "svg" => "image/svg+xml",
        "png" => "image/png",
        "json" => "application/json",
        _ => "text/plain; charset=utf-8",
    };
    (
        [
            (header::CONTENT_TYPE, kind),
            (header::CACHE_CONTROL, "public, max-age=600"),
        ],
        file.data.into_owned(),
    )
        .into_response()
}
