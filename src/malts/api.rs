//! `/api/v1/malts`, the lots under each and their titrations.

use axum::extract::State;
use axum::http::{HeaderMap, StatusCode, header};
use axum::response::IntoResponse;
use chemistry::mash::Behaviour;
use chemistry::quantity::{Estimate, MeqPerKg};
use serde::Serialize;
use utoipa_axum::router::OpenApiRouter;
use utoipa_axum::routes;

use super::entered::{NewMaltBody, NewMaltLotBody, NewTitrationBody};
use super::{Malt, MaltLot, QUOTED_PH, Titration, acid_demand, operations};
use crate::db::Db;
use crate::error::Error;
use crate::id::{MaltId, MaltLotId, MaltTitrationId, UtcTime};
use crate::input::{ReasonBody, percent};
use crate::people::{Member, Permission};
use crate::web::App;
use crate::web::extract::{At, Json, ListQuery, Listed, Query, etag, if_match};
use crate::web::problem::Problem;

/// What is known of a malt's acidity, as calculations take it.
#[derive(Debug, Serialize, utoipa::ToSchema)]
pub struct BehaviourBody {
    /// For example `titrated lot`, `sheet of the lot` or `class default, assumed`.
    how_known: &'static str,
    /// `groups`, `coefficients` or `acidulated`.
    form: &'static str,
    /// pH of its mash in distilled water; of an acidulated malt without its acid.
    distilled_ph: f64,
    /// Its standard deviation.
    distilled_ph_sd: f64,
    /// Buffering relative to an average pale malt, where it is known so.
    relative_buffering: Option<f64>,
    /// Its standard deviation.
    relative_buffering_sd: Option<f64>,
    /// Lactic acid of an acidulated malt, % of its weight.
    lactic_percent: Option<f64>,
    /// Its standard deviation, percentage points.
    lactic_sd_percent: Option<f64>,
    /// Buffering at pH 5.4, meq/(kg·pH).
    buffering_meq_per_kg_ph: f64,
    /// Acid to bring it to pH 5.4, meq/kg; negative: it brings acid itself.
    acid_demand_meq_per_kg: f64,
    /// Its standard deviation, meq/kg.
    acid_demand_sd_meq_per_kg: f64,
}

impl BehaviourBody {
    fn of(malt: &Malt, lot: Option<&MaltLot>) -> Self {
        let (behaviour, how_known) = malt.behaviour(lot);
        let demand: Estimate<MeqPerKg> = acid_demand(&behaviour, QUOTED_PH);
        let (form, distilled_ph, buffering, lactic) = match behaviour {
            Behaviour::Groups(groups) => {
                ("groups", groups.distilled_ph, Some(groups.buffering), None)
            }
            Behaviour::Taylor(taylor) => ("coefficients", taylor.distilled_ph(), None, None),
            Behaviour::Acidulated { base, lactic } => (
                "acidulated",
                base.distilled_ph,
                Some(base.buffering),
                Some(lactic),
            ),
        };
        Self {
            how_known,
            form,
            distilled_ph: distilled_ph.value.get(),
            distilled_ph_sd: distilled_ph.sd,
            relative_buffering: buffering.map(|b| b.value.get()),
            relative_buffering_sd: buffering.map(|b| b.sd),
            lactic_percent: lactic.map(|share| percent(share.value.get())),
            lactic_sd_percent: lactic.map(|share| percent(share.sd)),
            buffering_meq_per_kg_ph: behaviour.buffering(QUOTED_PH).get(),
            acid_demand_meq_per_kg: demand.value.get(),
            acid_demand_sd_meq_per_kg: demand.sd,
        }
    }
}

/// A malt.
#[derive(Debug, Serialize, utoipa::ToSchema)]
pub struct MaltBody {
    /// Its identifier.
    id: MaltId,
    /// Counts changes; the ETag.
    version: i64,
    /// As it was entered.
    #[serde(flatten)]
    entered: NewMaltBody,
    /// What every calculation takes without a lot.
    behaviour: BehaviourBody,
}

impl From<&Malt> for MaltBody {
    fn from(malt: &Malt) -> Self {
        Self {
            id: malt.id,
            version: malt.version,
            entered: malt.into(),
            behaviour: BehaviourBody::of(malt, None),
        }
    }
}

