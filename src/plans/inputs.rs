//! Everything a plan is computed from, so that it can be computed again from that
//! alone.
//!
//! [`Inputs`] is the chemistry's [`Problem`] with the names a brewer knows its parts
//! by. [`InputsBody`](super::bodies::InputsBody) is how it is written down: what an
//! approval freezes, and what a preview takes.

use std::borrow::Cow;

use chemistry::ion::{Ion, IonMap};
use chemistry::mash::malt::{Behaviour, Groups, Taylor};
use chemistry::plan::Problem;
use chemistry::quantity::{Estimate, Fraction, Litres, MgPerL};

use crate::id::{MaltId, MaltLotId, MaterialId, MaterialLotId, SourceId, WaterTestId};

/// A plan's inputs: numbers for the chemistry, names for people.
#[derive(Clone, Debug, PartialEq)]
pub struct Inputs {
    /// What the chemistry computes from.
    pub problem: Problem,
    /// Its sources, in the same order.
    pub sources: Vec<SourceLabel>,
    /// Its malts, in the same order.
    pub malts: Vec<MaltLabel>,
    /// Its materials, in the same order.
    pub shelf: Vec<ShelfLabel>,
    /// Beer in the fermenter.
    pub batch: Litres,
    /// How the learned offset in the problem was come by.
    pub learned: Learned,
}

/// What the brewery's closed batches say about this mash.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Learned {
    /// Closed batches it was learned from; none: nothing is learned yet.
    pub batches: u32,
    /// Whether the learned doubt stands in place of what is assumed of the malts' pH,
    /// and not beside it.
    pub replaces_malt_doubt: bool,
}

/// One source as a plan names it.
#[derive(Clone, Debug, PartialEq)]
pub struct SourceLabel {
    /// What the brewery calls it.
    pub name: String,
    /// Which it is.
    pub id: Option<SourceId>,
    /// The tests its composition was read from.
    pub tests: Vec<WaterTestId>,
    /// Date of the latest of them.
    pub tested_on: Option<jiff::civil::Date>,
    /// What was assumed, because no test says it.
    pub assumed: Vec<String>,
    /// Where it is outside the limits for drinking water, in words.
    pub outside_potable: Vec<String>,
    /// One standard deviation of each ion.
    pub ion_sd: IonMap<MgPerL>,
}

/// One malt as a plan names it.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct MaltLabel {
    /// Which it is.
    pub id: Option<MaltId>,
    /// Which lot.
    pub lot_id: Option<MaltLotId>,
    /// Its class's key, for what is learned of classes.
    pub class: String,
    /// How its figures are known, in words.
    pub known_by: String,
}

/// One material as a plan names it.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct ShelfLabel {
    /// Which it is.
    pub id: Option<MaterialId>,
    /// Which lot.
    pub lot_id: Option<MaterialLotId>,
    /// The lot's code.
    pub lot: String,
}

impl Inputs {
    /// The problem to compute: where what was learned of the malts replaces what is
    /// assumed of them, their pH carries no doubt of its own.
    pub fn computed(&self) -> Cow<'_, Problem> {
        if !self.learned.replaces_malt_doubt {
            return Cow::Borrowed(&self.problem);
        }
        let mut problem = self.problem.clone();
        for item in &mut problem.grist {
            item.malt.behaviour = without_ph_doubt(item.malt.behaviour);
        }
        Cow::Owned(problem)
    }

    /// Whether any source in use lies outside the limits for drinking water.
    pub fn outside_potable(&self, shares: &[Fraction]) -> Vec<String> {
        self.sources
            .iter()
            .zip(shares)
            .filter(|(_, share)| share.get() > 0.0)
            .flat_map(|(source, _)| {
                source
                    .outside_potable
                    .iter()
                    .map(|what| format!("{}: {what}", source.name))
            })
            .collect()
    }
}

/// The same malt, its pH in distilled water taken as certain.
fn without_ph_doubt(behaviour: Behaviour) -> Behaviour {
    let groups = |groups: Groups| {
        Groups::new(
            Estimate::new(groups.distilled_ph.value, 0.0),
            groups.buffering,
        )
    };
    match behaviour {
        Behaviour::Groups(inner) => Behaviour::Groups(groups(inner)),
        Behaviour::Taylor(taylor) => {
            let ph = Estimate::new(taylor.distilled_ph().value, 0.0);
            Taylor::new(ph, taylor.coefficients(), taylor.relative_sd())
                .map_or(behaviour, Behaviour::Taylor)
        }
        Behaviour::Acidulated { base, lactic } => Behaviour::Acidulated {
            base: groups(base),
            lactic,
        },
    }
}

/// The ions plans speak of, in the order they are printed.
pub const SHOWN_IONS: [Ion; 7] = [
    Ion::Calcium,
    Ion::Magnesium,
    Ion::Sodium,
    Ion::Potassium,
    Ion::Sulfate,
    Ion::Chloride,
    Ion::Nitrate,
];
