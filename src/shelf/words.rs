//! A material in words, for pages.

use chemistry::material::{self, Form, Role, Strength, Substance, Vessel};
use chemistry::quantity::{DoseAmount, Estimate, Fraction};

use super::{Brings, Material, Price};
use crate::brewery::{Settings, Units};
use crate::input::percent;
use crate::web::format;
use crate::web::units::Measure;

/// What its figures are measured in on pages.
#[derive(Clone, Copy, Debug)]
pub struct Measures {
    /// A dose.
    pub dose: Measure,
    /// What is on the shelf.
    pub stock: Measure,
    /// A dose in so much liquor.
    pub per_batch: Measure,
    /// A price.
    pub price: Measure,
}

impl Measures {
    /// Those of a substance.
    pub const fn of(substance: Substance) -> Self {
        match substance.form() {
            Form::Solid => Self {
                dose: Measure::DoseMass,
                stock: Measure::StockMass,
                per_batch: Measure::DoseMassPerBatch,
                price: Measure::PricePerMass,
            },
            Form::Liquid => Self {
                dose: Measure::DoseVolume,
                stock: Measure::StockVolume,
                per_batch: Measure::DoseVolumePerBatch,
                price: Measure::PricePerVolume,
            },
        }
    }

    /// The fields of the form that carry them.
    pub fn fields(self) -> Vec<(String, Measure)> {
        vec![
            ("scale_step_g_or_ml".into(), self.dose),
            ("reorder_below_g_or_ml".into(), self.stock),
            ("highest_g_or_ml_per_hl".into(), self.per_batch),
            ("price_per_kg_or_l".into(), self.price),
        ]
    }
}

/// A name with its formula.
pub fn what(substance: Substance) -> String {
    format!("{}, {}", substance.name(), substance.formula())
}

/// What stands under a material's name: the formula alone where the name says the rest.
pub fn beside_name(material: &Material) -> String {
    if material.name == material.substance.name() {
        material.substance.formula().to_owned()
    } else {
        what(material.substance)
    }
}

/// A dose, or a dose in so much liquor, as it was entered.
pub fn amount(units: Units, measure: Measure, amount: DoseAmount) -> String {
    format!(
        "{} {}",
        format::entered(units.shown(measure, amount.get())),
        units.label(measure)
    )
}

/// How far a weighed dose may be from its plan: `2 %, assumed`.
pub fn tolerance(material: &Material) -> String {
    let percent = format::entered(percent(material.tolerance().get()));
    let assumed = if material.own_tolerance.is_none() {
        ", assumed"
    } else {
        ""
    };
    format!("{percent} %{assumed}")
}

/// What it is for.
pub const fn role(substance: Substance) -> &'static str {
    match substance.role() {
        Role::Salt => "salt",
        Role::Base => "base",
        Role::Acid => "acid",
    }
}

/// With a capital letter.
pub fn capital(words: &str) -> String {
    let mut letters = words.chars();
    letters.next().map_or_else(String::new, |first| {
        first.to_uppercase().chain(letters).collect()
    })
}

/// A share and its doubt in percent: `97 ± 2 %`.
pub fn share(share: Estimate<Fraction>) -> String {
    let percent = share.value.get() * 100.0;
    let sd = share.sd * 100.0;
    // A doubt of less than one per cent needs its decimal, and so does its figure.
    let places = usize::from(sd < 0.95 || (percent - percent.round()).abs() > 0.049);
    format!(
        "{} ± {} %",
        format::decimals(percent, places),
        format::decimals(sd, places)
    )
}