/// A lot of a malt.
#[derive(Debug, Serialize, utoipa::ToSchema)]
pub struct MaltLotBody {
    /// Its identifier.
    id: MaltLotId,
    /// Of which malt.
    malt_id: MaltId,
    /// Counts changes; the ETag.
    version: i64,
    /// As it was entered.
    #[serde(flatten)]
    entered: NewMaltLotBody,
    /// What every calculation takes with this lot.
    behaviour: BehaviourBody,
    /// Its titrations, newest first, the withdrawn ones too.
    titrations: Vec<TitrationBody>,
}

impl MaltLotBody {
    fn of(malt: &Malt, lot: &MaltLot) -> Self {
        Self {
            id: lot.id,
            malt_id: lot.malt_id,
            version: lot.version,
            entered: lot.into(),
            behaviour: BehaviourBody::of(malt, Some(lot)),
            titrations: lot.titrations.iter().map(TitrationBody::from).collect(),
        }
    }
}

/// A bench titration.
#[derive(Debug, Serialize, utoipa::ToSchema)]
pub struct TitrationBody {
    /// Its identifier.
    id: MaltTitrationId,
    /// As it was typed.
    #[serde(flatten)]
    entered: NewTitrationBody,
    /// When it was entered.
    entered_at: UtcTime,
    /// By whom.
    entered_by: String,
    /// When it was withdrawn, if it was.
    withdrawn_at: Option<UtcTime>,
    /// Why.
    withdrawn_reason: Option<String>,
    /// What it says of the malt.
    fit: Option<FitBody>,
}

/// What a titration says of a malt.
#[derive(Debug, Serialize, utoipa::ToSchema)]
pub struct FitBody {
    /// pH of its mash in distilled water.
    distilled_ph: f64,
    /// Its standard error.
    distilled_ph_sd: f64,
    /// Buffering relative to an average pale malt.
    relative_buffering: f64,
    /// Its standard error.
    relative_buffering_sd: f64,
    /// Root mean square of what the curve leaves over, pH.
    left_over_ph: f64,
}

impl From<&Titration> for TitrationBody {
    fn from(titration: &Titration) -> Self {
        let (withdrawn_at, withdrawn_reason) = titration.withdrawn.clone().unzip();
        let fit = titration.fit().ok();
        Self {
            id: titration.id,
            entered: titration.into(),
            entered_at: titration.entered_at,
            entered_by: titration.entered_by.clone(),
            withdrawn_at,
            withdrawn_reason,
            fit: fit.map(|fit| FitBody {
                distilled_ph: fit.groups.distilled_ph.value.get(),
                distilled_ph_sd: fit.groups.distilled_ph.sd,
                relative_buffering: fit.groups.buffering.value.get(),
                relative_buffering_sd: fit.groups.buffering.sd,
                left_over_ph: fit.left_over.get(),
            }),
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
        .routes(routes!(titrate))
        .routes(routes!(withdraw))
}

/// The malts, in the order they were added.
#[utoipa::path(get, path = "/malts", tag = "malts", params(ListQuery), responses(
    (status = 200, description = "Malts, in the order they were added", body = Listed<MaltBody>),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token lacks the scope read", body = Problem),
    (status = 422, description = "The cursor or limit cannot be read", body = Problem),
))]
async fn list(
    State(db): State<Db>,
    by: Member,
    Query(query): Query<ListQuery>,
) -> Result<axum::Json<Listed<MaltBody>>, Error> {
    let limit = query.limit()?;
    let found = operations::page(&db, &by, query.after()?, limit + 1).await?;
    let bodies = found.iter().map(MaltBody::from).collect();
    Ok(axum::Json(Listed::cut(bodies, limit, |body: &MaltBody| {
        body.id.to_string()
    })))
}

/// Add a malt.
#[utoipa::path(post, path = "/malts", tag = "malts", request_body = NewMaltBody, responses(
    (status = 201, description = "Added; Location and ETag tell where and which version", body = MaltBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Only a manager's token with the scope plans may", body = Problem),
    (status = 422, description = "Some fields need mending", body = Problem),
))]
async fn create(
    State(db): State<Db>,
    by: Member,
    Json(body): Json<NewMaltBody>,
) -> Result<impl IntoResponse, Error> {
    by.may(Permission::KeepMalts)?;
    let malt = operations::create(&db, &by, body.try_into()?).await?;
    let location = format!("/api/v1/malts/{}", malt.id);
    Ok((
        StatusCode::CREATED,
        [(header::LOCATION, location)],
        etag(malt.version),
        axum::Json(MaltBody::from(&malt)),
    ))
}

