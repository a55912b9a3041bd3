//! The salts, bases and acids a brewery puts into liquor, as pure substances.
//!
//! Everything fixed about a substance is here: what one mole of it carries, how
//! it is sold, where it may go, and what to be careful of.

use crate::acid::Acid;
use crate::ion::Ion;
use crate::quantity::{Days, Estimate, Fraction, GramsPerMl, GramsPerMol};

/// A place in the brewhouse where something can be added.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Vessel {
    /// All the liquor of a batch, before it is divided.
    LiquorTank,
    /// The mash: grist and mash liquor.
    Mash,
    /// The liquor that rinses the grains.
    SpargeLiquor,
    /// The kettle.
    Kettle,
}

impl Vessel {
    /// Every vessel, in the order of the brewing day.
    pub const ALL: [Self; 4] = [
        Self::LiquorTank,
        Self::Mash,
        Self::SpargeLiquor,
        Self::Kettle,
    ];

    /// Stable name for storage and the API.
    #[must_use]
    pub const fn key(self) -> &'static str {
        match self {
            Self::LiquorTank => "liquor_tank",
            Self::Mash => "mash",
            Self::SpargeLiquor => "sparge_liquor",
            Self::Kettle => "kettle",
        }
    }

    /// Name in words, lower case.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::LiquorTank => "liquor tank",
            Self::Mash => "mash",
            Self::SpargeLiquor => "sparge liquor",
            Self::Kettle => "kettle",
        }
    }

    /// The vessel with this [`key`](Self::key).
    #[must_use]
    pub fn from_key(key: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|vessel| vessel.key() == key)
    }
}

/// What a substance is for.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Role {
    /// Brings ions and leaves alkalinity alone.
    Salt,
    /// Raises the pH.
    Base,
    /// Lowers the pH.
    Acid,
}

/// How a substance is weighed or measured out.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Form {
    /// Weighed, in grams.
    Solid,
    /// Measured, in millilitres.
    Liquid,
}

/// A salt, base or acid, with its hydration where that matters.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Substance {
    /// CaSO₄·2H₂O
    Gypsum,
    /// CaCl₂
    CalciumChlorideAnhydrous,
    /// CaCl₂·2H₂O
    CalciumChlorideDihydrate,
    /// CaCl₂ dissolved in water
    CalciumChlorideSolution,
    /// MgSO₄·7H₂O
    EpsomSalt,
    /// MgCl₂·6H₂O
    MagnesiumChloride,
    /// NaCl
    SodiumChloride,
    /// KCl
    PotassiumChloride,
    /// Na₂SO₄
    SodiumSulfate,
    /// NaHCO₃
    SodiumBicarbonate,
    /// Ca(OH)₂
    SlakedLime,
    /// CaCO₃
    Chalk,
    /// NaOH
    SodiumHydroxide,
    /// CH₃CH(OH)COOH
    LacticAcid,
    /// H₃PO₄
    PhosphoricAcid,
    /// HCl
    HydrochloricAcid,
    /// H₂SO₄
    SulfuricAcid,
    /// C₆H₈O₇
    CitricAcidAnhydrous,
    /// C₆H₈O₇·H₂O
    CitricAcidMonohydrate,
    /// Hydrochloric and sulfuric acid sold as one liquid, known by its titrated strength
    BlendedAcid,
}

/// What one mole of a substance carries: the facts behind a contribution.
pub(super) struct Mole {
    /// mol of each ion per mol.
    pub(super) ions: &'static [(Ion, f64)],
    /// Alkalinity, equivalents per mol. Negative for acids.
    pub(super) alkalinity: f64,
    /// Inorganic carbon, mol per mol.
    pub(super) carbon: f64,
}

