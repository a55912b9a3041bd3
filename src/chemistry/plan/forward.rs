//! What a treatment does: every figure a plan shows, from shares and doses.
//!
//! It is plain bookkeeping and one mash prediction, cheap enough to answer while an
//! amount is being moved. The solver's own plans are shown through it as well.

use crate::ion::{Ion, IonMap};
use crate::mash::{Addition, LiquorDoubt, MashError, MashInputs, MashPrediction};
use crate::material::{Contribution, Vessel};
use crate::quantity::{
    Cost, DoseAmount, Fraction, Litres, MassRatio, Meq, MeqPerL, MgPerL, MgPerLAsCaCO3, MmolPerL,
    Ph, PhShift,
};
use crate::water::Water;

use super::problem::{PlanError, Problem, Window};
use super::{Limit, Measure, Requirement};

/// A limit passed by less than this, relative to it, is not passed: the solver's own
/// accuracy, far below what can be weighed.
const LIMIT_TOLERANCE: f64 = 1e-6;

/// A window missed by less than this is met: 0.1 mg/L or 0.2 % of its bound, whichever
/// is more. Source: assumed; less than any report or scale in a brewery can tell.
const WINDOW_TOLERANCE: (f64, f64) = (0.1, 0.002);

/// One material, one amount, one vessel.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Dose {
    /// Its place on the shelf of the problem.
    pub material: usize,
    /// Where it goes.
    pub vessel: Vessel,
    /// How much, g or mL.
    pub amount: DoseAmount,
}

/// How a figure stands to its window.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Standing {
    /// Inside, or outside by less than can be told.
    Inside,
    /// Too low by this much.
    Below(Measure),
    /// Too high by this much.
    Above(Measure),
}

/// One window and where the figure lies.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Finding {
    /// Whose window.
    pub requirement: Requirement,
    /// The figure.
    pub value: Measure,
    /// How it stands.
    pub standing: Standing,
}

/// A limit that is passed.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Broken {
    /// Which limit.
    pub limit: Limit,
    /// The figure that passes it.
    pub reaches: Measure,
}

/// What a treatment does.
#[derive(Clone, Debug, PartialEq)]
pub struct Outcome {
    /// The sources blended, before anything is added.
    pub blend: Water,
    /// The liquor in the tank after its doses.
    pub tank: Water,
    /// The mash liquor with what is added to the mash, grist left out.
    pub mash_liquor: Water,
    /// The sparge liquor after its doses; as the tank if the beer is not sparged.
    pub sparge_liquor: Water,
    /// Everything added in any vessel, over all the liquor of the batch.
    pub whole: Water,
    /// The mash pH, with interval and influences.
    pub mash: Result<MashPrediction, MashError>,
    /// Acid still missing for the mash to settle at its target; negative where it
    /// misses base.
    pub acid_missing: Meq,
    /// Sulfate to chloride of the blend; `None` where there is hardly any of either.
    pub sulfate_to_chloride_before: Option<MassRatio>,
    /// Sulfate to chloride of the whole liquor.
    pub sulfate_to_chloride: Option<MassRatio>,
    /// Each window of the spec, the mash pH first.
    pub findings: Vec<Finding>,
    /// Limits that are passed.
    pub broken: Vec<Broken>,
    /// Water and materials.
    pub cost: Cost,
    /// For each material of the shelf, how much more of it the batch may take before
    /// it passes a limit: what is left for putting the mash right.
    pub room: Vec<DoseAmount>,
}