/// One malt.
#[utoipa::path(get, path = "/malts/{id}", tag = "malts", params(("id" = MaltId, Path)), responses(
    (status = 200, description = "The malt, with its version as ETag", body = MaltBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token lacks the scope read", body = Problem),
    (status = 404, description = "No such malt", body = Problem),
))]
async fn show(
    State(db): State<Db>,
    by: Member,
    At(id): At<MaltId>,
) -> Result<impl IntoResponse, Error> {
    let malt = operations::find(&db, &by, id).await?;
    Ok((etag(malt.version), axum::Json(MaltBody::from(&malt))))
}

/// Replace a malt.
#[utoipa::path(put, path = "/malts/{id}", tag = "malts", params(("id" = MaltId, Path)), request_body = NewMaltBody, responses(
    (status = 200, description = "Replaced", body = MaltBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Only a manager's token with the scope plans may", body = Problem),
    (status = 404, description = "No such malt", body = Problem),
    (status = 409, description = "Changed by somebody else since the version in If-Match", body = Problem),
    (status = 422, description = "Some fields need mending", body = Problem),
))]
async fn revise(
    State(db): State<Db>,
    by: Member,
    At(id): At<MaltId>,
    headers: HeaderMap,
    Json(body): Json<NewMaltBody>,
) -> Result<impl IntoResponse, Error> {
    by.may(Permission::KeepMalts)?;
    let malt = operations::revise(&db, &by, id, body.try_into()?, if_match(&headers)?).await?;
    Ok((etag(malt.version), axum::Json(MaltBody::from(&malt))))
}

/// The lots of a malt, in the order they were entered.
#[utoipa::path(get, path = "/malts/{id}/lots", tag = "malts", params(("id" = MaltId, Path), ListQuery), responses(
    (status = 200, description = "Lots, in the order they were entered", body = Listed<MaltLotBody>),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token lacks the scope read", body = Problem),
    (status = 404, description = "No such malt", body = Problem),
    (status = 422, description = "The cursor or limit cannot be read", body = Problem),
))]
async fn list_lots(
    State(db): State<Db>,
    by: Member,
    At(id): At<MaltId>,
    Query(query): Query<ListQuery>,
) -> Result<axum::Json<Listed<MaltLotBody>>, Error> {
    let limit = query.limit()?;
    let malt = operations::find(&db, &by, id).await?;
    let lots = operations::page_of_lots(&db, &by, id, query.after()?, limit + 1).await?;
    let bodies = lots.iter().map(|lot| MaltLotBody::of(&malt, lot)).collect();
    Ok(axum::Json(Listed::cut(
        bodies,
        limit,
        |body: &MaltLotBody| body.id.to_string(),
    )))
}

/// Enter a lot.
#[utoipa::path(post, path = "/malts/{id}/lots", tag = "malts", params(("id" = MaltId, Path)), request_body = NewMaltLotBody, responses(
    (status = 201, description = "Entered; Location and ETag tell where and which version", body = MaltLotBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Only a QA person's or manager's token with the scope plans may", body = Problem),
    (status = 404, description = "No such malt", body = Problem),
    (status = 422, description = "Some fields need mending", body = Problem),
))]
async fn create_lot(
    State(db): State<Db>,
    by: Member,
    At(id): At<MaltId>,
    Json(body): Json<NewMaltLotBody>,
) -> Result<impl IntoResponse, Error> {
    let malt = operations::find(&db, &by, id).await?;
    let lot = operations::create_lot(&db, &by, id, body).await?;
    Ok(made(&malt, &lot))
}

fn made(malt: &Malt, lot: &MaltLot) -> impl IntoResponse + use<> {
    let location = format!("/api/v1/malts/{}/lots/{}", malt.id, lot.id);
    (
        StatusCode::CREATED,
        [(header::LOCATION, location)],
        etag(lot.version),
        axum::Json(MaltLotBody::of(malt, lot)),
    )
}

