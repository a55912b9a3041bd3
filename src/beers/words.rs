//! A spec and a grist in words, for pages.

use chemistry::ion::Ion;
use chemistry::quantity::{MassRatio, MgPerL, MgPerLAsCaCO3};

use super::Beer;
use super::spec::{IONS, Priority, Spec, Window};
use crate::brewery::Units;
use crate::web::format::decimals;
use crate::web::units::Measure;

/// One window in words.
pub(super) struct SpecLine {
    /// Whose.
    pub(super) label: &'static str,
    /// “50 to 150 mg/L”.
    pub(super) window: String,
    /// “80 mg/L”, or nothing.
    pub(super) preferred: String,
    /// “give up last”.
    pub(super) priority: &'static str,
}

/// The ion as the head of a line.
pub(super) const fn ion_label(ion: Ion) -> &'static str {
    match ion {
        Ion::Calcium => "Calcium",
        Ion::Magnesium => "Magnesium",
        Ion::Sodium => "Sodium",
        Ion::Potassium => "Potassium",
        Ion::Sulfate => "Sulfate",
        Ion::Chloride => "Chloride",
        Ion::Nitrate => "Nitrate, as NO₃",
        _ => ion.symbol(),
    }
}

/// The priority as what to do with its window when not everything can be had.
pub(super) const fn priority_words(priority: Priority) -> &'static str {
    match priority {
        Priority::High => "give up last",
        Priority::Middle => "give up second",
        Priority::Low => "give up first",
    }
}

/// Every window of a spec in words, in the order of the form.
pub(super) fn spec_lines(spec: &Spec) -> Vec<SpecLine> {
    let ions = IONS
        .into_iter()
        .filter_map(|ion| Some(line(ion_label(ion), spec.ions[ion]?, "mg/L", MgPerL::get)));
    let as_caco3 =
        |label, window: Option<_>| Some(line(label, window?, "mg/L as CaCO₃", MgPerLAsCaCO3::get));
    let others = [
        spec.mash_calcium
            .map(|w| line("Calcium in the mash liquor", w, "mg/L", MgPerL::get)),
        spec.sulfate_to_chloride
            .map(|w| line("Sulfate to chloride, by mass", w, "", MassRatio::get)),
        as_caco3("Alkalinity of the sparge liquor", spec.sparge_alkalinity),
    ];
    ions.chain(others.into_iter().flatten()).collect()
}

fn line<T: Copy>(
    label: &'static str,
    window: Window<T>,
    unit: &str,
    get: impl Fn(T) -> f64,
) -> SpecLine {
    // Bounds are shown as they were typed: they are wishes, not estimates.
    let shown = |value: T| get(value).to_string();
    let with_unit = |words: String| format!("{words} {unit}").trim_end().to_owned();
    SpecLine {
        label,
        window: match (window.low, window.high) {
            (Some(low), Some(high)) => with_unit(format!("{} to {}", shown(low), shown(high))),
            (Some(low), None) => with_unit(format!("at least {}", shown(low))),
            (None, Some(high)) => with_unit(format!("at most {}", shown(high))),
            (None, None) => "open".into(),
        },
        preferred: window
            .preferred
            .map(|value| with_unit(shown(value)))
            .unwrap_or_default(),
        priority: priority_words(window.priority),
    }
}

/// Mash liquor per mass of grist: litres per kilogram, or US quarts per pound.
pub(super) fn thickness(beer: &Beer, units: Units) -> String {
    let (litres, kilograms) = (beer.volumes.mash_l.get(), beer.grist_mass().get());
    match units {
        Units::Metric => format!("{} L/kg", decimals(litres / kilograms, 2)),
        // Four quarts are a gallon.
        Units::Us => {
            let quarts = 4.0 * units.shown(Measure::Volume, litres);
            let pounds = units.shown(Measure::Malt, kilograms);
            format!("{} qt/lb", decimals(quarts / pounds, 2))
        }
    }
}
