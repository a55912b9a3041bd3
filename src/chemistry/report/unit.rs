//! The units and bases reports are printed in, and the way to mg/L and back.
//!
//! A unit and its basis are one choice ("mg/L as N"), so a form needs one select
//! per line and JSON one field, `unit`, holding [`ReportingUnit::key`].

use super::analyte::Analyte;
use crate::quantity::MG_CACO3_PER_MEQ;

/// A unit together with the basis the figure is expressed on.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum ReportingUnit {
    /// mg/L of the substance itself (ppm in water).
    MgPerL,
    /// µg/L of the substance itself.
    MicrogramsPerL,
    /// mg/L as calcium carbonate.
    MgPerLAsCaCO3,
    /// mg/L as bicarbonate.
    MgPerLAsHco3,
    /// mg/L as nitrogen.
    MgPerLAsN,
    /// µg/L as nitrogen.
    MicrogramsPerLAsN,
    /// mg/L as sulfur.
    MgPerLAsS,
    /// mg/L as phosphorus.
    MgPerLAsP,
    /// µg/L as phosphorus.
    MicrogramsPerLAsP,
    /// mg/L as silicon.
    MgPerLAsSi,
    /// mmol/L of the substance; for hardness of calcium plus magnesium.
    MmolPerL,
    /// meq/L (mval/L).
    MeqPerL,
    /// German degrees, °dH.
    GermanDegrees,
    /// French degrees, °fH.
    FrenchDegrees,
    /// English (Clark) degrees, °e.
    ClarkDegrees,
    /// US grains of CaCO₃ per US gallon.
    UsGrainsPerGallon,
    /// Acid capacity to pH 4.3, mmol/L: the German way to print alkalinity.
    Ks43MmolPerL,
    /// µS/cm at 25 °C.
    MicrosiemensPerCm25,
    /// µS/cm at 20 °C.
    MicrosiemensPerCm20,
    /// mS/cm at 25 °C.
    MillisiemensPerCm25,
    /// mS/cm at 20 °C.
    MillisiemensPerCm20,
    /// mS/m at 25 °C.
    MillisiemensPerM25,
    /// mS/m at 20 °C.
    MillisiemensPerM20,
    /// pH.
    Ph,
}

/// Conductivity at 25 °C over conductivity at 20 °C. Source: correction table of
/// ISO 7888 for natural waters, from memory.
const CONDUCTIVITY_25_OVER_20: f64 = 1.116;
/// Nitrogen, phosphorus, silicon and sulfur, g/mol (`references::IUPAC_2021`).
const N_G_PER_MOL: f64 = 14.007;
const P_G_PER_MOL: f64 = 30.974;
const SI_G_PER_MOL: f64 = 28.085;
const S_G_PER_MOL: f64 = 32.06;
/// 10 mg of CaO (56.077 g/mol, two charges) per litre: the definition of 1 °dH.
const MEQ_PER_GERMAN_DEGREE: f64 = 2.0 * 10.0 / 56.077;
/// 10 mg of CaCO₃ per litre: the definition of 1 °fH.
const MEQ_PER_FRENCH_DEGREE: f64 = 10.0 / MG_CACO3_PER_MEQ;
/// One grain, mg; by definition.
const MG_PER_GRAIN: f64 = 64.798_91;
/// One grain of CaCO₃ per imperial gallon (4.546 09 L): the definition of 1 °e.
const MEQ_PER_CLARK_DEGREE: f64 = MG_PER_GRAIN / 4.546_09 / MG_CACO3_PER_MEQ;
/// One grain of CaCO₃ per US gallon (3.785 411 784 L).
const MEQ_PER_US_GRAIN: f64 = MG_PER_GRAIN / 3.785_411_784 / MG_CACO3_PER_MEQ;

impl ReportingUnit {
    /// Every unit.
    pub const ALL: [Self; 24] = [
        Self::MgPerL,
        Self::MicrogramsPerL,
        Self::MgPerLAsCaCO3,
        Self::MgPerLAsHco3,
        Self::MgPerLAsN,
        Self::MicrogramsPerLAsN,
        Self::MgPerLAsS,
        Self::MgPerLAsP,
        Self::MicrogramsPerLAsP,
        Self::MgPerLAsSi,
        Self::MmolPerL,
        Self::MeqPerL,
        Self::GermanDegrees,
        Self::FrenchDegrees,
        Self::ClarkDegrees,
        Self::UsGrainsPerGallon,
        Self::Ks43MmolPerL,
        Self::MicrosiemensPerCm25,
        Self::MicrosiemensPerCm20,
        Self::MillisiemensPerCm25,
        Self::MillisiemensPerCm20,
        Self::MillisiemensPerM25,
        Self::MillisiemensPerM20,
        Self::Ph,
    ];

