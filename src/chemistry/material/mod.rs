//! Salts, bases and acids as the shelf holds them, and what one gram or one
//! millilitre of each brings into water.
//!
//! A [`Substance`] is fixed chemistry. A [`Material`] adds what the label and the
//! certificate say: strength, density, assay. From both follows a
//! [`Contribution`], and everything a dose does is that contribution times the
//! amount.

mod cautions;
mod contribution;
mod substance;

pub use cautions::SAFETY_DATA_SHEET;
pub use contribution::{Contribution, DoseUnit};
pub(crate) use contribution::{PROTOLYTES, protons_kept};
pub use substance::{Form, Role, Substance, Vessel};

use crate::ion::{Ion, IonMap};
use crate::quantity::{
    DoseAmount, Estimate, Fraction, GramsPerLitre, GramsPerMl, Meq, MeqPerMl, Milligrams,
    Millimoles, RelativeSd,
};

/// How strong a liquid is, in the terms of its label.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Strength {
    /// Share of the weight (% w/w), with the density of that strength.
    WeightPercent {
        /// Grams of substance per gram of liquid.
        share: Fraction,
        /// Density of the liquid.
        density: GramsPerMl,
    },
    /// Grams of substance per litre of liquid (% w/v times ten).
    WeightPerVolume(GramsPerLitre),
    /// A blended mineral acid by its titrated strength.
    Titrated {
        /// Acid by titration.
        acid: MeqPerMl,
        /// Share of those equivalents that is hydrochloric acid; the rest is
        /// sulfuric acid.
        chloride_share: Fraction,
    },
}

/// A substance as the shelf holds it.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Material {
    substance: Substance,
    strength: Option<Strength>,
    assay: Estimate<Fraction>,
}

/// A material that cannot be described so.
#[derive(Clone, Copy, Debug, PartialEq, Eq, thiserror::Error)]
pub enum MaterialError {
    /// A solid was given a strength.
    #[error("{} is weighed as a solid and has an assay, not a strength.", .0.name())]
    SolidWithStrength(Substance),
    /// A liquid without one.
    #[error("{} is a liquid and needs its strength.", .0.name())]
    LiquidWithoutStrength(Substance),
    /// A titrated strength for anything but a blended acid, or a blended acid
    /// without one.
    #[error(
        "A titrated strength with its chloride share belongs to a blended acid, and a blended acid needs one."
    )]
    TitratedStrength,
    /// A strength of nothing, or more substance than liquid.
    #[error("The strength of {} must be more than nothing and no more than the liquid itself weighs.", .0.name())]
    ImpossibleStrength(Substance),
}

impl Material {
    /// A weighed solid, `assay` being the share of its weight that is the
    /// substance with its stated water of crystallisation.
    pub fn solid(substance: Substance, assay: Estimate<Fraction>) -> Result<Self, MaterialError> {
        match substance.form() {
            Form::Liquid => Err(MaterialError::LiquidWithoutStrength(substance)),
            Form::Solid => Ok(Self {
                substance,
                strength: None,
                assay,
            }),
        }
    }

    /// A liquid of this strength, `assay` being what it holds over what its
    /// label says.
    pub fn liquid(
        substance: Substance,
        strength: Strength,
        assay: Estimate<Fraction>,
    ) -> Result<Self, MaterialError> {
        if substance.form() == Form::Solid {
            return Err(MaterialError::SolidWithStrength(substance));
        }
        let titrated = matches!(strength, Strength::Titrated { .. });
        if titrated != (substance == Substance::BlendedAcid) {
            return Err(MaterialError::TitratedStrength);
        }
        // No liquid on the list reaches 3 g/mL, the limit of a density.
        let possible = match strength {
            Strength::WeightPercent { share, .. } => share.get() > 0.0,
            Strength::WeightPerVolume(grams) => {
                grams.get() > 0.0 && grams.get() <= 1000.0 * GramsPerMl::HIGH
            }
            Strength::Titrated { acid, .. } => acid.get() > 0.0,
        };
        if !possible {
            return Err(MaterialError::ImpossibleStrength(substance));
        }
        Ok(Self {
            substance,
            strength: Some(strength),
            assay,
        })
    }

    /// The substance at its usual strength and assay. `None` for a blended acid,
    /// whose strength only its certificate knows.
    #[must_use]
    pub fn usual(substance: Substance) -> Option<Self> {
        let strength = match substance.form() {
            Form::Solid => None,
            Form::Liquid => {
                let (share, density) = substance.default_strength()?;
                Some(Strength::WeightPercent { share, density })
            }
        };
        Some(Self {
            substance,
            strength,
            assay: substance.default_assay(),
        })
    }

