//! The description of the API and the page to read it.

use axum::Router;
use axum::http::header;
use axum::response::IntoResponse;
use axum::routing::get;
use utoipa::openapi::security::{HttpAuthScheme, HttpBuilder, SecurityScheme};
use utoipa::openapi::{ComponentsBuilder, InfoBuilder, OpenApi, OpenApiBuilder};

use super::App;

/// The frame of the description; the domains add their paths.
pub fn description() -> OpenApi {
    OpenApiBuilder::new()
        .info(
            InfoBuilder::new()
                .title("Leat")
                .version(env!("CARGO_PKG_VERSION"))
                .description(Some(
                    "Water tests, treatment plans and mash-pH outcomes of one brewery. Send a bearer token. \
                     Errors are application/problem+json with a JSON Pointer to each wrong field. \
                     A POST may carry an Idempotency-Key: it is applied once and answered the same again. \
                     Numbers may be sent as JSON numbers or as typed text with a point or comma.",
                ))
                .build(),
        )
        .components(Some(
            ComponentsBuilder::new()
                .security_scheme("token", SecurityScheme::Http(HttpBuilder::new().scheme(HttpAuthScheme::Bearer).build()))
                .build(),
        ))
        .security(Some([utoipa::openapi::security::SecurityRequirement::new::<_, [&str; 0], &str>("token", [])]))
        .build()
}

/// `/api/openapi.json`: the description, open to anybody who can reach the server.
pub fn reading_room(description: OpenApi) -> Router<App> {
    let json = description.to_pretty_json().unwrap_or_default();
    Router::new().route(
        "/api/openapi.json",
        get(move || {
            let json = json.clone();
            async move { ([(header::CONTENT_TYPE, "application/json")], json).into_response() }
        }),
    )
}
