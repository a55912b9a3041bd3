//! How much acid or base brings a water to a pH or an alkalinity, and what it is
//! then.
//!
//! Acid turns bicarbonate into carbon dioxide. How much of that leaves decides how far
//! the pH rises again, so every question here takes the share that is lost: none in a
//! closed vessel, and at the end of a long stir nearly all. It is a share of all
//! carbon dioxide there would otherwise be at the final pH, whatever its origin.

use super::constants::Constants;
use super::equilibrium::{Carbon, Equilibrium, Totals};
use super::root::root;
use super::{CarbonateError, Speciation};
use crate::acid::Acid;
use crate::material::Contribution;
use crate::quantity::{DoseAmount, Fraction, Litres, MeqPerL, Millimoles, MmolPerL, Ph};
use crate::water::Water;

/// A dose and the water it leaves.
#[derive(Clone, Debug)]
pub struct Dose<Amount> {
    /// How much to add.
    pub amount: Amount,
    /// The water after it, without the carbon dioxide that was lost.
    pub after: Degassed,
}

/// What a search for a dose found.
#[derive(Clone, Debug)]
pub enum DoseOutcome<Amount> {
    /// This much reaches the aim.
    Reached(Dose<Amount>),
    /// The water is there already, or beyond where the addition could take it.
    NotNeeded(Degassed),
    /// No amount that can still be calculated with reaches the aim.
    OutOfReach,
}

impl<Amount> DoseOutcome<Amount> {
    /// The dose, when one reaches the aim.
    #[must_use]
    pub const fn reached(&self) -> Option<&Dose<Amount>> {
        match self {
            Self::Reached(dose) => Some(dose),
            Self::NotNeeded(_) | Self::OutOfReach => None,
        }
    }

    fn map<Other>(self, amount: impl FnOnce(Amount) -> Other) -> DoseOutcome<Other> {
        match self {
            Self::Reached(dose) => DoseOutcome::Reached(Dose {
                amount: amount(dose.amount),
                after: dose.after,
            }),
            Self::NotNeeded(after) => DoseOutcome::NotNeeded(after),
            Self::OutOfReach => DoseOutcome::OutOfReach,
        }
    }
}

/// A water after carbon dioxide has escaped from it.
#[derive(Clone, Debug)]
pub struct Degassed {
    /// The water that is left.
    pub speciation: Speciation,
    /// Carbon dioxide that escaped.
    pub carbon_lost: MmolPerL,
}

/// The water after a share of its carbon dioxide is lost.
///
/// The share is of what there would be at the pH it comes to: the pH rises while it
/// escapes, and less of the carbon is carbon dioxide.
pub fn degassed(
    water: &Water,
    carbon_dioxide_lost: Fraction,
    constants: &Constants,
) -> Result<Degassed, CarbonateError> {
    let carbon = kept(carbon_dioxide_lost);
    let mut equilibrium = Equilibrium::new(Totals::of(water), carbon, constants);
    equilibrium.find_ph()?;
    Ok(what_is_left(water, &equilibrium, constants))
}

/// The dose of an acid that brings the water to a pH, mmol per litre of it.
pub fn dose_to_ph(
    water: &Water,
    acid: Acid,
    target: Ph,
    carbon_dioxide_lost: Fraction,
    constants: &Constants,
) -> Result<DoseOutcome<MmolPerL>, CarbonateError> {
    let one_millimole = Contribution::of_acid(acid, Millimoles::constant(1.0));
    let outcome = per_litre_to_ph(
        water,
        &one_millimole,
        target,
        carbon_dioxide_lost,
        constants,
    )?;
    Ok(outcome.map(MmolPerL::clamped))
}

/// The amount of a material that brings this volume of the water to a pH: an acid,
/// a blend of acids, or a base. `per_unit` is what one gram or millilitre brings.
pub fn amount_to_ph(
    water: &Water,
    volume: Litres,
    per_unit: &Contribution,
    target: Ph,
    carbon_dioxide_lost: Fraction,
    constants: &Constants,
) -> Result<DoseOutcome<DoseAmount>, CarbonateError> {
    let outcome = per_litre_to_ph(water, per_unit, target, carbon_dioxide_lost, constants)?;
    Ok(outcome.map(|units_per_litre| DoseAmount::clamped(units_per_litre * volume.get())))
}

