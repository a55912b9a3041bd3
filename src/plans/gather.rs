//! Reading everything a plan starts from: the beer, today's water, the malts, the shelf,
//! the settings and what was learned.

use chemistry::ion::{Ion, IonMap};
use chemistry::mash::{GristItem, LiquorDoubt, Malt, MashInputs};
use chemistry::plan::{Limits, Preference, Problem, ShelfItem, Source, Volumes};
use chemistry::quantity::{
    CostPerLitre, CostPerUnit, DoseAmount, Estimate, Fraction, Litres, MgPerL, MgPerLAsCaCO3,
    PhShift,
};
use chemistry::report::{Analyte, LimitSet};
use jiff::civil::Date;

use super::bodies::MASH_VOLUME_RELATIVE_SD;
use super::inputs::{Inputs, Learned, MaltLabel, ShelfLabel, SourceLabel};
use super::learning;
use super::operations::SourceChoice;
use crate::beers::{self, Beer};
use crate::brewery;
use crate::db::Db;
use crate::error::Error;
use crate::id::BeerId;
use crate::malts;
use crate::people::Member;
use crate::shelf;
use crate::sources::{self, TodaysWater};

/// What was gathered for a beer.
#[derive(Clone, Debug)]
pub struct Gathered {
    /// The beer's name.
    pub beer_name: String,
    /// Everything to compute from.
    pub inputs: Inputs,
}

/// Gathers the inputs of a plan for a beer brewed on a day. No choice of sources means every source in
/// use that has a test.
pub async fn inputs(
    db: &Db,
    by: &Member,
    beer_id: BeerId,
    brewed_on: Date,
    choices: &[SourceChoice],
) -> Result<Gathered, Error> {
    let settings = brewery::operations::settings(db).await?;
    let beer = beers::operations::find(db, by, beer_id).await?;
    let waters = waters(db, by, choices).await?;
    let (sources, source_labels) = waters
        .iter()
        .map(|(water, choice)| source(water, choice))
        .unzip();
    let (grist, malts) = grist(db, by, &beer).await?;
    let (shelf, shelf_labels) = shelf(db, by, brewed_on, beer.volumes.liquor()).await?;
    let mut limits = potable_limits(settings.potable_limits, &waters);
    let lower = |limit: &mut Option<MgPerL>, other: Option<MgPerL>| {
        *limit = match (*limit, other) {
            (Some(limit), Some(other)) => Some(if other < limit { other } else { limit }),
            (limit, other) => limit.or(other),
        };
    };
    for (ion, limit) in beer.spec.taste_limits().iter() {
        lower(&mut limits[ion], *limit);
    }
    let mash = beer.volumes.mash_l;
    let mut inputs = Inputs {
        problem: Problem {
            sources,
            shelf,
            volumes: Volumes {
                liquor: beer.volumes.liquor(),
                mash: Estimate::new(mash, MASH_VOLUME_RELATIVE_SD * mash.get()),
                sparge: beer.volumes.sparge_l,
            },
            grist,
            settings: settings.mash,
            offset: Estimate::new(PhShift::constant(0.0), 0.0),
            spec: beer.spec.for_plan(),
            limits: Limits {
                ions: limits,
                lowest_alkalinity: MgPerLAsCaCO3::constant(0.0),
            },
        },
        sources: source_labels,
        malts,
        shelf: shelf_labels,
        batch: beer.volumes.batch_l,
        learned: Learned::default(),
    };
    // How far each malt moves the mash depends little on the treatment: the first source
    // untreated is near enough.
    let untreated = MashInputs {
        grist: inputs.problem.grist.clone(),
        liquor: inputs.problem.sources[0].water,
        liquor_doubt: inputs.problem.sources[0].doubt,
        volume: inputs.problem.volumes.mash,
        additions: Vec::new(),
        settings: inputs.problem.settings,
        offset: inputs.problem.offset,
    };
    let lesson = learning::lesson(db, &untreated, &inputs).await?;
    inputs.problem.offset = lesson.offset;
    inputs.learned = lesson.learned;
    Ok(Gathered {
        beer_name: beer.name,
        inputs,
    })
}

/// Today's water of each source that may be used. There is at least one.
async fn waters(
    db: &Db,
    by: &Member,
    choices: &[SourceChoice],
) -> Result<Vec<(TodaysWater, SourceChoice)>, Error> {
    let mut waters = Vec::new();
    if choices.is_empty() {
        for source in sources::operations::list(db, by)
            .await?
            .into_iter()
            .filter(|source| source.in_use)
        {
            let choice = SourceChoice {
                source_id: source.id,
                lowest: Fraction::constant(0.0),
                highest: Fraction::constant(1.0),
            };
            match sources::operations::todays_water(db, by, source.id).await {
                Ok(water) => waters.push((water, choice)),
                // A source nobody has tested yet is not proposed.
                Err(Error::Conflict(_)) => {}
                Err(error) => return Err(error),
            }
        }
        if waters.is_empty() {
            return Err(Error::field(
                "sources",
                "No source in use has a water test yet. Enter one first.",
            ));
        }
    }
    for (index, choice) in choices.iter().enumerate() {
        match sources::operations::todays_water(db, by, choice.source_id).await {
            Ok(water) => waters.push((water, *choice)),
            Err(Error::Conflict(message)) => {
                return Err(Error::field(
                    format!("sources.{index}.source_id"),
                    format!("{message}."),
                ));
            }
            Err(Error::NotFound(_)) => {
                return Err(Error::field(
                    format!("sources.{index}.source_id"),
                    "There is no such source.",
                ));
            }
            Err(error) => return Err(error),
        }
    }
    Ok(waters)
}

