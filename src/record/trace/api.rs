//! Tracing over `/api/v1`.

use axum::extract::State;
use serde::Serialize;
use utoipa_axum::router::OpenApiRouter;
use utoipa_axum::routes;

use super::{Known, Part, Reached};
use crate::db::Db;
use crate::error::Error;
use crate::id::{
    BeerId, MaltId, MaltLotId, MaterialId, MaterialLotId, MemberId, PlanId, SourceId, UtcTime,
    WaterTestId,
};
use crate::people::Member;
use crate::web::App;
use crate::web::extract::At;
use crate::web::problem::Problem;

/// The endpoints.
pub fn routes() -> OpenApiRouter<App> {
    OpenApiRouter::new()
        .routes(routes!(material_lot))
        .routes(routes!(malt_lot))
        .routes(routes!(water_test))
        .routes(routes!(trace))
}

/// A batch that something reached.
#[derive(Debug, Serialize, utoipa::ToSchema)]
pub struct ReachedBody {
    /// The plan of the batch: the last of its revisions that counts.
    plan_id: PlanId,
    /// Number of the batch.
    batch: String,
    /// Revision of that plan.
    revision: i64,
    /// The beer.
    beer_id: BeerId,
    /// Its name then.
    beer: String,
    /// The day it is brewed.
    brewed_on: String,
    /// Where the plan stands.
    state: &'static str,
    /// Of a material: where it went.
    vessel: Option<&'static str>,
    /// Of a material: how much, g or mL.
    actual: Option<f64>,
    /// `g` or `mL`.
    unit: Option<&'static str>,
    /// When it was weighed in.
    weighed_at: Option<UtcTime>,
    /// By whom.
    weighed_by: Option<String>,
    /// Of a material: how its lot is known: `picked` at the scale, `by_code` as it was
    /// typed there, `by_correction` after the batch was closed; `corrected_away` where a correction
    /// says it was another.
    known: Option<&'static str>,
    /// The lot that a correction names in place of this one.
    corrected_to: Option<String>,
    /// Of a malt: its mass in the grist, kg.
    kilograms: Option<f64>,
    /// Of a water test: share of the liquor, 0 to 1.
    share: Option<f64>,
}

impl From<Reached> for ReachedBody {
    fn from(reached: Reached) -> Self {
        let mut body = Self {
            plan_id: reached.plan_id,
            batch: reached.batch,
            revision: reached.revision,
            beer_id: reached.beer_id,
            beer: reached.beer_name,
            brewed_on: reached.brewed_on.to_string(),
            state: reached.state.key(),
            vessel: None,
            actual: None,
            unit: None,
            weighed_at: None,
            weighed_by: None,
            known: None,
            corrected_to: None,
            kilograms: None,
            share: None,
        };
        match reached.part {
            Part::Dose {
                vessel,
                amount,
                unit,
                at,
                by,
                known,
            } => {
                body.vessel = Some(vessel.key());
                body.actual = Some(amount.get());
                body.unit = Some(unit.symbol());
                body.weighed_at = Some(at);
                body.weighed_by = Some(by);
                body.known = Some(match &known {
                    Known::Picked => "picked",
                    Known::ByCode => "by_code",
                    Known::ByCorrection => "by_correction",
                    Known::CorrectedTo(_) => "corrected_away",
                });
                if let Known::CorrectedTo(lot) = known {
                    body.corrected_to = Some(lot);
                }
            }
            Part::Malt(mass) => body.kilograms = Some(mass.get()),
            Part::Water(share) => body.share = Some(share.get()),
        }
        body
    }
}

fn bodies(found: Vec<Reached>) -> axum::Json<Vec<ReachedBody>> {
    axum::Json(found.into_iter().map(Into::into).collect())
}

/// Every batch a lot of a material went into, the latest brewed first: one item for each dose.
#[utoipa::path(get, path = "/materials/{id}/lots/{lot_id}/batches", tag = "record",
    params(("id" = MaterialId, Path), ("lot_id" = MaterialLotId, Path)), responses(
    (status = 200, description = "Batches", body = Vec<ReachedBody>),
    (status = 401, description = "No valid token", body = Problem),
    (status = 404, description = "There is no such lot", body = Problem),
))]
async fn material_lot(
    State(db): State<Db>,
    by: Member,
    At((material, id)): At<(MaterialId, MaterialLotId)>,
) -> Result<axum::Json<Vec<ReachedBody>>, Error> {
    Ok(bodies(
        super::of_material_lot(&db, &by, material, id).await?,
    ))
}

/// Every batch a lot of a malt is in the grist of, the latest brewed first.
#[utoipa::path(get, path = "/malts/{id}/lots/{lot_id}/batches", tag = "record",
    params(("id" = MaltId, Path), ("lot_id" = MaltLotId, Path)), responses(
    (status = 200, description = "Batches", body = Vec<ReachedBody>),
    (status = 401, description = "No valid token", body = Problem),
    (status = 404, description = "There is no such lot", body = Problem),
))]
async fn malt_lot(
    State(db): State<Db>,
    by: Member,
    At((malt, id)): At<(MaltId, MaltLotId)>,
) -> Result<axum::Json<Vec<ReachedBody>>, Error> {
    Ok(bodies(super::of_malt_lot(&db, &by, malt, id).await?))
}

