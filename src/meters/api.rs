//! `/api/v1/meters` and the calibrations of each.

use axum::extract::State;
use axum::http::{HeaderMap, StatusCode, header};
use axum::response::IntoResponse;
use chemistry::quantity::SlopePercent;
use serde::Serialize;
use utoipa_axum::router::OpenApiRouter;
use utoipa_axum::routes;

use super::entered::{NewCalibrationBody, NewMeterBody};
use super::{Calibration, Meter, Standing, operations};
use crate::db::Db;
use crate::error::Error;
use crate::id::{CalibrationId, MeterId, UtcTime};
use crate::input::ReasonBody;
use crate::people::{Member, Permission};
use crate::web::App;
use crate::web::extract::{At, Json, ListQuery, Listed, Query, etag, if_match};
use crate::web::problem::Problem;

/// What a reading taken with a meter now is worth.
#[derive(Debug, Serialize, utoipa::ToSchema)]
pub struct MeterStandingBody {
    /// The last calibration that was not withdrawn.
    calibration_id: Option<CalibrationId>,
    /// When that was done.
    calibrated_at: Option<UtcTime>,
    /// `good`, `ageing`, `do_not_use` or `not_calibrated`.
    verdict: &'static str,
    /// Whether it was done in the last 24 hours.
    fresh: bool,
    /// Whether a dose may rest on a reading: fresh, and good or ageing.
    may_be_acted_on: bool,
    /// One standard deviation of a reading near pH 5.4, cooled sample.
    sd: f64,
    /// The slope it found, % of the Nernst slope at its temperature.
    slope_percent: Option<f64>,
}

impl From<&Standing> for MeterStandingBody {
    fn from(standing: &Standing) -> Self {
        Self {
            calibration_id: standing.calibration_id,
            calibrated_at: standing.calibrated_at,
            verdict: standing.verdict.key(),
            fresh: standing.fresh,
            may_be_acted_on: standing.may_be_acted_on(),
            sd: standing.sd.get(),
            slope_percent: standing.slope_percent.map(SlopePercent::get),
        }
    }
}

/// A pH meter.
#[derive(Debug, Serialize, utoipa::ToSchema)]
pub struct MeterBody {
    /// Its identifier.
    id: MeterId,
    /// Counts changes; the ETag.
    version: i64,
    /// As it was entered.
    #[serde(flatten)]
    entered: NewMeterBody,
}

impl From<&Meter> for MeterBody {
    fn from(meter: &Meter) -> Self {
        Self {
            id: meter.id,
            version: meter.version,
            entered: meter.into(),
        }
    }
}

/// A pH meter and what it is worth now.
#[derive(Debug, Serialize, utoipa::ToSchema)]
pub struct MeterNowBody {
    /// The meter.
    #[serde(flatten)]
    meter: MeterBody,
    /// What a reading taken now is worth.
    standing: MeterStandingBody,
}

/// A calibration of a pH meter.
#[derive(Debug, Serialize, utoipa::ToSchema)]
pub struct CalibrationBody {
    /// Its identifier.
    id: CalibrationId,
    /// Of which meter.
    meter_id: MeterId,
    /// As it was entered; `calibrated_at` in UTC.
    #[serde(flatten)]
    entered: NewCalibrationBody,
    /// The pH of each buffer at its temperature, in the same order.
    buffer_phs: Vec<f64>,
    /// The slope it found, % of the Nernst slope at its temperature.
    slope_percent: f64,
    /// What the electrode gives at pH 7, mV.
    offset_found_mv: f64,
    /// Standard deviation of three or more points about the line, pH.
    residual_ph: Option<f64>,
    /// `good`, `ageing` or `do_not_use`.
    verdict: &'static str,
    /// When it was entered.
    entered_at: UtcTime,
    /// By whom.
    entered_by: String,
    /// When it was withdrawn, if it was.
    withdrawn_at: Option<UtcTime>,
    /// Why.
    withdrawn_reason: Option<String>,
}

