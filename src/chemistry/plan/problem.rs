//! What a plan starts from: water, shelf, mash, wishes and limits, as plain values.

use crate::ion::IonMap;
use crate::mash::{GristItem, LiquorDoubt, Settings};
use crate::material::{Material, Vessel};
use crate::put_right::Aim;
use crate::quantity::{
    CostPerLitre, CostPerUnit, DoseAmount, Estimate, Fraction, Litres, MassRatio, MgPerL,
    MgPerLAsCaCO3, PhShift,
};
use crate::water::Water;

use super::{Limit, Requirement};

/// Everything the treatment of one batch depends on.
///
/// Sources and materials are known by their place in [`sources`](Self::sources) and
/// [`shelf`](Self::shelf); their order changes nothing else.
#[derive(Clone, Debug, PartialEq)]
pub struct Problem {
    /// The waters that can be blended.
    pub sources: Vec<Source>,
    /// What can be added.
    pub shelf: Vec<ShelfItem>,
    /// How much water goes where.
    pub volumes: Volumes,
    /// The malts.
    pub grist: Vec<GristItem>,
    /// What happens in a mash that no analysis tells.
    pub settings: Settings,
    /// How far this brewery's mashes have settled above what the balance says.
    pub offset: Estimate<PhShift>,
    /// What the beer wants.
    pub spec: Spec,
    /// What must not be passed, whatever the beer wants.
    pub limits: Limits,
}

/// One water.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Source {
    /// What is in it today.
    pub water: Water,
    /// How well that is known.
    pub doubt: LiquorDoubt,
    /// Least share of the liquor it must make up.
    pub lowest: Fraction,
    /// Greatest share it may make up.
    pub highest: Fraction,
    /// Whether it is there to thin the others: RO permeate or bought-in water.
    pub blending: bool,
    /// What a litre costs.
    pub price: CostPerLitre,
}

/// How gladly a material is used.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Preference {
    /// Like any other.
    Usual,
    /// Only as far as the mash pH or a window cannot be had without it.
    Discouraged,
    /// Never.
    Avoided,
}

/// A material at hand for this batch.
#[derive(Clone, Debug, PartialEq)]
pub struct ShelfItem {
    /// What the brewery calls it, with its lot.
    pub name: String,
    /// What it is.
    pub material: Material,
    /// Where it may go.
    pub vessels: Vec<Vessel>,
    /// Smallest amount the scale or the measure can tell, g or mL; none if zero.
    pub step: DoseAmount,
    /// What a gram or a millilitre costs.
    pub price: CostPerUnit,
    /// Most of it the batch may take, all vessels together, g or mL.
    pub most: Option<DoseAmount>,
    /// How gladly it is used.
    pub preference: Preference,
}

/// How much water goes where.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Volumes {
    /// All liquor of the batch, as it stands in the liquor tank. What goes neither to
    /// the mash nor over the grains goes to the kettle.
    pub liquor: Litres,
    /// Mash liquor.
    pub mash: Estimate<Litres>,
    /// Sparge liquor; nothing if the beer is not sparged.
    pub sparge: Litres,
}

/// How much a window matters beside the others. A window of a lower priority never
/// costs one of a higher priority anything.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Priority {
    /// Before all others.
    High,
    /// After those.
    Middle,
    /// Last.
    Low,
}

impl Priority {
    /// Every priority, the most urgent first.
    pub const ALL: [Self; 3] = [Self::High, Self::Middle, Self::Low];

    /// Stable name for storage and the API.
    #[must_use]
    pub const fn key(self) -> &'static str {
        match self {
            Self::High => "high",
            Self::Middle => "middle",
            Self::Low => "low",
        }
    }

    /// The priority with this [`key`](Self::key).
    #[must_use]
    pub fn from_key(key: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|priority| priority.key() == key)
    }
}

/// Where a figure should lie.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Window<T> {
    /// Lowest accepted.
    pub low: Option<T>,
    /// Highest accepted.
    pub high: Option<T>,
    /// Where in between it would best be.
    pub preferred: Option<T>,
    /// How much it matters.
    pub priority: Priority,
}

impl<T> Window<T> {
    /// From `low` to `high`, no place in between preferred.
    pub const fn between(low: T, high: T, priority: Priority) -> Self {
        Self {
            low: Some(low),
            high: Some(high),
            preferred: None,
            priority,
        }
    }
}

/// What a beer wants of its liquor and its mash.
#[derive(Clone, Debug, PartialEq)]
pub struct Spec {
    /// Each ion in the whole liquor: everything added in any vessel, over all the
    /// liquor of the batch.
    pub ions: IonMap<Option<Window<MgPerL>>>,
    /// Calcium in the mash liquor.
    pub mash_calcium: Option<Window<MgPerL>>,
    /// Sulfate to chloride in the whole liquor, mass by mass. A preferred ratio is
    /// not looked at.
    pub sulfate_to_chloride: Option<Window<MassRatio>>,
    /// Alkalinity of the sparge liquor.
    pub sparge_alkalinity: Option<Window<MgPerLAsCaCO3>>,
    /// pH of the mash, cooled sample.
    pub mash_ph: Aim,
}

