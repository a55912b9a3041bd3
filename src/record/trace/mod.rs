//! Tracing both ways: from a lot or a water test to every batch it reached, and from a
//! batch to every lot, test and person behind it.
//!
//! A batch is traced by the last of its revisions that counts: one that was approved and
//! not replaced, or a draft that may still be.

use chemistry::material::{DoseUnit, Vessel};
use chemistry::quantity::{DoseAmount, Fraction, Kilograms};
use jiff::civil::Date;

use crate::db::Db;
use crate::error::Error;
use crate::id::{
    BeerId, MaltId, MaltLotId, MaterialId, MaterialLotId, MemberId, PlanId, SourceId, UtcTime,
    WaterTestId,
};
use crate::people::{Member, Permission};
use crate::plans::{self, Plan, State};
use crate::{malts, shelf, sources};

pub mod api;
pub mod pages;
mod store;

/// A batch that something reached.
#[derive(Clone, Debug, PartialEq)]
pub struct Reached {
    /// The plan of the batch.
    pub plan_id: PlanId,
    /// Number of the batch.
    pub batch: String,
    /// Revision of that plan.
    pub revision: i64,
    /// The beer.
    pub beer_id: BeerId,
    /// Its name then.
    pub beer_name: String,
    /// The day it is brewed.
    pub brewed_on: Date,
    /// Where the plan stands.
    pub state: State,
    /// How much of it went there.
    pub part: Part,
}

/// How much of something is in a batch.
#[derive(Clone, Debug, PartialEq)]
pub enum Part {
    /// A dose that was weighed in.
    Dose {
        /// Where.
        vessel: Vessel,
        /// How much, in the unit of the material.
        amount: DoseAmount,
        /// Of the material.
        unit: DoseUnit,
        /// When.
        at: UtcTime,
        /// By whom.
        by: String,
        /// How the lot is known.
        known: Known,
    },
    /// Malt in the grist.
    Malt(Kilograms),
    /// A share of the liquor.
    Water(Fraction),
}

/// How it is known that a dose was of a lot.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Known {
    /// It was picked or scanned at the scale.
    Picked,
    /// The code typed at the scale is that of the lot.
    ByCode,
    /// A correction after the batch was closed says so.
    ByCorrection,
    /// It was written down at the scale; a correction says it was another.
    CorrectedTo(String),
}

/// Every batch a lot of a material went into, the latest brewed first.
pub async fn of_material_lot(
    db: &Db,
    by: &Member,
    material: MaterialId,
    id: MaterialLotId,
) -> Result<Vec<Reached>, Error> {
    by.may(Permission::Read)?;
    let (material, lot) = shelf::operations::find_lot_of(db, by, material, id).await?;
    store::of_material_lot(&mut *db.reader().await?, &material, &lot).await
}

/// Every batch a lot of a malt is in the grist of, the latest brewed first.
pub async fn of_malt_lot(
    db: &Db,
    by: &Member,
    malt: MaltId,
    id: MaltLotId,
) -> Result<Vec<Reached>, Error> {
    by.may(Permission::Read)?;
    malts::operations::find_lot_of(db, by, malt, id).await?;
    store::of_malt_lot(&mut *db.reader().await?, id).await
}

/// Every batch whose liquor was planned by a water test, the latest brewed first.
pub async fn of_water_test(db: &Db, by: &Member, id: WaterTestId) -> Result<Vec<Reached>, Error> {
    by.may(Permission::Read)?;
    sources::water_tests::operations::find(db, by, id).await?;
    store::of_water_test(&mut *db.reader().await?, id).await
}

/// What is behind a batch.
#[derive(Clone, Debug)]
pub struct Behind {
    /// Each dose that went in.
    pub doses: Vec<DoseBehind>,
    /// Each malt of the grist.
    pub malts: Vec<MaltBehind>,
    /// Each water test the liquor was planned by.
    pub tests: Vec<TestBehind>,
    /// Everybody who did something for it, with what.
    pub people: Vec<PersonBehind>,
}

