//! The proton balance: what each part of a mash asks of acid at one pH.
//!
//! Positive means that acid must be added to reach the pH, negative that the part
//! brings more acid than it needs. At a fixed pH everything is linear in the
//! amounts: twice the liquor asks for twice the acid. Solvers rely on that.

use crate::ion::{Ion, IonMap};
use crate::material::{Contribution, PROTOLYTES, protons_kept};
use crate::quantity::{Estimate, Fraction, Kilograms, Meq, MeqPerKg, MeqPerL, Ph};
use crate::water::Water;

use super::BASIS;
use super::malt::{Behaviour, Malt};

/// pK of the first step of carbonic acid at 20 °C.
/// Source: [`PLUMMER_BUSENBERG_1982`](crate::references::PLUMMER_BUSENBERG_1982),
/// evaluated at 293.15 K.
const PK1: f64 = 6.3819;

/// −log₁₀ of the ion product of water at 20 °C. Source: from memory, 14.17.
const PKW: f64 = 14.17;

/// What happens in a mash that no analysis tells.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Settings {
    /// Equivalents of acid set free per equivalent of calcium.
    pub calcium_release: Estimate<Fraction>,
    /// Equivalents of acid set free per equivalent of magnesium. It errs together
    /// with calcium: one reaction, one doubt.
    pub magnesium_release: Estimate<Fraction>,
    /// Share of the carbon dioxide formed that escapes before the mash is read.
    pub carbon_dioxide_lost: Estimate<Fraction>,
}

impl Default for Settings {
    /// Calcium 0.35 ± 0.12 and magnesium half of it: fitted between the 1/3.5 and 1/7
    /// of [`KOLBACH_1953`](crate::references::KOLBACH_1953), made for cast wort, and
    /// the mash series of [`TAYLOR_1990`](crate::references::TAYLOR_1990). Half the
    /// carbon dioxide lost, usual range 0.2 to 0.9: assumed, no measurement found.
    fn default() -> Self {
        Self {
            calcium_release: Estimate::new(Fraction::constant(0.35), 0.12),
            magnesium_release: Estimate::new(Fraction::constant(0.175), 0.06),
            carbon_dioxide_lost: Estimate::new(Fraction::constant(0.5), 0.2),
        }
    }
}

/// A malt and how much of it, as-is weight.
#[derive(Clone, Debug, PartialEq)]
pub struct GristItem {
    /// Which malt.
    pub malt: Malt,
    /// How much.
    pub mass: Kilograms,
}

/// What everything asks of acid at one pH (cooled sample, 20 °C constants).
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Demand {
    ph: Ph,
    /// Share of dissolved carbon that is still bicarbonate, carbon lost included.
    bicarbonate_share: f64,
    /// OH⁻ − H⁺, meq/L.
    water_meq_per_l: f64,
    /// Protons kept by each mole of anion beyond the reference level, eq/mol.
    kept: IonMap<f64>,
    calcium_release: f64,
    magnesium_release: f64,
}

impl Demand {
    /// Prepares the coefficients for one pH.
    #[must_use]
    pub fn at(ph: Ph, settings: &Settings) -> Self {
        let ratio = (1.0 - settings.carbon_dioxide_lost.value.get()) * 10f64.powf(ph.get() - PK1);
        let mut kept = IonMap::from_fn(|_| 0.0);
        for acid in PROTOLYTES {
            kept[acid.anion()] = protons_kept(acid, ph, BASIS).get();
        }
        Self {
            ph,
            bicarbonate_share: ratio / (1.0 + ratio),
            water_meq_per_l: 1000.0 * (10f64.powf(ph.get() - PKW) - 10f64.powf(-ph.get())),
            kept,
            calcium_release: settings.calcium_release.value.get(),
            magnesium_release: settings.magnesium_release.value.get(),
        }
    }

    /// The pH everything is asked at.
    #[must_use]
    pub const fn ph(&self) -> Ph {
        self.ph
    }

    /// What one litre of liquor asks, calcium and magnesium included:
    /// [`alkalinity`](Self::alkalinity) − [`calcium_release`](Self::calcium_release).
    #[must_use]
    pub fn liquor(&self, water: &Water) -> MeqPerL {
        self.alkalinity(water) - self.calcium_release(water)
    }

    /// Alkalinity of one litre that is taken up on the way to this pH: all of it,
    /// less what is left as bicarbonate, hydroxide and the anions of weak acids.
    ///
    /// For natural water this is the known S(pH) = C f(pH of the water) + w(pH of the
    /// water) − C r/(1+r) − w(pH), because the first two terms are its
    /// alkalinity. An acid dose needs no term of its own: it has lowered the
    /// alkalinity by its full equivalents, and its anion here gives back what it
    /// keeps at this pH.
    #[must_use]
    pub fn alkalinity(&self, water: &Water) -> MeqPerL {
        let kept: f64 = PROTOLYTES
            .iter()
            .map(|acid| {
                let ion = acid.anion();
                water.mmol_per_l(ion).get() * self.kept[ion]
            })
            .sum();
        MeqPerL::clamped(
            water.alkalinity.get()
                - water.carbon.get() * self.bicarbonate_share
                - self.water_meq_per_l
                + kept,
        )
    }

    /// Acid that calcium and magnesium of one litre set free from malt phosphate.
    #[must_use]
    pub fn calcium_release(&self, water: &Water) -> MeqPerL {
        MeqPerL::clamped(
            2.0 * (self.calcium_release * water.mmol_per_l(Ion::Calcium).get()
                + self.magnesium_release * water.mmol_per_l(Ion::Magnesium).get()),
        )
    }

    /// What an addition to the mash asks: negative for acids, for calcium and for
    /// magnesium, positive for bases.
    #[must_use]
    pub fn contribution(&self, addition: &Contribution) -> Meq {
        let kept: f64 = PROTOLYTES
            .iter()
            .map(|acid| {
                let ion = acid.anion();
                addition.millimoles(ion).get() * self.kept[ion]
            })
            .sum();
        let released = 2.0
            * (self.calcium_release * addition.millimoles(Ion::Calcium).get()
                + self.magnesium_release * addition.millimoles(Ion::Magnesium).get());
        Meq::clamped(
            addition.alkalinity.get() - addition.carbon.get() * self.bicarbonate_share + kept
                - released,
        )
    }

    /// Share of added bicarbonate that is taken up on the way to this pH.
    pub(super) const fn share_taken_of_bicarbonate(&self) -> f64 {
        1.0 - self.bicarbonate_share
    }

    /// Acid set free per mmol of calcium or magnesium, meq.
    pub(super) const fn released_per_mmol(&self, ion: Ion) -> f64 {
        match ion {
            Ion::Calcium => 2.0 * self.calcium_release,
            Ion::Magnesium => 2.0 * self.magnesium_release,
            _ => 0.0,
        }
    }

    /// What one kilogram of a malt asks.
    #[must_use]
    pub fn malt(&self, behaviour: &Behaviour) -> MeqPerKg {
        behaviour.acid_demand(self.ph)
    }

    /// What a whole grist asks.
    #[must_use]
    pub fn grist(&self, grist: &[GristItem]) -> Meq {
        Meq::clamped(
            grist
                .iter()
                .map(|item| item.mass.get() * item.malt.behaviour.demand(self.ph.get()))
                .sum(),
        )
    }
}