/// Every batch whose liquor was planned by a water test, the latest brewed first.
#[utoipa::path(get, path = "/water-tests/{id}/batches", tag = "record", params(("id" = WaterTestId, Path)), responses(
    (status = 200, description = "Batches", body = Vec<ReachedBody>),
    (status = 401, description = "No valid token", body = Problem),
    (status = 404, description = "There is no such water test", body = Problem),
))]
async fn water_test(
    State(db): State<Db>,
    by: Member,
    At(id): At<WaterTestId>,
) -> Result<axum::Json<Vec<ReachedBody>>, Error> {
    Ok(bodies(super::of_water_test(&db, &by, id).await?))
}

/// What is behind a batch.
#[derive(Debug, Serialize, utoipa::ToSchema)]
pub struct TraceBody {
    /// Number of the batch.
    batch: String,
    /// Each dose that went in.
    doses: Vec<DoseBehindBody>,
    /// Each malt of the grist.
    malts: Vec<MaltBehindBody>,
    /// Each water test the liquor was planned by.
    water_tests: Vec<TestBehindBody>,
    /// Everybody who did something for it.
    people: Vec<PersonBehindBody>,
}

/// A dose of a batch.
#[derive(Debug, Serialize, utoipa::ToSchema)]
pub struct DoseBehindBody {
    /// Which material.
    material_id: Option<MaterialId>,
    /// Its name.
    material: String,
    /// Which lot, where the shelf knows it.
    material_lot_id: Option<MaterialLotId>,
    /// The code on the pack, as it was told.
    lot: String,
    /// The lot it was by a correction.
    corrected_lot: Option<String>,
    /// The same, where the shelf knows it.
    corrected_lot_id: Option<MaterialLotId>,
    /// Where it went.
    vessel: &'static str,
    /// How much, g or mL.
    actual: f64,
    /// `g` or `mL`.
    unit: &'static str,
    /// When.
    weighed_at: UtcTime,
    /// By whom.
    weighed_by: String,
    /// Who stood by.
    witness: Option<String>,
}

/// A malt of a batch.
#[derive(Debug, Serialize, utoipa::ToSchema)]
pub struct MaltBehindBody {
    /// Which malt.
    malt_id: Option<MaltId>,
    /// Its name, with the lot.
    name: String,
    /// Which lot.
    malt_lot_id: Option<MaltLotId>,
    /// Its mass in the grist, kg.
    kilograms: f64,
}

/// A water test a batch rested on.
#[derive(Debug, Serialize, utoipa::ToSchema)]
pub struct TestBehindBody {
    /// Which test.
    water_test_id: WaterTestId,
    /// Of which source.
    source_id: SourceId,
    /// The source's name in the plan.
    source: String,
    /// Share of the liquor that is from there, 0 to 1.
    share: f64,
    /// When the sample was drawn.
    sampled_on: String,
    /// Who made the analysis.
    laboratory: String,
    /// The report's number.
    reference: String,
    /// Whether it was withdrawn since.
    withdrawn: bool,
}

/// Somebody who did something for a batch.
#[derive(Debug, Serialize, utoipa::ToSchema)]
pub struct PersonBehindBody {
    /// Whose account.
    member_id: Option<MemberId>,
    /// The name of that day.
    name: String,
    /// What.
    deeds: Vec<PersonDeedBody>,
}

/// One kind of deed.
#[derive(Debug, Serialize, utoipa::ToSchema)]
pub struct PersonDeedBody {
    /// What, in the words of the record book.
    what: String,
    /// How often.
    times: i64,
}

/// Every lot, test and person behind a batch.
#[utoipa::path(get, path = "/plans/{id}/trace", tag = "record", params(("id" = PlanId, Path)), responses(
    (status = 200, description = "What is behind it", body = TraceBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 404, description = "There is no such plan", body = Problem),
))]
async fn trace(
    State(db): State<Db>,
    by: Member,
    At(id): At<PlanId>,
) -> Result<axum::Json<TraceBody>, Error> {
    let (plan, behind) = super::behind(&db, &by, id).await?;
    let doses = behind.doses.into_iter().map(|dose| {
        let (corrected_lot_id, corrected_lot) = match dose.corrected_lot {
            Some((id, code)) => (id, Some(code)),
            None => (None, None),
        };
        DoseBehindBody {
            material_id: dose.material_id,
            material: dose.material,
            material_lot_id: dose.lot_id,
            lot: dose.lot,
            corrected_lot,
            corrected_lot_id,
            vessel: dose.vessel.key(),
            actual: dose.amount.get(),
            unit: dose.unit.symbol(),
            weighed_at: dose.at,
            weighed_by: dose.by,
            witness: dose.witness,
        }
    });
    let malts = behind.malts.into_iter().map(|malt| MaltBehindBody {
        malt_id: malt.malt_id,
        name: malt.name,
        malt_lot_id: malt.lot_id,
        kilograms: malt.mass.get(),
    });
    let tests = behind.tests.into_iter().map(|test| TestBehindBody {
        water_test_id: test.id,
        source_id: test.source_id,
        source: test.source,
        share: test.share.get(),
        sampled_on: test.sampled_on.to_string(),
        laboratory: test.laboratory,
        reference: test.reference,
        withdrawn: test.withdrawn,
    });
    let people = behind.people.into_iter().map(|person| PersonBehindBody {
        member_id: person.id,
        name: person.name,
        deeds: person
            .deeds
            .into_iter()
            .map(|(what, times)| PersonDeedBody { what, times })
            .collect(),
    });
    Ok(axum::Json(TraceBody {
        batch: plan.batch,
        doses: doses.collect(),
        malts: malts.collect(),
        water_tests: tests.collect(),
        people: people.collect(),
    }))
}