impl From<&Calibration> for CalibrationBody {
    fn from(calibration: &Calibration) -> Self {
        let (withdrawn_at, withdrawn_reason) = calibration.withdrawn.clone().unzip();
        Self {
            id: calibration.id,
            meter_id: calibration.meter_id,
            entered: calibration.into(),
            buffer_phs: calibration
                .buffers
                .iter()
                .map(|read| read.ph.get())
                .collect(),
            slope_percent: calibration.electrode.slope.get(),
            offset_found_mv: calibration.electrode.offset.get(),
            residual_ph: calibration.residual.map(|residual| residual.get()),
            verdict: calibration.verdict().key(),
            entered_at: calibration.entered_at,
            entered_by: calibration.entered_by.clone(),
            withdrawn_at,
            withdrawn_reason,
        }
    }
}

/// The endpoints.
pub fn routes() -> OpenApiRouter<App> {
    OpenApiRouter::new()
        .routes(routes!(list, create))
        .routes(routes!(show, revise))
        .routes(routes!(list_calibrations, calibrate))
        .routes(routes!(show_calibration))
        .routes(routes!(withdraw))
}

/// The pH meters, in the order they were added.
#[utoipa::path(get, path = "/meters", tag = "meters", params(ListQuery), responses(
    (status = 200, description = "Meters, in the order they were added", body = Listed<MeterBody>),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token lacks the scope read", body = Problem),
    (status = 422, description = "The cursor or limit cannot be read", body = Problem),
))]
async fn list(
    State(db): State<Db>,
    by: Member,
    Query(query): Query<ListQuery>,
) -> Result<axum::Json<Listed<MeterBody>>, Error> {
    let limit = query.limit()?;
    let found = operations::page(&db, &by, query.after()?, limit + 1).await?;
    let bodies = found.iter().map(MeterBody::from).collect();
    Ok(axum::Json(Listed::cut(
        bodies,
        limit,
        |body: &MeterBody| body.id.to_string(),
    )))
}

/// Add a pH meter.
#[utoipa::path(post, path = "/meters", tag = "meters", request_body = NewMeterBody, responses(
    (status = 201, description = "Added; Location and ETag tell where and which version", body = MeterBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Only a QA person's or manager's token with the scope readings may", body = Problem),
    (status = 422, description = "Some fields need mending", body = Problem),
))]
async fn create(
    State(db): State<Db>,
    by: Member,
    Json(body): Json<NewMeterBody>,
) -> Result<impl IntoResponse, Error> {
    by.may(Permission::KeepMeters)?;
    let meter = operations::create(&db, &by, body.try_into()?).await?;
    let location = format!("/api/v1/meters/{}", meter.id);
    Ok((
        StatusCode::CREATED,
        [(header::LOCATION, location)],
        etag(meter.version),
        axum::Json(MeterBody::from(&meter)),
    ))
}

/// One pH meter, and what a reading taken with it now is worth.
#[utoipa::path(get, path = "/meters/{id}", tag = "meters", params(("id" = MeterId, Path)), responses(
    (status = 200, description = "The meter, with its version as ETag", body = MeterNowBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token lacks the scope read", body = Problem),
    (status = 404, description = "No such meter", body = Problem),
))]
async fn show(
    State(db): State<Db>,
    by: Member,
    At(id): At<MeterId>,
) -> Result<impl IntoResponse, Error> {
    let (meter, standing) = operations::now(&db, &by, id).await?;
    let body = MeterNowBody {
        meter: (&meter).into(),
        standing: (&standing).into(),
    };
    Ok((etag(meter.version), axum::Json(body)))
}

/// Replace a pH meter. Its calibrations stay.
#[utoipa::path(put, path = "/meters/{id}", tag = "meters", params(("id" = MeterId, Path)), request_body = NewMeterBody, responses(
    (status = 200, description = "Replaced", body = MeterBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Only a QA person's or manager's token with the scope readings may", body = Problem),
    (status = 404, description = "No such meter", body = Problem),
    (status = 409, description = "Changed by somebody else since the version in If-Match", body = Problem),
    (status = 422, description = "Some fields need mending", body = Problem),
))]
async fn revise(
    State(db): State<Db>,
    by: Member,
    At(id): At<MeterId>,
    headers: HeaderMap,
    Json(body): Json<NewMeterBody>,
) -> Result<impl IntoResponse, Error> {
    by.may(Permission::KeepMeters)?;
    let meter = operations::revise(&db, &by, id, body.try_into()?, if_match(&headers)?).await?;
    Ok((etag(meter.version), axum::Json(MeterBody::from(&meter))))
}

