//! `/api/v1/materials` and the lots under each.

use axum::extract::State;
use axum::http::{HeaderMap, StatusCode, header};
use axum::response::IntoResponse;
use chemistry::quantity::DoseAmount;
use jiff::civil::Date;
use serde::Serialize;
use utoipa_axum::router::OpenApiRouter;
use utoipa_axum::routes;

use super::entered::{NewMaterialBody, NewMaterialLotBody, StrengthBody};
use super::stock::{Levels, Stock};
use super::{Material, MaterialLot, operations, warnings};
use crate::brewery;
use crate::db::Db;
use crate::error::Error;
use crate::id::{MaterialId, MaterialLotId};
use crate::input::percent;
use crate::people::{Member, Permission};
use crate::web::App;
use crate::web::extract::{At, Json, ListQuery, Listed, Query, etag, if_match};
use crate::web::problem::Problem;

/// A material on the shelf.
#[derive(Debug, Serialize, utoipa::ToSchema)]
pub struct MaterialBody {
    /// Its identifier.
    id: MaterialId,
    /// Counts changes; the ETag.
    version: i64,
    /// As it was entered.
    #[serde(flatten)]
    entered: NewMaterialBody,
    /// `g` or `mL`: what it is measured out in.
    unit: &'static str,
    /// What every calculation takes without a lot.
    in_force: InForceBody,
    /// How much there is of its lots on the shelf, g or mL; absent where none was counted.
    stock_g_or_ml: Option<f64>,
    /// How many of its lots on the shelf were never counted.
    lots_not_counted: usize,
    /// What to look after: `low`, and of its current lot `overdrawn`, `past_use_by`,
    /// `near_use_by`, `open_long`.
    warnings: Vec<&'static str>,
    /// What whoever weighs it must know.
    cautions: Vec<&'static str>,
}

/// Strength and assay as calculations take them.
#[derive(Debug, Serialize, utoipa::ToSchema)]
pub struct InForceBody {
    /// `label`, `certificate of the lot`, `own assay`, `own assay, then open, assumed`,
    /// `opened pack, assumed` or `usual for it, assumed`.
    how_known: &'static str,
    /// How strong a liquid is.
    strength: StrengthBody,
    /// Share that is the substance, %.
    assay_percent: f64,
    /// Its standard deviation, percentage points.
    assay_sd_percent: f64,
    /// What 10 g (or mL) of it in one hectolitre bring.
    ten_per_hl: Vec<BringsBody>,
}

/// One figure of a liquor that an addition changes.
#[derive(Debug, Serialize, utoipa::ToSchema)]
pub struct BringsBody {
    /// An ion, or `alkalinity_as_caco3`.
    figure: &'static str,
    /// By how much, mg/L; negative where it falls.
    mg_per_l: f64,
    /// Its standard deviation, mg/L.
    sd_mg_per_l: f64,
}

impl InForceBody {
    fn of(material: &Material, lot: Option<&MaterialLot>, today: Date) -> Self {
        let substance = material.chemistry(lot, today);
        let ten = DoseAmount::constant(10.0);
        Self {
            how_known: material.how_known(lot),
            strength: substance.strength().into(),
            assay_percent: percent(substance.assay().value.get()),
            assay_sd_percent: percent(substance.assay().sd),
            ten_per_hl: material
                .brings(lot, today, ten)
                .into_iter()
                .map(|brings| BringsBody {
                    figure: brings.ion.map_or("alkalinity_as_caco3", |ion| ion.name()),
                    mg_per_l: brings.mg_per_l,
                    sd_mg_per_l: brings.sd_mg_per_l,
                })
                .collect(),
        }
    }
}

/// What bodies are made with: the stock and the day.
struct Now {
    levels: Levels,
    current: Vec<MaterialLot>,
    today: Date,
}

impl Now {
    async fn read(db: &Db) -> Result<Self, Error> {
        let (levels, current) = operations::now(db).await?;
        Ok(Self {
            levels,
            current,
            today: brewery::operations::today(db).await?,
        })
    }

    fn of_lot(&self, id: MaterialLotId) -> Option<Stock> {
        self.levels.lot(id).and_then(|level| level.stock)
    }
}

impl MaterialBody {
    fn of(material: &Material, now: &Now) -> Self {
        let level = now.levels.material(material.id);
        let current = now
            .current
            .iter()
            .find(|lot| lot.material_id == material.id);
        let in_hand = current.map(|lot| (lot, now.of_lot(lot.id)));
        let warnings = warnings::of_material(material, level, in_hand, now.today);
        Self {
            stock_g_or_ml: level.stock.map(Stock::get),
            lots_not_counted: level.not_counted,
            warnings: warnings.iter().map(|warning| warning.key()).collect(),
            id: material.id,
            version: material.version,
            entered: material.into(),
            unit: material.unit().symbol(),
            in_force: InForceBody::of(material, None, now.today),
            cautions: material.substance.cautions(),
        }
    }
}

