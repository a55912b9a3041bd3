//! What closed batches teach: the brewery's own bias and how its malts differ from what
//! was assumed of them.
//!
//! Nothing learned is stored. Every closed batch keeps what it was predicted without
//! learning, what was measured, and how far each malt moves its mash ([`Taught`]); the
//! whole history is learned again whenever a plan is drafted.

use chemistry::mash::malt::Behaviour;
use chemistry::mash::{InfluenceKind, MashInputs, MashPrediction};
use chemistry::quantity::{Estimate, PhShift};
use serde::{Deserialize, Serialize};
use statistics::learning::{self, Effect, LOT_TO_LOT, Prior};
use statistics::quantity::{Sd, Value};

use super::inputs::{Inputs, Learned, MaltLabel};
use super::{Outcome, store};
use crate::db::Db;
use crate::error::Error;
use crate::id::{MaltId, MaltLotId};

/// How far one malt moved the mash of a closed batch.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, utoipa::ToSchema)]
pub struct Taught {
    /// Which malt.
    pub malt_id: MaltId,
    /// Which lot, where lots are kept.
    pub malt_lot_id: Option<MaltLotId>,
    /// Mash pH per unit of the malt's own pH in distilled water.
    pub size: f64,
    /// What was assumed of the doubt in that pH, one standard deviation.
    pub malt_sd: f64,
}

#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
enum Of {
    Malt(MaltId),
    Lot(MaltLotId),
}

/// What the brewery has learned, for one mash.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Lesson {
    /// How far it settles above what the balance says.
    pub offset: Estimate<PhShift>,
    /// How that was come by.
    pub learned: Learned,
    /// How much of the scatter of the outcomes the learning explains, if enough is known
    /// to say: the share, below zero when it only does harm.
    pub skill: Option<f64>,
    /// Outcomes learned from, even if too few or too poor to be used yet.
    pub outcomes: u32,
}

/// What each malt moves in this mash, and the doubt from everything else.
pub fn taught(prediction: &MashPrediction, inputs: &Inputs) -> (Vec<Taught>, PhShift) {
    let other = prediction
        .influences
        .iter()
        .filter(|influence| {
            !matches!(
                influence.kind,
                InfluenceKind::MaltPh | InfluenceKind::LearnedOffset
            )
        })
        .map(|influence| influence.effect.get().powi(2))
        .sum::<f64>()
        .sqrt();
    let malts = inputs
        .problem
        .grist
        .iter()
        .zip(&inputs.malts)
        .filter_map(|(item, label)| {
            let MaltLabel {
                id: Some(malt_id),
                lot_id,
                ..
            } = label
            else {
                return None;
            };
            let malt_sd = ph_sd(item.malt.behaviour);
            let moved = prediction
                .influences
                .iter()
                .find(|influence| influence.is_ph_of(&item.malt.name))?;
            let size = if malt_sd > 0.0 {
                moved.effect.get() / malt_sd
            } else {
                return None;
            };
            Some(Taught {
                malt_id: *malt_id,
                malt_lot_id: *lot_id,
                size,
                malt_sd,
            })
        })
        .collect();
    (malts, PhShift::clamped(other))
}

fn ph_sd(behaviour: Behaviour) -> f64 {
    match behaviour {
        Behaviour::Groups(groups) | Behaviour::Acidulated { base: groups, .. } => {
            groups.distilled_ph.sd
        }
        Behaviour::Taylor(taylor) => taylor.distilled_ph().sd,
    }
}

fn effects(taught: &[Taught]) -> Vec<Effect<Of>> {
    taught
        .iter()
        .flat_map(|malt| {
            let size = Value::clamped(malt.size);
            let of_malt = Effect {
                of: Of::Malt(malt.malt_id),
                size,
                prior: Sd::clamped(malt.malt_sd),
            };
            let of_lot = malt.malt_lot_id.map(|lot| Effect {
                of: Of::Lot(lot),
                size,
                prior: LOT_TO_LOT,
            });
            std::iter::once(of_malt).chain(of_lot)
        })
        .collect()
}

/// Learns from every closed batch whose reading counts, for a mash with these malts.
pub async fn lesson(db: &Db, mash: &MashInputs, inputs: &Inputs) -> Result<Lesson, Error> {
    let closed = store::outcomes(&mut *db.reader().await?).await?;
    Ok(learn(&closed, mash, inputs))
}