/// The calibrations of a pH meter, in the order they were entered, the withdrawn ones too.
#[utoipa::path(get, path = "/meters/{id}/calibrations", tag = "meters", params(("id" = MeterId, Path), ListQuery), responses(
    (status = 200, description = "Calibrations, in the order they were entered", body = Listed<CalibrationBody>),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token lacks the scope read", body = Problem),
    (status = 404, description = "No such meter", body = Problem),
    (status = 422, description = "The cursor or limit cannot be read", body = Problem),
))]
async fn list_calibrations(
    State(db): State<Db>,
    by: Member,
    At(id): At<MeterId>,
    Query(query): Query<ListQuery>,
) -> Result<axum::Json<Listed<CalibrationBody>>, Error> {
    let limit = query.limit()?;
    let found = operations::page_of_calibrations(&db, &by, id, query.after()?, limit + 1).await?;
    let bodies = found.iter().map(CalibrationBody::from).collect();
    Ok(axum::Json(Listed::cut(
        bodies,
        limit,
        |body: &CalibrationBody| body.id.to_string(),
    )))
}

/// Enter a calibration of a pH meter. From its moment on readings rest on it.
#[utoipa::path(post, path = "/meters/{id}/calibrations", tag = "meters", params(("id" = MeterId, Path)), request_body = NewCalibrationBody, responses(
    (status = 201, description = "Entered; Location tells where", body = CalibrationBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token lacks the scope readings", body = Problem),
    (status = 404, description = "No such meter", body = Problem),
    (status = 422, description = "Some fields need mending, or the readings are none an electrode gives", body = Problem),
))]
async fn calibrate(
    State(db): State<Db>,
    by: Member,
    At(id): At<MeterId>,
    Json(body): Json<NewCalibrationBody>,
) -> Result<impl IntoResponse, Error> {
    let (_, calibration) = operations::calibrate(&db, &by, id, body).await?;
    let location = format!("/api/v1/meters/{id}/calibrations/{}", calibration.id);
    Ok((
        StatusCode::CREATED,
        [(header::LOCATION, location)],
        axum::Json(CalibrationBody::from(&calibration)),
    ))
}

/// One calibration.
#[utoipa::path(get, path = "/meters/{id}/calibrations/{calibration_id}", tag = "meters", params(("id" = MeterId, Path), ("calibration_id" = CalibrationId, Path)), responses(
    (status = 200, description = "The calibration", body = CalibrationBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token lacks the scope read", body = Problem),
    (status = 404, description = "No such calibration of this meter", body = Problem),
))]
async fn show_calibration(
    State(db): State<Db>,
    by: Member,
    At((id, calibration_id)): At<(MeterId, CalibrationId)>,
) -> Result<axum::Json<CalibrationBody>, Error> {
    let (_, calibration) = operations::find_calibration(&db, &by, id, calibration_id).await?;
    Ok(axum::Json((&calibration).into()))
}

/// Withdraw a calibration, with a reason. It stays to be read and no longer counts.
#[utoipa::path(post, path = "/meters/{id}/calibrations/{calibration_id}/withdrawal", tag = "meters", params(("id" = MeterId, Path), ("calibration_id" = CalibrationId, Path)), request_body = ReasonBody, responses(
    (status = 200, description = "Withdrawn", body = CalibrationBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token lacks the scope readings", body = Problem),
    (status = 404, description = "No such calibration of this meter", body = Problem),
    (status = 409, description = "Withdrawn already", body = Problem),
    (status = 422, description = "No reason was given", body = Problem),
))]
async fn withdraw(
    State(db): State<Db>,
    by: Member,
    At((id, calibration_id)): At<(MeterId, CalibrationId)>,
    Json(body): Json<ReasonBody>,
) -> Result<axum::Json<CalibrationBody>, Error> {
    let withdrawn = operations::withdraw(&db, &by, id, calibration_id, &body.reason).await?;
    Ok(axum::Json((&withdrawn.1).into()))
}