/// A lot of a material.
#[derive(Debug, Serialize, utoipa::ToSchema)]
pub struct MaterialLotBody {
    /// Its identifier.
    id: MaterialLotId,
    /// Of which material.
    material_id: MaterialId,
    /// Counts changes; the ETag.
    version: i64,
    /// As it was entered.
    #[serde(flatten)]
    entered: NewMaterialLotBody,
    /// How much there is, g or mL; below zero where more was weighed out than came, absent
    /// where nobody counted it and no delivery was entered.
    stock_g_or_ml: Option<f64>,
    /// What to look after: `overdrawn`, `past_use_by`, `near_use_by`, `open_long`.
    warnings: Vec<&'static str>,
    /// What every calculation takes with this lot.
    in_force: InForceBody,
}

impl MaterialLotBody {
    fn of(material: &Material, lot: &MaterialLot, now: &Now) -> Self {
        let there = now.of_lot(lot.id);
        let warnings = warnings::of_lot(material, lot, there, now.today);
        Self {
            stock_g_or_ml: there.map(Stock::get),
            warnings: warnings.iter().map(|warning| warning.key()).collect(),
            id: lot.id,
            material_id: lot.material_id,
            version: lot.version,
            entered: lot.into(),
            in_force: InForceBody::of(material, Some(lot), now.today),
        }
    }
}

/// The endpoints.
pub fn routes() -> OpenApiRouter<App> {
    OpenApiRouter::new()
        .routes(routes!(list, create))
        .routes(routes!(show, revise))
        .routes(routes!(list_lots, create_lot))
        .routes(routes!(show_lot, revise_lot))
}

/// The materials on the shelf, in the order they were added.
#[utoipa::path(get, path = "/materials", tag = "shelf", params(ListQuery), responses(
    (status = 200, description = "Materials, in the order they were added", body = Listed<MaterialBody>),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token lacks the scope read", body = Problem),
    (status = 422, description = "The cursor or limit cannot be read", body = Problem),
))]
async fn list(
    State(db): State<Db>,
    by: Member,
    Query(query): Query<ListQuery>,
) -> Result<axum::Json<Listed<MaterialBody>>, Error> {
    let now = Now::read(&db).await?;
    let limit = query.limit()?;
    let found = operations::page(&db, &by, query.after()?, limit + 1).await?;
    let bodies = found
        .iter()
        .map(|material| MaterialBody::of(material, &now))
        .collect();
    Ok(axum::Json(Listed::cut(
        bodies,
        limit,
        |body: &MaterialBody| body.id.to_string(),
    )))
}

/// Put a material on the shelf.
#[utoipa::path(post, path = "/materials", tag = "shelf", request_body = NewMaterialBody, responses(
    (status = 201, description = "Added; Location and ETag tell where and which version", body = MaterialBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Only a manager's token with the scope plans may", body = Problem),
    (status = 422, description = "Some fields need mending", body = Problem),
))]
async fn create(
    State(db): State<Db>,
    by: Member,
    Json(body): Json<NewMaterialBody>,
) -> Result<impl IntoResponse, Error> {
    let now = Now::read(&db).await?;
    by.may(Permission::KeepShelf)?;
    let material = operations::create(&db, &by, body.try_into()?).await?;
    let location = format!("/api/v1/materials/{}", material.id);
    Ok((
        StatusCode::CREATED,
        [(header::LOCATION, location)],
        etag(material.version),
        axum::Json(MaterialBody::of(&material, &now)),
    ))
}

/// One material.
#[utoipa::path(get, path = "/materials/{id}", tag = "shelf", params(("id" = MaterialId, Path)), responses(
    (status = 200, description = "The material, with its version as ETag", body = MaterialBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token lacks the scope read", body = Problem),
    (status = 404, description = "No such material", body = Problem),
))]
async fn show(
    State(db): State<Db>,
    by: Member,
    At(id): At<MaterialId>,
) -> Result<impl IntoResponse, Error> {
    let now = Now::read(&db).await?;
    let material = operations::find(&db, &by, id).await?;
    Ok((
        etag(material.version),
        axum::Json(MaterialBody::of(&material, &now)),
    ))
}

/// Replace a material. Its substance stays.
#[utoipa::path(put, path = "/materials/{id}", tag = "shelf", params(("id" = MaterialId, Path)), request_body = NewMaterialBody, responses(
    (status = 200, description = "Replaced", body = MaterialBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Only a manager's token with the scope plans may", body = Problem),
    (status = 404, description = "No such material", body = Problem),
    (status = 409, description = "Changed by somebody else since the version in If-Match", body = Problem),
    (status = 422, description = "Some fields need mending", body = Problem),
))]
async fn revise(
    State(db): State<Db>,
    by: Member,
    At(id): At<MaterialId>,
    headers: HeaderMap,
    Json(body): Json<NewMaterialBody>,
) -> Result<impl IntoResponse, Error> {
    let now = Now::read(&db).await?;
    by.may(Permission::KeepShelf)?;
    let material = operations::revise(&db, &by, id, body.try_into()?, if_match(&headers)?).await?;
    Ok((
        etag(material.version),
        axum::Json(MaterialBody::of(&material, &now)),
    ))
}

