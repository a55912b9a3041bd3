//! What is dissolved, one species at a time, and what each is made of.
//!
//! Every species forms from at most one cation and one anion of the list below,
//! protons and water. The solver rests on that.

use super::activity::Class;

/// Cations that pair. Their order is that of the solver's arrays.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Cation {
    Calcium,
    Magnesium,
    Sodium,
    Potassium,
    /// For what holds no cation; its amount is one.
    None,
}

/// Anions that pair or take up protons.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Anion {
    Sulfate,
    Carbonate,
    Phosphate,
    Lactate,
    Citrate,
    /// For what holds no anion; its amount is one.
    None,
}

/// Length of the solver's arrays, the `None` at the end included.
pub(super) const CATIONS: usize = 5;
pub(super) const ANIONS: usize = 6;

/// How one species is made.
#[derive(Clone, Copy, Debug)]
pub(super) struct Formation {
    pub(super) cation: Cation,
    pub(super) anion: Anion,
    /// Protons taken up; negative when given away.
    pub(super) protons: i8,
    /// Molecules of water taken up; negative when set free.
    pub(super) water: i8,
    pub(super) class: Class,
}

impl Formation {
    /// Equivalents of alkalinity per mole, at the reference level H⁺, CO₂, H₂PO₄⁻,
    /// SO₄²⁻, lactate⁻, citrate³⁻.
    pub(super) const fn alkalinity(&self) -> i8 {
        let base = match self.anion {
            Anion::Carbonate | Anion::Phosphate => 2,
            _ => 0,
        };
        base - self.protons
    }

    pub(super) const fn charge(&self) -> i8 {
        let cation = match self.cation {
            Cation::Calcium | Cation::Magnesium => 2,
            Cation::Sodium | Cation::Potassium => 1,
            Cation::None => 0,
        };
        let anion = match self.anion {
            Anion::Sulfate | Anion::Carbonate => -2,
            Anion::Phosphate | Anion::Citrate => -3,
            Anion::Lactate => -1,
            Anion::None => 0,
        };
        cation + anion + self.protons
    }
}

