//! The treatment of one batch: which share of which water, and what to add where.
//!
//! At the target pH of the mash everything a treatment does is linear in shares and
//! amounts, so the best treatment is the optimum of a convex program, and there is
//! only one. [`solve`] finds it in a strict order, each step leaving the earlier ones
//! untouched:
//!
//! 1. limits are never passed;
//! 2. the mash comes as near its target pH as it can;
//! 3. windows are missed as little as possible, those of high priority first;
//! 4. discouraged materials are used only as far as that takes them;
//! 5. among what is left, the [`Way`] chooses;
//! 6. of the treatments that cannot be told from the one chosen, the simplest is taken.
//!
//! Every line on a weigh-out is a chance to slip, so the last step takes the fewest
//! lines: a line is a material in one vessel, or a source in use. Steps 1 to 4 stay as
//! held as they were; for step 5, "cannot be told" means (source: assumed, no finer than
//! reports and scales tell):
//!
//! - closest to preferred: each figure with a preferred value within 1 mg/L or 2 %,
//!   whichever is more, of where the optimum puts it;
//! - fewest additions: no addition more, sources in use counting as lines too;
//! - least blending water: at most 0.5 % of the liquor above the least, or up to the next
//!   whole per cent;
//! - cheapest: at most 1 % above the least cost.
//!
//! A window that cannot be met may trade as much with others of its priority. Of equally
//! many lines those nearest to what is preferred are taken, then the smallest amounts.
//! Then the shares are rounded to whole per cents, the doses solved again for them and
//! rounded to the scale. Rounding shares may cost a window 0.05 % of its scale; where
//! whole per cents would cost more, tenths are tried, then the exact shares stay.
//!
//! The ending is a value: [`Ending`]. Start with [`Problem`]; [`evaluate`] says what any
//! shares and doses do, a solver's or a brewer's.
//!
//! Ions are counted in the whole liquor, calcium also in the mash. A dose in the liquor
//! tank reaches mash and sparge liquor in proportion; what is dosed to the mash stays in
//! the mash; the kettle counts in the whole liquor only. The steps of the solve are in
//! `model`, `order`, `fewest`, `simplest`, `lines`, `shares`, `rounding` and
//! `obstacles`.

mod fewest;
mod forward;
mod lines;
mod model;
mod obstacles;
mod order;
mod problem;
mod program;
mod rounding;
mod shares;
mod simplest;
mod simplex;

use std::fmt;

pub use forward::{Broken, Dose, Finding, Outcome, Standing, evaluate, mash_inputs};
pub use problem::{
    Limits, PlanError, Preference, Priority, Problem, ShelfItem, Source, Spec, Volumes, Window,
};

use crate::ion::Ion;
use crate::material::Vessel;
use crate::quantity::{
    DoseAmount, Fraction, MassRatio, Meq, MgPerL, MgPerLAsCaCO3, Ph, PhShift, Score,
};

/// What to choose by, once everything asked for is met as well as it can be.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Way {
    /// Nearest to the preferred figures.
    ClosestToPreferred,
    /// As few additions as possible, a material in one vessel each.
    FewestAdditions,
    /// As little blending water as possible.
    LeastBlendingWater,
    /// The least money for water and materials.
    Cheapest,
}

impl Way {
    /// Every way.
    pub const ALL: [Self; 4] = [
        Self::ClosestToPreferred,
        Self::FewestAdditions,
        Self::LeastBlendingWater,
        Self::Cheapest,
    ];

    /// Stable name for storage and the API.
    #[must_use]
    pub const fn key(self) -> &'static str {
        match self {
            Self::ClosestToPreferred => "closest_to_preferred",
            Self::FewestAdditions => "fewest_additions",
            Self::LeastBlendingWater => "least_blending_water",
            Self::Cheapest => "cheapest",
        }
    }

    /// The way with this [`key`](Self::key).
    #[must_use]
    pub fn from_key(key: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|way| way.key() == key)
    }
}

/// Something a beer asks for.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Requirement {
    /// The pH of the mash.
    MashPh,
    /// An ion in the whole liquor.
    Ion(Ion),
    /// Calcium in the mash liquor.
    MashCalcium,
    /// Sulfate to chloride in the whole liquor.
    SulfateToChloride,
    /// Alkalinity of the sparge liquor.
    SpargeAlkalinity,
}

impl fmt::Display for Requirement {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::MashPh => f.write_str("mash pH"),
            Self::Ion(ion) => f.write_str(ion.name()),
            Self::MashCalcium => f.write_str("calcium in the mash"),
            Self::SulfateToChloride => f.write_str("sulfate to chloride"),
            Self::SpargeAlkalinity => f.write_str("alkalinity of the sparge liquor"),
        }
    }
}

