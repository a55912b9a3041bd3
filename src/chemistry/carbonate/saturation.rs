//! Equilibrium with what surrounds the water: a gas that holds carbon dioxide, and
//! solids that dissolve or precipitate.

use super::constants::Constants;
use super::equilibrium::{Carbon, Equilibrium, Totals};
use super::root::root;
use super::{CarbonateError, Mineral, Speciation};
use crate::ion::Ion;
use crate::quantity::{Atmospheres, MeqPerL, MgPerL, MmolPerL};
use crate::water::Water;

/// What happens to carbon dioxide.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Gas {
    /// None enters or leaves.
    Closed,
    /// A gas holds it at this pressure: it enters or leaves as needed.
    Open(Atmospheres),
}

/// A water in equilibrium with a solid.
#[derive(Clone, Debug)]
pub struct Saturated {
    /// The water.
    pub speciation: Speciation,
    /// How much of the solid dissolved.
    pub dissolved: MmolPerL,
    /// How much of the solid precipitated. One of the two is zero.
    pub precipitated: MmolPerL,
}

/// The water in equilibrium with a gas that holds carbon dioxide at this pressure
/// (fugacity). Alkalinity stays; carbon follows.
pub fn open_to(
    water: &Water,
    pco2: Atmospheres,
    constants: &Constants,
) -> Result<Speciation, CarbonateError> {
    let carbon = Carbon::Held {
        activity: pco2.get() * constants.henry,
    };
    let mut equilibrium = Equilibrium::new(Totals::of(water), carbon, constants);
    equilibrium.find_ph()?;
    let water = Water {
        carbon: MmolPerL::clamped(1000.0 * equilibrium.carbon()),
        ..*water
    };
    Ok(Speciation::new(water, &equilibrium, constants))
}

/// The water in equilibrium with a solid that may dissolve or precipitate freely,
/// however slow that may be in a tank.
///
/// Refused when 100 mmol/L dissolved do not saturate it, and where the water itself
/// cannot be calculated.
pub fn saturated(
    water: &Water,
    mineral: Mineral,
    gas: Gas,
    constants: &Constants,
) -> Result<Saturated, CarbonateError> {
    let speciate = |dissolved: f64| {
        let water = with_solid(water, mineral, dissolved);
        match gas {
            Gas::Closed => Speciation::of(&water, constants),
            Gas::Open(pco2) => open_to(&water, pco2, constants),
        }
    };
    let excess = |dissolved: f64| Ok(speciate(dissolved)?.ratio(mineral) - 1.0);
    let now = excess(0.0)?;
    let dissolved = if now < 0.0 {
        let mut high = 0.1;
        let mut above = excess(high)?;
        while above < 0.0 {
            high *= 2.0;
            if high > MOST_DISSOLVED {
                return Err(CarbonateError::Insatiable(mineral));
            }
            above = excess(high)?;
        }
        root(excess, (0.0, now), (high, above), 1e-9)?
    } else {
        // With a part all gone nothing is left to precipitate: the product is zero. So
        // it is where so much would have gone that the water had turned to acid.
        let excess = |dissolved: f64| match excess(dissolved) {
            Err(CarbonateError::BeyondPh(_)) => Ok(-1.0),
            found => found,
        };
        let all = -available(water, mineral, gas);
        root(excess, (all, -1.0), (0.0, now), 1e-9)?
    };
    Ok(Saturated {
        speciation: speciate(dissolved)?,
        dissolved: MmolPerL::clamped(dissolved),
        precipitated: MmolPerL::clamped(-dissolved),
    })
}

/// A solid that has not reached equilibrium with this much of it dissolved does not,
/// mmol/L.
const MOST_DISSOLVED: f64 = 100.0;

/// The most that could precipitate, mmol/L.
fn available(water: &Water, mineral: Mineral, gas: Gas) -> f64 {
    let calcium = water.mmol_per_l(Ion::Calcium).get();
    match (mineral, gas) {
        (Mineral::Calcite, Gas::Closed) => calcium.min(water.carbon.get()),
        (Mineral::Calcite, Gas::Open(_)) => calcium,
        (Mineral::Gypsum, _) => calcium.min(water.mmol_per_l(Ion::Sulfate).get()),
    }
}

/// The water with so many mmol/L of the solid dissolved in it, or taken out of it.
fn with_solid(water: &Water, mineral: Mineral, mmol_per_l: f64) -> Water {
    let mut water = *water;
    let mut add = |ion: Ion| {
        let mg = water.ions[ion].get() + mmol_per_l * ion.grams_per_mol();
        water.ions[ion] = MgPerL::clamped(mg);
    };
    add(Ion::Calcium);
    match mineral {
        Mineral::Calcite => {
            water.alkalinity = MeqPerL::clamped(water.alkalinity.get() + 2.0 * mmol_per_l);
            water.carbon = MmolPerL::clamped(water.carbon.get() + mmol_per_l);
        }
        Mineral::Gypsum => add(Ion::Sulfate),
    }
    water
}