impl Substance {
    /// Every substance: salts, then bases, then acids.
    pub const ALL: [Self; 20] = [
        Self::Gypsum,
        Self::CalciumChlorideAnhydrous,
        Self::CalciumChlorideDihydrate,
        Self::CalciumChlorideSolution,
        Self::EpsomSalt,
        Self::MagnesiumChloride,
        Self::SodiumChloride,
        Self::PotassiumChloride,
        Self::SodiumSulfate,
        Self::SodiumBicarbonate,
        Self::SlakedLime,
        Self::Chalk,
        Self::SodiumHydroxide,
        Self::LacticAcid,
        Self::PhosphoricAcid,
        Self::HydrochloricAcid,
        Self::SulfuricAcid,
        Self::CitricAcidAnhydrous,
        Self::CitricAcidMonohydrate,
        Self::BlendedAcid,
    ];

    /// Stable name for storage and the API.
    #[must_use]
    pub const fn key(self) -> &'static str {
        match self {
            Self::Gypsum => "gypsum",
            Self::CalciumChlorideAnhydrous => "calcium_chloride_anhydrous",
            Self::CalciumChlorideDihydrate => "calcium_chloride_dihydrate",
            Self::CalciumChlorideSolution => "calcium_chloride_solution",
            Self::EpsomSalt => "epsom_salt",
            Self::MagnesiumChloride => "magnesium_chloride",
            Self::SodiumChloride => "sodium_chloride",
            Self::PotassiumChloride => "potassium_chloride",
            Self::SodiumSulfate => "sodium_sulfate",
            Self::SodiumBicarbonate => "sodium_bicarbonate",
            Self::SlakedLime => "slaked_lime",
            Self::Chalk => "chalk",
            Self::SodiumHydroxide => "sodium_hydroxide",
            Self::LacticAcid => "lactic_acid",
            Self::PhosphoricAcid => "phosphoric_acid",
            Self::HydrochloricAcid => "hydrochloric_acid",
            Self::SulfuricAcid => "sulfuric_acid",
            Self::CitricAcidAnhydrous => "citric_acid_anhydrous",
            Self::CitricAcidMonohydrate => "citric_acid_monohydrate",
            Self::BlendedAcid => "blended_acid",
        }
    }

    /// The substance with this [`key`](Self::key).
    #[must_use]
    pub fn from_key(key: &str) -> Option<Self> {
        Self::ALL
            .into_iter()
            .find(|substance| substance.key() == key)
    }

    /// Name in words.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::Gypsum => "Gypsum",
            Self::CalciumChlorideAnhydrous => "Calcium chloride, anhydrous",
            Self::CalciumChlorideDihydrate => "Calcium chloride, dihydrate",
            Self::CalciumChlorideSolution => "Calcium chloride solution",
            Self::EpsomSalt => "Epsom salt",
            Self::MagnesiumChloride => "Magnesium chloride, hexahydrate",
            Self::SodiumChloride => "Salt",
            Self::PotassiumChloride => "Potassium chloride",
            Self::SodiumSulfate => "Sodium sulfate, anhydrous",
            Self::SodiumBicarbonate => "Sodium bicarbonate",
            Self::SlakedLime => "Slaked lime",
            Self::Chalk => "Chalk",
            Self::SodiumHydroxide => "Sodium hydroxide",
            Self::LacticAcid => "Lactic acid",
            Self::PhosphoricAcid => "Phosphoric acid",
            Self::HydrochloricAcid => "Hydrochloric acid",
            Self::SulfuricAcid => "Sulfuric acid",
            Self::CitricAcidAnhydrous => "Citric acid, anhydrous",
            Self::CitricAcidMonohydrate => "Citric acid, monohydrate",
            Self::BlendedAcid => "Blended mineral acid",
        }
    }

    /// Formula with its water of crystallisation.
    #[must_use]
    pub const fn formula(self) -> &'static str {
        match self {
            Self::Gypsum => "CaSO₄·2H₂O",
            Self::CalciumChlorideAnhydrous => "CaCl₂",
            Self::CalciumChlorideDihydrate => "CaCl₂·2H₂O",
            Self::CalciumChlorideSolution => "CaCl₂ in water",
            Self::EpsomSalt => "MgSO₄·7H₂O",
            Self::MagnesiumChloride => "MgCl₂·6H₂O",
            Self::SodiumChloride => "NaCl",
            Self::PotassiumChloride => "KCl",
            Self::SodiumSulfate => "Na₂SO₄",
            Self::SodiumBicarbonate => "NaHCO₃",
            Self::SlakedLime => "Ca(OH)₂",
            Self::Chalk => "CaCO₃",
            Self::SodiumHydroxide => "NaOH",
            Self::LacticAcid => "CH₃CH(OH)COOH",
            Self::PhosphoricAcid => "H₃PO₄",
            Self::HydrochloricAcid => "HCl",
            Self::SulfuricAcid => "H₂SO₄",
            Self::CitricAcidAnhydrous => "C₆H₈O₇",
            Self::CitricAcidMonohydrate => "C₆H₈O₇·H₂O",
            Self::BlendedAcid => "HCl and H₂SO₄ in water",
        }
    }

    /// What it is for.
    #[must_use]
    pub const fn role(self) -> Role {
        match self {
            Self::SodiumBicarbonate | Self::SlakedLime | Self::Chalk | Self::SodiumHydroxide => {
                Role::Base
            }
            Self::LacticAcid
            | Self::PhosphoricAcid
            | Self::HydrochloricAcid
            | Self::SulfuricAcid
            | Self::CitricAcidAnhydrous
            | Self::CitricAcidMonohydrate
            | Self::BlendedAcid => Role::Acid,
            _ => Role::Salt,
        }
    }

    /// How it is weighed or measured out.
    #[must_use]
    pub const fn form(self) -> Form {
        match self {
            Self::CalciumChlorideSolution
            | Self::LacticAcid
            | Self::PhosphoricAcid
            | Self::HydrochloricAcid
            | Self::SulfuricAcid
            | Self::BlendedAcid => Form::Liquid,
            _ => Form::Solid,
        }
    }

    /// The acid it brings, or `None`. A blended acid is two acids in the
    /// proportion its certificate gives, so it is `None` here as well.
    #[must_use]
    pub const fn acid(self) -> Option<Acid> {
        match self {
            Self::LacticAcid => Some(Acid::Lactic),
            Self::PhosphoricAcid => Some(Acid::Phosphoric),
            Self::HydrochloricAcid => Some(Acid::Hydrochloric),
            Self::SulfuricAcid => Some(Acid::Sulfuric),
            Self::CitricAcidAnhydrous | Self::CitricAcidMonohydrate => Some(Acid::Citric),
            _ => None,
        }
    }

    /// Molar mass with the water of crystallisation, or of the dissolved
    /// substance for a liquid. `None` for a blended acid.
    ///
    /// Source: sums of IUPAC 2021 abridged standard atomic weights
    /// (`references::IUPAC_2021`).
    #[must_use]
    pub const fn molar_mass(self) -> Option<GramsPerMol> {
        Some(GramsPerMol::constant(match self {
            Self::Gypsum => 172.164,
            Self::CalciumChlorideAnhydrous | Self::CalciumChlorideSolution => 110.978,
            Self::CalciumChlorideDihydrate => 147.008,
            Self::EpsomSalt => 246.466,
            Self::MagnesiumChloride => 203.295,
            Self::SodiumChloride => 58.440,
            Self::PotassiumChloride => 74.548,
            Self::SodiumSulfate => 142.036,
            Self::SodiumBicarbonate => 84.006,
            Self::SlakedLime => 74.092,
            Self::Chalk => 100.086,
            Self::SodiumHydroxide => 39.997,
            Self::LacticAcid => 90.078,
            Self::PhosphoricAcid => 97.994,
            Self::HydrochloricAcid => 36.458,
            Self::SulfuricAcid => 98.072,
            Self::CitricAcidAnhydrous => 192.123,
            Self::CitricAcidMonohydrate => 210.138,
            Self::BlendedAcid => return None,
        }))
    }

    /// What one mole carries, at the reference level of
    /// [`Water`](crate::water::Water). Nothing for a blended acid.
    pub(super) const fn mole(self) -> Mole {
        use Ion::{
            Calcium, Chloride, Citrate, Lactate, Magnesium, Phosphate, Potassium, Sodium, Sulfate,
        };
        let (ions, alkalinity, carbon): (&'static [(Ion, f64)], f64, f64) = match self {
            Self::Gypsum => (&[(Calcium, 1.0), (Sulfate, 1.0)], 0.0, 0.0),
            Self::CalciumChlorideAnhydrous
            | Self::CalciumChlorideDihydrate
            | Self::CalciumChlorideSolution => (&[(Calcium, 1.0), (Chloride, 2.0)], 0.0, 0.0),
            Self::EpsomSalt => (&[(Magnesium, 1.0), (Sulfate, 1.0)], 0.0, 0.0),
            Self::MagnesiumChloride => (&[(Magnesium, 1.0), (Chloride, 2.0)], 0.0, 0.0),
            Self::SodiumChloride => (&[(Sodium, 1.0), (Chloride, 1.0)], 0.0, 0.0),
            Self::PotassiumChloride => (&[(Potassium, 1.0), (Chloride, 1.0)], 0.0, 0.0),
            Self::SodiumSulfate => (&[(Sodium, 2.0), (Sulfate, 1.0)], 0.0, 0.0),
            Self::SodiumBicarbonate => (&[(Sodium, 1.0)], 1.0, 1.0),
            Self::SlakedLime => (&[(Calcium, 1.0)], 2.0, 0.0),
            Self::Chalk => (&[(Calcium, 1.0)], 2.0, 1.0),
            Self::SodiumHydroxide => (&[(Sodium, 1.0)], 1.0, 0.0),
            Self::LacticAcid => (&[(Lactate, 1.0)], -1.0, 0.0),
            Self::PhosphoricAcid => (&[(Phosphate, 1.0)], -1.0, 0.0),
            Self::HydrochloricAcid => (&[(Chloride, 1.0)], -1.0, 0.0),
            Self::SulfuricAcid => (&[(Sulfate, 1.0)], -2.0, 0.0),
            Self::CitricAcidAnhydrous | Self::CitricAcidMonohydrate => {
                (&[(Citrate, 1.0)], -3.0, 0.0)
            }
            Self::BlendedAcid => (&[], 0.0, 0.0),
        };
        Mole {
            ions,
            alkalinity,
            carbon,
        }
    }

    /// Share of a freshly opened good pack that is the substance itself; for a
    /// liquid, what it holds over what its label says.
    ///
    /// Sources: gypsum 98 %, dihydrate 97 % sealed, an opened anhydrous pack
    /// 5.6 % water (J.-P. Hosom, open measurements; from memory for the first
    /// two); lactic acid sold as 80 % may lawfully hold 76 to 84 % (EU purity
    /// criteria for E 270), hence 3 % relative; the other figures are assumed.
    #[must_use]
    pub const fn default_assay(self) -> Estimate<Fraction> {
        let (value, sd) = match self {
            Self::Gypsum => (0.98, 0.01),
            Self::CalciumChlorideAnhydrous => (0.95, 0.03),
            Self::CalciumChlorideDihydrate => (0.97, 0.02),
            Self::SlakedLime => (0.95, 0.03),
            Self::LacticAcid => (1.0, 0.03),
            Self::CalciumChlorideSolution
            | Self::PhosphoricAcid
            | Self::HydrochloricAcid
            | Self::SulfuricAcid
            | Self::BlendedAcid => (1.0, 0.01),
            _ => (0.99, 0.01),
        };
        Estimate::new(Fraction::constant(value), sd)
    }

    /// Share of an opened pack that is still the substance, where standing open
    /// matters: calcium chloride draws water from the air, lime takes up carbon
    /// dioxide. `None` for everything else.
    ///
    /// Sources: dihydrate 90 ± 7 % (from memory); anhydrous and lime assumed to
    /// lose as much.
    #[must_use]
    pub const fn opened_assay(self) -> Option<Estimate<Fraction>> {
        match self {
            Self::CalciumChlorideDihydrate | Self::CalciumChlorideAnhydrous | Self::SlakedLime => {
                Some(Estimate::new(Fraction::constant(0.90), 0.07))
            }
            _ => None,
        }
    }

    /// Share of a pack that is still the substance after standing open for this long,
    /// where `sealed` was the share when it was opened or last assayed.
    ///
    /// The share s falls and its variance v grows from the sealed pack's (index 0) to the
    /// opened one's (index ∞, [`Self::opened_assay`]) with f = 1 − exp(−t/τ):
    /// s = s₀ + f·(s∞ − s₀), v = v₀ + f·(v∞ − v₀). It never holds more than when it was
    /// sealed, and its doubt never shrinks. Substances that do not mind stay as they were.
    ///
    /// Source: that it drifts to 90 ± 7 %, see [`Self::opened_assay`]; that it does so
    /// exponentially, with τ = [`Self::OPENED_TIME`]: assumed.
    #[must_use]
    pub fn assay_after_opening(
        self,
        sealed: Estimate<Fraction>,
        open_for: Days,
    ) -> Estimate<Fraction> {
        let Some(opened) = self.opened_assay() else {
            return sealed;
        };
        let gone = 1.0 - (-open_for.get() / Self::OPENED_TIME.get()).exp();
        let toward = |from: f64, to: f64| from + gone * (to - from);
        let share = sealed.value.get();
        let lowest = opened.value.get().min(share);
        let variance = toward(sealed.sd.powi(2), sealed.sd.max(opened.sd).powi(2));
        Estimate::new(Fraction::clamped(toward(share, lowest)), variance.sqrt())
    }

    /// Time in which an opened pack goes 63 % of its way to damp. Source: assumed; packs,
    /// rooms and habits differ.
    pub const OPENED_TIME: Days = Days::constant(30.0);

    /// The usual strength of a liquid, as a share of its weight, with the
    /// density of that strength. `None` for solids and for a blended acid, whose
    /// strength only its certificate knows.
    ///
    /// Densities at 20 °C: from memory; lactic 88 % agrees with a supplier's
    /// 1.20 to 1.21, phosphoric 75 % with 1.57 to 1.58 (ECHA dossier).
    #[must_use]
    pub const fn default_strength(self) -> Option<(Fraction, GramsPerMl)> {
        let (share, density) = match self {
            Self::CalciumChlorideSolution => (0.33, 1.317),
            Self::LacticAcid => (0.80, 1.190),
            Self::PhosphoricAcid => (0.75, 1.579),
            Self::HydrochloricAcid => (0.28, 1.139),
            Self::SulfuricAcid => (0.25, 1.178),
            _ => return None,
        };
        Some((Fraction::constant(share), GramsPerMl::constant(density)))
    }

    /// Share of what is added that acts before the mash is read.
    ///
    /// Sources: chalk 0.3 ± 0.3, undissolved chalk hardly acts (Troester 2009,
    /// deLange 2013; the figure is assumed); lime delivers less than its
    /// stoichiometry (deLange 2013; the spread is assumed, the return of acid by
    /// its own calcium is counted by the mash and not here).
    #[must_use]
    pub const fn efficiency(self) -> Estimate<Fraction> {
        match self {
            Self::Chalk => Estimate::new(Fraction::constant(0.3), 0.3),
            Self::SlakedLime => Estimate::new(Fraction::constant(1.0), 0.1),
            _ => Estimate::new(Fraction::constant(1.0), 0.0),
        }
    }

    /// Whether it is better left on the shelf for this purpose: chalk does not
    /// dissolve in time, and sodium hydroxide is corrosive and easy to overdose.
    #[must_use]
    pub const fn is_discouraged(self) -> bool {
        matches!(self, Self::Chalk | Self::SodiumHydroxide)
    }

    /// Vessels it may go into unless the brewery says otherwise. None for sodium
    /// hydroxide: whoever wants it must say where.
    ///
    /// Source: assumed from common practice. Alkali belongs in the mash, where
    /// it is wanted; mineral acids go into water, where they are diluted at once;
    /// gypsum is too slow for hot sparge liquor.
    #[must_use]
    pub const fn default_vessels(self) -> &'static [Vessel] {
        use Vessel::{Kettle, LiquorTank, Mash, SpargeLiquor};
        match self {
            Self::Gypsum => &[LiquorTank, Mash, Kettle],
            Self::SodiumBicarbonate | Self::SlakedLime | Self::Chalk => &[Mash],
            Self::SodiumHydroxide => &[],
            Self::HydrochloricAcid | Self::SulfuricAcid | Self::BlendedAcid => {
                &[LiquorTank, SpargeLiquor]
            }
            _ => &[LiquorTank, Mash, SpargeLiquor, Kettle],
        }
    }

    /// Additive number in Europe (E) and in the international list (INS). `None`
    /// for a blend. It says nothing about where or whether its use is lawful.
    ///
    /// Source: from memory.
    #[must_use]
    pub const fn additive_number(self) -> Option<&'static str> {
        Some(match self {
            Self::Gypsum => "516",
            Self::CalciumChlorideAnhydrous
            | Self::CalciumChlorideDihydrate
            | Self::CalciumChlorideSolution => "509",
            Self::EpsomSalt => "518",
            Self::MagnesiumChloride => "511",
            Self::PotassiumChloride => "508",
            Self::SodiumSulfate => "514",
            Self::SodiumBicarbonate => "500(ii)",
            Self::SlakedLime => "526",
            Self::Chalk => "170",
            Self::SodiumHydroxide => "524",
            Self::LacticAcid => "270",
            Self::PhosphoricAcid => "338",
            Self::HydrochloricAcid => "507",
            Self::SulfuricAcid => "513",
            Self::CitricAcidAnhydrous | Self::CitricAcidMonohydrate => "330",
            Self::SodiumChloride | Self::BlendedAcid => return None,
        })
    }

    /// What to expect when dissolving it, 20 °C. `None` where nothing needs
    /// saying.
    ///
    /// Source: from memory.
    #[must_use]
    pub const fn solubility_note(self) -> Option<&'static str> {
        Some(match self {
            Self::Gypsum => {
                "Dissolves 2.4 g/L, slowly, and less when hot: stir it into cold liquor or into the grist."
            }
            Self::CalciumChlorideAnhydrous => "Dissolves about 740 g/L and grows hot.",
            Self::CalciumChlorideDihydrate | Self::MagnesiumChloride => {
                "Dissolves at once; keep the pack shut, it draws water from the air."
            }
            Self::EpsomSalt => "Dissolves about 700 g/L.",
            Self::SodiumChloride => "Dissolves 359 g/L.",
            Self::PotassiumChloride => "Dissolves 340 g/L.",
            Self::SodiumSulfate => "Dissolves about 195 g/L.",
            Self::SodiumBicarbonate => "Dissolves 96 g/L.",
            Self::SlakedLime => "Dissolves 1.7 g/L, less when hot: stir it in as a slurry.",
            Self::Chalk => "Dissolves 0.014 g/L: most of it stays undissolved in the mash.",
            _ => return None,
        })
    }
}
