//! Style sheets, scripts and pictures, embedded in the binary.

use axum::Router;
use axum::extract::Path;
use axum::http::{StatusCode, header};
use axum::response::{IntoResponse, Response};
use axum::routing::get;
use rust_embed::RustEmbed;

use super::App;

#[derive(RustEmbed)]
#[folder = "templates/assets/"]
struct Assets;

/// Everything under `/assets`.
pub fn routes() -> Router<App> {
    Router::new().route("/assets/{*path}", get(asset))
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
