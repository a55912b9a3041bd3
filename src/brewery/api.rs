//! `/api/v1/settings`.

use axum::extract::State;
use axum::http::HeaderMap;
use axum::response::IntoResponse;
use serde::{Deserialize, Serialize};
use utoipa_axum::router::OpenApiRouter;
use utoipa_axum::routes;

use super::{Settings, operations};
use crate::db::Db;
use crate::error::Error;
use crate::input::Number;
use crate::people::{Member, Permission};
use crate::web::App;
use crate::web::extract::{Json, etag, if_match};
use crate::web::problem::Problem;

/// The brewery's settings.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct SettingsBody {
    /// Whose water desk this is.
    pub name: String,
    /// `metric` or `us`: what pages show. The API is always metric.
    pub units: String,
    /// An IANA time zone.
    pub time_zone: String,
    /// How prices are written.
    pub currency: String,
    /// Limits for drinking water: `eu`, `us` or `who`.
    pub potable_limits: String,
    /// The four vessels, `liquor_tank`, `mash`, `sparge_liquor` and `kettle`, in the order in
    /// which the brewery weighs out.
    pub vessel_order: Vec<String>,
    /// Which lines somebody else has to look at before they count: `never` (none) or
    /// `acid_and_lime` (acids, lime and other bases).
    pub second_person: String,
    /// Minutes a shared tablet may lie idle before it goes back to the names: 1 to 60, whole.
    pub tablet_idle_minutes: Number,
    /// Equivalents of acid set free in the mash per equivalent of calcium.
    pub calcium_share: Number,
    /// Its standard deviation.
    pub calcium_share_sd: Number,
    /// Share of the carbon dioxide formed that escapes before the mash is read.
    pub co2_lost_share: Number,
    /// Its standard deviation.
    pub co2_lost_share_sd: Number,
}

impl From<&Settings> for SettingsBody {
    fn from(settings: &Settings) -> Self {
        Self {
            name: settings.name.clone(),
            units: settings.units.key().into(),
            time_zone: settings.time_zone.clone(),
            currency: settings.currency.clone(),
            potable_limits: settings.potable_limits.key().into(),
            vessel_order: settings
                .vessel_order
                .iter()
                .map(|vessel| vessel.key().to_owned())
                .collect(),
            second_person: settings.second_person.key().into(),
            tablet_idle_minutes: settings.idle_minutes().into(),
            calcium_share: settings.mash.calcium_release.value.get().into(),
            calcium_share_sd: settings.mash.calcium_release.sd.into(),
            co2_lost_share: settings.mash.carbon_dioxide_lost.value.get().into(),
            co2_lost_share_sd: settings.mash.carbon_dioxide_lost.sd.into(),
        }
    }
}

/// The endpoints.
pub fn routes() -> OpenApiRouter<App> {
    OpenApiRouter::new().routes(routes!(show, revise))
}

fn answer(settings: &Settings) -> impl IntoResponse + use<> {
    (
        etag(settings.version),
        axum::Json(SettingsBody::from(settings)),
    )
}

/// The settings in force.
#[utoipa::path(get, path = "/settings", tag = "settings", responses(
    (status = 200, description = "The settings, with their version as ETag", body = SettingsBody),
    (status = 401, description = "No valid token", body = Problem),
))]
async fn show(State(db): State<Db>, by: Member) -> Result<impl IntoResponse, Error> {
    by.may(Permission::Read)?;
    Ok(answer(&operations::settings(&db).await?))
}

/// Replace the settings.
#[utoipa::path(put, path = "/settings", tag = "settings", request_body = SettingsBody, responses(
    (status = 200, description = "Replaced", body = SettingsBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "No token may change settings", body = Problem),
    (status = 409, description = "Changed by somebody else meanwhile", body = Problem),
    (status = 422, description = "Some fields need mending", body = Problem),
))]
async fn revise(
    State(db): State<Db>,
    by: Member,
    headers: HeaderMap,
    Json(body): Json<SettingsBody>,
) -> Result<impl IntoResponse, Error> {
    by.may(Permission::KeepSettings)?;
    let settings = operations::revise(&db, &by, body.try_into()?, if_match(&headers)?).await?;
    Ok(answer(&settings))
}
