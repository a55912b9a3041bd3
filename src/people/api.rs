//! `/api/v1/me`: whose token this is.

use serde::Serialize;
use utoipa_axum::router::OpenApiRouter;
use utoipa_axum::routes;

use super::{Member, Role, Scope};
use crate::id::MemberId;
use crate::web::App;
use crate::web::problem::Problem;

/// Who asks, and what they may do.
#[derive(Debug, Serialize, utoipa::ToSchema)]
pub struct MeBody {
    /// The account whose rights the token carries.
    id: MemberId,
    /// Its owner.
    name: String,
    /// What they do.
    role: Role,
    /// What the token may be used for.
    scopes: Vec<Scope>,
}

/// The endpoints.
pub fn routes() -> OpenApiRouter<App> {
    OpenApiRouter::new().routes(routes!(me))
}

/// Whose token this is.
#[utoipa::path(get, path = "/me", tag = "people", responses(
    (status = 200, description = "The account and the scopes of the token", body = MeBody),
    (status = 401, description = "No valid token", body = Problem),
))]
async fn me(by: Member) -> axum::Json<MeBody> {
    axum::Json(MeBody {
        id: by.id,
        name: by.name,
        role: by.role,
        scopes: by.scopes.unwrap_or_default(),
    })
}