/// Works out what these shares and doses do.
///
/// `shares` has one entry for each source, adding up to one. A dose of an avoided
/// material or into a vessel not meant for it is counted all the same.
pub fn evaluate(
    problem: &Problem,
    shares: &[Fraction],
    doses: &[Dose],
) -> Result<Outcome, PlanError> {
    problem.check()?;
    let whole_share: f64 = shares.iter().map(|share| share.get()).sum();
    if shares.len() != problem.sources.len() || (whole_share - 1.0).abs() > 1e-6 {
        return Err(PlanError::Shares);
    }
    if let Some(dose) = doses
        .iter()
        .find(|dose| dose.material >= problem.shelf.len())
    {
        return Err(PlanError::NotOnShelf(dose.material));
    }

    let volumes = problem.volumes;
    let (liquor, mash) = (volumes.liquor, volumes.mash.value);
    let to = |vessel: Vessel| sum_of(problem, doses, |dose| dose.vessel == vessel);
    let blend = blended(problem, shares);
    let tank = to(Vessel::LiquorTank).added_to(&blend, liquor);
    let mash_liquor = to(Vessel::Mash).added_to(&tank, mash);
    let sparge_liquor = to(Vessel::SpargeLiquor).added_to(&tank, volumes.sparge);
    let whole = sum_of(problem, doses, |_| true).added_to(&blend, liquor);

    let inputs = mash_with(problem, shares, doses, blend);
    let target = problem.spec.mash_ph.target;
    let outcome = Outcome {
        blend,
        tank,
        mash_liquor,
        sparge_liquor,
        whole,
        mash: inputs.predict(),
        acid_missing: inputs.acid_demand(target).unwrap_or(Meq::constant(0.0)),
        sulfate_to_chloride_before: ratio(&blend),
        sulfate_to_chloride: ratio(&whole),
        findings: Vec::new(),
        broken: Vec::new(),
        cost: cost(problem, shares, doses),
        room: room(problem, doses, &whole),
    };
    let findings = findings(problem, &outcome);
    let broken = broken(problem, shares, doses, &outcome);
    Ok(Outcome {
        findings,
        broken,
        ..outcome
    })
}

impl Outcome {
    /// The finding about one requirement, if the spec has a window for it.
    #[must_use]
    pub fn finding(&self, requirement: Requirement) -> Option<&Finding> {
        self.findings
            .iter()
            .find(|finding| finding.requirement == requirement)
    }
}

fn blended(problem: &Problem, shares: &[Fraction]) -> Water {
    let mean = |figure: &dyn Fn(&Water) -> f64| -> f64 {
        problem
            .sources
            .iter()
            .zip(shares)
            .map(|(source, share)| share.get() * figure(&source.water))
            .sum()
    };
    Water {
        ions: IonMap::from_fn(|ion| MgPerL::clamped(mean(&|water| water.ions[ion].get()))),
        alkalinity: MeqPerL::clamped(mean(&|water| water.alkalinity.get())),
        carbon: MmolPerL::clamped(mean(&|water| water.carbon.get())),
    }
}

/// Sources are tested independently, so their errors add by squares.
fn blended_doubt(problem: &Problem, shares: &[Fraction]) -> LiquorDoubt {
    let combined = |sd: &dyn Fn(&LiquorDoubt) -> f64| -> f64 {
        problem
            .sources
            .iter()
            .zip(shares)
            .map(|(source, share)| (share.get() * sd(&source.doubt)).powi(2))
            .sum::<f64>()
            .sqrt()
    };
    LiquorDoubt {
        alkalinity: MeqPerL::clamped(combined(&|doubt| doubt.alkalinity.get())),
        calcium: MgPerL::clamped(combined(&|doubt| doubt.calcium.get())),
        magnesium: MgPerL::clamped(combined(&|doubt| doubt.magnesium.get())),
    }
}

fn sum_of(problem: &Problem, doses: &[Dose], counts: impl Fn(&Dose) -> bool) -> Contribution {
    doses
        .iter()
        .filter(|dose| counts(dose))
        .fold(Contribution::nothing(), |sum, dose| {
            let material = &problem.shelf[dose.material].material;
            sum.plus(&material.contribution(dose.amount))
        })
}

/// The mash that these shares and doses make: what its prediction is made of, and what a
/// put-right works on.
#[must_use]
pub fn mash_inputs(problem: &Problem, shares: &[Fraction], doses: &[Dose]) -> MashInputs {
    mash_with(problem, shares, doses, blended(problem, shares))
}

fn mash_with(problem: &Problem, shares: &[Fraction], doses: &[Dose], blend: Water) -> MashInputs {
    let volumes = problem.volumes;
    let tank_share = volumes.mash.value.get() / volumes.liquor.get();
    let additions = doses
        .iter()
        .filter_map(|dose| {
            let share = match dose.vessel {
                Vessel::LiquorTank => tank_share,
                Vessel::Mash => 1.0,
                Vessel::SpargeLiquor | Vessel::Kettle => return None,
            };
            let item = &problem.shelf[dose.material];
            let amount = DoseAmount::clamped(share * dose.amount.get());
            Some(Addition::of(item.name.clone(), &item.material, amount))
        })
        .collect();
    MashInputs {
        grist: problem.grist.clone(),
        liquor: blend,
        liquor_doubt: blended_doubt(problem, shares),
        volume: volumes.mash,
        additions,
        settings: problem.settings,
        offset: problem.offset,
    }
}