/// Something that must not be passed. Sources and materials by their place in the
/// problem.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Limit {
    /// The lowest share of a source.
    LowestShare(usize),
    /// The highest share of a source.
    HighestShare(usize),
    /// Most of a material.
    Amount(usize),
    /// Most of an ion in the whole liquor.
    Ion(Ion),
    /// The lowest alkalinity of the liquor in a vessel.
    LowestAlkalinity(Vessel),
}

impl fmt::Display for Limit {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::LowestShare(source) => write!(f, "the lowest share of source {}", source + 1),
            Self::HighestShare(source) => write!(f, "the highest share of source {}", source + 1),
            Self::Amount(material) => write!(f, "the most of material {}", material + 1),
            Self::Ion(ion) => write!(f, "the most {}", ion.name()),
            Self::LowestAlkalinity(vessel) => {
                write!(f, "the lowest alkalinity in the {}", vessel.name())
            }
        }
    }
}

/// A figure of whatever kind its requirement or limit has.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Measure {
    /// Of an ion.
    Concentration(MgPerL),
    /// Of a liquor.
    Alkalinity(MgPerLAsCaCO3),
    /// Sulfate to chloride.
    Ratio(MassRatio),
    /// Of the mash.
    Ph(Ph),
    /// A difference of the mash pH.
    PhShift(PhShift),
    /// Of a source.
    Share(Fraction),
    /// Of a material, g or mL.
    Dose(DoseAmount),
}

impl Measure {
    /// The bare number, in the unit of its kind.
    #[must_use]
    pub const fn get(self) -> f64 {
        match self {
            Self::Concentration(value) => value.get(),
            Self::Alkalinity(value) => value.get(),
            Self::Ratio(value) => value.get(),
            Self::Ph(value) => value.get(),
            Self::PhShift(value) => value.get(),
            Self::Share(value) => value.get(),
            Self::Dose(value) => value.get(),
        }
    }
}

/// Something that stands in the way of a requirement.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Obstacle {
    /// A limit.
    Limit(Limit),
    /// Another requirement of at least the same priority.
    Requirement(Requirement),
}

/// What giving way at one obstacle would buy.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Relief {
    /// What would give way.
    pub obstacle: Obstacle,
    /// How far: the figure it would then reach.
    pub to: Measure,
    /// How the requirement would then stand.
    pub leaves: Standing,
}

/// A requirement that is not met.
#[derive(Clone, Debug, PartialEq)]
pub struct Shortfall {
    /// Which one.
    pub requirement: Requirement,
    /// How far it is missed by the doses as they will be weighed.
    pub standing: Standing,
    /// What stands in its way, the worst first. Empty when nothing on the shelf and no
    /// source could help, or when only the steps of the scale are to blame.
    pub in_the_way: Vec<Obstacle>,
    /// What giving way at the worst of them would buy.
    pub relief: Option<Relief>,
}

/// Limits that no treatment keeps all at once.
#[derive(Clone, Debug, PartialEq)]
pub struct Conflict {
    /// Those that would be passed if they were passed as little as possible, and how far.
    pub broken: Vec<Broken>,
    /// Those that would still be passed if the first of them were lifted: none if lifting
    /// it is enough.
    pub left_when_lifted: Vec<Limit>,
}

/// What each step of the strict order reached, before doses are rounded.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Reached {
    /// Acid the mash still misses at its target pH; negative where it misses base.
    pub acid_missing: Meq,
    /// How far the windows of each priority are missed together, each relative to the
    /// greatest of 10 mg/L, its low, its preferred and half of its high figure (a ratio
    /// by the sulfate it misses, relative to 50 mg/L).
    pub missed: [Score; 3],
    /// Discouraged materials, g or mL per litre of liquor.
    pub discouraged: Score,
    /// What the way looks at: additions, share of blending water, or cost per litre of
    /// liquor. Nothing for the closest to preferred.
    pub chosen_by: Score,
    /// Squared distances to what is preferred, relative as `missed`, and a ten-thousandth
    /// of the squared shares and of the squared g or mL per litre, which makes the
    /// optimum unique.
    pub distance: Score,
}

