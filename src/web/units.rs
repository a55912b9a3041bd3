//! The brewery's choice of units on pages. What is stored, and the JSON API, is SI.
//!
//! A page shows a stored figure through [`Units::show`];
//! [`typed_in_si`] turns what was typed into
//! SI before the body is built, [`shown_in`] the other way.

use crate::brewery::Units;
use crate::input::Number;
use crate::web::form::Form;
use crate::web::format;

/// What kind of figure it is.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Measure {
    /// Liquor, wort: litres or US gallons.
    Volume,
    /// Finished batches: hectolitres or US barrels; stored in litres.
    Batch,
    /// Malt: kilograms or pounds.
    Malt,
    /// A weighed dose: grams or ounces.
    DoseMass,
    /// A poured dose: millilitres or US fluid ounces.
    DoseVolume,
    /// What is on the shelf of a solid: kilograms or pounds; stored in grams.
    StockMass,
    /// What is on the shelf of a liquid: litres or US gallons; stored in millilitres.
    StockVolume,
    /// A weighed dose in so much liquor: grams per hectolitre or ounces per US barrel.
    DoseMassPerBatch,
    /// A poured dose in so much liquor: millilitres per hectolitre or US fluid ounces per
    /// US barrel.
    DoseVolumePerBatch,
    /// Temperature: °C or °F.
    Temperature,
    /// Price of a solid per kilogram or pound.
    PricePerMass,
    /// Price of a liquid per litre or US gallon.
    PricePerVolume,
    /// Price of water per cubic metre or thousand US gallons.
    PriceOfWater,
}

/// Litres in a US liquid gallon: 231 cubic inches exactly (NIST Handbook 44, app. C).
const LITRES_PER_GALLON: f64 = 3.785_411_784;
/// Litres in a US beer barrel of 31 gallons (27 CFR 25.11).
const LITRES_PER_BARREL: f64 = 31.0 * LITRES_PER_GALLON;
/// Kilograms in an avoirdupois pound, exact (NIST Handbook 44, app. C).
const KILOGRAMS_PER_POUND: f64 = 0.453_592_37;

impl Units {
    /// The unit as it is printed.
    pub const fn label(self, measure: Measure) -> &'static str {
        match (self, measure) {
            (Self::Metric, Measure::Volume) => "L",
            (Self::Us, Measure::Volume) => "gal",
            (Self::Metric, Measure::Batch) => "hL",
            (Self::Us, Measure::Batch) => "bbl",
            (Self::Metric, Measure::Malt) => "kg",
            (Self::Us, Measure::Malt) => "lb",
            (Self::Metric, Measure::DoseMass) => "g",
            (Self::Us, Measure::DoseMass) => "oz",
            (Self::Metric, Measure::DoseVolume) => "mL",
            (Self::Us, Measure::DoseVolume) => "fl oz",
            (Self::Metric, Measure::StockMass) => "kg",
            (Self::Us, Measure::StockMass) => "lb",
            (Self::Metric, Measure::StockVolume) => "L",
            (Self::Us, Measure::StockVolume) => "gal",
            (Self::Metric, Measure::DoseMassPerBatch) => "g/hL",
            (Self::Us, Measure::DoseMassPerBatch) => "oz/bbl",
            (Self::Metric, Measure::DoseVolumePerBatch) => "mL/hL",
            (Self::Us, Measure::DoseVolumePerBatch) => "fl oz/bbl",
            (Self::Metric, Measure::Temperature) => "°C",
            (Self::Us, Measure::Temperature) => "°F",
            (Self::Metric, Measure::PricePerMass) => "per kg",
            (Self::Us, Measure::PricePerMass) => "per lb",
            (Self::Metric, Measure::PricePerVolume) => "per L",
            (Self::Us, Measure::PricePerVolume) => "per gal",
            (Self::Metric, Measure::PriceOfWater) => "per m³",
            (Self::Us, Measure::PriceOfWater) => "per 1000 gal",
        }
    }

    /// How many SI units (L, kg, g, mL, and g or mL per hL) make one of the shown units.
    const fn size(self, measure: Measure) -> f64 {
        match (self, measure) {
            (Self::Metric, Measure::Batch) => 100.0,
            (Self::Metric, Measure::StockMass | Measure::StockVolume) => 1000.0,
            (Self::Metric, _) | (_, Measure::Temperature) => 1.0,
            (Self::Us, Measure::Volume) => LITRES_PER_GALLON,
            (Self::Us, Measure::Batch) => LITRES_PER_BARREL,
            (Self::Us, Measure::Malt) => KILOGRAMS_PER_POUND,
            (Self::Us, Measure::DoseMass) => KILOGRAMS_PER_POUND * 1000.0 / 16.0,
            (Self::Us, Measure::DoseVolume) => LITRES_PER_GALLON * 1000.0 / 128.0,
            (Self::Us, Measure::StockMass) => KILOGRAMS_PER_POUND * 1000.0,
            (Self::Us, Measure::StockVolume) => LITRES_PER_GALLON * 1000.0,
            (Self::Us, Measure::DoseMassPerBatch) => {
                self.size(Measure::DoseMass) * 100.0 / LITRES_PER_BARREL
            }
            (Self::Us, Measure::DoseVolumePerBatch) => {
                self.size(Measure::DoseVolume) * 100.0 / LITRES_PER_BARREL
            }
            (Self::Us, Measure::PricePerMass) => 1.0 / KILOGRAMS_PER_POUND,
            (Self::Us, Measure::PricePerVolume) => 1.0 / LITRES_PER_GALLON,
            (Self::Us, Measure::PriceOfWater) => 1.0 / LITRES_PER_GALLON,
        }
    }

    /// A stored figure in the shown unit.
    pub fn shown(self, measure: Measure, si: f64) -> f64 {
        match (self, measure) {
            (Self::Us, Measure::Temperature) => si * 1.8 + 32.0,
            _ => si / self.size(measure),
        }
    }

    /// A figure typed in the shown unit, in SI.
    pub fn stored(self, measure: Measure, shown: f64) -> f64 {
        match (self, measure) {
            (Self::Us, Measure::Temperature) => (shown - 32.0) / 1.8,
            _ => shown * self.size(measure),
        }
    }

    /// A stored figure as people read it, with its unit.
    pub fn show(self, measure: Measure, si: f64) -> String {
        format!(
            "{} {}",
            format::figure(self.shown(measure, si)),
            self.label(measure)
        )
    }

    /// A stored dose to the step of its scale, without the unit. `step` is stored too.
    pub fn stepped(self, measure: Measure, si: f64, step: f64) -> String {
        format::stepped(self.shown(measure, si), self.shown(measure, step))
    }
}