/// The lots of a material, in the order they were entered.
#[utoipa::path(get, path = "/materials/{id}/lots", tag = "shelf", params(("id" = MaterialId, Path), ListQuery), responses(
    (status = 200, description = "Lots, in the order they were entered", body = Listed<MaterialLotBody>),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token lacks the scope read", body = Problem),
    (status = 404, description = "No such material", body = Problem),
    (status = 422, description = "The cursor or limit cannot be read", body = Problem),
))]
async fn list_lots(
    State(db): State<Db>,
    by: Member,
    At(id): At<MaterialId>,
    Query(query): Query<ListQuery>,
) -> Result<axum::Json<Listed<MaterialLotBody>>, Error> {
    let now = Now::read(&db).await?;
    let limit = query.limit()?;
    let material = operations::find(&db, &by, id).await?;
    let lots = operations::page_of_lots(&db, &by, id, query.after()?, limit + 1).await?;
    let bodies = lots
        .iter()
        .map(|lot| MaterialLotBody::of(&material, lot, &now))
        .collect();
    Ok(axum::Json(Listed::cut(
        bodies,
        limit,
        |body: &MaterialLotBody| body.id.to_string(),
    )))
}

/// Enter a lot.
#[utoipa::path(post, path = "/materials/{id}/lots", tag = "shelf", params(("id" = MaterialId, Path)), request_body = NewMaterialLotBody, responses(
    (status = 201, description = "Entered; Location and ETag tell where and which version", body = MaterialLotBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Only a QA person's or manager's token with the scope plans may", body = Problem),
    (status = 404, description = "No such material", body = Problem),
    (status = 422, description = "Some fields need mending", body = Problem),
))]
async fn create_lot(
    State(db): State<Db>,
    by: Member,
    At(id): At<MaterialId>,
    Json(body): Json<NewMaterialLotBody>,
) -> Result<impl IntoResponse, Error> {
    let now = Now::read(&db).await?;
    let material = operations::find(&db, &by, id).await?;
    let lot = operations::create_lot(&db, &by, id, body).await?;
    let location = format!("/api/v1/materials/{id}/lots/{}", lot.id);
    Ok((
        StatusCode::CREATED,
        [(header::LOCATION, location)],
        etag(lot.version),
        axum::Json(MaterialLotBody::of(&material, &lot, &now)),
    ))
}

/// One lot.
#[utoipa::path(get, path = "/materials/{id}/lots/{lot_id}", tag = "shelf", params(("id" = MaterialId, Path), ("lot_id" = MaterialLotId, Path)), responses(
    (status = 200, description = "The lot, with its version as ETag", body = MaterialLotBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token lacks the scope read", body = Problem),
    (status = 404, description = "No such lot of this material", body = Problem),
))]
async fn show_lot(
    State(db): State<Db>,
    by: Member,
    At((id, lot_id)): At<(MaterialId, MaterialLotId)>,
) -> Result<impl IntoResponse, Error> {
    let now = Now::read(&db).await?;
    let (material, lot) = operations::find_lot_of(&db, &by, id, lot_id).await?;
    Ok((
        etag(lot.version),
        axum::Json(MaterialLotBody::of(&material, &lot, &now)),
    ))
}

/// Replace a lot.
#[utoipa::path(put, path = "/materials/{id}/lots/{lot_id}", tag = "shelf", params(("id" = MaterialId, Path), ("lot_id" = MaterialLotId, Path)), request_body = NewMaterialLotBody, responses(
    (status = 200, description = "Replaced", body = MaterialLotBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Only a QA person's or manager's token with the scope plans may", body = Problem),
    (status = 404, description = "No such lot of this material", body = Problem),
    (status = 409, description = "Changed by somebody else since the version in If-Match", body = Problem),
    (status = 422, description = "Some fields need mending", body = Problem),
))]
async fn revise_lot(
    State(db): State<Db>,
    by: Member,
    At((id, lot_id)): At<(MaterialId, MaterialLotId)>,
    headers: HeaderMap,
    Json(body): Json<NewMaterialLotBody>,
) -> Result<impl IntoResponse, Error> {
    let now = Now::read(&db).await?;
    by.may(Permission::KeepLots)?;
    let (material, _) = operations::find_lot_of(&db, &by, id, lot_id).await?;
    let lot = operations::revise_lot(&db, &by, lot_id, body, if_match(&headers)?).await?;
    Ok((
        etag(lot.version),
        axum::Json(MaterialLotBody::of(&material, &lot, &now)),
    ))
}