/// What must not be passed.
#[derive(Clone, Debug, PartialEq)]
pub struct Limits {
    /// Most of each ion in the whole liquor: what makes a water potable, and what a
    /// palate bears of lactate or sodium.
    pub ions: IonMap<Option<MgPerL>>,
    /// How far acid may take the alkalinity of the liquor in the tank and of the
    /// sparge liquor. A source that is lower by itself is not held against the plan.
    pub lowest_alkalinity: MgPerLAsCaCO3,
}

/// Why a problem cannot be looked at.
#[derive(Clone, Copy, Debug, PartialEq, thiserror::Error)]
pub enum PlanError {
    /// Nothing to brew with.
    #[error("There is no source of water: choose at least one.")]
    NoSource,
    /// The volumes do not fit each other.
    #[error(
        "The mash needs liquor, and mash and sparge liquor together may not be more than all the liquor of the batch."
    )]
    Volumes,
    /// The malts weigh nothing together.
    #[error("The grist weighs nothing: enter at least one malt with its mass.")]
    NoGrist,
    /// The lowest value of a window is above its highest.
    #[error("The lowest value is above the highest in the window for {0}.")]
    UpsideDown(Requirement),
    /// The lowest share of a source is above its highest.
    #[error("A limit is upside down: {0}.")]
    LimitUpsideDown(Limit),
    /// The shares given are not one for each source, or do not make a whole.
    #[error("The shares of the sources must be one for each source and add up to 100 %.")]
    Shares,
    /// A dose of something that is not on the shelf.
    #[error("A dose names material {0}, which is not on the shelf of this plan.")]
    NotOnShelf(usize),
    /// More materials and vessels than a plan can choose among.
    #[error(
        "A plan can choose among 128 additions, a material in one vessel each, and {0} are offered: leave out lots or vessels."
    )]
    TooManyAdditions(usize),
    /// The numbers are too far apart for the solver to settle.
    #[error(
        "No plan could be computed from these figures: look for an amount, a volume or a limit that is out of proportion."
    )]
    Unsettled,
}

/// As many as the search for the fewest additions has places for.
pub(super) const MOST_ADDITIONS: usize = 128;

impl Problem {
    /// Refuses what cannot be planned or evaluated.
    pub(super) fn check(&self) -> Result<(), PlanError> {
        if self.sources.is_empty() {
            return Err(PlanError::NoSource);
        }
        let volumes = self.volumes;
        let (mash, liquor) = (volumes.mash.value.get(), volumes.liquor.get());
        // Litres typed with a few decimals may add up to a hair more than their sum.
        if mash <= 0.0 || mash + volumes.sparge.get() > liquor * (1.0 + 1e-6) {
            return Err(PlanError::Volumes);
        }
        if self.grist.iter().all(|item| item.mass.get() <= 0.0) {
            return Err(PlanError::NoGrist);
        }
        for (index, source) in self.sources.iter().enumerate() {
            if source.lowest.get() > source.highest.get() {
                return Err(PlanError::LimitUpsideDown(Limit::LowestShare(index)));
            }
        }
        let additions = self.shelf.iter().map(|item| item.vessels.len()).sum();
        if additions > MOST_ADDITIONS {
            return Err(PlanError::TooManyAdditions(additions));
        }
        let upside_down = |low: Option<f64>, high: Option<f64>| matches!((low, high), (Some(low), Some(high)) if low > high);
        for (requirement, low, high) in self.spec.bounds() {
            if upside_down(low, high) {
                return Err(PlanError::UpsideDown(requirement));
            }
        }
        Ok(())
    }
}

impl Spec {
    fn bounds(&self) -> Vec<(Requirement, Option<f64>, Option<f64>)> {
        let mut bounds = vec![(
            Requirement::MashPh,
            Some(self.mash_ph.low.get()),
            Some(self.mash_ph.high.get()),
        )];
        for (ion, window) in self.ions.iter() {
            if let Some(window) = window {
                bounds.push((
                    Requirement::Ion(ion),
                    window.low.map(MgPerL::get),
                    window.high.map(MgPerL::get),
                ));
            }
        }
        if let Some(window) = self.mash_calcium {
            bounds.push((
                Requirement::MashCalcium,
                window.low.map(MgPerL::get),
                window.high.map(MgPerL::get),
            ));
        }
        if let Some(window) = self.sulfate_to_chloride {
            bounds.push((
                Requirement::SulfateToChloride,
                window.low.map(MassRatio::get),
                window.high.map(MassRatio::get),
            ));
        }
        if let Some(window) = self.sparge_alkalinity {
            bounds.push((
                Requirement::SpargeAlkalinity,
                window.low.map(MgPerLAsCaCO3::get),
                window.high.map(MgPerLAsCaCO3::get),
            ));
        }
        bounds
    }
}