    /// What it is.
    #[must_use]
    pub const fn substance(&self) -> Substance {
        self.substance
    }

    /// How strong, for a liquid.
    #[must_use]
    pub const fn strength(&self) -> Option<Strength> {
        self.strength
    }

    /// Share that is the substance, and how surely.
    #[must_use]
    pub const fn assay(&self) -> Estimate<Fraction> {
        self.assay
    }

    /// Whether it is measured in grams or in millilitres.
    #[must_use]
    pub const fn unit(&self) -> DoseUnit {
        match self.substance.form() {
            Form::Solid => DoseUnit::Grams,
            Form::Liquid => DoseUnit::Millilitres,
        }
    }

    /// How uncertain its effect is, relative to the effect (one standard
    /// deviation): assay and efficiency together.
    #[must_use]
    pub fn relative_sd(&self) -> RelativeSd {
        let efficiency = self.substance.efficiency();
        let relative = |estimate: Estimate<Fraction>| {
            if estimate.value.get() > 0.0 {
                estimate.sd / estimate.value.get()
            } else {
                0.0
            }
        };
        RelativeSd::clamped(relative(self.assay).hypot(relative(efficiency)))
    }

    /// What one gram or one millilitre holds, were all of it to act.
    #[must_use]
    pub fn contents(&self) -> Contribution {
        self.holding(self.assay.value.get())
    }

    /// What one gram or one millilitre brings into the water: its contents times
    /// the [`efficiency`](Substance::efficiency), which is below one for chalk.
    #[must_use]
    pub fn per_unit(&self) -> Contribution {
        self.holding(self.assay.value.get() * self.substance.efficiency().value.get())
    }

    /// What this much of it brings into the water.
    #[must_use]
    pub fn contribution(&self, amount: DoseAmount) -> Contribution {
        self.per_unit().times(amount)
    }

    /// How much of this does what `amount` of `other` does, where both are the same
    /// substance in another strength. Acids and bases by their equivalents, salts by their
    /// ions. `None` for another substance, and where this does nothing at all.
    #[must_use]
    pub fn in_place_of(&self, other: &Self, amount: DoseAmount) -> Option<DoseAmount> {
        if self.substance != other.substance {
            return None;
        }
        let acting = |material: &Self| {
            let unit = material.per_unit();
            match unit.alkalinity.get().abs() {
                0.0 => unit.ions.iter().map(|(_, ion)| ion.get()).sum(),
                equivalents => equivalents,
            }
        };
        let (this, that) = (acting(self), acting(other));
        (this > 0.0).then(|| DoseAmount::clamped(amount.get() * that / this))
    }

    fn holding(&self, acting_share: f64) -> Contribution {
        if let Some(Strength::Titrated {
            acid,
            chloride_share,
        }) = self.strength
        {
            return blend(acid.get() * acting_share, chloride_share.get());
        }
        let grams_per_unit = match self.strength {
            None => 1.0,
            Some(Strength::WeightPercent { share, density }) => share.get() * density.get(),
            Some(Strength::WeightPerVolume(grams)) => grams.get() / 1000.0,
            Some(Strength::Titrated { .. }) => 0.0, // answered above
        };
        let mmol = self.substance.molar_mass().map_or(0.0, |molar_mass| {
            1000.0 * grams_per_unit * acting_share / molar_mass.get()
        });
        let mole = self.substance.mole();
        let mut ions = IonMap::from_fn(|_| Milligrams::constant(0.0));
        for &(ion, per_mole) in mole.ions {
            ions[ion] = Milligrams::clamped(mmol * per_mole * ion.grams_per_mol());
        }
        Contribution {
            ions,
            alkalinity: Meq::clamped(mmol * mole.alkalinity),
            carbon: Millimoles::clamped(mmol * mole.carbon),
        }
    }
}

/// One millilitre of a blended acid: each equivalent of hydrochloric acid leaves
/// one chloride, each of sulfuric acid half a sulfate.
fn blend(acid_meq_per_ml: f64, chloride_share: f64) -> Contribution {
    let mut ions = IonMap::from_fn(|_| Milligrams::constant(0.0));
    ions[Ion::Chloride] =
        Milligrams::clamped(acid_meq_per_ml * chloride_share * Ion::Chloride.grams_per_mol());
    ions[Ion::Sulfate] = Milligrams::clamped(
        acid_meq_per_ml * (1.0 - chloride_share) * Ion::Sulfate.grams_per_mol() / 2.0,
    );
    Contribution {
        ions,
        alkalinity: Meq::clamped(-acid_meq_per_ml),
        carbon: Millimoles::constant(0.0),
    }
}
