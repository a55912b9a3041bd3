//! The composition of a water.

use crate::ion::{Ion, IonMap};
use crate::quantity::{Celsius, Litres, MeqPerL, MgPerL, MgPerLAsCaCO3, MmolPerL, Ph};

/// What is dissolved in a water, as totals that are conserved when waters are
/// mixed, heated in a closed vessel, or given salts and acids.
///
/// One litre counts as one kilogram of water. The pH is not stored: it follows
/// from these totals and a temperature, see the carbonate engine.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Water {
    /// Each ion, mg/L of the ion itself.
    pub ions: IonMap<MgPerL>,
    /// Total alkalinity without an end point (reference level H⁺, CO₂, H₂PO₄⁻,
    /// SO₄²⁻, lactate⁻, citrate³⁻), meq/L. Negative when free mineral acid is left.
    pub alkalinity: MeqPerL,
    /// Dissolved inorganic carbon, CO₂ + HCO₃⁻ + CO₃²⁻ and their ion pairs, mmol/L.
    pub carbon: MmolPerL,
}

impl Water {
    /// Water with nothing in it.
    #[must_use]
    pub fn pure() -> Self {
        Self {
            ions: IonMap::from_fn(|_| MgPerL::constant(0.0)),
            alkalinity: MeqPerL::constant(0.0),
            carbon: MmolPerL::constant(0.0),
        }
    }

    /// These waters together, in a closed vessel: totals add up by volume. Pure water
    /// when there is no volume at all.
    #[must_use]
    pub fn mixed(parts: &[(Self, Litres)]) -> Self {
        let litres: f64 = parts.iter().map(|(_, volume)| volume.get()).sum();
        if litres <= 0.0 {
            return Self::pure();
        }
        let mean = |total: &dyn Fn(&Self) -> f64| {
            let sum: f64 = parts
                .iter()
                .map(|(water, volume)| total(water) * volume.get())
                .sum();
            sum / litres
        };
        Self {
            ions: IonMap::from_fn(|ion| MgPerL::clamped(mean(&|water| water.ions[ion].get()))),
            alkalinity: MeqPerL::clamped(mean(&|water| water.alkalinity.get())),
            carbon: MmolPerL::clamped(mean(&|water| water.carbon.get())),
        }
    }

    /// Total alkalinity, mg/L as CaCO₃.
    #[must_use]
    pub fn alkalinity_as_caco3(&self) -> MgPerLAsCaCO3 {
        self.alkalinity.into()
    }

    /// Amount of an ion, mmol/L.
    #[must_use]
    pub fn mmol_per_l(&self, ion: Ion) -> MmolPerL {
        MmolPerL::clamped(self.ions[ion].get() / ion.grams_per_mol())
    }
}

/// A water as it was measured: what [`Water`] holds, but with the pH that was
/// read instead of the carbon that follows from it.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct MeasuredWater {
    /// Each ion, mg/L of the ion itself.
    pub ions: IonMap<MgPerL>,
    /// Total alkalinity as titrated, mg/L as CaCO₃.
    pub alkalinity: MgPerLAsCaCO3,
    /// pH read at `temperature`.
    pub ph: Ph,
    /// Temperature of the pH reading.
    pub temperature: Celsius,
}
