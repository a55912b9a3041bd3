//! What a report can have a line for.

use super::unit::ReportingUnit;
use crate::ion::Ion;

/// One line a laboratory, a kit or a meter can report.
///
/// Several lines can speak of the same thing (calcium and calcium hardness; total
/// alkalinity and bicarbonate): each is kept as it was reported, and compared.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Analyte {
    /// Dissolved calcium.
    Calcium,
    /// Dissolved magnesium.
    Magnesium,
    /// Dissolved sodium.
    Sodium,
    /// Dissolved potassium.
    Potassium,
    /// Ammonium (with ammonia, as laboratories report it).
    Ammonium,
    /// Iron, dissolved or total as the report says.
    Iron,
    /// Manganese.
    Manganese,
    /// Total alkalinity, titrated to about pH 4.3 to 4.5.
    Alkalinity,
    /// Bicarbonate.
    Bicarbonate,
    /// Carbonate, the ion CO₃²⁻ only.
    Carbonate,
    /// Sulfate.
    Sulfate,
    /// Chloride.
    Chloride,
    /// Nitrate.
    Nitrate,
    /// Nitrite.
    Nitrite,
    /// Fluoride.
    Fluoride,
    /// Phosphate.
    Phosphate,
    /// Dissolved silica.
    Silica,
    /// Total hardness: calcium and magnesium together.
    TotalHardness,
    /// The part of the hardness that is calcium.
    CalciumHardness,
    /// The part of the hardness that is magnesium.
    MagnesiumHardness,
    /// pH, at the temperature the report gives.
    Ph,
    /// Electrical conductivity.
    Conductivity,
    /// Total dissolved solids, dried or calculated.
    DissolvedSolids,
    /// Free chlorine, as Cl₂.
    FreeChlorine,
    /// Total chlorine (free and combined), as Cl₂.
    TotalChlorine,
}

impl Analyte {
    /// Every analyte, in the order reports usually print them.
    pub const ALL: [Self; 25] = [
        Self::Calcium,
        Self::Magnesium,
        Self::Sodium,
        Self::Potassium,
        Self::Ammonium,
        Self::Iron,
        Self::Manganese,
        Self::Alkalinity,
        Self::Bicarbonate,
        Self::Carbonate,
        Self::Sulfate,
        Self::Chloride,
        Self::Nitrate,
        Self::Nitrite,
        Self::Fluoride,
        Self::Phosphate,
        Self::Silica,
        Self::TotalHardness,
        Self::CalciumHardness,
        Self::MagnesiumHardness,
        Self::Ph,
        Self::Conductivity,
        Self::DissolvedSolids,
        Self::FreeChlorine,
        Self::TotalChlorine,
    ];

    /// The six figures a plan cannot do without.
    pub const NEEDED: [Self; 6] = [
        Self::Calcium,
        Self::Magnesium,
        Self::Alkalinity,
        Self::Sodium,
        Self::Chloride,
        Self::Sulfate,
    ];