/// Below this much of both, a ratio says nothing, mg/L. Source: assumed.
const HARDLY_ANY: f64 = 0.01;

fn ratio(water: &Water) -> Option<MassRatio> {
    let (sulfate, chloride) = (
        water.ions[Ion::Sulfate].get(),
        water.ions[Ion::Chloride].get(),
    );
    (sulfate > HARDLY_ANY || chloride > HARDLY_ANY)
        .then(|| MassRatio::clamped(sulfate / chloride.max(1e-9)))
}

fn cost(problem: &Problem, shares: &[Fraction], doses: &[Dose]) -> Cost {
    let water: f64 = problem
        .sources
        .iter()
        .zip(shares)
        .map(|(source, share)| source.price.get() * share.get() * problem.volumes.liquor.get())
        .sum();
    let materials: f64 = doses
        .iter()
        .map(|dose| problem.shelf[dose.material].price.get() * dose.amount.get())
        .sum();
    Cost::clamped(water + materials)
}

fn used(doses: &[Dose], material: usize) -> f64 {
    doses
        .iter()
        .filter(|dose| dose.material == material)
        .map(|dose| dose.amount.get())
        .sum()
}

fn room(problem: &Problem, doses: &[Dose], whole: &Water) -> Vec<DoseAmount> {
    let liquor = problem.volumes.liquor.get();
    let left = |(index, item): (usize, &super::ShelfItem)| {
        let by_amount = item
            .most
            .map_or(DoseAmount::HIGH, |most| most.get() - used(doses, index));
        let per_unit = item.material.per_unit();
        let by_ion = problem
            .limits
            .ions
            .iter()
            .filter_map(|(ion, most)| Some((ion, (*most)?)))
            .filter(|(ion, _)| per_unit.ions[*ion].get() > 0.0)
            .map(|(ion, most)| {
                (most.get() - whole.ions[ion].get()) * liquor / per_unit.ions[ion].get()
            });
        DoseAmount::clamped(by_ion.fold(by_amount, f64::min))
    };
    problem.shelf.iter().enumerate().map(left).collect()
}

fn findings(problem: &Problem, outcome: &Outcome) -> Vec<Finding> {
    let spec = &problem.spec;
    let mut findings = Vec::new();
    if let Ok(prediction) = &outcome.mash {
        let (ph, aim) = (prediction.ph.value.get(), spec.mash_ph);
        let shift = |by: f64| Measure::PhShift(PhShift::clamped(by));
        findings.push(Finding {
            requirement: Requirement::MashPh,
            value: Measure::Ph(Ph::clamped(ph)),
            standing: if ph < aim.low.get() - PH_TOLERANCE {
                Standing::Below(shift(aim.low.get() - ph))
            } else if ph > aim.high.get() + PH_TOLERANCE {
                Standing::Above(shift(ph - aim.high.get()))
            } else {
                Standing::Inside
            },
        });
    }
    for (ion, window) in spec.ions.iter() {
        if let Some(window) = window {
            findings.push(Finding::of(
                Requirement::Ion(ion),
                outcome.whole.ions[ion].get(),
                numbers(window, MgPerL::get),
                |value| Measure::Concentration(MgPerL::clamped(value)),
            ));
        }
    }
    if let Some(window) = &spec.mash_calcium {
        findings.push(Finding::of(
            Requirement::MashCalcium,
            outcome.mash_liquor.ions[Ion::Calcium].get(),
            numbers(window, MgPerL::get),
            |value| Measure::Concentration(MgPerL::clamped(value)),
        ));
    }
    if let (Some(window), Some(ratio)) = (&spec.sulfate_to_chloride, outcome.sulfate_to_chloride) {
        // Judged by the sulfate that is missing or too much, shown as a ratio.
        let sulfate = outcome.whole.ions[Ion::Sulfate].get();
        let chloride = outcome.whole.ions[Ion::Chloride].get();
        let (low, high) = numbers(window, MassRatio::get);
        let by_sulfate = Finding::of(
            Requirement::SulfateToChloride,
            sulfate,
            (low.map(|r| r * chloride), high.map(|r| r * chloride)),
            |value| Measure::Concentration(MgPerL::clamped(value)),
        );
        let gap = |bound: Option<f64>| {
            let by = bound.map_or(0.0, |bound| (ratio.get() - bound).abs());
            Measure::Ratio(MassRatio::clamped(by))
        };
        findings.push(Finding {
            value: Measure::Ratio(ratio),
            standing: match by_sulfate.standing {
                Standing::Inside => Standing::Inside,
                Standing::Below(_) => Standing::Below(gap(low)),
                Standing::Above(_) => Standing::Above(gap(high)),
            },
            ..by_sulfate
        });
    }
    if let (Some(window), true) = (&spec.sparge_alkalinity, problem.volumes.sparge.get() > 0.0) {
        findings.push(Finding::of(
            Requirement::SpargeAlkalinity,
            outcome.sparge_liquor.alkalinity_as_caco3().get(),
            numbers(window, MgPerLAsCaCO3::get),
            |value| Measure::Alkalinity(MgPerLAsCaCO3::clamped(value)),
        ));
    }
    findings
}