/// The form with these fields turned from the shown units into SI. What cannot be
/// read as a number stays, for the body to refuse.
#[must_use]
pub fn typed_in_si(typed: &Form, units: Units, fields: &[(String, Measure)]) -> Form {
    converted(typed, fields, |measure, value| units.stored(measure, value))
}

/// The form with these fields turned from SI into the shown units.
#[must_use]
pub fn shown_in(stored: &Form, units: Units, fields: &[(String, Measure)]) -> Form {
    converted(stored, fields, |measure, value| {
        // Six significant digits: the noise of the conversion is not worth typing.
        let shown = units.shown(measure, value);
        format!("{shown:.5e}").parse().unwrap_or(shown)
    })
}

fn converted(
    form: &Form,
    fields: &[(String, Measure)],
    convert: impl Fn(Measure, f64) -> f64,
) -> Form {
    let mut result = form.clone();
    for (name, measure) in fields {
        if let Ok(value) = Number::Typed(form.value(name).to_owned()).parse() {
            result = result.with(name.clone(), convert(*measure, value).to_string());
        }
    }
    result
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Source: NIST Handbook 44, app. C: 1 gal = 3.785 412 L, 1 lb = 453.592 g,
    /// 1 oz = 28.349 52 g, 1 fl oz = 29.573 53 mL; a beer barrel of 31 gal = 117.348 L.
    #[test]
    fn us_units_have_the_sizes_the_handbook_prints() {
        for (measure, si) in [
            (Measure::Volume, 3.785_412),
            (Measure::Batch, 117.348),
            (Measure::Malt, 0.453_592),
            (Measure::DoseMass, 28.349_52),
            (Measure::DoseVolume, 29.573_53),
            (Measure::StockMass, 453.592),
            (Measure::StockVolume, 3_785.412),
            (Measure::DoseMassPerBatch, 28.349_52 / 1.173_48),
            (Measure::DoseVolumePerBatch, 29.573_53 / 1.173_48),
        ] {
            assert!(
                (Units::Us.stored(measure, 1.0) / si - 1.0).abs() < 3e-6,
                "{measure:?}"
            );
        }
        assert!((Units::Us.shown(Measure::Temperature, 20.0) - 68.0).abs() < 1e-12);
    }

    #[test]
    fn every_measure_comes_back_as_it_was() {
        for units in Units::ALL {
            for measure in [
                Measure::Volume,
                Measure::Batch,
                Measure::StockMass,
                Measure::Temperature,
                Measure::PriceOfWater,
            ] {
                assert!((units.stored(measure, units.shown(measure, 12.34)) - 12.34).abs() < 1e-12);
            }
        }
    }
}
