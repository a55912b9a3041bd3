//! The description of the API and the page to read it.

use axum::Router;
use axum::http::header;
use axum::response::IntoResponse;
use axum::routing::get;
use utoipa::openapi::path::Operation;
use utoipa::openapi::security::{HttpAuthScheme, HttpBuilder, SecurityScheme};
use utoipa::openapi::server::ServerBuilder;
use utoipa::openapi::{
    ComponentsBuilder, ContentBuilder, InfoBuilder, OpenApi, OpenApiBuilder, Ref, RefOr,
    ResponseBuilder, Schema,
};

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
        .servers(Some([ServerBuilder::new().url("/api/v1").description(Some("This server")).build()]))
        .components(Some(
            ComponentsBuilder::new()
                .security_scheme("token", SecurityScheme::Http(HttpBuilder::new().scheme(HttpAuthScheme::Bearer).build()))
                .build(),
        ))
        .security(Some([utoipa::openapi::security::SecurityRequirement::new::<_, [&str; 0], &str>("token", [])]))
        .build()
}

/// The description with what holds for every operation: a name that is its own, the
/// refusals that any of them may give, and the media type of refusals.
fn completed(mut description: OpenApi) -> OpenApi {
    for schema in description
        .components
        .iter_mut()
        .flat_map(|it| it.schemas.values_mut())
    {
        // What must be sent has no default.
        if let RefOr::T(Schema::Object(object)) = schema {
            for name in &object.required {
                if let Some(RefOr::T(Schema::Object(field))) = object.properties.get_mut(name) {
                    field.default = None;
                }
            }
        }
    }
    for (path, item) in &mut description.paths.paths {
        let place: Vec<&str> = path
            .split('/')
            .filter(|part| !part.is_empty() && !part.starts_with('{'))
            .collect();
        let methods = [
            (&mut item.get, false),
            (&mut item.put, true),
            (&mut item.post, true),
            (&mut item.delete, true),
            (&mut item.patch, true),
        ];
        for (operation, writes) in methods {
            let Some(operation) = operation else { continue };
            name(operation, &place);
            refuse(operation, writes, path == "/me");
            for (status, response) in &mut operation.responses.responses {
                if let RefOr::T(response) = response
                    && matches!(status.as_bytes().first(), Some(b'4' | b'5'))
                    && let Some(content) = response.content.shift_remove("application/json")
                {
                    response
                        .content
                        .insert("application/problem+json".into(), content);
                }
            }
        }
    }
    description
}

/// The refusals that stand before every operation, where it does not tell them itself.
fn refuse(operation: &mut Operation, writes: bool, open_to_any_token: bool) {
    let sent = operation.request_body.is_some();
    let refusals = [
        (!open_to_any_token, "403", "The token may not do this"),
        (
            writes,
            "409",
            "The Idempotency-Key was sent before with another request",
        ),
        (sent, "413", "The body is larger than 1 MB"),
        (writes, "422", "A header cannot be read"),
        (true, "500", "Something failed here; nothing was saved"),
        (true, "503", "The server is busy; nothing was saved"),
    ];
    for (_, status, description) in refusals.into_iter().filter(|(given, ..)| *given) {
        let problem = Ref::from_schema_name("Problem");
        let response = ResponseBuilder::new()
            .description(description)
            .content(
                "application/json",
                ContentBuilder::new().schema(Some(problem)).build(),
            )
            .build();
        let told = &mut operation.responses.responses;
        told.entry(status.into()).or_insert(RefOr::T(response));
    }
}

/// `revise` under `/beers/{id}` becomes `revise_beers`; what the verb says already is
/// not said again.
fn name(operation: &mut Operation, place: &[&str]) {
    let mut name = operation.operation_id.take().unwrap_or_default();
    for part in place {
        let part = part.replace('-', "_");
        if !name.contains(part.trim_end_matches('s')) {
            name = format!("{name}_{part}");
        }
    }
    operation.operation_id = Some(name);
}

/// `/api/openapi.json`: the description, open to anybody who can reach the server.
pub fn reading_room(description: OpenApi) -> Router<App> {
    let json = completed(description).to_pretty_json().unwrap_or_default();
    Router::new().route(
        "/api/openapi.json",
        get(move || {
            let json = json.clone();
            async move { ([(header::CONTENT_TYPE, "application/json")], json).into_response() }
        }),
    )
}
