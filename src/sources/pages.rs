//! The pages of sources.

use axum::Router;

use crate::web::App;

/// The pages.
pub fn routes() -> Router<App> {
    Router::new()
}