macro_rules! species {
    ($($(#[$doc:meta])* $name:ident $symbol:literal, $cation:expr, $anion:expr, $protons:literal, $water:literal, $class:ident;)*) => {
        /// A dissolved species that reacts: H⁺ and OH⁻, the free ions that pair or
        /// take up protons, and everything they form.
        ///
        /// Ammonium, iron, manganese, chloride, nitrate, nitrite and fluoride react
        /// with nothing here and stay as they are.
        #[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
        pub enum Species {$($(#[$doc])* $name,)*}

        impl Species {
            /// Every species.
            pub const ALL: [Self; FORMATIONS.len()] = [$(Self::$name,)*];

            /// Formula with its charge.
            #[must_use]
            pub const fn symbol(self) -> &'static str {
                match self {$(Self::$name => $symbol,)*}
            }
        }

        /// How each species forms, in the order of [`Species::ALL`].
        pub(super) const FORMATIONS: [Formation; [$($symbol),*].len()] = [$(Formation {
            cation: $cation,
            anion: $anion,
            protons: $protons,
            water: $water,
            class: Class::$class,
        },)*];
    };
}

const CA: Cation = Cation::Calcium;
const MG: Cation = Cation::Magnesium;
const NA: Cation = Cation::Sodium;
const K: Cation = Cation::Potassium;
const SO4: Anion = Anion::Sulfate;
const CO3: Anion = Anion::Carbonate;
const PO4: Anion = Anion::Phosphate;
const LAC: Anion = Anion::Lactate;
const CIT: Anion = Anion::Citrate;
const NO_C: Cation = Cation::None;
const NO_A: Anion = Anion::None;

species! {
    /// H⁺
    Hydrogen "H⁺", NO_C, NO_A, 1, 0, Hydrogen;
    /// OH⁻
    Hydroxide "OH⁻", NO_C, NO_A, -1, 1, Hydroxide;
    /// Ca²⁺
    Calcium "Ca²⁺", CA, NO_A, 0, 0, Calcium;
    /// CaOH⁺
    CalciumHydroxide "CaOH⁺", CA, NO_A, -1, 1, Davies1;
    /// Mg²⁺
    Magnesium "Mg²⁺", MG, NO_A, 0, 0, Magnesium;
    /// MgOH⁺
    MagnesiumHydroxide "MgOH⁺", MG, NO_A, -1, 1, MagnesiumHydroxide;
    /// Na⁺
    Sodium "Na⁺", NA, NO_A, 0, 0, Sodium;
    /// K⁺
    Potassium "K⁺", K, NO_A, 0, 0, Potassium;
    /// SO₄²⁻
    Sulfate "SO₄²⁻", NO_C, SO4, 0, 0, Sulfate;
    /// HSO₄⁻
    HydrogenSulfate "HSO₄⁻", NO_C, SO4, 1, 0, Davies1;
    /// CaSO₄
    CalciumSulfate "CaSO₄", CA, SO4, 0, 0, Neutral;
    /// CaHSO₄⁺
    CalciumHydrogenSulfate "CaHSO₄⁺", CA, SO4, 1, 0, Davies1;
    /// MgSO₄
    MagnesiumSulfate "MgSO₄", MG, SO4, 0, 0, Neutral;
    /// NaSO₄⁻
    SodiumSulfate "NaSO₄⁻", NA, SO4, 0, 0, Wide1;
    /// KSO₄⁻
    PotassiumSulfate "KSO₄⁻", K, SO4, 0, 0, Wide1;
    /// CO₃²⁻
    Carbonate "CO₃²⁻", NO_C, CO3, 0, 0, Wide2;
    /// HCO₃⁻
    Bicarbonate "HCO₃⁻", NO_C, CO3, 1, 0, Wide1;
    /// CO₂, hydrated or not
    CarbonDioxide "CO₂", NO_C, CO3, 2, -1, Neutral;
    /// CaCO₃, dissolved
    CalciumCarbonate "CaCO₃", CA, CO3, 0, 0, Neutral;
    /// CaHCO₃⁺
    CalciumBicarbonate "CaHCO₃⁺", CA, CO3, 1, 0, CalciumBicarbonate;
    /// MgCO₃
    MagnesiumCarbonate "MgCO₃", MG, CO3, 0, 0, Neutral;
    /// MgHCO₃⁺
    MagnesiumBicarbonate "MgHCO₃⁺", MG, CO3, 1, 0, Middle1;
    /// NaCO₃⁻
    SodiumCarbonate "NaCO₃⁻", NA, CO3, 0, 0, Davies1;
    /// NaHCO₃
    SodiumBicarbonate "NaHCO₃", NA, CO3, 1, 0, Neutral;
    /// PO₄³⁻
    Phosphate "PO₄³⁻", NO_C, PO4, 0, 0, Middle3;
    /// HPO₄²⁻
    HydrogenPhosphate "HPO₄²⁻", NO_C, PO4, 1, 0, HydrogenPhosphate;
    /// H₂PO₄⁻
    DihydrogenPhosphate "H₂PO₄⁻", NO_C, PO4, 2, 0, Wide1;
    /// H₃PO₄
    PhosphoricAcid "H₃PO₄", NO_C, PO4, 3, 0, Neutral;
    /// CaPO₄⁻
    CalciumPhosphate "CaPO₄⁻", CA, PO4, 0, 0, Wide1;
    /// CaHPO₄
    CalciumHydrogenPhosphate "CaHPO₄", CA, PO4, 1, 0, Neutral;
    /// CaH₂PO₄⁺
    CalciumDihydrogenPhosphate "CaH₂PO₄⁺", CA, PO4, 2, 0, Wide1;
    /// MgPO₄⁻
    MagnesiumPhosphate "MgPO₄⁻", MG, PO4, 0, 0, Wide1;
    /// MgHPO₄
    MagnesiumHydrogenPhosphate "MgHPO₄", MG, PO4, 1, 0, Neutral;
    /// MgH₂PO₄⁺
    MagnesiumDihydrogenPhosphate "MgH₂PO₄⁺", MG, PO4, 2, 0, Wide1;
    /// NaHPO₄⁻
    SodiumHydrogenPhosphate "NaHPO₄⁻", NA, PO4, 1, 0, Wide1;
    /// KHPO₄⁻
    PotassiumHydrogenPhosphate "KHPO₄⁻", K, PO4, 1, 0, Wide1;
    /// Lactate
    Lactate "lactate⁻", NO_C, LAC, 0, 0, Davies1;
    /// Undissociated lactic acid
    LacticAcid "H-lactate", NO_C, LAC, 1, 0, Neutral;
    /// Citrate
    Citrate "citrate³⁻", NO_C, CIT, 0, 0, Davies3;
    /// Citrate with one proton
    HydrogenCitrate "H-citrate²⁻", NO_C, CIT, 1, 0, Davies2;
    /// Citrate with two protons
    DihydrogenCitrate "H₂-citrate⁻", NO_C, CIT, 2, 0, Davies1;
    /// Undissociated citric acid
    CitricAcid "H₃-citrate", NO_C, CIT, 3, 0, Neutral;
    /// Calcium citrate
    CalciumCitrate "Ca-citrate⁻", CA, CIT, 0, 0, Davies1;
    /// Calcium citrate with one proton
    CalciumHydrogenCitrate "CaH-citrate", CA, CIT, 1, 0, Neutral;
    /// Calcium citrate with two protons
    CalciumDihydrogenCitrate "CaH₂-citrate⁺", CA, CIT, 2, 0, Davies1;
    /// Magnesium citrate
    MagnesiumCitrate "Mg-citrate⁻", MG, CIT, 0, 0, Davies1;
    /// Magnesium citrate with one proton
    MagnesiumHydrogenCitrate "MgH-citrate", MG, CIT, 1, 0, Neutral;
    /// Magnesium citrate with two protons
    MagnesiumDihydrogenCitrate "MgH₂-citrate⁺", MG, CIT, 2, 0, Davies1;
}

impl Species {
    /// Charge number.
    #[must_use]
    pub const fn charge(self) -> i8 {
        self.formation().charge()
    }

    pub(super) const fn formation(self) -> &'static Formation {
        &FORMATIONS[self as usize]
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_charge_of_a_class_is_the_charge_of_its_species() {
        for species in Species::ALL {
            let class = species.formation().class;
            assert_eq!(
                f64::from(species.charge()).abs(),
                class.charge(),
                "{}",
                species.symbol()
            );
        }
    }

    #[test]
    fn a_symbol_shows_the_charge_of_its_species() {
        for species in Species::ALL {
            let sign = |mark| species.symbol().matches(mark).count() as i8;
            let size = match species.symbol() {
                s if s.contains('³') => 3,
                s if s.contains('²') => 2,
                _ => 1,
            };
            assert_eq!(
                species.charge(),
                size * (sign('⁺') - sign('⁻')),
                "{}",
                species.symbol()
            );
        }
    }
}
