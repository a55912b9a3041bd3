//! The dissolved ions a composition is made of.

use std::ops::{Index, IndexMut};

/// A dissolved ion that is followed through every mixture and addition.
///
/// Alkalinity and dissolved carbonate are not ions here: they are conserved
/// totals of their own, see [`Water`](crate::water::Water).
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Ion {
    /// Ca²⁺
    Calcium,
    /// Mg²⁺
    Magnesium,
    /// Na⁺
    Sodium,
    /// K⁺
    Potassium,
    /// NH₄⁺
    Ammonium,
    /// Fe²⁺
    Iron,
    /// Mn²⁺
    Manganese,
    /// SO₄²⁻
    Sulfate,
    /// Cl⁻
    Chloride,
    /// NO₃⁻
    Nitrate,
    /// NO₂⁻
    Nitrite,
    /// F⁻
    Fluoride,
    /// Total phosphate, as PO₄³⁻
    Phosphate,
    /// Total lactate, CH₃CH(OH)COO⁻
    Lactate,
    /// Total citrate, C₆H₅O₇³⁻
    Citrate,
}

impl Ion {
    /// Every ion, in the order reports usually print them.
    pub const ALL: [Self; 15] = [
        Self::Calcium,
        Self::Magnesium,
        Self::Sodium,
        Self::Potassium,
        Self::Ammonium,
        Self::Iron,
        Self::Manganese,
        Self::Sulfate,
        Self::Chloride,
        Self::Nitrate,
        Self::Nitrite,
        Self::Fluoride,
        Self::Phosphate,
        Self::Lactate,
        Self::Citrate,
    ];

    /// Molar mass, g/mol.
    ///
    /// Source: sums of IUPAC 2021 abridged standard atomic weights
    /// (`references::IUPAC_2021`).
    #[must_use]
    pub const fn grams_per_mol(self) -> f64 {
        match self {
            Self::Calcium => 40.078,
            Self::Magnesium => 24.305,
            Self::Sodium => 22.990,
            Self::Potassium => 39.098,
            Self::Ammonium => 18.039,
            Self::Iron => 55.845,
            Self::Manganese => 54.938,
            Self::Sulfate => 96.056,
            Self::Chloride => 35.45,
            Self::Nitrate => 62.004,
            Self::Nitrite => 46.005,
            Self::Fluoride => 18.998,
            Self::Phosphate => 94.970,
            Self::Lactate => 89.070,
            Self::Citrate => 189.098,
        }
    }

    /// Charge number as it counts in an ion balance of drinking water: the fully
    /// dissociated ion for strong acids, HPO₄²⁻/H₂PO₄⁻ being left to the engine.
    #[must_use]
    pub const fn charge(self) -> i8 {
        match self {
            Self::Calcium | Self::Magnesium | Self::Iron | Self::Manganese => 2,
            Self::Sodium | Self::Potassium | Self::Ammonium => 1,
            Self::Sulfate => -2,
            Self::Chloride | Self::Nitrate | Self::Nitrite | Self::Fluoride | Self::Lactate => -1,
            Self::Phosphate | Self::Citrate => -3,
        }
    }

    /// Name in words, lower case.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::Calcium => "calcium",
            Self::Magnesium => "magnesium",
            Self::Sodium => "sodium",
            Self::Potassium => "potassium",
            Self::Ammonium => "ammonium",
            Self::Iron => "iron",
            Self::Manganese => "manganese",
            Self::Sulfate => "sulfate",
            Self::Chloride => "chloride",
            Self::Nitrate => "nitrate",
            Self::Nitrite => "nitrite",
            Self::Fluoride => "fluoride",
            Self::Phosphate => "phosphate",
            Self::Lactate => "lactate",
            Self::Citrate => "citrate",
        }
    }

    /// Symbol with its charge.
    #[must_use]
    pub const fn symbol(self) -> &'static str {
        match self {
            Self::Calcium => "Ca²⁺",
            Self::Magnesium => "Mg²⁺",
            Self::Sodium => "Na⁺",
            Self::Potassium => "K⁺",
            Self::Ammonium => "NH₄⁺",
            Self::Iron => "Fe²⁺",
            Self::Manganese => "Mn²⁺",
            Self::Sulfate => "SO₄²⁻",
            Self::Chloride => "Cl⁻",
            Self::Nitrate => "NO₃⁻",
            Self::Nitrite => "NO₂⁻",
            Self::Fluoride => "F⁻",
            Self::Phosphate => "PO₄³⁻",
            Self::Lactate => "lactate⁻",
            Self::Citrate => "citrate³⁻",
        }
    }

    /// The ion with this name, as [`name`](Self::name) writes it.
    #[must_use]
    pub fn from_name(name: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|ion| ion.name() == name)
    }
}

/// One value for every ion.
#[derive(Clone, Copy, Debug, PartialEq, Default)]
pub struct IonMap<T>([T; Ion::ALL.len()]);

impl<T> IonMap<T> {
    /// A map filled by asking for each ion's value.
    pub fn from_fn(mut value: impl FnMut(Ion) -> T) -> Self {
        Self(std::array::from_fn(|i| value(Ion::ALL[i])))
    }

    /// Every ion with its value, in the order of [`Ion::ALL`].
    pub fn iter(&self) -> impl Iterator<Item = (Ion, &T)> {
        Ion::ALL.into_iter().zip(&self.0)
    }
}

impl<T> Index<Ion> for IonMap<T> {
    type Output = T;
    fn index(&self, ion: Ion) -> &T {
        &self.0[ion as usize]
    }
}

impl<T> IndexMut<Ion> for IonMap<T> {
    fn index_mut(&mut self, ion: Ion) -> &mut T {
        &mut self.0[ion as usize]
    }
}
