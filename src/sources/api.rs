//! `/api/v1/sources`.

use axum::extract::State;
use axum::http::{HeaderMap, StatusCode, header};
use axum::response::IntoResponse;
use serde::{Deserialize, Serialize};
use utoipa_axum::router::OpenApiRouter;
use utoipa_axum::routes;

use super::water_tests::api::{FindingBody, PotableBody};
use super::{Source, TodaysWater, operations};
use crate::db::Db;
use crate::error::Error;
use crate::id::{SourceId, WaterTestId};
use crate::input::{Flag, Number};
use crate::people::Member;
use crate::web::App;
use crate::web::extract::{At, Json, ListQuery, Listed, Query, etag, if_match};
use crate::web::problem::Problem;

/// A source as it is sent.
#[derive(Clone, Debug, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct SourceBody {
    /// Its name, unlike every other source's.
    #[schema(required = true, min_length = 1)]
    pub name: String,
    /// `mains`, `borehole`, `surface`, `permeate` or `other`.
    #[schema(required = true, min_length = 1)]
    pub kind: String,
    /// Whether it only serves to dilute others.
    pub blending: Flag,
    /// What a cubic metre costs, in the brewery's currency.
    pub price_per_m3: Number,
    /// How often it should be tested, whole days.
    #[schema(required = true)]
    pub days_between_tests: Number,
    /// Anything else worth knowing.
    pub notes: String,
    /// Whether plans may draw on it; `true` when not sent.
    pub in_use: Flag,
}

impl Default for SourceBody {
    fn default() -> Self {
        Self {
            name: String::new(),
            kind: String::new(),
            blending: Flag(false),
            price_per_m3: Number::Missing,
            days_between_tests: Number::Missing,
            notes: String::new(),
            in_use: Flag(true),
        }
    }
}

impl From<&Source> for SourceBody {
    fn from(source: &Source) -> Self {
        #[allow(clippy::cast_precision_loss, reason = "at most ten years of days")]
        Self {
            name: source.name.clone(),
            kind: source.kind.key().into(),
            blending: Flag(source.blending),
            price_per_m3: source.price_per_m3.into(),
            days_between_tests: (source.days_between_tests as f64).into(),
            notes: source.notes.clone(),
            in_use: Flag(source.in_use),
        }
    }
}

/// A source as it is kept.
#[derive(Clone, Debug, Serialize, utoipa::ToSchema)]
pub struct SourceAnswer {
    /// Its identifier.
    id: SourceId,
    /// What it is.
    #[serde(flatten)]
    source: SourceBody,
}

impl From<&Source> for SourceAnswer {
    fn from(source: &Source) -> Self {
        Self {
            id: source.id,
            source: source.into(),
        }
    }
}

/// What a source's water is today.
#[derive(Clone, Debug, Serialize, utoipa::ToSchema)]
pub struct TodaysWaterBody {
    /// Whose water it is.
    source_id: SourceId,
    /// The day it is estimated for.
    on: String,
    /// The day of the newest sample that counts.
    latest_sample_on: String,
    /// Each figure, in mg/L (alkalinity and hardness as CaCO₃), µS/cm at 25 °C or pH.
    figures: Vec<TodaysFigureBody>,
    /// Total alkalinity, meq/L.
    alkalinity_meq_per_l: f64,
    /// Its standard deviation.
    alkalinity_sd_meq_per_l: f64,
    /// Dissolved inorganic carbon, mmol/L.
    carbon_mmol_per_l: f64,
    /// Temperature the pH is read at.
    ph_temperature_celsius: f64,
    /// What was taken for granted.
    assumed: Vec<String>,
    /// Figures outside the limits for drinking water.
    potable: Vec<PotableBody>,
    /// What the checks of the newest test with enough lines to be judged come to.
    verdict: &'static str,
    /// What speaks against that test.
    findings: Vec<FindingBody>,
    /// The tests it rests on, newest first.
    tests: Vec<WaterTestId>,
}

/// One figure of today's water.
#[derive(Clone, Debug, Serialize, utoipa::ToSchema)]
pub struct TodaysFigureBody {
    /// What it is a figure of.
    analyte: &'static str,
    /// The best number.
    value: f64,
    /// One standard deviation.
    sd: f64,
    /// Its unit's key.
    unit: &'static str,
    /// The limit below which it is only known to be.
    #[serde(skip_serializing_if = "Option::is_none")]
    below: Option<f64>,
    /// Days since the newest sample that shows it.
    age_days: Option<i64>,
    /// `laboratory`, `drop_kit`, `photometer`, `meter`, a way of working it out,
    /// `average`, or `assumed`.
    how: &'static str,
}

