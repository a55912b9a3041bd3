//! The pH of a mash, and how surely it is known.
//!
//! A mash settles where nothing in it asks for acid any more: the malts, the
//! alkalinity of the liquor, the acid its calcium sets free and whatever was added
//! balance. Start with [`MashInputs`]; [`balance`] holds what each part asks,
//! [`malt`] and [`class`] the malts, [`interval`] the doubt, [`titration`] the bench.
//!
//! Every pH here is that of a sample cooled to 20 °C, and every constant belongs to
//! 20 °C. The form of the balance is published
//! ([`DELANGE_2015`](crate::references::DELANGE_2015)); the figures for malt are thin.

pub mod balance;
pub mod class;
pub mod interval;
pub mod malt;
pub mod titration;

pub use balance::{Demand, GristItem, Settings};
pub use class::MaltClass;
pub use interval::{Influence, InfluenceKind};
pub use malt::{Behaviour, Groups, Malt, Taylor};

use crate::material::{Contribution, Material};
use crate::quantity::{
    Celsius, DoseAmount, Estimate, Kilograms, Litres, Meq, MeqPerKgPh, MeqPerL, MgPerL, Ph,
    PhShift, RelativeSd,
};
use crate::water::Water;

/// The temperature every pH and constant here belongs to.
pub const BASIS: Celsius = Celsius::constant(20.0);

/// A mash is looked for between these pH values.
const LOWEST: f64 = 3.0;
const HIGHEST: f64 = 9.0;

/// Something added to the mash, or the part of a liquor-tank dose that reaches it.
#[derive(Clone, Debug, PartialEq)]
pub struct Addition {
    /// What the brewery calls it, with the lot where there is one.
    pub name: String,
    /// What all of it brings.
    pub brings: Contribution,
    /// One standard deviation of its strength, relative to the strength.
    pub relative_sd: RelativeSd,
}

impl Addition {
    /// This much of a material.
    #[must_use]
    pub fn of(name: impl Into<String>, material: &Material, amount: DoseAmount) -> Self {
        Self {
            name: name.into(),
            brings: material.contribution(amount),
            relative_sd: material.relative_sd(),
        }
    }
}

/// How well the liquor is known, one standard deviation each.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct LiquorDoubt {
    /// Of its alkalinity.
    pub alkalinity: MeqPerL,
    /// Of its calcium.
    pub calcium: MgPerL,
    /// Of its magnesium.
    pub magnesium: MgPerL,
}

impl LiquorDoubt {
    /// No doubt at all.
    pub const NONE: Self = Self {
        alkalinity: MeqPerL::constant(0.0),
        calcium: MgPerL::constant(0.0),
        magnesium: MgPerL::constant(0.0),
    };
}

/// Everything the pH of a mash depends on.
#[derive(Clone, Debug, PartialEq)]
pub struct MashInputs {
    /// The malts.
    pub grist: Vec<GristItem>,
    /// The liquor before `additions`; what is dissolved in it counts per litre.
    pub liquor: Water,
    /// How well the liquor is known.
    pub liquor_doubt: LiquorDoubt,
    /// Liquor in the mash.
    pub volume: Estimate<Litres>,
    /// What is added to it, acids included. Of a dose in the liquor tank give the
    /// share that goes to the mash, and leave it out of `liquor`.
    pub additions: Vec<Addition>,
    /// What happens in a mash that no analysis tells.
    pub settings: Settings,
    /// How far this brewery's mashes have settled above what the balance says.
    pub offset: Estimate<PhShift>,
}

/// Why a mash has no pH to predict.
#[derive(Clone, Copy, Debug, PartialEq, Eq, thiserror::Error)]
pub enum MashError {
    /// The malts weigh nothing together.
    #[error("The grist weighs nothing: enter at least one malt with its mass.")]
    NoGrist,
    /// There is no liquor.
    #[error("The mash has no liquor: enter its volume.")]
    NoLiquor,
    /// The balance holds nowhere between pH 3 and 9.
    #[error(
        "No pH between 3 and 9 balances this mash: check the amounts of acid and base and the alkalinity."
    )]
    OutsideScale,
    /// The material pushes the other way.
    #[error("This material moves the pH away from the target.")]
    WrongDirection,
}

/// The pH a mash will settle at.
#[derive(Clone, Debug, PartialEq)]
pub struct MashPrediction {
    /// pH of a cooled sample, with its standard deviation.
    pub ph: Estimate<Ph>,
    /// Ninety times in a hundred the mash lies between these, as far as its inputs
    /// are known as well as they say.
    pub interval: (Ph, Ph),
    /// Acid the mash takes up per kg of grist and pH unit, where it settles.
    pub buffering: MeqPerKgPh,
    /// What the doubt consists of, greatest share first.
    pub influences: Vec<Influence>,
}

