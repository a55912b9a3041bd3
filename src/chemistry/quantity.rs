//! Quantities, each named by its unit.
//!
//! A quantity is a finite number inside the range its unit can have. It is made
//! by [`new`](MgPerL::new), which checks, or by [`constant`](MgPerL::constant),
//! which refuses to compile a wrong value. Only products and sums that mean
//! something exist.

use std::fmt;
use std::ops::{Add, Div, Mul, Sub};

/// A number that its unit cannot have.
#[derive(Clone, Copy, Debug, PartialEq, thiserror::Error)]
#[error("{value} {unit} is outside {low} to {high} {unit}")]
pub struct OutOfRange {
    /// The number offered.
    pub value: f64,
    /// The unit it was offered in.
    pub unit: &'static str,
    /// Least value accepted.
    pub low: f64,
    /// Greatest value accepted.
    pub high: f64,
}

macro_rules! quantities {
    ($($(#[$doc:meta])* $name:ident, $unit:literal, $low:expr, $high:expr;)*) => {$(
        $(#[$doc])*
        #[derive(Clone, Copy, Debug, PartialEq, PartialOrd)]
        pub struct $name(f64);

        impl $name {
            /// The unit as it is printed.
            pub const UNIT: &'static str = $unit;
            /// Least value accepted.
            pub const LOW: f64 = $low;
            /// Greatest value accepted.
            pub const HIGH: f64 = $high;

            /// A checked value. Refuses NaN, infinities and values outside
            /// `LOW..=HIGH`.
            pub fn new(value: f64) -> Result<Self, OutOfRange> {
                if (Self::LOW..=Self::HIGH).contains(&value) {
                    Ok(Self(value))
                } else {
                    Err(OutOfRange { value, unit: $unit, low: $low, high: $high })
                }
            }

            /// A value known when we compile; a wrong one does not build when
            /// used in a `const`.
            #[must_use]
            pub const fn constant(value: f64) -> Self {
                assert!(value >= $low && value <= $high);
                Self(value)
            }

            /// The value nearest to `value` that this unit can have; NaN becomes
            /// the least. For results of a calculation, never for input.
            #[must_use]
            pub fn clamped(value: f64) -> Self {
                if value.is_nan() { Self($low) } else { Self(value.clamp($low, $high)) }
            }

            /// The number, in the unit of the type.
            #[must_use]
            pub const fn get(self) -> f64 {
                self.0
            }
        }

        impl fmt::Display for $name {
            fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
                self.0.fmt(f)?;
                if $unit.is_empty() { Ok(()) } else { write!(f, " {}", $unit) }
            }
        }
    )*};
}

quantities! {
    /// Mass concentration, mg/L of the ion or substance itself.
    MgPerL, "mg/L", 0.0, 500_000.0;
    /// Mass concentration expressed as calcium carbonate, mg/L as CaCO₃.
    MgPerLAsCaCO3, "mg/L as CaCO₃", -100_000.0, 500_000.0;
    /// Amount concentration, mmol/L.
    MmolPerL, "mmol/L", 0.0, 50_000.0;
    /// Ionic strength, mol per kg of water.
    MolPerKg, "mol/kg", 0.0, 50.0;
    /// Activity of a dissolved species, molal scale.
    Activity, "", 0.0, 100.0;
    /// Saturation index, log₁₀ of ion activity product over solubility product: above
    /// zero a mineral may precipitate, below it may dissolve.
    SaturationIndex, "", -1_000.0, 100.0;
    /// Partial pressure of a gas, atm.
    Atmospheres, "atm", 0.0, 10_000.0;
    /// Charge concentration, meq/L. Alkalinity may be negative (mineral acidity).
    MeqPerL, "meq/L", -50_000.0, 50_000.0;
    /// Charge (acid or base), meq. Positive means what the name in front of it says.
    Meq, "meq", -1e9, 1e9;
    /// Acid or base per mass of malt, meq/kg.
    MeqPerKg, "meq/kg", -100_000.0, 100_000.0;
    /// Buffering, meq per kg of grist and pH unit.
    MeqPerKgPh, "meq/(kg·pH)", 0.0, 10_000.0;
    /// Buffering of a wort, meq per litre and pH unit.
    MeqPerLPh, "meq/(L·pH)", 0.0, 10_000.0;
    /// Equivalents per mole: protons given, charge or alkalinity of one molecule.
    EqPerMol, "eq/mol", -10.0, 10.0;
    /// Strength of a liquid acid or base by titration, meq/mL.
    MeqPerMl, "meq/mL", 0.0, 60.0;
    /// Temperature, °C. Liquid water only.
    Celsius, "°C", -5.0, 110.0;
    /// pH on the activity scale.
    Ph, "", 0.0, 14.0;
    /// A difference between two pH values.
    PhShift, "", -14.0, 14.0;
    /// One standard deviation, relative to the figure it belongs to.
    RelativeSd, "", 0.0, 10.0;
    /// Buffering of a malt relative to an average pale malt.
    RelativeBuffering, "", 0.0, 20.0;
    /// Potential of an electrode, mV.
    Millivolts, "mV", -2_000.0, 2_000.0;
    /// How much a potential changes with pH, mV/pH; positive where it falls with rising pH.
    MillivoltsPerPh, "mV/pH", 0.0, 200.0;
    /// Slope of an electrode relative to the Nernst slope at its temperature, %. Negative
    /// where the potential rises with pH, which no sound electrode does.
    SlopePercent, "%", -300.0, 300.0;
    /// Time since something was done, or that a pack stands open, days.
    Days, "days", 0.0, 100_000.0;
    /// Time since strike or between readings, min.
    Minutes, "min", 0.0, 100_000.0;
    /// Volume, L.
    Litres, "L", 0.0, 10_000_000.0;
    /// Volume, mL.
    Millilitres, "mL", 0.0, 1e9;
    /// Mass, kg.
    Kilograms, "kg", 0.0, 1_000_000.0;
    /// Mass, g.
    Grams, "g", 0.0, 1e9;
    /// Mass of something dissolved, mg.
    Milligrams, "mg", 0.0, 1e12;
    /// Amount of substance, mmol.
    Millimoles, "mmol", 0.0, 1e9;
    /// Molar mass, g/mol.
    GramsPerMol, "g/mol", 1.0, 1_000.0;
    /// Strength of a liquid, grams of substance per litre of liquid.
    GramsPerLitre, "g/L", 0.0, 3_000.0;
    /// Amount of a material in the unit it is measured out in: g for a solid, mL
    /// for a liquid.
    DoseAmount, "g or mL", 0.0, 1e9;
    /// Density, g/mL.
    GramsPerMl, "g/mL", 0.5, 3.0;
    /// Drops of a drop-count kit.
    Drops, "drops", 0.0, 200.0;
    /// A share between nothing and all.
    Fraction, "", 0.0, 1.0;
    /// Mass of one ion per mass of another.
    MassRatio, "", 0.0, 1e6;
    /// How far something misses what was wished, relative to the wish, summed up.
    Score, "", 0.0, 1e12;
    /// Money, in the currency the brewery keeps its prices in.
    Cost, "", 0.0, 1e12;
    /// Price of water per litre, in the same currency.
    CostPerLitre, "per L", 0.0, 1e6;
    /// Price of a material per gram or millilitre, in the same currency.
    CostPerUnit, "per g or mL", 0.0, 1e6;
    /// Electrical conductivity, µS/cm.
    MicrosiemensPerCm, "µS/cm", 0.0, 200_000.0;
    /// Malt or wort colour, °L (Lovibond).
    Lovibond, "°L", 0.0, 1_000.0;
    /// Malt or wort colour, EBC.
    Ebc, "EBC", 0.0, 2_500.0;
}

/// Milligrams of CaCO₃ per milliequivalent: half of its molar mass, 100.0869 g/mol.
pub const MG_CACO3_PER_MEQ: f64 = 50.043_45;

impl From<MeqPerL> for MgPerLAsCaCO3 {
    fn from(value: MeqPerL) -> Self {
        Self::clamped(value.get() * MG_CACO3_PER_MEQ)
    }
}

impl From<MgPerLAsCaCO3> for MeqPerL {
    fn from(value: MgPerLAsCaCO3) -> Self {
        Self::clamped(value.get() / MG_CACO3_PER_MEQ)
    }
}

impl Mul<Litres> for MgPerL {
    type Output = Grams;
    fn mul(self, volume: Litres) -> Grams {
        Grams::clamped(self.get() * volume.get() / 1000.0)
    }
}

impl Div<Litres> for Grams {
    type Output = MgPerL;
    fn div(self, volume: Litres) -> MgPerL {
        MgPerL::clamped(self.get() * 1000.0 / volume.get())
    }
}

impl Mul<Millilitres> for GramsPerMl {
    type Output = Grams;
    fn mul(self, volume: Millilitres) -> Grams {
        Grams::clamped(self.get() * volume.get())
    }
}

impl Mul<Litres> for MeqPerL {
    type Output = Meq;
    fn mul(self, volume: Litres) -> Meq {
        Meq::clamped(self.get() * volume.get())
    }
}

macro_rules! sums {
    ($($name:ident)*) => {$(
        impl Add for $name {
            type Output = Self;
            fn add(self, other: Self) -> Self {
                Self::clamped(self.0 + other.0)
            }
        }
        impl Sub for $name {
            type Output = Self;
            /// Stops at the least value the unit can have.
            fn sub(self, other: Self) -> Self {
                Self::clamped(self.0 - other.0)
            }
        }
    )*};
}

sums! { MgPerL MmolPerL MeqPerL Meq MeqPerKg Litres Millilitres Kilograms Grams Milligrams Millimoles }

/// Standard deviations either side that hold ninety of a hundred, normal distribution.
/// Source: Φ⁻¹(0.95) = 1.645, any table.
pub const NINETY_PERCENT: f64 = 1.645;

/// A figure and how well it is known.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Estimate<T> {
    /// The best single figure.
    pub value: T,
    /// One standard deviation, in the unit of `T`.
    pub sd: f64,
}

impl<T> Estimate<T> {
    /// A figure known to within `sd` (one standard deviation, in the unit of `T`).
    pub const fn new(value: T, sd: f64) -> Self {
        Self { value, sd }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn not_a_number_and_infinity_are_no_quantities() {
        for bad in [f64::NAN, f64::INFINITY, f64::NEG_INFINITY, 1e308, -1.0] {
            assert!(MgPerL::new(bad).is_err(), "{bad}");
        }
    }

    #[test]
    fn a_german_degree_is_17_848_mg_of_calcium_carbonate() {
        // 1 °dH = 0.35665 meq/L by definition (10 mg CaO per litre, CaO 56.077 g/mol).
        let alkalinity: MgPerLAsCaCO3 = MeqPerL::constant(0.35665).into();
        assert!((alkalinity.get() - 17.848).abs() < 0.001);
    }
}
