//! The acids a brewery doses, as pure substances: mass, ionisation, and how many
//! protons one molecule gives away at a pH.
//!
//! Strengths, densities and prices belong to a material; what an acid does to a
//! water of known composition belongs to the carbonate engine, which adds
//! activities and ion pairs to the constants given here.

use crate::ion::Ion;
use crate::quantity::{Celsius, EqPerMol, Ph};

/// An acid used on liquor, mash or sparge.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Acid {
    /// CH₃CH(OH)COOH
    Lactic,
    /// H₃PO₄
    Phosphoric,
    /// HCl
    Hydrochloric,
    /// H₂SO₄
    Sulfuric,
    /// C₆H₈O₇, counted without water of crystallisation
    Citric,
}

/// The gas constant, J/(mol·K). Source: CODATA 2018, exact by definition of the SI.
pub(crate) const GAS_CONSTANT: f64 = 8.314_462_618;

/// One ionisation step: pK and enthalpy at 25 °C, and a constant heat capacity.
#[derive(Clone, Copy, Debug)]
struct Step {
    /// −log₁₀K at 25 °C, infinite dilution.
    pk25: f64,
    /// Enthalpy of ionisation, kJ/mol.
    enthalpy: f64,
    /// Heat capacity of ionisation, J/(mol·K).
    heat_capacity: f64,
}

impl Step {
    const fn new(pk25: f64, enthalpy: f64, heat_capacity: f64) -> Self {
        Self {
            pk25,
            enthalpy,
            heat_capacity,
        }
    }

    /// pK(T) = pK₂₅ + ΔH/(R ln10)·(1/T − 1/T₀) − ΔCp/(R ln10)·(T₀/T − 1 + ln(T/T₀)),
    /// T₀ = 298.15 K: the van 't Hoff equation with a constant ΔCp.
    fn pk(self, kelvin: f64) -> f64 {
        const T0: f64 = 298.15;
        let r_ln10 = GAS_CONSTANT * std::f64::consts::LN_10;
        self.pk25 + 1000.0 * self.enthalpy / r_ln10 * (1.0 / kelvin - 1.0 / T0)
            - self.heat_capacity / r_ln10 * (T0 / kelvin - 1.0 + (kelvin / T0).ln())
    }
}

/// Source: [`MARTIN_TARTAR_1937`](crate::references::MARTIN_TARTAR_1937),
/// pK = 3.857 + 5.0e-5 (t − 22.5)², 0–50 °C; enthalpy and heat capacity are those
/// of that parabola, and follow it within 0.01 up to 50 °C and 0.03 up to 80 °C.
const LACTIC: [Step; 1] = [Step::new(3.86, -0.43, -173.0)];
/// Source: [`GOLDBERG_2002`](crate::references::GOLDBERG_2002); pK₂ from memory of it.
const PHOSPHORIC: [Step; 3] = [
    Step::new(2.148, -8.0, -141.0),
    Step::new(7.198, 3.6, -230.0),
    Step::new(12.35, 16.0, -242.0),
];
/// The second step; the first is complete in water.
/// Source: [`GOLDBERG_2002`](crate::references::GOLDBERG_2002), from memory.
const SULFURIC: [Step; 1] = [Step::new(1.987, -22.4, -258.0)];
/// Source: [`GOLDBERG_2002`](crate::references::GOLDBERG_2002); heat capacities from memory.
const CITRIC: [Step; 3] = [
    Step::new(3.128, 4.07, -131.0),
    Step::new(4.761, 2.23, -178.0),
    Step::new(6.396, -3.38, -254.0),
];

impl Acid {
    /// Every acid.
    pub const ALL: [Self; 5] = [
        Self::Lactic,
        Self::Phosphoric,
        Self::Hydrochloric,
        Self::Sulfuric,
        Self::Citric,
    ];

