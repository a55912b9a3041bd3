//! Every equilibrium constant at one temperature.

use std::f64::consts::LN_10;

use super::CarbonateError;
use super::activity::DebyeHueckel;
use super::species::Species;
use crate::acid::{Acid, GAS_CONSTANT};
use crate::quantity::Celsius;

/// Equilibrium constants and Debye-Hückel coefficients at one temperature.
///
/// Made once, they serve every water at that temperature. A set belongs together:
/// the calcite curve was fitted with its own CaHCO₃⁺ constant.
///
/// Sources: carbonate, calcite and the calcium carbonate pairs
/// [`PLUMMER_BUSENBERG_1982`](crate::references::PLUMMER_BUSENBERG_1982), 0–90 °C;
/// water, gypsum and the other pairs as in phreeqc.dat of
/// [`PHREEQC_3`](crate::references::PHREEQC_3), which rests on
/// [`NORDSTROM_1990`](crate::references::NORDSTROM_1990); lactic, phosphoric and
/// citric acid those of [`Acid`]; citrate pairs
/// [`NIST_46`](crate::references::NIST_46), measured at 25 °C.
///
/// Pairs of lactate are left out: they change a dose of lactic acid by 0.15 % at
/// most. Ammonia, and pairs of iron, manganese and fluoride are left out as well.
#[derive(Clone, Debug)]
pub struct Constants {
    pub(super) temperature: Celsius,
    pub(super) debye_hueckel: DebyeHueckel,
    /// K of formation from the free ions, H⁺ and water, by [`Species`].
    pub(super) formation: [f64; Species::ALL.len()],
    /// CO₂(g) = CO₂(aq), mol/(kg·atm).
    pub(super) henry: f64,
    /// Solubility products.
    pub(super) calcite: f64,
    pub(super) gypsum: f64,
}

/// Where the constants hold, °C.
const LOWEST: f64 = 0.0;
const HIGHEST: f64 = 90.0;

/// log K = A₁ + A₂T + A₃/T + A₄ log₁₀T + A₅/T² + A₆T², T in kelvin.
fn analytic(kelvin: f64, a: [f64; 6]) -> f64 {
    a[0] + a[1] * kelvin
        + a[2] / kelvin
        + a[3] * kelvin.log10()
        + a[4] / (kelvin * kelvin)
        + a[5] * kelvin * kelvin
}

/// The van 't Hoff equation: log K at 25 °C and an enthalpy in J/mol.
fn van_t_hoff(kelvin: f64, log_k25: f64, enthalpy: f64) -> f64 {
    log_k25 - enthalpy / (LN_10 * GAS_CONSTANT) * (1.0 / kelvin - 1.0 / 298.15)
}

/// J per thermochemical kilocalorie.
const KCAL: f64 = 4184.0;

impl Constants {
    /// The set to calculate with, 0–90 °C.
    ///
    /// Phosphoric acid is ionised after
    /// [`GOLDBERG_2002`](crate::references::GOLDBERG_2002), with a heat capacity, as
    /// everywhere in this crate: an enthalpy alone puts pK₂ 0.17 too low at 80 °C. Up
    /// to 65 °C that moves a dose of phosphoric acid by 3 % at most.
    pub fn at(temperature: Celsius) -> Result<Self, CarbonateError> {
        let temperature = within_range(temperature)?;
        Ok(Self::evaluate(
            temperature,
            pks(Acid::Phosphoric, temperature),
        ))
    }

    /// The set as phreeqc.dat of [`PHREEQC_3`](crate::references::PHREEQC_3) has it,
    /// for comparing with results of that program: phosphoric acid after van 't Hoff,
    /// one digit less in the pair CaCO₃ (0.3 % of it), another curve through the same
    /// solubility of carbon dioxide.
    pub fn phreeqc_dat(temperature: Celsius) -> Result<Self, CarbonateError> {
        let temperature = within_range(temperature)?;
        let kelvin = temperature.get() + 273.15;
        // Formation from PO₄³⁻.
        let one = van_t_hoff(kelvin, 12.346, -3.530 * KCAL);
        let two = van_t_hoff(kelvin, 19.553, -4.520 * KCAL);
        let three = van_t_hoff(kelvin, 21.721, -10_100.0);
        let mut set = Self::evaluate(temperature, [three - two, two - one, one]);
        set.formation[Species::CalciumCarbonate as usize] *= 10f64.powf(4e-6 * kelvin);
        set.henry = 10f64.powf(analytic(
            kelvin,
            [10.5624, -0.023_547, -3_972.8, 0.0, 587_460.0, 1.9194e-5],
        ));
        Ok(set)
    }