/// Shares and doses, and what they do.
#[derive(Clone, Debug, PartialEq)]
pub struct Treatment {
    /// Share of each source: whole per cents, tenths of a per cent where those would
    /// break what the strict order reached, or as exact as it takes.
    pub shares: Vec<Fraction>,
    /// Doses as they will be weighed, in steps of the scale.
    pub doses: Vec<Dose>,
    /// Doses for these shares before they are rounded to the scale.
    pub exact_doses: Vec<Dose>,
    /// What shares and doses as weighed do.
    pub outcome: Outcome,
    /// What the steps of the strict order reached before anything was made simple or
    /// rounded.
    pub reached: Reached,
    /// Where they reached it.
    pub optimum: Optimum,
}

/// The treatment that is best to the last digit, before it is made simple.
#[derive(Clone, Debug, PartialEq)]
pub struct Optimum {
    /// Share of each source.
    pub shares: Vec<Fraction>,
    /// Doses, not rounded.
    pub doses: Vec<Dose>,
}

impl Treatment {
    /// Lines on the weigh-out: sources in use and doses.
    #[must_use]
    pub fn lines(&self) -> usize {
        lines(&self.shares, self.doses.len())
    }
}

impl Optimum {
    /// Lines it would take, a share of less than a ten-thousandth not counted.
    #[must_use]
    pub fn lines(&self) -> usize {
        lines(&self.shares, self.doses.len())
    }
}

fn lines(shares: &[Fraction], doses: usize) -> usize {
    shares.iter().filter(|share| share.get() > 1e-4).count() + doses
}

/// How the search for a plan ended.
#[derive(Clone, Debug, PartialEq)]
pub enum Ending {
    /// Everything asked for is met.
    Met(Treatment),
    /// This is as near as it gets.
    Closest {
        /// The nearest.
        treatment: Treatment,
        /// What it does not meet, the mash pH first, then by priority. Empty only if the
        /// steps of the scale are too coarse for a limit: see
        /// [`Outcome::broken`].
        shortfalls: Vec<Shortfall>,
    },
    /// The limits contradict each other or the water.
    Impossible(Conflict),
}

impl Ending {
    /// The treatment, if there is one.
    #[must_use]
    pub const fn treatment(&self) -> Option<&Treatment> {
        match self {
            Self::Met(treatment) | Self::Closest { treatment, .. } => Some(treatment),
            Self::Impossible(_) => None,
        }
    }
}

/// The best treatment of a batch, chosen in one way.
pub fn solve(problem: &Problem, way: Way) -> Result<Ending, PlanError> {
    problem.check()?;
    let model = model::Model::of(problem);
    match order::settle(&model)? {
        None => Ok(Ending::Impossible(obstacles::conflict(problem, &model)?)),
        Some(frozen) => one_way(problem, &model, &frozen, way),
    }
}

/// The best treatment in each way of [`Way::ALL`], for less than four times the work.
pub fn solve_all(problem: &Problem) -> Result<[(Way, Ending); 4], PlanError> {
    problem.check()?;
    let model = model::Model::of(problem);
    let Some(frozen) = order::settle(&model)? else {
        let conflict = obstacles::conflict(problem, &model)?;
        return Ok(Way::ALL.map(|way| (way, Ending::Impossible(conflict.clone()))));
    };
    // The ways share nothing that changes.
    let ways = std::thread::scope(|scope| {
        let running = Way::ALL.map(|way| {
            let (model, frozen) = (&model, &frozen);
            scope.spawn(move || one_way(problem, model, frozen, way))
        });
        running.map(|way| way.join().unwrap_or(Err(PlanError::Unsettled)))
    });
    let [closest, fewest, blending, cheapest] = ways;
    let [a, b, c, d] = Way::ALL;
    Ok([(a, closest?), (b, fewest?), (c, blending?), (d, cheapest?)])
}

fn one_way(
    problem: &Problem,
    model: &model::Model,
    frozen: &order::Frozen,
    way: Way,
) -> Result<Ending, PlanError> {
    let chosen = order::choose(model, frozen, way)?;
    let columns = simplest::settled(problem, model, frozen, &chosen, way)?;
    let shares = model.shares(&columns);
    let doses = rounding::rounded(problem, model, &columns);
    let treatment = Treatment {
        outcome: evaluate(problem, &shares, &doses)?,
        exact_doses: model.doses(&columns),
        reached: chosen.reached(model, frozen),
        optimum: Optimum {
            shares: model.shares(&chosen.columns),
            doses: model.doses(&chosen.columns),
        },
        shares,
        doses,
    };
    let shortfalls = obstacles::shortfalls(problem, model, frozen, &chosen.columns, &treatment)?;
    if shortfalls.is_empty() && treatment.outcome.broken.is_empty() {
        Ok(Ending::Met(treatment))
    } else {
        Ok(Ending::Closest {
            treatment,
            shortfalls,
        })
    }
}
