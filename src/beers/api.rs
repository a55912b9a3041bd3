//! `/api/v1/beers`.

use axum::extract::State;
use axum::http::{HeaderMap, StatusCode, header};
use axum::response::IntoResponse;
use chemistry::ion::Ion;
use chemistry::put_right::Aim;
use chemistry::quantity::{MassRatio, MgPerL, MgPerLAsCaCO3};
use serde::{Deserialize, Serialize};
use utoipa_axum::router::OpenApiRouter;
use utoipa_axum::routes;

use super::spec::{Spec, USUAL_PRIORITY, Window};
use super::{Beer, GristLine, operations};
use crate::db::Db;
use crate::error::Error;
use crate::id::BeerId;
use crate::input::{Flag, Number};
use crate::people::{Member, Permission};
use crate::web::App;
use crate::web::extract::{At, Json, ListQuery, Listed, Query, etag, if_match};
use crate::web::problem::Problem;

/// A beer: grist, volumes and spec.
#[derive(Clone, Debug, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct NewBeerBody {
    /// What the brewery calls it; no other beer has this name.
    #[schema(required = true, min_length = 1)]
    pub name: String,
    /// Beer in the fermenter, L.
    #[schema(required = true)]
    pub batch_l: Number,
    /// Strike liquor in the mash, L.
    #[schema(required = true)]
    pub mash_l: Number,
    /// Sparge liquor, L; 0 when not given.
    pub sparge_l: Number,
    /// The malts of one batch, each once. Lines with neither malt nor mass are left out.
    pub grist: Vec<GristLineBody>,
    /// What the liquor and the mash must be.
    pub spec: SpecBody,
    /// Whatever else should be known.
    pub notes: String,
    /// Whether it is brewed still; yes when not given.
    pub in_use: Flag,
}

impl Default for NewBeerBody {
    fn default() -> Self {
        Self {
            name: String::new(),
            batch_l: Number::Missing,
            mash_l: Number::Missing,
            sparge_l: Number::Missing,
            grist: Vec::new(),
            spec: SpecBody::default(),
            notes: String::new(),
            in_use: Flag(true),
        }
    }
}

/// One malt of a grist.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct GristLineBody {
    /// Which malt: an identifier of `/malts`.
    pub malt_id: String,
    /// Its mass in one batch, kg.
    pub kilograms: Number,
}

/// The windows of a beer. A window with neither low, high nor preferred is no window.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct SpecBody {
    /// Calcium in the whole liquor, mg/L.
    pub calcium_mg_per_l: WindowBody,
    /// Magnesium in the whole liquor, mg/L.
    pub magnesium_mg_per_l: WindowBody,
    /// Sodium in the whole liquor, mg/L.
    pub sodium_mg_per_l: WindowBody,
    /// Potassium in the whole liquor, mg/L.
    pub potassium_mg_per_l: WindowBody,
    /// Sulfate in the whole liquor, mg/L.
    pub sulfate_mg_per_l: WindowBody,
    /// Chloride in the whole liquor, mg/L.
    pub chloride_mg_per_l: WindowBody,
    /// Nitrate (as NO₃) in the whole liquor, mg/L.
    pub nitrate_mg_per_l: WindowBody,
    /// Calcium in the mash liquor, mg/L.
    pub mash_calcium_mg_per_l: RangeBody,
    /// Mass of sulfate per mass of chloride in the whole liquor.
    pub sulfate_to_chloride: RangeBody,
    /// Alkalinity of the sparge liquor, mg/L as CaCO₃.
    pub sparge_alkalinity_mg_per_l_as_caco3: RangeBody,
    /// pH of the mash, read in a cooled sample.
    pub mash_ph: MashPhBody,
    /// Taste limit: most lactate in the whole liquor, mg/L.
    pub highest_lactate_mg_per_l: Number,
    /// Taste limit: most sodium in the whole liquor, mg/L.
    pub highest_sodium_mg_per_l: Number,
}

/// Where a figure should lie.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct WindowBody {
    /// Lowest accepted.
    pub low: Number,
    /// Where in between it would best be.
    pub preferred: Number,
    /// Highest accepted.
    pub high: Number,
    /// `high` is given up last, `middle` second, `low` first; `middle` when not given.
    pub priority: String,
}

/// Where a figure should lie, no place in between preferred.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct RangeBody {
    /// Lowest accepted.
    pub low: Number,
    /// Highest accepted.
    pub high: Number,
    /// `high` is given up last, `middle` second, `low` first; `middle` when not given.
    pub priority: String,
}