impl MashInputs {
    /// Predicts the pH and its interval.
    pub fn predict(&self) -> Result<MashPrediction, MashError> {
        let balanced = self.settle()?;
        let slope = self.slope(balanced);
        let influences = interval::influences(self, balanced, slope);
        let sd = interval::combined_sd(&influences);
        let ph = balanced + self.offset.value.get();
        let reach = interval::NINETY_PERCENT * sd;
        Ok(MashPrediction {
            ph: Estimate::new(Ph::clamped(ph), sd),
            interval: (Ph::clamped(ph - reach), Ph::clamped(ph + reach)),
            buffering: MeqPerKgPh::clamped(slope / self.grist_mass().get()),
            influences,
        })
    }

    /// Acid that must still be added for the mash to settle at `target`; negative
    /// where it takes base.
    pub fn acid_demand(&self, target: Ph) -> Result<Meq, MashError> {
        self.check()?;
        Ok(Meq::clamped(self.total(self.balanced_for(target))))
    }

    /// Acid that an addition gives this mash at `target`; negative for a base.
    #[must_use]
    pub fn acid_given(&self, target: Ph, brings: &Contribution) -> Meq {
        let demand = self.asks(self.balanced_for(target));
        Meq::clamped(-demand.contribution(brings).get())
    }

    /// How much of a material brings the mash to `target`. It is exact, not
    /// iterated, because the balance is linear at a fixed pH.
    pub fn dose_for(&self, target: Ph, material: &Material) -> Result<DoseAmount, MashError> {
        self.check()?;
        let at = self.balanced_for(target);
        let demand = self.total(at);
        let per_unit = self.asks(at).contribution(&material.per_unit()).get();
        let amount = -demand / per_unit;
        if amount.is_finite() && amount >= 0.0 {
            Ok(DoseAmount::clamped(amount))
        } else {
            Err(MashError::WrongDirection)
        }
    }

    /// Acid the whole mash takes up per kg of grist and pH unit at `ph`, liquor
    /// included.
    pub fn buffering(&self, ph: Ph) -> Result<MeqPerKgPh, MashError> {
        self.check()?;
        let slope = self.slope(self.balanced_for(ph));
        Ok(MeqPerKgPh::clamped(slope / self.grist_mass().get()))
    }

    /// All malts together.
    #[must_use]
    pub fn grist_mass(&self) -> Kilograms {
        Kilograms::clamped(self.grist.iter().map(|item| item.mass.get()).sum())
    }

    /// The pH on the balance's own scale, before what the brewery has learned.
    fn balanced_for(&self, ph: Ph) -> f64 {
        ph.get() - self.offset.value.get()
    }

    fn check(&self) -> Result<(), MashError> {
        if self.grist_mass().get() <= 0.0 {
            Err(MashError::NoGrist)
        } else if self.volume.value.get() <= 0.0 {
            Err(MashError::NoLiquor)
        } else {
            Ok(())
        }
    }

    fn asks(&self, ph: f64) -> Demand {
        Demand::at(Ph::clamped(ph), &self.settings)
    }

    /// Acid asked for by everything together, meq. Falls with rising pH.
    fn total(&self, ph: f64) -> f64 {
        let demand = self.asks(ph);
        let added: f64 = self
            .additions
            .iter()
            .map(|addition| demand.contribution(&addition.brings).get())
            .sum();
        demand.grist(&self.grist).get()
            + self.volume.value.get() * demand.liquor(&self.liquor).get()
            + added
    }

    /// How fast it falls, meq per pH unit.
    fn slope(&self, ph: f64) -> f64 {
        let step = 1e-4; // pH; every curve is smooth on that scale
        (self.total(ph - step) - self.total(ph + step)) / (2.0 * step)
    }

    /// Where nothing asks for acid any more, by bisection to 1e-9: the total falls
    /// steadily, so there is one such pH and it cannot be missed.
    fn settle(&self) -> Result<f64, MashError> {
        self.check()?;
        let (mut low, mut high) = (LOWEST, HIGHEST);
        if self.total(low) < 0.0 || self.total(high) > 0.0 {
            return Err(MashError::OutsideScale);
        }
        while high - low > 1e-9 {
            let middle = f64::midpoint(low, high);
            if self.total(middle) > 0.0 {
                low = middle;
            } else {
                high = middle;
            }
        }
        Ok(f64::midpoint(low, high))
    }
}