    /// The temperature they belong to.
    #[must_use]
    pub const fn temperature(&self) -> Celsius {
        self.temperature
    }

    /// At any temperature, unchecked. Beyond 90 °C the carbonate equations are
    /// extrapolated.
    fn evaluate(temperature: Celsius, phosphate_pks: [f64; 3]) -> Self {
        use Species as S;
        let kelvin = temperature.get() + 273.15;
        let curve = |a| analytic(kelvin, a);
        let heat = |log_k25, kcal| van_t_hoff(kelvin, log_k25, kcal * KCAL);

        let k1 = curve([
            -356.3094,
            -0.060_919_64,
            21_834.37,
            126.8339,
            -1_684_915.0,
            0.0,
        ]);
        let k2 = curve([
            -107.8871,
            -0.032_528_49,
            5_151.79,
            38.925_61,
            -563_713.9,
            0.0,
        ]);
        let kw = curve([
            293.292_27,
            0.136_083_3,
            -10_576.913,
            -123.731_58,
            0.0,
            -6.996_455e-5,
        ]);
        let hso4 = curve([-56.889, 0.006_473, 2_307.9, 19.8858, 0.0, 0.0]);
        let [p1, p2, p3] = phosphate_pks;
        let [lactic, ..] = pks(Acid::Lactic, temperature);
        let [c1, c2, c3] = pks(Acid::Citric, temperature);
        // The pairs of citrate are known at 25 °C from citrate³⁻ and protons. The
        // protons carry the temperature of citric acid; the binding itself is taken
        // as the same at every temperature.
        let citrate_pair = |log_k25: f64, protons: u8| match protons {
            0 => log_k25,
            1 => log_k25 - 6.396 + c3,
            _ => log_k25 - 6.396 - 4.761 + c3 + c2,
        };

        let log_k = |species| match species {
            S::Hydrogen
            | S::Calcium
            | S::Magnesium
            | S::Sodium
            | S::Potassium
            | S::Sulfate
            | S::Carbonate
            | S::Phosphate
            | S::Lactate
            | S::Citrate => 0.0,
            S::Hydroxide => kw,
            S::CalciumHydroxide => -12.78,
            S::MagnesiumHydroxide => heat(-11.44, 15.952),
            S::HydrogenSulfate => hso4,
            S::CalciumSulfate => heat(2.25, 1.325),
            S::CalciumHydrogenSulfate => 1.08 + hso4,
            S::MagnesiumSulfate => heat(2.37, 4.550),
            S::SodiumSulfate => heat(0.70, 1.120),
            S::PotassiumSulfate => curve([3.106, 0.0, -673.6, 0.0, 0.0, 0.0]),
            S::Bicarbonate => -k2,
            S::CarbonDioxide => -k1 - k2,
            S::CalciumCarbonate => curve([-1228.732, -0.299_444, 35_512.75, 485.818, 0.0, 0.0]),
            S::CalciumBicarbonate => {
                curve([1209.120, 0.312_94, -34_765.05, -478.782, 0.0, 0.0]) - k2
            }
            S::MagnesiumCarbonate => curve([0.9910, 0.006_67, 0.0, 0.0, 0.0, 0.0]),
            S::MagnesiumBicarbonate => curve([-59.215, 0.0, 2_537.455, 20.922_98, 0.0, 0.0]) - k2,
            S::SodiumCarbonate => heat(1.27, 8.91),
            S::SodiumBicarbonate => heat(-0.25, -1.0) - k2,
            S::HydrogenPhosphate => p3,
            S::DihydrogenPhosphate => p3 + p2,
            S::PhosphoricAcid => p3 + p2 + p1,
            S::CalciumPhosphate => heat(6.459, 3.10),
            S::CalciumHydrogenPhosphate => heat(2.739, 3.3) + p3,
            S::CalciumDihydrogenPhosphate => heat(1.408, 3.4) + p3 + p2,
            S::MagnesiumPhosphate => heat(6.589, 3.10),
            S::MagnesiumHydrogenPhosphate => heat(2.87, 3.3) + p3,
            S::MagnesiumDihydrogenPhosphate => heat(1.513, 3.4) + p3 + p2,
            S::SodiumHydrogenPhosphate | S::PotassiumHydrogenPhosphate => 0.29 + p3,
            S::LacticAcid => lactic,
            S::HydrogenCitrate => c3,
            S::DihydrogenCitrate => c3 + c2,
            S::CitricAcid => c3 + c2 + c1,
            S::CalciumCitrate => citrate_pair(4.87, 0),
            S::CalciumHydrogenCitrate => citrate_pair(9.26, 1),
            S::CalciumDihydrogenCitrate => citrate_pair(12.257, 2),
            S::MagnesiumCitrate => citrate_pair(4.89, 0),
            S::MagnesiumHydrogenCitrate => citrate_pair(8.91, 1),
            S::MagnesiumDihydrogenCitrate => citrate_pair(12.2, 2),
        };
        let ten_to = |log: f64| 10f64.powf(log);
        Self {
            temperature,
            debye_hueckel: DebyeHueckel::at(temperature.get()),
            formation: Species::ALL.map(|species| ten_to(log_k(species))),
            henry: ten_to(curve([
                108.3865,
                0.019_850_76,
                -6_919.53,
                -40.451_54,
                669_365.0,
                0.0,
            ])),
            calcite: ten_to(curve([-171.9065, -0.077_993, 2_839.319, 71.595, 0.0, 0.0])),
            gypsum: ten_to(curve([68.2401, 0.0, -3_221.51, -25.0627, 0.0, 0.0])),
        }
    }
}