/// A dose of a batch.
#[derive(Clone, Debug, PartialEq)]
pub struct DoseBehind {
    /// Which material, where the shelf knows it.
    pub material_id: Option<MaterialId>,
    /// Its name.
    pub material: String,
    /// Which lot, where the shelf knows it.
    pub lot_id: Option<MaterialLotId>,
    /// The code on the pack, as it was told.
    pub lot: String,
    /// What a correction says it was.
    pub corrected_lot: Option<(Option<MaterialLotId>, String)>,
    /// Where.
    pub vessel: Vessel,
    /// How much.
    pub amount: DoseAmount,
    /// In which unit.
    pub unit: DoseUnit,
    /// When.
    pub at: UtcTime,
    /// By whom.
    pub by: String,
    /// Who stood by.
    pub witness: Option<String>,
}

/// A malt of a batch.
#[derive(Clone, Debug, PartialEq)]
pub struct MaltBehind {
    /// Which malt.
    pub malt_id: Option<MaltId>,
    /// Its name, with the lot.
    pub name: String,
    /// Which lot.
    pub lot_id: Option<MaltLotId>,
    /// How much.
    pub mass: Kilograms,
}

/// A water test a batch rested on.
#[derive(Clone, Debug, PartialEq)]
pub struct TestBehind {
    /// Which test.
    pub id: WaterTestId,
    /// Of which source.
    pub source_id: SourceId,
    /// The source's name in the plan.
    pub source: String,
    /// Share of the liquor that is from there.
    pub share: Fraction,
    /// When the sample was drawn.
    pub sampled_on: Date,
    /// Who made the analysis.
    pub laboratory: String,
    /// The report's number.
    pub reference: String,
    /// Whether it was withdrawn since.
    pub withdrawn: bool,
}

/// Somebody who did something for a batch.
#[derive(Clone, Debug, PartialEq)]
pub struct PersonBehind {
    /// Whose account.
    pub id: Option<MemberId>,
    /// The name of that day.
    pub name: String,
    /// What, how often.
    pub deeds: Vec<(String, i64)>,
}

/// Every lot, test and person behind a batch.
pub async fn behind(db: &Db, by: &Member, id: PlanId) -> Result<(Plan, Behind), Error> {
    by.may(Permission::Read)?;
    let plan = plans::operations::find(db, by, id).await?;
    let mut snapshot = db.snapshot().await?;
    let corrected = store::corrected_lots(&mut snapshot, id).await?;
    let doses = plan.doses.iter().filter_map(|dose| {
        let weighed = dose.weighed.as_ref()?;
        let item = plan.inputs.problem.shelf.get(dose.material)?;
        Some(DoseBehind {
            material_id: plan.inputs.shelf.get(dose.material).and_then(|it| it.id),
            material: item.name.clone(),
            lot_id: weighed.lot.id,
            lot: weighed.lot.code.clone(),
            corrected_lot: corrected
                .iter()
                .rfind(|(of, ..)| *of == dose.id)
                .map(|(_, lot, code)| (*lot, code.clone())),
            vessel: dose.vessel,
            amount: weighed.actual,
            unit: item.material.unit(),
            at: weighed.at,
            by: weighed.by.clone(),
            witness: weighed.witness.as_ref().map(|it| it.name.clone()),
        })
    });
    let doses = doses.filter(|dose| dose.amount.get() > 0.0).collect();
    let grist = plan.inputs.problem.grist.iter().zip(&plan.inputs.malts);
    let malts = grist.map(|(item, label)| MaltBehind {
        malt_id: label.id,
        name: item.malt.name.clone(),
        lot_id: label.lot_id,
        mass: item.mass,
    });
    let malts = malts.collect();
    let mut tests = Vec::new();
    for (source, share) in plan.inputs.sources.iter().zip(&plan.shares) {
        if share.get() <= 0.0 {
            continue;
        }
        for test in &source.tests {
            tests.extend(store::test(&mut snapshot, *test, &source.name, *share).await?);
        }
    }
    let people = store::people(&mut snapshot, &plan.batch).await?;
    Ok((
        plan,
        Behind {
            doses,
            malts,
            tests,
            people,
        },
    ))
}