/// Where the mash pH should lie: all three are needed.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct MashPhBody {
    /// Lowest accepted.
    pub low: Number,
    /// The pH aimed at.
    pub target: Number,
    /// Highest accepted.
    pub high: Number,
}

/// A beer as it is kept.
#[derive(Clone, Debug, Serialize, utoipa::ToSchema)]
pub struct BeerBody {
    /// Its identifier.
    pub id: BeerId,
    /// Counts changes; also the ETag.
    pub version: i64,
    /// Mass of the whole grist, kg.
    pub grist_kilograms: f64,
    /// Mash liquor per mass of grist, L/kg.
    pub litres_per_kilogram: f64,
    /// The beer.
    #[serde(flatten)]
    pub beer: NewBeerBody,
}

impl SpecBody {
    /// The window of each ion, in the order of [`spec::IONS`](super::spec::IONS).
    pub(super) fn ion_windows(&self) -> [(Ion, &WindowBody); 7] {
        [
            (Ion::Calcium, &self.calcium_mg_per_l),
            (Ion::Magnesium, &self.magnesium_mg_per_l),
            (Ion::Sodium, &self.sodium_mg_per_l),
            (Ion::Potassium, &self.potassium_mg_per_l),
            (Ion::Sulfate, &self.sulfate_mg_per_l),
            (Ion::Chloride, &self.chloride_mg_per_l),
            (Ion::Nitrate, &self.nitrate_mg_per_l),
        ]
    }
}

impl From<&Spec> for SpecBody {
    fn from(spec: &Spec) -> Self {
        let ion = |ion| WindowBody::of(spec.ions[ion], MgPerL::get);
        Self {
            calcium_mg_per_l: ion(Ion::Calcium),
            magnesium_mg_per_l: ion(Ion::Magnesium),
            sodium_mg_per_l: ion(Ion::Sodium),
            potassium_mg_per_l: ion(Ion::Potassium),
            sulfate_mg_per_l: ion(Ion::Sulfate),
            chloride_mg_per_l: ion(Ion::Chloride),
            nitrate_mg_per_l: ion(Ion::Nitrate),
            mash_calcium_mg_per_l: RangeBody::of(spec.mash_calcium, MgPerL::get),
            sulfate_to_chloride: RangeBody::of(spec.sulfate_to_chloride, MassRatio::get),
            sparge_alkalinity_mg_per_l_as_caco3: RangeBody::of(
                spec.sparge_alkalinity,
                MgPerLAsCaCO3::get,
            ),
            mash_ph: MashPhBody::from(&spec.mash_ph),
            highest_lactate_mg_per_l: spec.highest_lactate.map(MgPerL::get).into(),
            highest_sodium_mg_per_l: spec.highest_sodium.map(MgPerL::get).into(),
        }
    }
}

impl WindowBody {
    fn of<T>(window: Option<Window<T>>, get: impl Fn(T) -> f64) -> Self {
        let Some(window) = window else {
            return Self {
                priority: USUAL_PRIORITY.key().into(),
                ..Self::default()
            };
        };
        Self {
            low: window.low.map(&get).into(),
            preferred: window.preferred.map(&get).into(),
            high: window.high.map(&get).into(),
            priority: window.priority.key().into(),
        }
    }
}

impl RangeBody {
    fn of<T>(window: Option<Window<T>>, get: impl Fn(T) -> f64) -> Self {
        let WindowBody {
            low,
            high,
            priority,
            ..
        } = WindowBody::of(window, get);
        Self {
            low,
            high,
            priority,
        }
    }

    /// The same with nothing preferred.
    pub(super) fn as_window(&self) -> WindowBody {
        WindowBody {
            low: self.low.clone(),
            preferred: Number::Missing,
            high: self.high.clone(),
            priority: self.priority.clone(),
        }
    }
}

impl From<&Aim> for MashPhBody {
    fn from(aim: &Aim) -> Self {
        Self {
            low: aim.low.get().into(),
            target: aim.target.get().into(),
            high: aim.high.get().into(),
        }
    }
}

impl From<&GristLine> for GristLineBody {
    fn from(line: &GristLine) -> Self {
        Self {
            malt_id: line.malt_id.to_string(),
            kilograms: line.kilograms.get().into(),
        }
    }
}

impl From<&Beer> for NewBeerBody {
    fn from(beer: &Beer) -> Self {
        Self {
            name: beer.name.clone(),
            batch_l: beer.volumes.batch_l.get().into(),
            mash_l: beer.volumes.mash_l.get().into(),
            sparge_l: beer.volumes.sparge_l.get().into(),
            grist: beer.grist.iter().map(GristLineBody::from).collect(),
            spec: SpecBody::from(&beer.spec),
            notes: beer.notes.clone().unwrap_or_default(),
            in_use: Flag(beer.in_use),
        }
    }
}

