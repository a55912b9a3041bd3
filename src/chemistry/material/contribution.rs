//! What an addition brings into water, and what its anions do to protons.

use crate::acid::Acid;
use crate::ion::{Ion, IonMap};
use crate::quantity::{
    Celsius, DoseAmount, EqPerMol, Litres, Meq, MeqPerL, MgPerL, Milligrams, Millimoles, MmolPerL,
    Ph,
};
use crate::water::Water;

/// The unit a dose is measured out in.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum DoseUnit {
    /// Grams, for solids.
    Grams,
    /// Millilitres, for liquids.
    Millilitres,
}

impl DoseUnit {
    /// The unit as it is printed.
    #[must_use]
    pub const fn symbol(self) -> &'static str {
        match self {
            Self::Grams => "g",
            Self::Millilitres => "mL",
        }
    }
}

/// What an addition brings, in the conserved totals of [`Water`].
///
/// Contributions add up and scale: a dose of ten grams brings ten times one gram.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Contribution {
    /// Each ion, mg of the ion itself.
    pub ions: IonMap<Milligrams>,
    /// Alkalinity at the reference level of [`Water::alkalinity`]; negative for acids.
    pub alkalinity: Meq,
    /// Inorganic carbon.
    pub carbon: Millimoles,
}

impl Contribution {
    /// Nothing at all.
    #[must_use]
    pub fn nothing() -> Self {
        Self {
            ions: IonMap::from_fn(|_| Milligrams::constant(0.0)),
            alkalinity: Meq::constant(0.0),
            carbon: Millimoles::constant(0.0),
        }
    }

    /// So much of a pure acid.
    #[must_use]
    pub fn of_acid(acid: Acid, amount: Millimoles) -> Self {
        let mut new = Self::nothing();
        let anion = acid.anion();
        new.ions[anion] = Milligrams::clamped(amount.get() * anion.grams_per_mol());
        new.alkalinity = Meq::clamped(-amount.get() * acid.alkalinity_destroyed().get());
        new
    }

    /// This contribution, `amount` times.
    #[must_use]
    pub fn times(&self, amount: DoseAmount) -> Self {
        let amount = amount.get();
        Self {
            ions: IonMap::from_fn(|ion| Milligrams::clamped(self.ions[ion].get() * amount)),
            alkalinity: Meq::clamped(self.alkalinity.get() * amount),
            carbon: Millimoles::clamped(self.carbon.get() * amount),
        }
    }

    /// Both together.
    #[must_use]
    pub fn plus(&self, other: &Self) -> Self {
        Self {
            ions: IonMap::from_fn(|ion| self.ions[ion] + other.ions[ion]),
            alkalinity: self.alkalinity + other.alkalinity,
            carbon: self.carbon + other.carbon,
        }
    }

    /// Amount of an ion.
    #[must_use]
    pub fn millimoles(&self, ion: Ion) -> Millimoles {
        Millimoles::clamped(self.ions[ion].get() / ion.grams_per_mol())
    }

    /// Acid given to water at this pH, ideal constants: what lactate, phosphate,
    /// citrate and sulfate do not keep for themselves. Negative for a base.
    ///
    /// Carbonate is left out, because how much of it acts depends on the carbon
    /// dioxide that escapes: the mash and the carbonate engine count it.
    #[must_use]
    pub fn acid_meq(&self, ph: Ph, temperature: Celsius) -> Meq {
        let kept: f64 = PROTOLYTES
            .iter()
            .map(|&acid| {
                self.millimoles(acid.anion()).get() * protons_kept(acid, ph, temperature).get()
            })
            .sum();
        Meq::clamped(-self.alkalinity.get() - kept)
    }

    /// The water after this was stirred into `volume` of it. The volume of the
    /// addition itself is neglected.
    #[must_use]
    pub fn added_to(&self, water: &Water, volume: Litres) -> Water {
        let litres = volume.get();
        if litres <= 0.0 {
            return *water;
        }
        Water {
            ions: IonMap::from_fn(|ion| {
                MgPerL::clamped(water.ions[ion].get() + self.ions[ion].get() / litres)
            }),
            alkalinity: MeqPerL::clamped(water.alkalinity.get() + self.alkalinity.get() / litres),
            carbon: MmolPerL::clamped(water.carbon.get() + self.carbon.get() / litres),
        }
    }
}

/// The acids whose anions hold protons back somewhere between pH 3 and 9.
pub(crate) const PROTOLYTES: [Acid; 4] =
    [Acid::Lactic, Acid::Phosphoric, Acid::Citric, Acid::Sulfuric];

/// Protons one mole of this acid's anion holds at `ph`, beyond those it holds at
/// the reference level of [`Water::alkalinity`]; negative when it has given up
/// more (HPO₄²⁻).
pub(crate) fn protons_kept(acid: Acid, ph: Ph, temperature: Celsius) -> EqPerMol {
    EqPerMol::clamped(
        acid.alkalinity_destroyed().get() - acid.protons_released(ph, temperature).get(),
    )
}
