//! What to be careful of when a substance is weighed or added.

use super::substance::{Form, Role, Substance};

const ACID_INTO_WATER: &str = "Add acid to water, never water to acid.";
const PROTECT_FROM_ACID: &str = "Protect eyes and skin: goggles, gloves, apron.";
const NEVER_WITH_HYPOCHLORITE: &str =
    "Never let acid meet hypochlorite or a chlorinated cleaner: chlorine gas forms.";
const NEVER_WITH_SULFITE: &str = "Never let acid meet sulfite: sulfur dioxide forms.";
const FOOD_GRADE: &str = "Food grade only.";
/// What every list of cautions ends with.
pub const SAFETY_DATA_SHEET: &str =
    "Follow the safety data sheet, local codes and licensed practice.";
const LIME_BURNS: &str =
    "Lime burns eyes and skin and its dust hurts to breathe: goggles, gloves, apron, no draught.";
const LIME_INTO_WATER: &str = "Stir lime into water, keep it away from acid.";
const CAUSTIC: &str = "Corrosive and easy to overdose: goggles, face shield, gloves, apron. Stir it into cold water, never water onto it, and keep it away from acid.";
const VENTILATE: &str = "Ventilate: its fumes irritate.";
const PITS_STEEL: &str = "Chloride pits hot stainless steel: dose into flowing liquor and rinse.";
const HEATS: &str = "Grows hot when it meets water: add it slowly to cold water.";
const CHALK_FAILS: &str =
    "Chalk hardly dissolves in a mash, so what it will do is uncertain: choose another base.";
const DUST: &str = "Avoid breathing the dust; wash off splashes.";

impl Substance {
    /// Plain sentences for whoever weighs or adds this, most urgent first.
    ///
    /// Sources: 29 CFR 1910.151(c) for eye and skin protection; the rest common
    /// practice and from memory. They do not replace the safety data sheet.
    #[must_use]
    pub fn cautions(self) -> Vec<&'static str> {
        let mut cautions = Vec::new();
        match self.role() {
            Role::Acid => {
                cautions.extend([ACID_INTO_WATER, PROTECT_FROM_ACID]);
                cautions.extend([NEVER_WITH_HYPOCHLORITE, NEVER_WITH_SULFITE]);
            }
            Role::Base if self == Self::SlakedLime => {
                cautions.extend([LIME_BURNS, LIME_INTO_WATER]);
            }
            Role::Base if self == Self::SodiumHydroxide => cautions.push(CAUSTIC),
            _ if self.form() == Form::Solid => cautions.push(DUST),
            _ => {}
        }
        match self {
            Self::HydrochloricAcid | Self::BlendedAcid => cautions.extend([VENTILATE, PITS_STEEL]),
            Self::SulfuricAcid | Self::CalciumChlorideAnhydrous => cautions.push(HEATS),
            Self::Chalk => cautions.push(CHALK_FAILS),
            _ => {}
        }
        cautions.extend([FOOD_GRADE, SAFETY_DATA_SHEET]);
        cautions
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_acid_says_acid_into_water_and_keeps_away_from_hypochlorite_and_sulfite() {
        for substance in Substance::ALL {
            let cautions = substance.cautions();
            let is_acid = substance.role() == Role::Acid;
            for sentence in [ACID_INTO_WATER, NEVER_WITH_HYPOCHLORITE, NEVER_WITH_SULFITE] {
                assert_eq!(
                    cautions.contains(&sentence),
                    is_acid,
                    "{}",
                    substance.name()
                );
            }
            assert!(cautions.ends_with(&[FOOD_GRADE, SAFETY_DATA_SHEET]));
        }
    }
}