impl From<&Beer> for BeerBody {
    fn from(beer: &Beer) -> Self {
        Self {
            id: beer.id,
            version: beer.version,
            grist_kilograms: beer.grist_mass().get(),
            litres_per_kilogram: beer.litres_per_kilogram(),
            beer: beer.into(),
        }
    }
}

/// The endpoints.
pub fn routes() -> OpenApiRouter<App> {
    OpenApiRouter::new()
        .routes(routes!(list, create))
        .routes(routes!(show, revise))
}

fn answer(beer: &Beer) -> impl IntoResponse + use<> {
    (etag(beer.version), axum::Json(BeerBody::from(beer)))
}

/// Every beer, retired ones too, oldest first.
#[utoipa::path(get, path = "/beers", tag = "beers", params(ListQuery), responses(
    (status = 200, description = "Beers, in the order they were made", body = Listed<BeerBody>),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token may not read", body = Problem),
    (status = 422, description = "The cursor or limit cannot be read", body = Problem),
))]
async fn list(
    State(db): State<Db>,
    by: Member,
    Query(query): Query<ListQuery>,
) -> Result<axum::Json<Listed<BeerBody>>, Error> {
    let limit = query.limit()?;
    let after = query.after()?;
    let beers = operations::list_after(&db, &by, after, limit + 1).await?;
    let beers = beers.iter().map(BeerBody::from).collect();
    Ok(axum::Json(Listed::cut(beers, limit, |beer: &BeerBody| {
        beer.id.to_string()
    })))
}

/// Make a beer.
#[utoipa::path(post, path = "/beers", tag = "beers", request_body = NewBeerBody,
    params(("Idempotency-Key" = Option<String>, Header, description = "Applied once however often it is sent")),
    responses(
    (status = 201, description = "Made; its address is in Location, its version in ETag", body = BeerBody,
        headers(("Location" = String, description = "Its address"), ("ETag" = String, description = "Its version"))),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token or its owner may not change beers", body = Problem),
    (status = 409, description = "The Idempotency-Key was used for another request", body = Problem),
    (status = 422, description = "Some fields need mending", body = Problem),
))]
async fn create(
    State(db): State<Db>,
    by: Member,
    Json(body): Json<NewBeerBody>,
) -> Result<impl IntoResponse, Error> {
    by.may(Permission::KeepBeers)?;
    let beer = operations::create(&db, &by, body.try_into()?).await?;
    let location = format!("/api/v1/beers/{}", beer.id);
    Ok((
        StatusCode::CREATED,
        [(header::LOCATION, location)],
        answer(&beer),
    ))
}

/// One beer.
#[utoipa::path(get, path = "/beers/{id}", tag = "beers",
    params(("id" = BeerId, Path, description = "Which beer")), responses(
    (status = 200, description = "The beer, with its version as ETag", body = BeerBody,
        headers(("ETag" = String, description = "Its version"))),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token may not read", body = Problem),
    (status = 404, description = "No such beer", body = Problem),
))]
async fn show(
    State(db): State<Db>,
    by: Member,
    At(id): At<BeerId>,
) -> Result<impl IntoResponse, Error> {
    Ok(answer(&operations::find(&db, &by, id).await?))
}

/// Replace a beer.
///
/// `in_use: false` retires it, `true` takes it back.
#[utoipa::path(put, path = "/beers/{id}", tag = "beers", request_body = NewBeerBody,
    params(
        ("id" = BeerId, Path, description = "Which beer"),
        ("If-Match" = Option<String>, Header, description = "The ETag it was read with: a change made meanwhile is not overwritten"),
    ),
    responses(
    (status = 200, description = "Replaced", body = BeerBody,
        headers(("ETag" = String, description = "Its version"))),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token or its owner may not change beers", body = Problem),
    (status = 404, description = "No such beer", body = Problem),
    (status = 409, description = "Changed by somebody else meanwhile", body = Problem),
    (status = 422, description = "Some fields need mending", body = Problem),
))]
async fn revise(
    State(db): State<Db>,
    by: Member,
    At(id): At<BeerId>,
    headers: HeaderMap,
    Json(body): Json<NewBeerBody>,
) -> Result<impl IntoResponse, Error> {
    by.may(Permission::KeepBeers)?;
    let version = if_match(&headers)?;
    let beer = operations::revise(&db, &by, id, body.try_into()?, version).await?;
    Ok(answer(&beer))
}