fn learn(closed: &[Outcome], mash: &MashInputs, inputs: &Inputs) -> Lesson {
    let history: Vec<learning::Outcome<Of>> = closed.iter().filter_map(outcome).collect();
    let learned = learning::learn(&history, &Prior::DEFAULT);
    let count = u32::try_from(history.len()).unwrap_or(u32::MAX);
    let nothing = Lesson {
        offset: Estimate::new(PhShift::constant(0.0), 0.0),
        learned: Learned::default(),
        skill: learned.skill().map(|skill| skill.get()),
        outcomes: count,
    };
    let Ok(prediction) = mash.predict() else {
        return nothing;
    };
    if !learned.in_use() {
        return nothing;
    }
    let (malts, _) = taught(&prediction, inputs);
    let shift = learned.predict(&effects(&malts)).shift;
    Lesson {
        offset: Estimate::new(PhShift::clamped(shift.value.get()), shift.sd.get()),
        learned: Learned {
            batches: count,
            replaces_malt_doubt: true,
        },
        ..nothing
    }
}

fn outcome(outcome: &Outcome) -> Option<learning::Outcome<Of>> {
    let (measured, measured_sd) = (outcome.measured_ph?, outcome.measured_sd?);
    if !outcome.counts {
        return None;
    }
    Some(learning::Outcome {
        effects: effects(&outcome.malts),
        residual: Value::clamped(measured - outcome.untrained_ph),
        sd: Sd::clamped(measured_sd.hypot(outcome.other_sd)),
    })
}

#[cfg(test)]
mod tests {
    use chemistry::mash::{GristItem, Malt, MaltClass};
    use chemistry::plan::{Limits, Problem, Spec, Volumes};
    use chemistry::put_right::Aim;
    use chemistry::quantity::{Kilograms, Litres, MgPerLAsCaCO3, Ph};
    use chemistry::water::Water;

    use super::*;

    fn two_malts(first: &str, second: &str) -> Inputs {
        let item = |name: &str, class: MaltClass, kilograms| GristItem {
            malt: Malt {
                name: name.into(),
                behaviour: class.behaviour(None),
            },
            mass: Kilograms::constant(kilograms),
        };
        let label = || MaltLabel {
            id: Some(MaltId::new()),
            ..MaltLabel::default()
        };
        let litres = Litres::constant(1000.0);
        Inputs {
            problem: Problem {
                sources: Vec::new(),
                shelf: Vec::new(),
                volumes: Volumes {
                    liquor: litres,
                    mash: Estimate::new(litres, 0.0),
                    sparge: Litres::constant(0.0),
                },
                grist: vec![
                    item(first, MaltClass::PaleAle, 300.0),
                    item(second, MaltClass::Crystal, 30.0),
                ],
                settings: chemistry::mash::Settings::default(),
                offset: Estimate::new(PhShift::constant(0.0), 0.0),
                spec: Spec {
                    ions: chemistry::ion::IonMap::from_fn(|_| None),
                    mash_calcium: None,
                    sulfate_to_chloride: None,
                    sparge_alkalinity: None,
                    mash_ph: Aim {
                        target: Ph::constant(5.4),
                        low: Ph::constant(5.3),
                        high: Ph::constant(5.5),
                    },
                },
                limits: Limits {
                    ions: chemistry::ion::IonMap::from_fn(|_| None),
                    lowest_alkalinity: MgPerLAsCaCO3::constant(0.0),
                },
            },
            sources: Vec::new(),
            malts: vec![label(), label()],
            shelf: Vec::new(),
            batch: litres,
            learned: Learned::default(),
        }
    }

    #[test]
    fn a_malt_whose_name_holds_anothers_is_not_taken_for_it() {
        let sizes = |inputs: &Inputs| {
            let mash = MashInputs {
                grist: inputs.problem.grist.clone(),
                liquor: Water::pure(),
                liquor_doubt: chemistry::mash::LiquorDoubt::NONE,
                volume: inputs.problem.volumes.mash,
                additions: Vec::new(),
                settings: inputs.problem.settings,
                offset: inputs.problem.offset,
            };
            let (malts, _) = taught(&mash.predict().unwrap(), inputs);
            malts.iter().map(|malt| malt.size).collect::<Vec<_>>()
        };
        let apart = sizes(&two_malts("Base", "Dark"));
        let alike = sizes(&two_malts("Malt", "Malt, dark"));
        assert_eq!(apart, alike);
        // Nine tenths of the grist move the mash more than one tenth; crystal malt buffers
        // up to about twice as much as pale malt.
        assert!(apart[0] > 3.0 * apart[1], "{apart:?}");
    }
}
