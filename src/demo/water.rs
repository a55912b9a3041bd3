//! The sources of the invented brewery and two years of their tests.

use std::f64::consts::TAU;

use chemistry::quantity::{Celsius, MgPerL, MgPerLAsCaCO3, Ph};
use chemistry::report::conductivity;
use chemistry::water::MeasuredWater;
use jiff::civil::Date;
use serde_json::{Value, json};

use super::{Chance, body, days_before};
use crate::db::Db;
use crate::error::Error;
use crate::people::Member;
use crate::sources::water_tests::operations as water_tests;
use crate::sources::{self, NewSource};

/// What a source holds on average, mg/L; alkalinity as CaCO₃. The ions balance.
struct Average {
    calcium: f64,
    magnesium: f64,
    sodium: f64,
    potassium: f64,
    alkalinity: f64,
    sulfate: f64,
    chloride: f64,
    nitrate: f64,
    ph: f64,
}

const MAINS: Average = Average {
    calcium: 96.0,
    magnesium: 11.0,
    sodium: 28.0,
    potassium: 3.5,
    alkalinity: 215.0,
    sulfate: 62.0,
    chloride: 38.0,
    nitrate: 22.0,
    ph: 7.4,
};
const BOREHOLE: Average = Average {
    calcium: 14.0,
    magnesium: 3.2,
    sodium: 12.0,
    potassium: 1.2,
    alkalinity: 42.0,
    sulfate: 11.0,
    chloride: 13.0,
    nitrate: 4.5,
    ph: 7.2,
};
const PERMEATE: Average = Average {
    calcium: 0.8,
    magnesium: 0.2,
    sodium: 3.0,
    potassium: 0.2,
    alkalinity: 6.0,
    sulfate: 0.4,
    chloride: 2.2,
    nitrate: 0.0,
    ph: 7.1,
};

pub(super) async fn fill_sources(
    db: &Db,
    by: &Member,
    today: Date,
    chance: &mut Chance,
) -> Result<(), Error> {
    for (name, kind, blending, price, every, average, notes) in [
        (
            "Town mains",
            "mains",
            false,
            2.4,
            90,
            &MAINS,
            "Hard; harder in late summer.",
        ),
        (
            "Mill borehole",
            "borehole",
            false,
            0.6,
            180,
            &BOREHOLE,
            "Soft, from the gravel under the mill.",
        ),
        (
            "RO permeate",
            "permeate",
            true,
            5.8,
            180,
            &PERMEATE,
            "From the mains; a third of it goes to the drain.",
        ),
    ] {
        let new = NewSource::try_from(body::<sources::api::SourceBody>(json!({
            "name": name, "kind": kind, "blending": blending, "price_per_m3": price,
            "days_between_tests": every, "notes": notes, "in_use": true,
        }))?)?;
        let source = sources::operations::create(db, by, new).await?;
        let swing = if kind == "mains" { 0.07 } else { 0.02 };
        for days in (0..=720)
            .rev()
            .step_by(if kind == "mains" { 90 } else { 180 })
            .filter(|days| days % 10 == 0)
        {
            let days = i64::from(days) + 12;
            let test = laboratory(average, days, swing, today, chance);
            water_tests::enter(
                db,
                by,
                source.id,
                body::<sources::water_tests::api::WaterTestBody>(test)?.try_into()?,
            )
            .await?;
        }
        if kind == "mains" {
            for days in (1..24).rev().map(|month| i64::from(month) * 30) {
                let level = average.alkalinity * season(days, swing) * (1.0 + chance.about(0.03));
                let drops = (level / 10.0).round() * 10.0;
                let test = json!({
                    "sampled_on": days_before(today, days).to_string(), "laboratory": "Drop kit at the desk",
                    "method": "drop_kit", "drop_mg_per_l_as_caco3": 10,
                    "readings": [{"analyte": "alkalinity", "value": drops.to_string(), "unit": "mg_per_l_as_caco3"}],
                });
                water_tests::enter(
                    db,
                    by,
                    source.id,
                    body::<sources::water_tests::api::WaterTestBody>(test)?.try_into()?,
                )
                .await?;
            }
        }
    }
    Ok(())
}

/// Everything in the water rises and falls together over the year.
fn season(days_ago: i64, swing: f64) -> f64 {
    // Whole days of two years: exact.
    1.0 + swing * (TAU * days_ago as f64 / 365.25).sin()
}

fn laboratory(average: &Average, days: i64, swing: f64, today: Date, chance: &mut Chance) -> Value {
    let level = season(days, swing);
    let mut read = |value: f64| value * level * (1.0 + chance.about(0.012));
    let [
        calcium,
        magnesium,
        sodium,
        potassium,
        alkalinity,
        sulfate,
        chloride,
        nitrate,
    ] = [
        average.calcium,
        average.magnesium,
        average.sodium,
        average.potassium,
        average.alkalinity,
        average.sulfate,
        average.chloride,
        average.nitrate,
    ]
    .map(&mut read);
    let mut ions = chemistry::ion::IonMap::from_fn(|_| MgPerL::constant(0.0));
    use chemistry::ion::Ion;
    for (ion, value) in [
        (Ion::Calcium, calcium),
        (Ion::Magnesium, magnesium),
        (Ion::Sodium, sodium),
        (Ion::Potassium, potassium),
        (Ion::Sulfate, sulfate),
        (Ion::Chloride, chloride),
        (Ion::Nitrate, nitrate),
    ] {
        ions[ion] = MgPerL::clamped(value);
    }
    let ph = average.ph + chance.about(0.06);
    let conducts = conductivity(&MeasuredWater {
        ions,
        alkalinity: MgPerLAsCaCO3::clamped(alkalinity),
        ph: Ph::clamped(ph),
        temperature: Celsius::constant(20.0),
    });
    let figure = |value: f64| {
        if value >= 20.0 {
            format!("{value:.0}")
        } else if value >= 2.0 {
            format!("{value:.1}")
        } else {
            format!("{value:.2}")
        }
    };
    let nitrate = if nitrate < 0.5 {
        "<0.5".to_owned()
    } else {
        figure(nitrate)
    };
    json!({
        "sampled_on": days_before(today, days).to_string(),
        "laboratory": "Fen Analytical", "reference": format!("FA-{}", 4000 - days), "method": "laboratory",
        "ph_temperature_celsius": 20,
        "readings": [
            {"analyte": "calcium", "value": figure(calcium), "unit": "mg_per_l"},
            {"analyte": "magnesium", "value": figure(magnesium), "unit": "mg_per_l"},
            {"analyte": "sodium", "value": figure(sodium), "unit": "mg_per_l"},
            {"analyte": "potassium", "value": figure(potassium), "unit": "mg_per_l"},
            {"analyte": "alkalinity", "value": figure(alkalinity), "unit": "mg_per_l_as_caco3"},
            {"analyte": "sulfate", "value": figure(sulfate), "unit": "mg_per_l"},
            {"analyte": "chloride", "value": figure(chloride), "unit": "mg_per_l"},
            {"analyte": "nitrate", "value": nitrate, "unit": "mg_per_l"},
            {"analyte": "ph", "value": format!("{ph:.2}"), "unit": "ph"},
            {"analyte": "conductivity", "value": figure(conducts.get()), "unit": "us_per_cm_25"},
        ],
    })
}