    /// The stable name in JSON, form fields and the database.
    #[must_use]
    pub const fn key(self) -> &'static str {
        match self {
            Self::Calcium => "calcium",
            Self::Magnesium => "magnesium",
            Self::Sodium => "sodium",
            Self::Potassium => "potassium",
            Self::Ammonium => "ammonium",
            Self::Iron => "iron",
            Self::Manganese => "manganese",
            Self::Alkalinity => "alkalinity",
            Self::Bicarbonate => "bicarbonate",
            Self::Carbonate => "carbonate",
            Self::Sulfate => "sulfate",
            Self::Chloride => "chloride",
            Self::Nitrate => "nitrate",
            Self::Nitrite => "nitrite",
            Self::Fluoride => "fluoride",
            Self::Phosphate => "phosphate",
            Self::Silica => "silica",
            Self::TotalHardness => "total_hardness",
            Self::CalciumHardness => "calcium_hardness",
            Self::MagnesiumHardness => "magnesium_hardness",
            Self::Ph => "ph",
            Self::Conductivity => "conductivity",
            Self::DissolvedSolids => "dissolved_solids",
            Self::FreeChlorine => "free_chlorine",
            Self::TotalChlorine => "total_chlorine",
        }
    }

    /// The analyte with this [`key`](Self::key).
    #[must_use]
    pub fn from_key(key: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|analyte| analyte.key() == key)
    }

    /// Name in words, as it stands inside a sentence.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::Alkalinity => "total alkalinity",
            Self::TotalHardness => "total hardness",
            Self::CalciumHardness => "calcium hardness",
            Self::MagnesiumHardness => "magnesium hardness",
            Self::Ph => "pH",
            Self::DissolvedSolids => "total dissolved solids",
            Self::FreeChlorine => "free chlorine",
            Self::TotalChlorine => "total chlorine",
            other => other.key(),
        }
    }

    /// Symbol, or the short name where there is none.
    #[must_use]
    pub const fn symbol(self) -> &'static str {
        match self {
            Self::Calcium => "Ca²⁺",
            Self::Magnesium => "Mg²⁺",
            Self::Sodium => "Na⁺",
            Self::Potassium => "K⁺",
            Self::Ammonium => "NH₄⁺",
            Self::Iron => "Fe",
            Self::Manganese => "Mn",
            Self::Alkalinity => "Alk",
            Self::Bicarbonate => "HCO₃⁻",
            Self::Carbonate => "CO₃²⁻",
            Self::Sulfate => "SO₄²⁻",
            Self::Chloride => "Cl⁻",
            Self::Nitrate => "NO₃⁻",
            Self::Nitrite => "NO₂⁻",
            Self::Fluoride => "F⁻",
            Self::Phosphate => "PO₄³⁻",
            Self::Silica => "SiO₂",
            Self::TotalHardness => "TH",
            Self::CalciumHardness => "CaH",
            Self::MagnesiumHardness => "MgH",
            Self::Ph => "pH",
            Self::Conductivity => "EC",
            Self::DissolvedSolids => "TDS",
            Self::FreeChlorine | Self::TotalChlorine => "Cl₂",
        }
    }

    /// The ion of a composition this line gives directly.
    #[must_use]
    pub const fn ion(self) -> Option<Ion> {
        Some(match self {
            Self::Calcium => Ion::Calcium,
            Self::Magnesium => Ion::Magnesium,
            Self::Sodium => Ion::Sodium,
            Self::Potassium => Ion::Potassium,
            Self::Ammonium => Ion::Ammonium,
            Self::Iron => Ion::Iron,
            Self::Manganese => Ion::Manganese,
            Self::Sulfate => Ion::Sulfate,
            Self::Chloride => Ion::Chloride,
            Self::Nitrate => Ion::Nitrate,
            Self::Nitrite => Ion::Nitrite,
            Self::Fluoride => Ion::Fluoride,
            Self::Phosphate => Ion::Phosphate,
            _ => return None,
        })
    }

    /// The unit every report is brought to: mg/L of the substance itself;
    /// alkalinity and hardness mg/L as CaCO₃; conductivity µS/cm at 25 °C; pH.
    #[must_use]
    pub const fn canonical_unit(self) -> ReportingUnit {
        match self {
            Self::Alkalinity
            | Self::TotalHardness
            | Self::CalciumHardness
            | Self::MagnesiumHardness => ReportingUnit::MgPerLAsCaCO3,
            Self::Ph => ReportingUnit::Ph,
            Self::Conductivity => ReportingUnit::MicrosiemensPerCm25,
            _ => ReportingUnit::MgPerL,
        }
    }

    /// The units this analyte is reported in, the most usual first.
    #[must_use]
    pub const fn units(self) -> &'static [ReportingUnit] {
        use ReportingUnit as U;
        match self {
            Self::Calcium | Self::Magnesium => &[
                U::MgPerL,
                U::MgPerLAsCaCO3,
                U::MmolPerL,
                U::MeqPerL,
                U::GermanDegrees,
                U::FrenchDegrees,
                U::ClarkDegrees,
                U::UsGrainsPerGallon,
            ],
            Self::Sodium | Self::Potassium | Self::Chloride | Self::Fluoride | Self::Carbonate => {
                &[U::MgPerL, U::MmolPerL, U::MeqPerL]
            }
            Self::Bicarbonate => &[U::MgPerL, U::MgPerLAsCaCO3, U::MmolPerL, U::MeqPerL],
            Self::Iron | Self::Manganese => &[U::MgPerL, U::MicrogramsPerL],
            Self::Ammonium | Self::Nitrate | Self::Nitrite => &[
                U::MgPerL,
                U::MgPerLAsN,
                U::MicrogramsPerL,
                U::MicrogramsPerLAsN,
                U::MmolPerL,
                U::MeqPerL,
            ],
            Self::Sulfate => &[U::MgPerL, U::MgPerLAsS, U::MmolPerL, U::MeqPerL],
            Self::Phosphate => &[
                U::MgPerL,
                U::MgPerLAsP,
                U::MicrogramsPerL,
                U::MicrogramsPerLAsP,
                U::MmolPerL,
            ],
            Self::Silica => &[U::MgPerL, U::MgPerLAsSi, U::MmolPerL],
            Self::Alkalinity => &[
                U::MgPerLAsCaCO3,
                U::Ks43MmolPerL,
                U::MeqPerL,
                U::MgPerLAsHco3,
                U::GermanDegrees,
                U::FrenchDegrees,
                U::ClarkDegrees,
                U::UsGrainsPerGallon,
            ],
            Self::TotalHardness | Self::CalciumHardness | Self::MagnesiumHardness => &[
                U::MgPerLAsCaCO3,
                U::GermanDegrees,
                U::FrenchDegrees,
                U::ClarkDegrees,
                U::UsGrainsPerGallon,
                U::MmolPerL,
                U::MeqPerL,
            ],
            Self::Ph => &[U::Ph],
            Self::Conductivity => &[
                U::MicrosiemensPerCm25,
                U::MicrosiemensPerCm20,
                U::MillisiemensPerCm25,
                U::MillisiemensPerCm20,
                U::MillisiemensPerM25,
                U::MillisiemensPerM20,
            ],
            Self::DissolvedSolids => &[U::MgPerL],
            Self::FreeChlorine | Self::TotalChlorine => &[U::MgPerL, U::MicrogramsPerL],
        }
    }

    /// Mass and charge of the substance itself; `None` for pH, conductivity,
    /// dissolved solids and chlorine, which are not converted by molar mass.
    /// Hardness and alkalinity are counted as CaCO₃.
    pub(super) const fn substance(self) -> Option<Substance> {
        /// Hydrogencarbonate: H 1.008, C 12.011, O 15.999 (`references::IUPAC_2021`).
        const HCO3_G_PER_MOL: f64 = 1.008 + 12.011 + 3.0 * 15.999;
        /// Carbonate.
        const CO3_G_PER_MOL: f64 = 12.011 + 3.0 * 15.999;
        /// Silica: Si 28.085.
        const SIO2_G_PER_MOL: f64 = 28.085 + 2.0 * 15.999;
        if let Some(ion) = self.ion() {
            return Some(Substance {
                grams_per_mol: ion.grams_per_mol(),
                charges: ion.charge().unsigned_abs(),
            });
        }
        let (grams_per_mol, charges) = match self {
            Self::Bicarbonate => (HCO3_G_PER_MOL, 1),
            Self::Carbonate => (CO3_G_PER_MOL, 2),
            Self::Silica => (SIO2_G_PER_MOL, 0),
            Self::Alkalinity
            | Self::TotalHardness
            | Self::CalciumHardness
            | Self::MagnesiumHardness => (2.0 * crate::quantity::MG_CACO3_PER_MEQ, 2),
            _ => return None,
        };
        Some(Substance {
            grams_per_mol,
            charges,
        })
    }

    /// The most a water that somebody would brew with is likely to hold, in the
    /// canonical unit; above it a slip of unit or of the decimal mark is likelier.
    /// Assumed: several times the potable limits and usual hard waters.
    pub(super) const fn likely_at_most(self) -> f64 {
        match self {
            Self::Calcium => 500.0,
            Self::Magnesium => 300.0,
            Self::Sodium => 1000.0,
            Self::Potassium => 100.0,
            Self::Ammonium | Self::FreeChlorine | Self::TotalChlorine => 10.0,
            Self::Iron => 20.0,
            Self::Manganese => 5.0,
            Self::Alkalinity => 800.0,
            Self::Bicarbonate => 1000.0,
            Self::Carbonate => 100.0,
            Self::Sulfate => 2000.0,
            Self::Chloride => 1500.0,
            Self::Nitrate => 250.0,
            Self::Nitrite => 10.0,
            Self::Fluoride => 15.0,
            Self::Phosphate => 20.0,
            Self::Silica => 120.0,
            Self::TotalHardness | Self::CalciumHardness => 2000.0,
            Self::MagnesiumHardness => 1200.0,
            Self::Ph => 10.5,
            Self::Conductivity | Self::DissolvedSolids => 6000.0,
        }
    }

    /// The most that is accepted at all, in the canonical unit: beyond it no
    /// figure of a brewing water can be meant. pH by its scale; the rest assumed,
    /// about the saltiest natural brines.
    pub(super) const fn accepted_at_most(self) -> f64 {
        match self {
            Self::Ph => 14.0,
            Self::Conductivity => 200_000.0,
            _ => 100_000.0,
        }
    }
}

/// What one mole of an analyte weighs and how many charges it counts for.
#[derive(Clone, Copy, Debug)]
pub(super) struct Substance {
    /// Molar mass, g/mol.
    pub(super) grams_per_mol: f64,
    /// Charges per molecule, without sign; 0 for silica.
    pub(super) charges: u8,
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_analyte_is_found_again_by_its_key() {
        for analyte in Analyte::ALL {
            assert_eq!(Analyte::from_key(analyte.key()), Some(analyte));
        }
        assert_eq!(Analyte::from_key("unobtainium"), None);
    }

    #[test]
    fn every_analyte_offers_its_canonical_unit_and_no_unit_twice() {
        for analyte in Analyte::ALL {
            let units = analyte.units();
            assert!(units.contains(&analyte.canonical_unit()), "{analyte:?}");
            for (i, unit) in units.iter().enumerate() {
                assert!(!units[..i].contains(unit), "{analyte:?} {unit:?}");
            }
        }
    }
}
