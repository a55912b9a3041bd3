//! Deviations and corrections over `/api/v1`.

use axum::extract::State;
use axum::http::StatusCode;
use axum::response::IntoResponse;
use serde::Serialize;
use utoipa_axum::router::OpenApiRouter;
use utoipa_axum::routes;

use super::corrections::{self, NewCorrectionBody, PlanCorrection};
use super::deviations::{self, Deviation};
use crate::db::Db;
use crate::error::Error;
use crate::id::{DoseId, MaterialLotId, PlanCorrectionId, PlanId, UtcTime};
use crate::people::{Member, Permission};
use crate::plans::operations;
use crate::web::App;
use crate::web::extract::{At, Json};
use crate::web::problem::Problem;

/// The endpoints.
pub fn routes() -> OpenApiRouter<App> {
    OpenApiRouter::new()
        .routes(routes!(list_deviations))
        .routes(routes!(list_corrections, correct))
}

/// One thing that was not as planned.
#[derive(Debug, Serialize, utoipa::ToSchema)]
pub struct DeviationBody {
    /// What tells it from the others of its plan.
    deviation: String,
    /// `outside_tolerance`, `left_out`, `other_lot`, `no_second_person`, `outside_window` or
    /// `approved_despite`.
    kind: &'static str,
    /// Which dose, mash check or plan: its identifier.
    about: String,
    /// What it was, in the units of the brewery.
    words: String,
    /// Why; absent where nobody said so far.
    reason: Option<String>,
}

impl From<Deviation> for DeviationBody {
    fn from(deviation: Deviation) -> Self {
        Self {
            deviation: deviation.key(),
            kind: deviation.kind.key(),
            about: deviation.about,
            words: deviation.words,
            reason: Some(deviation.reason).filter(|reason| !reason.is_empty()),
        }
    }
}

/// What of a batch was not as planned. Closing it asks for the reasons that are missing; once
/// it is closed, as it was written down.
#[utoipa::path(get, path = "/plans/{id}/deviations", tag = "plans", params(("id" = PlanId, Path)), responses(
    (status = 200, description = "Deviations", body = Vec<DeviationBody>),
    (status = 401, description = "No valid token", body = Problem),
    (status = 404, description = "There is no such plan", body = Problem),
))]
async fn list_deviations(
    State(db): State<Db>,
    by: Member,
    At(id): At<PlanId>,
) -> Result<axum::Json<Vec<DeviationBody>>, Error> {
    let found = deviations::list(&db, &by, id).await?;
    Ok(axum::Json(found.into_iter().map(Into::into).collect()))
}

/// A correction of a closed batch.
#[derive(Debug, Serialize, utoipa::ToSchema)]
pub struct CorrectionBody {
    /// Its identifier.
    id: PlanCorrectionId,
    /// `lot`, `amount`, `reading` or `other`.
    what: &'static str,
    /// Which dose, for a lot or an amount.
    dose_id: Option<DoseId>,
    /// What was said before, with its unit.
    said_before: String,
    /// What is right, with its unit.
    says_now: String,
    /// An amount as it really was, g or mL.
    amount: Option<f64>,
    /// A lot, where the shelf knows it.
    material_lot_id: Option<MaterialLotId>,
    /// Whether the batch teaches the next prediction all the same.
    teaches: bool,
    /// Why.
    reason: String,
    /// When.
    corrected_at: UtcTime,
    /// By whom.
    corrected_by: String,
}

impl From<PlanCorrection> for CorrectionBody {
    fn from(correction: PlanCorrection) -> Self {
        Self {
            id: correction.id,
            what: correction.what.key(),
            dose_id: correction.dose_id,
            said_before: correction.said_before,
            says_now: correction.says_now,
            amount: correction.amount.map(|amount| amount.get()),
            material_lot_id: correction.lot_id,
            teaches: correction.teaches,
            reason: correction.made.reason,
            corrected_at: correction.made.at,
            corrected_by: correction.made.by,
        }
    }
}

/// What was corrected about a closed batch, the earliest first.
#[utoipa::path(get, path = "/plans/{id}/corrections", tag = "plans", params(("id" = PlanId, Path)), responses(
    (status = 200, description = "Corrections", body = Vec<CorrectionBody>),
    (status = 401, description = "No valid token", body = Problem),
    (status = 404, description = "There is no such plan", body = Problem),
))]
async fn list_corrections(
    State(db): State<Db>,
    by: Member,
    At(id): At<PlanId>,
) -> Result<axum::Json<Vec<CorrectionBody>>, Error> {
    operations::find(&db, &by, id).await?;
    let found = corrections::list(&db, &by, id).await?;
    Ok(axum::Json(found.into_iter().map(Into::into).collect()))
}

/// Write down what is right about a closed batch. What was closed stays to be read.
#[utoipa::path(post, path = "/plans/{id}/corrections", tag = "plans", params(("id" = PlanId, Path)),
    request_body = NewCorrectionBody, responses(
    (status = 201, description = "Written down", body = CorrectionBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Not allowed", body = Problem),
    (status = 404, description = "There is no such plan", body = Problem),
    (status = 409, description = "The batch is not closed", body = Problem),
    (status = 422, description = "Some fields need mending", body = Problem),
))]
async fn correct(
    State(db): State<Db>,
    by: Member,
    At(id): At<PlanId>,
    Json(body): Json<NewCorrectionBody>,
) -> Result<impl IntoResponse, Error> {
    by.may(Permission::ApprovePlans)?;
    let correction = corrections::correct(&db, &by, id, body.try_into()?).await?;
    Ok((
        StatusCode::CREATED,
        axum::Json(CorrectionBody::from(correction)),
    ))
}