impl From<&TodaysWater> for TodaysWaterBody {
    fn from(todays: &TodaysWater) -> Self {
        Self {
            source_id: todays.source.id,
            on: todays.on.to_string(),
            latest_sample_on: todays.latest.to_string(),
            figures: todays
                .figures
                .iter()
                .map(|figure| TodaysFigureBody {
                    analyte: figure.analyte.key(),
                    value: figure.value,
                    sd: figure.sd,
                    unit: figure.analyte.canonical_unit().key(),
                    below: figure.below,
                    age_days: figure.age_days,
                    how: figure.how.key(),
                })
                .collect(),
            alkalinity_meq_per_l: todays.water.alkalinity.get(),
            alkalinity_sd_meq_per_l: todays.alkalinity_sd.get(),
            carbon_mmol_per_l: todays.water.carbon.get(),
            ph_temperature_celsius: todays.measured.temperature.get(),
            assumed: todays.assumed.clone(),
            potable: todays.potable.iter().map(PotableBody::from).collect(),
            verdict: todays.verdict.key(),
            findings: todays.findings.iter().map(FindingBody::from).collect(),
            tests: todays.tests.clone(),
        }
    }
}

/// The endpoints.
pub fn routes() -> OpenApiRouter<App> {
    OpenApiRouter::new()
        .routes(routes!(list, create))
        .routes(routes!(show, revise))
        .routes(routes!(todays_water))
        .merge(super::water_tests::api::routes())
}

fn answer(source: &Source) -> impl IntoResponse + use<> {
    (etag(source.version), axum::Json(SourceAnswer::from(source)))
}

/// The sources, in the order they were made.
#[utoipa::path(get, path = "/sources", tag = "sources", params(ListQuery), responses(
    (status = 200, description = "Sources, in the order they were made", body = Listed<SourceAnswer>),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token may not read", body = Problem),
    (status = 422, description = "The cursor or limit cannot be read", body = Problem),
))]
async fn list(
    State(db): State<Db>,
    by: Member,
    Query(query): Query<ListQuery>,
) -> Result<axum::Json<Listed<SourceAnswer>>, Error> {
    let limit = query.limit()?;
    let after = query.after()?;
    let sources = operations::page(&db, &by, after, limit + 1).await?;
    let sources = sources.iter().map(SourceAnswer::from).collect();
    Ok(axum::Json(Listed::cut(
        sources,
        limit,
        |source: &SourceAnswer| source.id.to_string(),
    )))
}

/// Keep a new source.
#[utoipa::path(post, path = "/sources", tag = "sources", request_body = SourceBody, responses(
    (status = 201, description = "Kept; Location leads to it", body = SourceAnswer),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token may not keep sources", body = Problem),
    (status = 422, description = "Some fields need mending, or the name is taken", body = Problem),
))]
async fn create(
    State(db): State<Db>,
    by: Member,
    Json(body): Json<SourceBody>,
) -> Result<impl IntoResponse, Error> {
    by.may(crate::people::Permission::KeepSources)?;
    let source = operations::create(&db, &by, body.try_into()?).await?;
    let location = format!("/api/v1/sources/{}", source.id);
    Ok((
        StatusCode::CREATED,
        [(header::LOCATION, location)],
        answer(&source),
    ))
}

/// One source.
#[utoipa::path(get, path = "/sources/{id}", tag = "sources", params(("id" = SourceId, Path)), responses(
    (status = 200, description = "The source, with its version as ETag", body = SourceAnswer),
    (status = 401, description = "No valid token", body = Problem),
    (status = 404, description = "There is no such source", body = Problem),
))]
async fn show(
    State(db): State<Db>,
    by: Member,
    At(id): At<SourceId>,
) -> Result<impl IntoResponse, Error> {
    Ok(answer(&operations::find(&db, &by, id).await?))
}

/// Replace what a source is. `in_use: false` retires it.
#[utoipa::path(put, path = "/sources/{id}", tag = "sources", params(("id" = SourceId, Path)), request_body = SourceBody, responses(
    (status = 200, description = "Replaced", body = SourceAnswer),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token may not keep sources", body = Problem),
    (status = 404, description = "There is no such source", body = Problem),
    (status = 409, description = "Changed by somebody else meanwhile", body = Problem),
    (status = 422, description = "Some fields need mending, or the name is taken", body = Problem),
))]
async fn revise(
    State(db): State<Db>,
    by: Member,
    At(id): At<SourceId>,
    headers: HeaderMap,
    Json(body): Json<SourceBody>,
) -> Result<impl IntoResponse, Error> {
    by.may(crate::people::Permission::KeepSources)?;
    let new = body.try_into()?;
    let source = operations::revise(&db, &by, id, new, if_match(&headers)?).await?;
    Ok(answer(&source))
}

/// What a source's water is today, each figure with its doubt.
#[utoipa::path(get, path = "/sources/{id}/todays-water", tag = "sources", params(("id" = SourceId, Path)), responses(
    (status = 200, description = "The best estimate from every test that counts", body = TodaysWaterBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 404, description = "There is no such source", body = Problem),
    (status = 409, description = "No test counts, or too little was ever tested", body = Problem),
))]
async fn todays_water(
    State(db): State<Db>,
    by: Member,
    At(id): At<SourceId>,
) -> Result<axum::Json<TodaysWaterBody>, Error> {
    let todays = operations::todays_water(&db, &by, id).await?;
    Ok(axum::Json(TodaysWaterBody::from(&todays)))
}