fn source(water: &TodaysWater, choice: &SourceChoice) -> (Source, SourceLabel) {
    let source = Source {
        water: water.water,
        doubt: LiquorDoubt {
            alkalinity: water.alkalinity_sd,
            calcium: water.ion_sd[Ion::Calcium],
            magnesium: water.ion_sd[Ion::Magnesium],
        },
        lowest: choice.lowest,
        highest: choice.highest,
        blending: water.source.blending,
        price: CostPerLitre::clamped(water.source.price_per_m3.unwrap_or(0.0) / 1000.0),
    };
    let label = SourceLabel {
        name: water.source.name.clone(),
        id: Some(water.source.id),
        tests: water.tests.clone(),
        tested_on: Some(water.latest),
        assumed: water.assumed.clone(),
        outside_potable: water
            .potable
            .iter()
            .map(|finding| finding.sentence.clone())
            .collect(),
        ion_sd: water.ion_sd,
    };
    (source, label)
}

async fn grist(
    db: &Db,
    by: &Member,
    beer: &Beer,
) -> Result<(Vec<GristItem>, Vec<MaltLabel>), Error> {
    let held = malts::operations::list_with_lots(db, by).await?;
    let mut grist = Vec::new();
    for line in &beer.grist {
        let (malt, lot) = held
            .iter()
            .find(|(malt, _)| malt.id == line.malt_id)
            .ok_or(Error::NotFound("malt of this grist"))?;
        let (behaviour, known_by) = malt.behaviour(lot.as_ref());
        let label = MaltLabel {
            id: Some(malt.id),
            lot_id: lot.as_ref().map(|lot| lot.id),
            class: malt.class.key().into(),
            known_by: known_by.into(),
        };
        let malt = Malt {
            name: malt.name_with(lot.as_ref()),
            behaviour,
        };
        grist.push((
            GristItem {
                malt,
                mass: line.kilograms,
            },
            label,
        ));
    }
    Ok(grist.into_iter().unzip())
}

async fn shelf(
    db: &Db,
    by: &Member,
    brewed_on: Date,
    liquor: Litres,
) -> Result<(Vec<ShelfItem>, Vec<ShelfLabel>), Error> {
    let held = shelf::operations::list_in_use(db, by).await?;
    Ok(held
        .into_iter()
        .map(|(material, lot)| {
            let lot = lot.as_ref();
            let item = ShelfItem {
                name: material.name.clone(),
                material: material.chemistry(lot, brewed_on),
                vessels: material.vessels.clone(),
                step: material.scale_step,
                price: CostPerUnit::clamped(
                    material
                        .price
                        .map_or(0.0, |price| price.of(DoseAmount::constant(1.0))),
                ),
                most: material
                    .highest
                    .map(|per_hl| DoseAmount::clamped(per_hl.get() * liquor.get() / 100.0)),
                preference: if material.avoid {
                    Preference::Avoided
                } else if material.substance.is_discouraged() {
                    Preference::Discouraged
                } else {
                    Preference::Usual
                },
            };
            let label = ShelfLabel {
                id: Some(material.id),
                lot_id: lot.map(|lot| lot.id),
                lot: lot.map(|lot| lot.code.clone()).unwrap_or_default(),
            };
            (item, label)
        })
        .unzip())
}

/// The limits for drinking water as limits on the whole liquor. A water that is above one
/// by itself is flagged and needs a named reason; it does not make every plan impossible,
/// so its own figure is then the limit.
fn potable_limits(set: LimitSet, waters: &[(TodaysWater, SourceChoice)]) -> IonMap<Option<MgPerL>> {
    IonMap::from_fn(|ion| {
        let analyte = match ion {
            Ion::Sodium => Analyte::Sodium,
            Ion::Sulfate => Analyte::Sulfate,
            Ion::Chloride => Analyte::Chloride,
            Ion::Nitrate => Analyte::Nitrate,
            _ => return None,
        };
        let limit = set.limit(analyte)?.high();
        let highest = waters
            .iter()
            .map(|(water, _)| water.water.ions[ion].get())
            .fold(limit, f64::max);
        Some(MgPerL::clamped(highest))
    })
}
