//! Tests of sparge liquor for programs.

use axum::extract::State;
use axum::http::StatusCode;
use axum::response::IntoResponse;
use chemistry::quantity::{Drops, Litres, MgPerLAsCaCO3};
use serde::{Deserialize, Serialize};
use utoipa_axum::router::OpenApiRouter;
use utoipa_axum::routes;

use super::{LiquorAdvised, LiquorCheck, NewLiquorCheck, Tested};
use crate::db::Db;
use crate::error::Error;
use crate::id::{DoseId, LiquorCheckId, PlanId, UtcTime};
use crate::input::{Number, Problems, ReasonBody, within};
use crate::people::{Member, Permission};
use crate::plans::answers::DeedBody;
use crate::plans::operations;
use crate::web::App;
use crate::web::extract::{At, Json};
use crate::web::problem::Problem;

/// A test of sparge liquor as it is sent: drops and what each is worth, or the alkalinity
/// itself.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct NewLiquorCheckBody {
    /// Drops until the colour turned.
    pub drops: Number,
    /// What one drop is worth, mg/L as CaCO₃: 17.1, 10 or 5 in most kits.
    pub mg_per_l_as_caco3_per_drop: Number,
    /// The alkalinity, mg/L as CaCO₃, where it was not a drop count.
    pub alkalinity_mg_per_l_as_caco3: Number,
    /// How much liquor is still to run, L; all of the plan's when not given.
    pub volume_l: Number,
}

impl TryFrom<NewLiquorCheckBody> for NewLiquorCheck {
    type Error = Error;

    fn try_from(body: NewLiquorCheckBody) -> Result<Self, Error> {
        let mut problems = Problems::new();
        let drops = problems.optional_quantity("drops", &body.drops, |value| {
            within(value, "drops", 0.0, 200.0).map(Drops::clamped)
        });
        let per_drop = problems.optional_quantity(
            "mg_per_l_as_caco3_per_drop",
            &body.mg_per_l_as_caco3_per_drop,
            |value| within(value, "mg/L", 0.1, 100.0).map(MgPerLAsCaCO3::clamped),
        );
        let alkalinity = problems.optional_quantity(
            "alkalinity_mg_per_l_as_caco3",
            &body.alkalinity_mg_per_l_as_caco3,
            |value| within(value, "mg/L", 0.0, 2000.0).map(MgPerLAsCaCO3::clamped),
        );
        let volume = problems.optional_quantity("volume_l", &body.volume_l, |value| {
            within(value, "L", 1.0, 1e6).map(Litres::clamped)
        });
        if body.drops.is_missing() && body.alkalinity_mg_per_l_as_caco3.is_missing() {
            problems.add("drops", "Enter the drops, or the alkalinity.");
        } else if !body.drops.is_missing() && !body.alkalinity_mg_per_l_as_caco3.is_missing() {
            problems.add(
                "alkalinity_mg_per_l_as_caco3",
                "Enter the drops or the alkalinity, not both.",
            );
        } else if !body.drops.is_missing() && body.mg_per_l_as_caco3_per_drop.is_missing() {
            problems.add(
                "mg_per_l_as_caco3_per_drop",
                "Enter what one drop is worth: the kit’s leaflet says.",
            );
        }
        problems.finish()?;
        let tested = match (drops, per_drop, alkalinity) {
            (Some(drops), Some(per_drop), _) => Tested::Drops(drops, per_drop),
            (_, _, Some(alkalinity)) => Tested::Alkalinity(alkalinity),
            _ => return Err(Error::field("drops", "Enter the drops, or the alkalinity.")),
        };
        Ok(Self { tested, volume })
    }
}

/// A test of sparge liquor and what to do about it.
#[derive(Clone, Debug, Serialize, utoipa::ToSchema)]
pub struct LiquorCheckBody {
    /// Its identifier.
    id: LiquorCheckId,
    /// When it was entered.
    checked_at: UtcTime,
    /// Drops, where it was a drop count.
    drops: Option<f64>,
    /// What one drop was worth, mg/L as CaCO₃.
    mg_per_l_as_caco3_per_drop: Option<f64>,
    /// The alkalinity, mg/L as CaCO₃.
    alkalinity_mg_per_l_as_caco3: f64,
    /// Its standard deviation.
    alkalinity_sd: f64,
    /// How much liquor was still to run, L.
    volume_l: f64,
    /// What to do.
    advised: LiquorAdvised,
    /// The line of the weigh-out it led to.
    dose_id: Option<DoseId>,
    /// By whom.
    checked_by: String,
    /// When, by whom and why it was withdrawn.
    withdrawn: Option<DeedBody>,
}