/// The steps of an acid, zero beyond its last.
fn pks(acid: Acid, temperature: Celsius) -> [f64; 3] {
    let mut pks = [0.0; 3];
    for (pk, value) in pks.iter_mut().zip(acid.pks(temperature)) {
        *pk = value.get();
    }
    pks
}

fn within_range(temperature: Celsius) -> Result<Celsius, CarbonateError> {
    if (LOWEST..=HIGHEST).contains(&temperature.get()) {
        Ok(temperature)
    } else {
        Err(CarbonateError::Temperature(temperature))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn at(celsius: f64) -> Constants {
        Constants::at(Celsius::new(celsius).unwrap()).unwrap()
    }

    fn near(value: f64, expected: f64, tolerance: f64, what: &str) {
        assert!(
            (value - expected).abs() <= tolerance,
            "{what}: {value} against {expected}"
        );
    }

    /// Marshall & Franck 1981 at the pressure of saturated vapour (CRC Handbook) at
    /// all temperatures, and IAPWS R11-07 (Bandura & Lvov 2006) where two values
    /// stand. The sources differ by 0.024 at 80 °C.
    #[test]
    fn water_ionises_as_the_handbooks_say_within_0_03() {
        for (celsius, tables) in [
            (0.0, &[14.938, 14.946][..]),
            (5.0, &[14.727]),
            (10.0, &[14.528]),
            (15.0, &[14.340]),
            (20.0, &[14.163]),
            (25.0, &[13.995, 13.995]),
            (30.0, &[13.836]),
            (40.0, &[13.542]),
            (50.0, &[13.275, 13.264]),
            (60.0, &[13.034]),
            (75.0, &[12.712, 12.696]),
            (80.0, &[12.613]),
            (90.0, &[12.428]),
        ] {
            for table in tables {
                let pkw = -at(celsius).formation[Species::Hydroxide as usize].log10();
                near(pkw, *table, 0.03, &format!("pKw at {celsius} °C"));
            }
        }
    }

    /// Goldberg, Kishore & Lennen 2002 (from memory), another evaluation: pK₁ 6.351,
    /// ΔH 9.15 kJ/mol, ΔCp −371 J/(mol K) and pK₂ 10.329, 14.70, −249. It agrees with
    /// Plummer & Busenberg within 0.03.
    #[test]
    fn carbonic_acid_is_as_strong_as_another_evaluation_has_it_within_0_03() {
        let pk = |pk25: f64, kilojoule: f64, heat_capacity: f64, kelvin: f64| {
            let r_ln10 = GAS_CONSTANT * LN_10;
            pk25 + 1000.0 * kilojoule / r_ln10 * (1.0 / kelvin - 1.0 / 298.15)
                - heat_capacity / r_ln10 * (298.15 / kelvin - 1.0 + (kelvin / 298.15).ln())
        };
        for celsius in [5.0, 25.0, 50.0, 65.0, 80.0] {
            let kelvin = celsius + 273.15;
            let set = at(celsius);
            let pk2 = set.formation[Species::Bicarbonate as usize].log10();
            let pk1 = set.formation[Species::CarbonDioxide as usize].log10() - pk2;
            near(pk1, pk(6.351, 9.15, -371.0, kelvin), 0.03, "pK1");
            near(pk2, pk(10.329, 14.70, -249.0, kelvin), 0.03, "pK2");
        }
    }

    /// Values at 25 °C as their sources print them: NIST 46 (log K from citrate³⁻),
    /// WATEQ4F for gypsum and the pairs of sulfate and phosphate (that of potassium by
    /// its formula, 3.106 − 673.6/T), Plummer & Busenberg for calcite (8.480) and K_H
    /// (1.468).
    #[test]
    fn at_25_degrees_the_constants_are_the_printed_ones() {
        let set = at(25.0);
        for (species, printed) in [
            (Species::CalciumSulfate, 2.25),
            (Species::MagnesiumSulfate, 2.37),
            (Species::SodiumSulfate, 0.70),
            (Species::PotassiumSulfate, 0.847),
            (Species::HydrogenSulfate, 1.988),
            (Species::MagnesiumCarbonate, 2.98),
            (Species::CalciumCarbonate, 3.224),
            (Species::CalciumPhosphate, 6.459),
            (Species::CalciumCitrate, 4.87),
            (Species::CalciumHydrogenCitrate, 9.26),
            (Species::CalciumDihydrogenCitrate, 12.257),
            (Species::MagnesiumHydrogenCitrate, 8.91),
        ] {
            let log_k = set.formation[species as usize].log10();
            near(log_k, printed, 0.0011, species.symbol());
        }
        near(set.calcite.log10(), -8.480, 0.0005, "calcite");
        near(set.henry.log10(), -1.468, 0.0005, "K_H");
        near(set.gypsum.log10(), -4.581, 0.0005, "gypsum");
    }

    #[test]
    fn the_phosphate_of_phreeqc_is_another_set_and_close_at_25_degrees() {
        // phreeqc.dat: 12.346, 19.553, 21.721 from PO₄³⁻; Goldberg 12.35, 19.548, 21.696.
        let set = Constants::phreeqc_dat(Celsius::constant(25.0)).unwrap();
        for (species, printed, goldberg) in [
            (Species::HydrogenPhosphate, 12.346, 12.350),
            (Species::DihydrogenPhosphate, 19.553, 19.548),
            (Species::PhosphoricAcid, 21.721, 21.696),
        ] {
            near(
                set.formation[species as usize].log10(),
                printed,
                1e-9,
                species.symbol(),
            );
            near(
                at(25.0).formation[species as usize].log10(),
                goldberg,
                1e-9,
                species.symbol(),
            );
        }
    }

    #[test]
    fn below_0_and_above_90_degrees_there_are_no_constants() {
        for celsius in [-0.1, 90.1, 110.0] {
            let temperature = Celsius::new(celsius).unwrap();
            assert!(matches!(
                Constants::at(temperature),
                Err(CarbonateError::Temperature(_))
            ));
        }
    }
}