/// One lot with its titrations.
#[utoipa::path(get, path = "/malts/{id}/lots/{lot_id}", tag = "malts", params(("id" = MaltId, Path), ("lot_id" = MaltLotId, Path)), responses(
    (status = 200, description = "The lot, with its version as ETag", body = MaltLotBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token lacks the scope read", body = Problem),
    (status = 404, description = "No such lot of this malt", body = Problem),
))]
async fn show_lot(
    State(db): State<Db>,
    by: Member,
    At((id, lot_id)): At<(MaltId, MaltLotId)>,
) -> Result<impl IntoResponse, Error> {
    let (malt, lot) = operations::find_lot_of(&db, &by, id, lot_id).await?;
    Ok((etag(lot.version), axum::Json(MaltLotBody::of(&malt, &lot))))
}

/// Replace a lot. Its titrations stay.
#[utoipa::path(put, path = "/malts/{id}/lots/{lot_id}", tag = "malts", params(("id" = MaltId, Path), ("lot_id" = MaltLotId, Path)), request_body = NewMaltLotBody, responses(
    (status = 200, description = "Replaced", body = MaltLotBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Only a QA person's or manager's token with the scope plans may", body = Problem),
    (status = 404, description = "No such lot of this malt", body = Problem),
    (status = 409, description = "Changed by somebody else since the version in If-Match", body = Problem),
    (status = 422, description = "Some fields need mending", body = Problem),
))]
async fn revise_lot(
    State(db): State<Db>,
    by: Member,
    At((id, lot_id)): At<(MaltId, MaltLotId)>,
    headers: HeaderMap,
    Json(body): Json<NewMaltLotBody>,
) -> Result<impl IntoResponse, Error> {
    let malt = operations::find(&db, &by, id).await?;
    let lot = operations::revise_lot(&db, &by, id, lot_id, body, if_match(&headers)?).await?;
    Ok((etag(lot.version), axum::Json(MaltLotBody::of(&malt, &lot))))
}

/// Enter a bench titration of a lot.
#[utoipa::path(post, path = "/malts/{id}/lots/{lot_id}/titrations", tag = "malts", params(("id" = MaltId, Path), ("lot_id" = MaltLotId, Path)), request_body = NewTitrationBody, responses(
    (status = 201, description = "Entered: the lot as it is taken from now on", body = MaltLotBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Only a QA person's or manager's token with the scope plans may", body = Problem),
    (status = 404, description = "No such lot of this malt", body = Problem),
    (status = 409, description = "Acidulated malt is not titrated", body = Problem),
    (status = 422, description = "Some fields need mending, or the jars describe no malt", body = Problem),
))]
async fn titrate(
    State(db): State<Db>,
    by: Member,
    At((id, lot_id)): At<(MaltId, MaltLotId)>,
    Json(body): Json<NewTitrationBody>,
) -> Result<impl IntoResponse, Error> {
    let malt = operations::find(&db, &by, id).await?;
    let lot = operations::titrate(&db, &by, id, lot_id, body).await?;
    Ok(made(&malt, &lot))
}

/// Withdraw a bench titration. Its jars stay to be read.
#[utoipa::path(post, path = "/malts/{id}/lots/{lot_id}/titrations/{titration_id}/withdrawal", tag = "malts", params(("id" = MaltId, Path), ("lot_id" = MaltLotId, Path), ("titration_id" = MaltTitrationId, Path)), request_body = ReasonBody, responses(
    (status = 200, description = "Withdrawn: the lot as it is taken from now on", body = MaltLotBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Only a QA person's or manager's token with the scope plans may", body = Problem),
    (status = 404, description = "No such titration of this lot", body = Problem),
    (status = 409, description = "It is withdrawn already", body = Problem),
    (status = 422, description = "The reason is missing", body = Problem),
))]
async fn withdraw(
    State(db): State<Db>,
    by: Member,
    At((id, lot_id, titration_id)): At<(MaltId, MaltLotId, MaltTitrationId)>,
    Json(body): Json<ReasonBody>,
) -> Result<impl IntoResponse, Error> {
    let malt = operations::find(&db, &by, id).await?;
    let lot =
        operations::withdraw_titration(&db, &by, id, lot_id, titration_id, &body.reason).await?;
    Ok((etag(lot.version), axum::Json(MaltLotBody::of(&malt, &lot))))
}