/// The dose of an acid that brings the total alkalinity to this, mmol per litre.
///
/// Total alkalinity is that of [`Water`]: it falls by
/// [`alkalinity_destroyed`](Acid::alkalinity_destroyed) whatever the pH. With
/// phosphoric and citric acid the phosphate or citrate takes part in what is left.
pub fn dose_to_alkalinity(
    water: &Water,
    acid: Acid,
    target: MeqPerL,
    carbon_dioxide_lost: Fraction,
    constants: &Constants,
) -> Result<DoseOutcome<MmolPerL>, CarbonateError> {
    let destroyed = acid.alkalinity_destroyed().get();
    let millimoles = (water.alkalinity.get() - target.get()) / destroyed;
    if millimoles <= 0.0 {
        let after = degassed(water, carbon_dioxide_lost, constants)?;
        return Ok(DoseOutcome::NotNeeded(after));
    }
    let contribution = Contribution::of_acid(acid, Millimoles::clamped(millimoles));
    let dosed = contribution.added_to(water, Litres::constant(1.0));
    match degassed(&dosed, carbon_dioxide_lost, constants) {
        Ok(after) => Ok(DoseOutcome::Reached(Dose {
            amount: MmolPerL::clamped(millimoles),
            after,
        })),
        Err(CarbonateError::TooConcentrated | CarbonateError::BeyondPh(_)) => {
            Ok(DoseOutcome::OutOfReach)
        }
        Err(other) => Err(other),
    }
}

/// Acid or base beyond this is no treatment of water any more, meq/L.
const MOST_ADDED: f64 = 400.0;

/// Units per litre that reach a pH.
fn per_litre_to_ph(
    water: &Water,
    per_unit: &Contribution,
    target: Ph,
    carbon_dioxide_lost: Fraction,
    constants: &Constants,
) -> Result<DoseOutcome<f64>, CarbonateError> {
    let alkalinity_per_unit = per_unit.alkalinity.get();
    // Rising with the dose: alkalinity the water would have at the target less what it
    // has, for an acid; the other way round for a base.
    let direction = -alkalinity_per_unit.signum();
    let start = Totals::of(water);
    let one = Totals::of(&per_unit.added_to(&Water::pure(), Litres::constant(1.0)));
    let mut equilibrium = Equilibrium::new(start, kept(carbon_dioxide_lost), constants);
    let mut excess = |units: f64| {
        let totals = start.plus(&one, units);
        equilibrium.set_totals(totals);
        equilibrium.settle_at(target.get())?;
        Ok(direction * (equilibrium.alkalinity - totals.alkalinity))
    };
    let untreated = excess(0.0)?;
    if untreated >= 0.0 {
        let after = degassed(water, carbon_dioxide_lost, constants)?;
        return Ok(DoseOutcome::NotNeeded(after));
    }
    if alkalinity_per_unit == 0.0 {
        return Ok(DoseOutcome::OutOfReach);
    }
    // What a strong acid would need; a weak one needs more.
    let mut low = (0.0, untreated);
    let mut units = -1000.0 * untreated / alkalinity_per_unit.abs();
    let high = loop {
        match excess(units) {
            Ok(enough) if enough >= 0.0 => break (units, enough),
            Ok(short) => low = (units, short),
            Err(CarbonateError::TooConcentrated) => return Ok(DoseOutcome::OutOfReach),
            Err(other) => return Err(other),
        }
        units *= 1.5;
        if units * alkalinity_per_unit.abs() > MOST_ADDED {
            return Ok(DoseOutcome::OutOfReach);
        }
    };
    let tolerance = 1e-9 * high.0;
    let units = root(&mut excess, low, high, tolerance)?;
    excess(units)?;
    let dosed = per_unit
        .times(DoseAmount::clamped(units))
        .added_to(water, Litres::constant(1.0));
    Ok(DoseOutcome::Reached(Dose {
        amount: units,
        after: what_is_left(&dosed, &equilibrium, constants),
    }))
}

fn kept(carbon_dioxide_lost: Fraction) -> Carbon {
    // All of it lost is as good as a trillionth left.
    Carbon::Kept {
        carbon_dioxide_weight: 1.0 / (1.0 - carbon_dioxide_lost.get()).max(1e-12),
    }
}

fn what_is_left(water: &Water, equilibrium: &Equilibrium, constants: &Constants) -> Degassed {
    let carbon = MmolPerL::clamped(1000.0 * equilibrium.carbon());
    let left = Water { carbon, ..*water };
    Degassed {
        speciation: Speciation::new(left, equilibrium, constants),
        carbon_lost: water.carbon - carbon,
    }
}