/// How strong it is: an assay for a solid, a strength with its doubt for a liquid.
pub fn strength(material: &material::Material) -> String {
    let assay = material.assay();
    let holds = assay.value.get();
    let doubt = |value: f64| value * assay.sd;
    match material.strength() {
        None => share(assay),
        Some(Strength::WeightPercent { share, density }) => {
            let percent = share.get() * 100.0;
            format!(
                "{} ± {} % w/w, {} g/mL",
                format::decimals(percent * holds, 1),
                format::decimals(doubt(percent), 1),
                format::decimals(density.get(), 3)
            )
        }
        Some(Strength::WeightPerVolume(grams)) => format!(
            "{} ± {} g/L",
            format::figure(grams.get() * holds),
            format::figure(doubt(grams.get()))
        ),
        Some(Strength::Titrated {
            acid,
            chloride_share,
        }) => format!(
            "{} ± {} meq/mL, {} of it hydrochloric",
            format::decimals(acid.get() * holds, 2),
            format::decimals(doubt(acid.get()), 2),
            format::percent(chloride_share.get())
        ),
    }
}

/// Its price in the brewery's units and currency; empty where none was entered.
pub fn price(material: &Material, settings: &Settings) -> String {
    let measure = Measures::of(material.substance).price;
    material
        .price
        .map(Price::get)
        .map_or_else(String::new, |price| {
            format!(
                "{} {} {}",
                settings.currency,
                format::decimals(settings.units.shown(measure, price), 2),
                settings.units.label(measure)
            )
        })
}

/// Vessels in a row.
pub fn vessels(vessels: &[Vessel]) -> String {
    let names: Vec<&str> = vessels.iter().map(|vessel| vessel.name()).collect();
    names.join(", ")
}

/// How a brewery finds the assay of an opened pack itself, where there is a simple way.
///
/// Source: a solution of 10 % calcium chloride by weight has a specific gravity of about
/// 1.086 at 15 °C (an old beverage manual); molar masses 110.98 and 147.01 g/mol, so that
/// 10.0 g of the anhydrous salt or 13.2 g of the dihydrate make 100 g of it; that what is
/// above 1 is in proportion to the strength near there: from memory.
pub fn how_to_assay(substance: Substance) -> Option<String> {
    let grams = match substance {
        Substance::CalciumChlorideDihydrate => "13.2",
        Substance::CalciumChlorideAnhydrous => "10.0",
        _ => return None,
    };
    Some(format!(
        "To assay it: fill {grams} g up to 100 g with pure water, let it cool to 15 °C and read a hydrometer. Pure salt reads about SG 1.086; the share is the reading less 1, divided by 0.086. A reading 0.001 off is 1.2 % off."
    ))
}

/// What share of it acts in time, where that is not simply all of it.
pub fn efficiency(substance: Substance) -> Option<String> {
    let efficiency = substance.efficiency();
    (efficiency.sd > 0.0).then(|| share(efficiency))
}

/// The dose whose effect a page quotes: 10 g (mL) per hectolitre, or 1 oz (fl oz) per
/// barrel.
pub fn quoted_dose(measures: Measures, units: Units) -> DoseAmount {
    let shown = match units {
        Units::Metric => 10.0,
        Units::Us => 1.0,
    };
    DoseAmount::clamped(units.stored(measures.per_batch, shown))
}

/// One line of what a dose brings.
pub struct BringsRow {
    /// Which figure of the liquor.
    pub figure: String,
    /// By how much, with its sign.
    pub change: String,
    /// One standard deviation.
    pub doubt: String,
    /// The unit.
    pub unit: &'static str,
}

/// What a dose brings, line by line.
pub fn brings(brings: &[Brings]) -> Vec<BringsRow> {
    let row = |brings: &Brings| {
        let sign = if brings.mg_per_l > 0.0 { "+" } else { "" };
        BringsRow {
            figure: brings.ion.map_or_else(
                || "Alkalinity".to_owned(),
                |ion| match ion.symbol() {
                    // Lactate and citrate have no shorter symbol.
                    symbol if symbol.starts_with(ion.name()) => capital(ion.name()),
                    symbol => format!("{} {symbol}", capital(ion.name())),
                },
            ),
            change: format!("{sign}{}", format::decimals(brings.mg_per_l, 1)),
            doubt: format::decimals(brings.sd_mg_per_l, 1),
            unit: if brings.ion.is_some() {
                "mg/L"
            } else {
                "mg/L as CaCO₃"
            },
        }
    };
    brings.iter().map(row).collect()
}
