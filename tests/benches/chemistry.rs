//! How long the engine takes, beside a textbook method timed in the same run.
//!
//! `cargo bench -p chemistry`. Fails when one speciation takes longer than 10 µs. The
//! ratio to the textbook method depends less on the machine than the time does.

#![expect(clippy::print_stdout, reason = "a benchmark reports to whoever ran it")]

use std::collections::HashMap;
use std::hint::black_box;
use std::process::ExitCode;
use std::time::Instant;

use chemistry::acid::Acid;
use chemistry::carbonate::{Constants, Speciation, dose_to_ph};
use chemistry::ion::{Ion, IonMap};
use chemistry::material::Contribution;
use chemistry::quantity::{Celsius, Fraction, Litres, MgPerL, MgPerLAsCaCO3, Millimoles, Ph};
use chemistry::water::{MeasuredWater, Water};

const ALLOWED_MICROSECONDS: f64 = 10.0;

fn main() -> ExitCode {
    let measured = measured_waters();
    let waters: Vec<(Water, Constants)> = measured
        .iter()
        .map(|measured| {
            let water = *Speciation::of_measured(measured)
                .expect("a speciation")
                .water();
            (
                water,
                Constants::at(measured.temperature).expect("constants"),
            )
        })
        .collect();
    // Every acid at once: all species take part.
    let treated: Vec<(Water, Constants)> = waters
        .iter()
        .map(|(water, constants)| {
            let tenth = Millimoles::constant(0.1);
            let water = Acid::ALL.into_iter().fold(*water, |water, acid| {
                Contribution::of_acid(acid, tenth).added_to(&water, Litres::constant(1.0))
            });
            (water, constants.clone())
        })
        .collect();

    let textbook = microseconds(waters.len(), || {
        for (water, _) in &waters {
            black_box(textbook_ph(black_box(water)));
        }
    });
    report("textbook bisection", textbook, textbook);
    let speciation = microseconds(waters.len(), || {
        for (water, constants) in &waters {
            black_box(Speciation::of(black_box(water), constants)).expect("a speciation");
        }
    });
    report("speciation", speciation, textbook);
    let of_treated = microseconds(treated.len(), || {
        for (water, constants) in &treated {
            black_box(Speciation::of(black_box(water), constants)).expect("a speciation");
        }
    });
    report("speciation of treated water", of_treated, textbook);
    let of_measured = microseconds(waters.len(), || {
        for (measured, (_, constants)) in measured.iter().zip(&waters) {
            black_box(Speciation::of_measured_with(black_box(measured), constants))
                .expect("a speciation");
        }
    });
    report("speciation from a pH", of_measured, textbook);
    let dose = microseconds(waters.len(), || {
        let (target, closed) = (Ph::constant(5.5), Fraction::constant(0.0));
        for (water, constants) in &waters {
            black_box(dose_to_ph(
                black_box(water),
                Acid::Lactic,
                target,
                closed,
                constants,
            ))
            .expect("an outcome");
        }
    });
    report("dose to a pH", dose, textbook);
    let constants = microseconds(waters.len(), || {
        for (_, constants) in &waters {
            black_box(Constants::at(black_box(constants.temperature()))).expect("constants");
        }
    });
    report("constants at a temperature", constants, textbook);

    if speciation.max(of_treated) > ALLOWED_MICROSECONDS {
        println!("A speciation takes more than {ALLOWED_MICROSECONDS} µs.");
        return ExitCode::FAILURE;
    }
    ExitCode::SUCCESS
}

fn report(what: &str, microseconds: f64, textbook: f64) {
    let ratio = microseconds / textbook;
    println!("{what:28} {microseconds:8.2} µs, {ratio:6.2} times the textbook method");
}

/// Time of one of `each` pieces of work: the least of several runs, because whatever
/// else the machine does only adds.
fn microseconds(each: usize, mut work: impl FnMut()) -> f64 {
    let mut least = f64::INFINITY;
    for _ in 0..40 {
        let start = Instant::now();
        work();
        least = least.min(start.elapsed().as_secs_f64());
    }
    least * 1e6 / each as f64
}

/// pH of carbonic acid and water alone at 25 °C: no activities, no pairs, two hundred
/// halvings of the pH scale.
fn textbook_ph(water: &Water) -> f64 {
    let (alkalinity, carbon) = (water.alkalinity.get() / 1000.0, water.carbon.get() / 1000.0);
    let (k1, k2, kw) = (10f64.powf(-6.352), 10f64.powf(-10.329), 10f64.powf(-13.995));
    let (mut low, mut high) = (0.0, 14.0);
    for _ in 0..200 {
        let middle = 0.5 * (low + high);
        let h = 10f64.powf(-middle);
        let sum = h * h + k1 * h + k1 * k2;
        let there = carbon * (k1 * h + 2.0 * k1 * k2) / sum + kw / h - h;
        if there < alkalinity {
            low = middle;
        } else {
            high = middle;
        }
    }
    0.5 * (low + high)
}

/// The waters of `../chemistry/phreeqc/speciation.csv`; its README says whence.
fn measured_waters() -> Vec<MeasuredWater> {
    let table = include_str!("../chemistry/phreeqc/speciation.csv");
    csv::Reader::from_reader(table.as_bytes())
        .deserialize()
        .map(|row| {
            let row: HashMap<String, String> = row.expect("a row");
            let at = |column: &str| row[column].parse::<f64>().expect("a number");
            MeasuredWater {
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
                ph: Ph::clamped(at("pH")),
                temperature: Celsius::clamped(at("temp_C")),
            }
        })
        .collect()
}