/// A mash outside its window by less than this is inside. Source: assumed; a tenth of
/// what a good meter can tell.
const PH_TOLERANCE: f64 = 0.002;

fn numbers<T: Copy>(window: &Window<T>, get: fn(T) -> f64) -> (Option<f64>, Option<f64>) {
    (window.low.map(get), window.high.map(get))
}

impl Finding {
    fn of(
        requirement: Requirement,
        value: f64,
        (low, high): (Option<f64>, Option<f64>),
        measure: impl Fn(f64) -> Measure,
    ) -> Self {
        let tolerance = |bound: f64| WINDOW_TOLERANCE.0.max(WINDOW_TOLERANCE.1 * bound.abs());
        let standing = match (low, high) {
            (Some(low), _) if value < low - tolerance(low) => Standing::Below(measure(low - value)),
            (_, Some(high)) if value > high + tolerance(high) => {
                Standing::Above(measure(value - high))
            }
            _ => Standing::Inside,
        };
        Self {
            requirement,
            value: measure(value),
            standing,
        }
    }
}

fn broken(
    problem: &Problem,
    shares: &[Fraction],
    doses: &[Dose],
    outcome: &Outcome,
) -> Vec<Broken> {
    let mut broken = Vec::new();
    let mut hold = |limit: Limit, reaches: Measure, passed: bool| {
        if passed {
            broken.push(Broken { limit, reaches });
        }
    };
    for (index, (source, share)) in problem.sources.iter().zip(shares).enumerate() {
        let value = share.get();
        let reaches = Measure::Share(*share);
        let lowest = source.lowest.get() - LIMIT_TOLERANCE;
        let highest = source.highest.get() + LIMIT_TOLERANCE;
        hold(Limit::LowestShare(index), reaches, value < lowest);
        hold(Limit::HighestShare(index), reaches, value > highest);
    }
    for (index, item) in problem.shelf.iter().enumerate() {
        let amount = used(doses, index);
        if let Some(most) = item.most {
            hold(
                Limit::Amount(index),
                Measure::Dose(DoseAmount::clamped(amount)),
                amount > most.get() * (1.0 + LIMIT_TOLERANCE) + LIMIT_TOLERANCE,
            );
        }
    }
    for (ion, most) in problem.limits.ions.iter() {
        if let Some(most) = most {
            let value = outcome.whole.ions[ion];
            hold(
                Limit::Ion(ion),
                Measure::Concentration(value),
                value.get() > most.get() * (1.0 + LIMIT_TOLERANCE) + LIMIT_TOLERANCE,
            );
        }
    }
    let floor = lowest_alkalinity(problem);
    let mut waters = vec![(Vessel::LiquorTank, &outcome.tank)];
    if problem.volumes.sparge > Litres::constant(0.0) {
        waters.push((Vessel::SpargeLiquor, &outcome.sparge_liquor));
    }
    for (vessel, water) in waters {
        let alkalinity = water.alkalinity_as_caco3();
        hold(
            Limit::LowestAlkalinity(vessel),
            Measure::Alkalinity(alkalinity),
            alkalinity.get() < floor - LIMIT_TOLERANCE * (1.0 + floor.abs()) * 10.0,
        );
    }
    broken
}

/// The floor under the alkalinity, mg/L as CaCO₃: the limit, or the lowest source
/// where that is lower by itself.
pub(super) fn lowest_alkalinity(problem: &Problem) -> f64 {
    problem
        .sources
        .iter()
        .map(|source| source.water.alkalinity_as_caco3().get())
        .fold(problem.limits.lowest_alkalinity.get(), f64::min)
}
