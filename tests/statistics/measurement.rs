//! How precise a method is.

use std::collections::BTreeMap;

use statistics::measurement::{Analyte, Method, Precision, median};
use statistics::quantity::{Step, Value};

use crate::reference::{Row, number, rows};

fn value(value: f64) -> Value {
    Value::new(value).unwrap()
}

pub(crate) fn method(name: &str) -> Method {
    match name {
        "drop_kit" => Method::DropKit,
        "photometer" => Method::Photometer,
        "lab" => Method::Laboratory,
        "meter" => Method::Meter,
        _ => panic!("{name}"),
    }
}

pub(crate) fn analyte(name: &str) -> Analyte {
    match name {
        "alkalinity" => Analyte::Alkalinity,
        "hardness" => Analyte::Hardness,
        "calcium" => Analyte::Calcium,
        "magnesium" => Analyte::Magnesium,
        "sodium" => Analyte::Sodium,
        "potassium" => Analyte::Potassium,
        "chloride" => Analyte::Chloride,
        "sulfate" => Analyte::Sulfate,
        "nitrate" => Analyte::Nitrate,
        "iron" => Analyte::Iron,
        "conductivity" => Analyte::Conductivity,
        "ph" => Analyte::Ph,
        _ => panic!("{name}"),
    }
}

#[test]
fn every_method_has_the_figures_of_the_reference_methods() {
    let rows = rows(include_str!("qa/methods.csv"));
    assert_eq!(rows.len(), 20);
    for row in rows {
        let ours = Precision::of(method(&row["method"]), analyte(&row["analyte"]));
        // The table's decimals, so equal to the last bit.
        assert_eq!(ours.constant.get(), number(&row, "a"), "{row:?}");
        assert_eq!(ours.proportional.get(), number(&row, "b"), "{row:?}");
        assert_eq!(ours.step.get(), number(&row, "step"), "{row:?}");
    }
}

#[test]
fn the_variance_of_every_reference_result_follows_from_its_method_at_the_median_of_its_series() {
    let mut series: BTreeMap<(String, String), Vec<Row>> = BTreeMap::new();
    for row in rows(include_str!("qa/local_level.csv")) {
        series
            .entry((row["source"].clone(), row["analyte"].clone()))
            .or_default()
            .push(row);
    }
    assert_eq!(series.len(), 6);
    for ((_, name), rows) in series {
        let values: Vec<Value> = rows.iter().map(|row| value(number(row, "value"))).collect();
        let level = median(&values).unwrap();
        for row in rows {
            let precision = Precision::of(method(&row["method"]), analyte(&name));
            let variance = precision.sd_at(level).get().powi(2);
            let expected = number(&row, "R");
            // Closed form; the table prints twelve digits.
            assert!(
                (variance / expected - 1.0).abs() < 1e-9,
                "{name}: {variance}, {expected}"
            );
        }
    }
}

#[test]
fn constant_and_proportional_parts_and_the_step_add_as_squares() {
    // Worked by hand at 600 µS/cm: 1 + 36 + 1/12; and at any pH: 0.0025 + 0.0001/12.
    let conductivity = Precision::of(Method::Meter, Analyte::Conductivity).sd_at(value(600.0));
    assert!((conductivity.get().powi(2) - 37.083_333_333_3).abs() < 1e-9);
    let ph = Precision::of(Method::Meter, Analyte::Ph).sd_at(value(7.0));
    assert!((ph.get().powi(2) - 0.002_508_333_333).abs() < 1e-11);
}

#[test]
fn a_coarser_drop_is_less_precise_and_a_laboratory_beats_a_kit() {
    let fine = Precision::of(Method::DropKit, Analyte::Alkalinity);
    let coarse = Precision {
        step: Step::constant(20.0),
        ..fine
    };
    let laboratory = Precision::of(Method::Laboratory, Analyte::Alkalinity);
    for level in [0.0, 20.0, 100.0, 300.0].map(value) {
        assert!(fine.sd_at(level) < coarse.sd_at(level));
        assert!(laboratory.sd_at(level) < fine.sd_at(level));
    }
}

#[test]
fn the_median_is_the_middle_value_or_the_mean_of_the_two_middle_ones() {
    assert_eq!(median(&[]), None);
    assert_eq!(median(&[3.0, 1.0, 20.0].map(value)), Some(value(3.0)));
    assert_eq!(median(&[3.0, 1.0, 20.0, 4.0].map(value)), Some(value(3.5)));
}