    /// The stable name in JSON, form fields and the database.
    #[must_use]
    pub const fn key(self) -> &'static str {
        match self {
            Self::MgPerL => "mg_per_l",
            Self::MicrogramsPerL => "ug_per_l",
            Self::MgPerLAsCaCO3 => "mg_per_l_as_caco3",
            Self::MgPerLAsHco3 => "mg_per_l_as_hco3",
            Self::MgPerLAsN => "mg_per_l_as_n",
            Self::MicrogramsPerLAsN => "ug_per_l_as_n",
            Self::MgPerLAsS => "mg_per_l_as_s",
            Self::MgPerLAsP => "mg_per_l_as_p",
            Self::MicrogramsPerLAsP => "ug_per_l_as_p",
            Self::MgPerLAsSi => "mg_per_l_as_si",
            Self::MmolPerL => "mmol_per_l",
            Self::MeqPerL => "meq_per_l",
            Self::GermanDegrees => "dh",
            Self::FrenchDegrees => "fh",
            Self::ClarkDegrees => "clark",
            Self::UsGrainsPerGallon => "us_gpg",
            Self::Ks43MmolPerL => "ks43_mmol_per_l",
            Self::MicrosiemensPerCm25 => "us_per_cm_25",
            Self::MicrosiemensPerCm20 => "us_per_cm_20",
            Self::MillisiemensPerCm25 => "ms_per_cm_25",
            Self::MillisiemensPerCm20 => "ms_per_cm_20",
            Self::MillisiemensPerM25 => "ms_per_m_25",
            Self::MillisiemensPerM20 => "ms_per_m_20",
            Self::Ph => "ph",
        }
    }

    /// The unit with this [`key`](Self::key).
    #[must_use]
    pub fn from_key(key: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|unit| unit.key() == key)
    }

    /// The unit as it is printed, with its basis. Empty for pH.
    #[must_use]
    pub const fn label(self) -> &'static str {
        match self {
            Self::MgPerL => "mg/L",
            Self::MicrogramsPerL => "µg/L",
            Self::MgPerLAsCaCO3 => "mg/L as CaCO₃",
            Self::MgPerLAsHco3 => "mg/L as HCO₃",
            Self::MgPerLAsN => "mg/L as N",
            Self::MicrogramsPerLAsN => "µg/L as N",
            Self::MgPerLAsS => "mg/L as S",
            Self::MgPerLAsP => "mg/L as P",
            Self::MicrogramsPerLAsP => "µg/L as P",
            Self::MgPerLAsSi => "mg/L as Si",
            Self::MmolPerL => "mmol/L",
            Self::MeqPerL => "meq/L",
            Self::GermanDegrees => "°dH",
            Self::FrenchDegrees => "°fH",
            Self::ClarkDegrees => "°e (Clark)",
            Self::UsGrainsPerGallon => "grains/US gal",
            Self::Ks43MmolPerL => "mmol/L (KS4.3)",
            Self::MicrosiemensPerCm25 => "µS/cm at 25 °C",
            Self::MicrosiemensPerCm20 => "µS/cm at 20 °C",
            Self::MillisiemensPerCm25 => "mS/cm at 25 °C",
            Self::MillisiemensPerCm20 => "mS/cm at 20 °C",
            Self::MillisiemensPerM25 => "mS/m at 25 °C",
            Self::MillisiemensPerM20 => "mS/m at 20 °C",
            Self::Ph => "",
        }
    }

    /// Canonical units of `analyte` in one of this unit; `None` when `analyte` is
    /// never reported in it. Every conversion is a factor.
    pub(super) fn canonical_per_unit(self, analyte: Analyte) -> Option<f64> {
        if !analyte.units().contains(&self) {
            return None;
        }
        let fixed = match self {
            Self::MgPerL | Self::Ph | Self::MicrosiemensPerCm25 => Some(1.0),
            Self::MicrogramsPerL => Some(1e-3),
            Self::MicrosiemensPerCm20 => Some(CONDUCTIVITY_25_OVER_20),
            Self::MillisiemensPerCm25 => Some(1000.0),
            Self::MillisiemensPerCm20 => Some(1000.0 * CONDUCTIVITY_25_OVER_20),
            Self::MillisiemensPerM25 => Some(10.0),
            Self::MillisiemensPerM20 => Some(10.0 * CONDUCTIVITY_25_OVER_20),
            _ => None,
        };
        if fixed.is_some() {
            return fixed;
        }
        let substance = analyte.substance()?;
        let per_mmol = substance.grams_per_mol;
        let per_meq = per_mmol / f64::from(substance.charges);
        Some(match self {
            Self::MmolPerL => per_mmol,
            Self::MeqPerL | Self::Ks43MmolPerL => per_meq,
            Self::MgPerLAsCaCO3 => per_meq / MG_CACO3_PER_MEQ,
            Self::MgPerLAsHco3 => per_meq / Analyte::Bicarbonate.substance()?.grams_per_mol,
            Self::GermanDegrees => per_meq * MEQ_PER_GERMAN_DEGREE,
            Self::FrenchDegrees => per_meq * MEQ_PER_FRENCH_DEGREE,
            Self::ClarkDegrees => per_meq * MEQ_PER_CLARK_DEGREE,
            Self::UsGrainsPerGallon => per_meq * MEQ_PER_US_GRAIN,
            Self::MgPerLAsN => per_mmol / N_G_PER_MOL,
            Self::MicrogramsPerLAsN => per_mmol / N_G_PER_MOL * 1e-3,
            Self::MgPerLAsS => per_mmol / S_G_PER_MOL,
            Self::MgPerLAsP => per_mmol / P_G_PER_MOL,
            Self::MicrogramsPerLAsP => per_mmol / P_G_PER_MOL * 1e-3,
            Self::MgPerLAsSi => per_mmol / SI_G_PER_MOL,
            _ => return None,
        })
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_unit_is_found_again_by_its_key() {
        for unit in ReportingUnit::ALL {
            assert_eq!(ReportingUnit::from_key(unit.key()), Some(unit));
        }
        assert_eq!(ReportingUnit::from_key("furlongs"), None);
    }

    #[test]
    fn every_unit_offered_for_an_analyte_converts() {
        for analyte in Analyte::ALL {
            for unit in analyte.units() {
                let factor = unit.canonical_per_unit(analyte).unwrap();
                assert!(factor.is_finite() && factor > 0.0, "{analyte:?} {unit:?}");
            }
            let canonical = analyte.canonical_unit().canonical_per_unit(analyte);
            assert!((canonical.unwrap() - 1.0).abs() < 1e-12, "{analyte:?}");
        }
    }

    /// Conversions between usual bases. Source: printed table computed from full
    /// atomic weights. This crate uses the IUPAC weights abridged to five figures,
    /// which moves the factors by up to 7 in 100 000; hence the tolerance of 1e-4.
    #[test]
    fn factors_agree_with_the_printed_table() {
        use Analyte as A;
        use ReportingUnit as U;
        for (analyte, unit, printed) in [
            (A::Alkalinity, U::MeqPerL, 50.0434),
            (A::Alkalinity, U::Ks43MmolPerL, 50.0434),
            (A::Alkalinity, U::MgPerLAsHco3, 0.8202),
            (A::Alkalinity, U::GermanDegrees, 17.848),
            (A::TotalHardness, U::GermanDegrees, 17.848),
            (A::TotalHardness, U::FrenchDegrees, 10.0),
            (A::TotalHardness, U::ClarkDegrees, 14.254),
            (A::TotalHardness, U::UsGrainsPerGallon, 17.118),
            (A::TotalHardness, U::MmolPerL, 2.0 * 50.0434),
            (A::Calcium, U::GermanDegrees, 7.147),
            (A::Magnesium, U::GermanDegrees, 4.334),
            (A::Calcium, U::MeqPerL, 20.039),
            (A::Magnesium, U::MeqPerL, 12.1525),
            (A::Sodium, U::MeqPerL, 22.990),
            (A::Potassium, U::MeqPerL, 39.098),
            (A::Chloride, U::MeqPerL, 35.453),
            (A::Sulfate, U::MeqPerL, 48.03),
            (A::Bicarbonate, U::MeqPerL, 61.017),
            (A::Nitrate, U::MeqPerL, 62.005),
            (A::Nitrate, U::MgPerLAsN, 4.4268),
            (A::Nitrite, U::MgPerLAsN, 3.2845),
            (A::Sulfate, U::MgPerLAsS, 2.9963),
            (A::Phosphate, U::MgPerLAsP, 3.0662),
            (A::Ammonium, U::MgPerLAsN, 1.2878),
            (A::Silica, U::MgPerLAsSi, 2.1394),
            (A::Conductivity, U::MicrosiemensPerCm20, 1.116),
        ] {
            let factor = unit.canonical_per_unit(analyte).unwrap();
            assert!(
                (factor / printed - 1.0).abs() < 1e-4,
                "{analyte:?} {unit:?}: {factor} against {printed}"
            );
        }
    }

    /// Source: Standard Methods 2340 B, hardness = 2.497 Ca + 4.118 Mg, to the
    /// printed digits.
    #[test]
    fn hardness_factors_are_those_of_standard_methods_2340_b() {
        for (analyte, printed) in [(Analyte::Calcium, 2.497), (Analyte::Magnesium, 4.118)] {
            let per_mg = 1.0
                / ReportingUnit::MgPerLAsCaCO3
                    .canonical_per_unit(analyte)
                    .unwrap();
            assert!((per_mg - printed).abs() < 0.0005, "{analyte:?} {per_mg}");
        }
    }
}