impl From<&LiquorCheck> for LiquorCheckBody {
    fn from(check: &LiquorCheck) -> Self {
        Self {
            id: check.id,
            checked_at: check.checked_at,
            drops: check.drops.map(|(drops, _)| drops.get()),
            mg_per_l_as_caco3_per_drop: check.drops.map(|(_, per_drop)| per_drop.get()),
            alkalinity_mg_per_l_as_caco3: check.alkalinity.value.get(),
            alkalinity_sd: check.alkalinity.sd,
            volume_l: check.volume.get(),
            advised: check.advised.clone(),
            dose_id: check.dose,
            checked_by: check.checked_by.clone(),
            withdrawn: check.withdrawn.as_ref().map(Into::into),
        }
    }
}

/// The endpoints.
pub fn routes() -> OpenApiRouter<App> {
    OpenApiRouter::new()
        .routes(routes!(list, check))
        .routes(routes!(withdraw))
}

/// Every test of the sparge liquor of a batch, the earliest first.
#[utoipa::path(get, path = "/plans/{id}/liquor-checks", tag = "plans", params(("id" = PlanId, Path)), responses(
    (status = 200, description = "Tests", body = Vec<LiquorCheckBody>),
    (status = 401, description = "No valid token", body = Problem),
    (status = 404, description = "There is no such plan", body = Problem),
))]
async fn list(
    State(db): State<Db>,
    by: Member,
    At(id): At<PlanId>,
) -> Result<axum::Json<Vec<LiquorCheckBody>>, Error> {
    let plan = operations::find(&db, &by, id).await?;
    let checks = super::list(&db, &by, plan.id).await?;
    Ok(axum::Json(checks.iter().map(Into::into).collect()))
}

/// Enter a test of the sparge liquor and be told what to do.
#[utoipa::path(post, path = "/plans/{id}/liquor-checks", tag = "plans", params(("id" = PlanId, Path)),
    request_body = NewLiquorCheckBody, responses(
    (status = 201, description = "Written down, with what to do", body = LiquorCheckBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Not allowed", body = Problem),
    (status = 404, description = "There is no such plan", body = Problem),
    (status = 409, description = "The plan is not approved", body = Problem),
    (status = 422, description = "Some fields need mending", body = Problem),
))]
async fn check(
    State(db): State<Db>,
    by: Member,
    At(id): At<PlanId>,
    Json(body): Json<NewLiquorCheckBody>,
) -> Result<impl IntoResponse, Error> {
    by.may(Permission::BrewBatches)?;
    let check = super::check(&db, &by, id, body.try_into()?).await?;
    Ok((
        StatusCode::CREATED,
        axum::Json(LiquorCheckBody::from(&check)),
    ))
}

/// Withdraw a test that was not what it said.
#[utoipa::path(post, path = "/plans/{id}/liquor-checks/{liquor_check_id}/withdrawal", tag = "plans",
    params(("id" = PlanId, Path), ("liquor_check_id" = LiquorCheckId, Path)), request_body = ReasonBody, responses(
    (status = 204, description = "Withdrawn"),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Not allowed", body = Problem),
    (status = 404, description = "There is no such test", body = Problem),
    (status = 409, description = "It is withdrawn already, or the plan is not open", body = Problem),
    (status = 422, description = "Some fields need mending", body = Problem),
))]
async fn withdraw(
    State(db): State<Db>,
    by: Member,
    At((id, check)): At<(PlanId, LiquorCheckId)>,
    Json(body): Json<ReasonBody>,
) -> Result<StatusCode, Error> {
    by.may(Permission::BrewBatches)?;
    super::withdraw(&db, &by, id, check, body.given()?).await?;
    Ok(StatusCode::NO_CONTENT)
}
