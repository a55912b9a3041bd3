//! `/api/v1/materials/{id}/lots/{lot_id}/movements` and `…/stock`.

use axum::extract::State;
use axum::http::{StatusCode, header};
use axum::response::IntoResponse;
use serde::Serialize;
use utoipa_axum::router::OpenApiRouter;
use utoipa_axum::routes;

use super::entered::NewMovementBody;
use super::{Movement, Stock, operations};
use crate::brewery;
use crate::db::Db;
use crate::error::Error;
use crate::id::{MaterialId, MaterialLotId, MovementId, PlanId, UtcTime};
use crate::people::Member;
use crate::shelf::warnings;
use crate::web::App;
use crate::web::extract::{At, Json, ListQuery, Listed, Query};
use crate::web::problem::Problem;

/// A delivery, a count, or the removal of one. It never changes.
#[derive(Debug, Serialize, utoipa::ToSchema)]
pub struct MovementBody {
    /// Its identifier.
    id: MovementId,
    /// Of which lot.
    material_lot_id: MaterialLotId,
    /// As it was entered; `moved_at` in UTC.
    #[serde(flatten)]
    entered: NewMovementBody,
    /// When it was entered.
    entered_at: UtcTime,
    /// Who entered it.
    entered_by: String,
}

impl From<&Movement> for MovementBody {
    fn from(movement: &Movement) -> Self {
        Self {
            id: movement.id,
            material_lot_id: movement.lot_id,
            entered: movement.into(),
            entered_at: movement.entered_at,
            entered_by: movement.entered_by.clone(),
        }
    }
}

/// How much of a lot there is, and why.
#[derive(Debug, Serialize, utoipa::ToSchema)]
pub struct StockBody {
    /// How much there is, g for a solid, mL for a liquid; below zero where more was weighed
    /// out than came, absent where nobody counted it and no delivery was entered.
    stock_g_or_ml: Option<f64>,
    /// When it was last counted.
    counted_at: Option<UtcTime>,
    /// What batches took of this material on average, the last ten at most.
    per_batch_g_or_ml: Option<f64>,
    /// What to look after: `overdrawn`, `past_use_by`, `near_use_by`, `open_long`.
    warnings: Vec<&'static str>,
    /// What was weighed out of it, in that order.
    doses: Vec<TakenBody>,
}

/// What a dose took of a lot.
#[derive(Debug, Serialize, utoipa::ToSchema)]
pub struct TakenBody {
    /// The plan.
    plan_id: PlanId,
    /// The batch.
    batch: String,
    /// How much, g or mL.
    amount_g_or_ml: f64,
    /// When.
    weighed_at: UtcTime,
    /// Who weighed it out.
    weighed_by: String,
}

/// The endpoints.
pub fn routes() -> OpenApiRouter<App> {
    OpenApiRouter::new()
        .routes(routes!(list, enter))
        .routes(routes!(show))
        .routes(routes!(stock))
}

/// Deliveries and counts of a lot, in the order they were entered.
#[utoipa::path(get, path = "/materials/{id}/lots/{lot_id}/movements", tag = "shelf", params(("id" = MaterialId, Path), ("lot_id" = MaterialLotId, Path), ListQuery), responses(
    (status = 200, description = "Movements, in the order they were entered; one that another corrects no longer counts", body = Listed<MovementBody>),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token lacks the scope read", body = Problem),
    (status = 404, description = "No such lot of this material", body = Problem),
    (status = 422, description = "The cursor or limit cannot be read", body = Problem),
))]
async fn list(
    State(db): State<Db>,
    by: Member,
    At((id, lot_id)): At<(MaterialId, MaterialLotId)>,
    Query(query): Query<ListQuery>,
) -> Result<axum::Json<Listed<MovementBody>>, Error> {
    let limit = query.limit()?;
    let found = operations::page(&db, &by, id, lot_id, query.after()?, limit + 1).await?;
    let bodies = found.iter().map(MovementBody::from).collect();
    Ok(axum::Json(Listed::cut(
        bodies,
        limit,
        |body: &MovementBody| body.id.to_string(),
    )))
}

/// Enter a delivery or a count, or correct one by another.
#[utoipa::path(post, path = "/materials/{id}/lots/{lot_id}/movements", tag = "shelf", params(("id" = MaterialId, Path), ("lot_id" = MaterialLotId, Path)), request_body = NewMovementBody, responses(
    (status = 201, description = "Entered; Location tells where", body = MovementBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Only a QA person's or manager's token with the scope plans may", body = Problem),
    (status = 404, description = "No such lot of this material", body = Problem),
    (status = 422, description = "Some fields need mending, or a count needs its reason", body = Problem),
))]
async fn enter(
    State(db): State<Db>,
    by: Member,
    At((id, lot_id)): At<(MaterialId, MaterialLotId)>,
    Json(body): Json<NewMovementBody>,
) -> Result<impl IntoResponse, Error> {
    let movement = operations::enter(&db, &by, id, lot_id, &body).await?;
    let location = format!(
        "/api/v1/materials/{id}/lots/{lot_id}/movements/{}",
        movement.id
    );
    Ok((
        StatusCode::CREATED,
        [(header::LOCATION, location)],
        axum::Json(MovementBody::from(&movement)),
    ))
}

/// One delivery or count.
#[utoipa::path(get, path = "/materials/{id}/lots/{lot_id}/movements/{movement_id}", tag = "shelf", params(("id" = MaterialId, Path), ("lot_id" = MaterialLotId, Path), ("movement_id" = MovementId, Path)), responses(
    (status = 200, description = "The movement", body = MovementBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token lacks the scope read", body = Problem),
    (status = 404, description = "No such movement of this lot", body = Problem),
))]
async fn show(
    State(db): State<Db>,
    by: Member,
    At(place): At<(MaterialId, MaterialLotId, MovementId)>,
) -> Result<axum::Json<MovementBody>, Error> {
    let (_, _, movement) = operations::find(&db, &by, place).await?;
    Ok(axum::Json(MovementBody::from(&movement)))
}

/// How much of a lot there is now.
#[utoipa::path(get, path = "/materials/{id}/lots/{lot_id}/stock", tag = "shelf", params(("id" = MaterialId, Path), ("lot_id" = MaterialLotId, Path)), responses(
    (status = 200, description = "The last count, plus what was delivered since, less what was weighed out since", body = StockBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token lacks the scope read", body = Problem),
    (status = 404, description = "No such lot of this material", body = Problem),
))]
async fn stock(
    State(db): State<Db>,
    by: Member,
    At((id, lot_id)): At<(MaterialId, MaterialLotId)>,
) -> Result<axum::Json<StockBody>, Error> {
    let ledger = operations::ledger(&db, &by, id, lot_id).await?;
    let today = brewery::operations::today(&db).await?;
    let stock = ledger.level.stock;
    let warnings = warnings::of_lot(&ledger.material, &ledger.lot, stock, today);
    Ok(axum::Json(StockBody {
        stock_g_or_ml: stock.map(Stock::get),
        counted_at: ledger.level.counted_at,
        per_batch_g_or_ml: ledger.recent_use.map(|it| it.per_batch.get()),
        warnings: warnings.iter().map(|warning| warning.key()).collect(),
        doses: ledger
            .taken
            .into_iter()
            .map(|taken| TakenBody {
                plan_id: taken.plan,
                batch: taken.batch,
                amount_g_or_ml: taken.amount.get(),
                weighed_at: taken.at,
                weighed_by: taken.by,
            })
            .collect(),
    }))
}