    /// The word it is stored and sent by, lower case ASCII.
    #[must_use]
    pub const fn key(self) -> &'static str {
        match self {
            Self::Lactic => "lactic",
            Self::Phosphoric => "phosphoric",
            Self::Hydrochloric => "hydrochloric",
            Self::Sulfuric => "sulfuric",
            Self::Citric => "citric",
        }
    }

    /// The acid with this [`key`](Self::key).
    #[must_use]
    pub fn from_key(key: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|acid| acid.key() == key)
    }

    /// Name in words, lower case.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::Lactic => "lactic acid",
            Self::Phosphoric => "phosphoric acid",
            Self::Hydrochloric => "hydrochloric acid",
            Self::Sulfuric => "sulfuric acid",
            Self::Citric => "citric acid",
        }
    }

    /// Molar mass of the undissociated, anhydrous acid, g/mol.
    ///
    /// Source: [`IUPAC_2021`](crate::references::IUPAC_2021).
    #[must_use]
    pub const fn grams_per_mol(self) -> f64 {
        match self {
            Self::Lactic => 90.078,
            Self::Phosphoric => 97.994,
            Self::Hydrochloric => 36.458,
            Self::Sulfuric => 98.072,
            Self::Citric => 192.123,
        }
    }

    /// What stays in the water when all protons are taken away.
    #[must_use]
    pub const fn anion(self) -> Ion {
        match self {
            Self::Lactic => Ion::Lactate,
            Self::Phosphoric => Ion::Phosphate,
            Self::Hydrochloric => Ion::Chloride,
            Self::Sulfuric => Ion::Sulfate,
            Self::Citric => Ion::Citrate,
        }
    }

    /// How many protons the acid has to give, counting those it hardly ever gives.
    #[must_use]
    pub const fn protons(self) -> u8 {
        match self {
            Self::Lactic | Self::Hydrochloric => 1,
            Self::Sulfuric => 2,
            Self::Phosphoric | Self::Citric => 3,
        }
    }

    /// Total alkalinity destroyed by one mole, eq/mol, at the reference level of
    /// [`Water::alkalinity`](crate::water::Water::alkalinity).
    ///
    /// It does not depend on the pH. Phosphoric acid counts 1, because H₂PO₄⁻ is the
    /// reference; what it gives beyond that shows as alkalinity of HPO₄²⁻.
    #[must_use]
    pub const fn alkalinity_destroyed(self) -> EqPerMol {
        EqPerMol::constant(match self {
            Self::Lactic | Self::Phosphoric | Self::Hydrochloric => 1.0,
            Self::Sulfuric => 2.0,
            Self::Citric => 3.0,
        })
    }

    /// The pK of each step that is not complete in water, at infinite dilution.
    ///
    /// Valid 0–80 °C. Sources stand at the constants of each acid.
    #[must_use]
    pub fn pks(self, temperature: Celsius) -> Vec<Pk> {
        let kelvin = temperature.get() + 273.15;
        self.steps()
            .iter()
            .map(|step| Pk(step.pk(kelvin)))
            .collect()
    }

    /// Protons one molecule has given away at `ph`: its mean charge with the sign
    /// turned. Ideal (infinite dilution, no ion pairs); valid 0–80 °C.
    #[must_use]
    pub fn protons_released(self, ph: Ph, temperature: Celsius) -> EqPerMol {
        let kelvin = temperature.get() + 273.15;
        let complete = f64::from(self.protons()) - self.steps().len() as f64;
        // Each term is the amount of one more step lost relative to the undissociated form.
        let (mut term, mut sum, mut weighted) = (1.0, 1.0, 0.0);
        for (step, lost) in self.steps().iter().zip(1u8..) {
            term *= 10f64.powf(ph.get() - step.pk(kelvin));
            sum += term;
            weighted += f64::from(lost) * term;
        }
        EqPerMol::clamped(complete + weighted / sum)
    }

    fn steps(self) -> &'static [Step] {
        match self {
            Self::Lactic => &LACTIC,
            Self::Phosphoric => &PHOSPHORIC,
            Self::Hydrochloric => &[],
            Self::Sulfuric => &SULFURIC,
            Self::Citric => &CITRIC,
        }
    }
}

/// −log₁₀ of an ionisation constant on the molal scale, at infinite dilution.
#[derive(Clone, Copy, Debug, PartialEq, PartialOrd)]
pub struct Pk(f64);

impl Pk {
    /// The number.
    #[must_use]
    pub const fn get(self) -> f64 {
        self.0
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn pks(acid: Acid, celsius: f64) -> Vec<f64> {
        let temperature = Celsius::new(celsius).expect("a temperature");
        acid.pks(temperature).into_iter().map(Pk::get).collect()
    }

    #[test]
    fn lactic_acid_follows_martin_and_tartar_from_0_to_50_degrees() {
        // pK = 3.857 + 5.0e-5 (t − 22.5)², J. Am. Chem. Soc. 59 (1937) 2672. A parabola and a
        // constant heat capacity cannot agree better than 0.01 over 50 degrees.
        for celsius in [0.0, 10.0, 20.0, 25.0, 37.0, 50.0] {
            let published = 3.857 + 5.0e-5 * (celsius - 22.5f64).powi(2);
            assert!(
                (pks(Acid::Lactic, celsius)[0] - published).abs() < 0.01,
                "{celsius}"
            );
        }
    }

    #[test]
    fn citric_acid_at_25_degrees_is_that_of_nist_database_46() {
        // NIST Standard Reference Database 46: 3.128, 4.761, 6.396 at 25 °C.
        for (ours, theirs) in pks(Acid::Citric, 25.0).iter().zip([3.128, 4.761, 6.396]) {
            assert!((ours - theirs).abs() < 0.001);
        }
    }

    #[test]
    fn halfway_between_two_far_pks_an_acid_has_given_a_whole_number() {
        // By symmetry of the ionisation curve: at (pK₁ + pK₂)/2 phosphoric acid has given
        // one proton.
        let temperature = Celsius::constant(25.0);
        let given =
            Acid::Phosphoric.protons_released(Ph::constant((2.148 + 7.198) / 2.0), temperature);
        assert!((given.get() - 1.0).abs() < 1e-6, "{given}");
    }

    #[test]
    fn at_its_pk_lactic_acid_has_given_half_a_proton_and_hydrochloric_acid_all() {
        let at = |acid: Acid| {
            acid.protons_released(Ph::constant(3.86), Celsius::constant(25.0))
                .get()
        };
        assert!((at(Acid::Lactic) - 0.5).abs() < 1e-9);
        assert!((at(Acid::Hydrochloric) - 1.0).abs() < 1e-12);
    }

    #[test]
    fn an_acid_is_its_anion_and_its_protons_by_mass() {
        // 1.008 g/mol of hydrogen, IUPAC 2021.
        for acid in Acid::ALL {
            let sum = acid.anion().grams_per_mol() + f64::from(acid.protons()) * 1.008;
            assert!(
                (sum - acid.grams_per_mol()).abs() < 0.005,
                "{acid:?}: {sum}"
            );
        }
    }

    #[test]
    fn keys_are_found_again() {
        for acid in Acid::ALL {
            assert_eq!(Acid::from_key(acid.key()), Some(acid));
        }
    }
}
