//! Doses in steps of the scale.
//!
//! Each dose goes down or up to a step, whichever together keep the limits, then the
//! windows, then the mash pH best.

use crate::quantity::DoseAmount;

use super::forward::Dose;
use super::model::{Model, TRACE};
use super::problem::{Priority, Problem};
use super::program::dot;

/// Up to this many doses every way of rounding is looked at; beyond, one dose at a time
/// until nothing gets better.
const ALL_WAYS: usize = 8;

/// Mash balances nearer than this are one, meq per litre: about 0.002 pH.
const BALANCE_GRAIN: f64 = 0.02;

/// Windows missed by this much more than they must are not missed, relative to their
/// scale: 0.1 mg/L in 100.
const WINDOW_GRAIN: f64 = 1e-3;

struct Choice {
    column: usize,
    down: f64,
    up: f64,
    exact: f64,
}

/// Worst first: limits passed, windows missed by priority, mash off, distance rounded.
type Badness = [f64; 6];

pub(super) fn rounded(problem: &Problem, model: &Model, exact: &[f64]) -> Vec<Dose> {
    let choices: Vec<Choice> = model
        .additions
        .iter()
        .enumerate()
        .filter_map(|(place, addition)| {
            let column = model.sources + place;
            let step = problem.shelf[addition.material].step.get() / model.litres;
            let per_litre = exact[column];
            if step <= 0.0 || per_litre <= TRACE {
                return None;
            }
            // A whole number of steps within the solver's accuracy is that number.
            let steps = per_litre / step;
            let near = (steps - steps.round()).abs() < 1e-6;
            let (down, up) = if near {
                (steps.round(), steps.round())
            } else {
                (steps.floor(), steps.ceil())
            };
            Some(Choice {
                column,
                down: down * step,
                up: up * step,
                exact: per_litre,
            })
        })
        .collect();
    let best = if choices.len() <= ALL_WAYS {
        best_of_all(model, exact, &choices)
    } else {
        improved(model, exact, &choices)
    };
    doses(problem, model, &best)
}

fn doses(problem: &Problem, model: &Model, columns: &[f64]) -> Vec<Dose> {
    let mut doses = model.doses(columns);
    for dose in &mut doses {
        let step = problem.shelf[dose.material].step.get();
        if step > 0.0 {
            let steps = (dose.amount.get() / step).round();
            dose.amount = DoseAmount::clamped(steps * step);
        }
    }
    doses.retain(|dose| dose.amount.get() > 0.0);
    doses
}

fn best_of_all(model: &Model, exact: &[f64], choices: &[Choice]) -> Vec<f64> {
    let columns_for = |bits: u32| {
        let mut columns = exact.to_vec();
        for (place, choice) in choices.iter().enumerate() {
            columns[choice.column] = if bits >> place & 1 == 1 {
                choice.up
            } else {
                choice.down
            };
        }
        columns
    };
    (0..1u32 << choices.len())
        .map(columns_for)
        .map(|columns| (badness(model, exact, choices, &columns), columns))
        .min_by(|(a, _), (b, _)| compare(a, b))
        .map_or_else(|| exact.to_vec(), |(_, columns)| columns)
}

fn improved(model: &Model, exact: &[f64], choices: &[Choice]) -> Vec<f64> {
    let from = |start: &dyn Fn(&Choice) -> f64| {
        let mut columns = exact.to_vec();
        for choice in choices {
            columns[choice.column] = start(choice);
        }
        let mut bad = badness(model, exact, choices, &columns);
        loop {
            let better = choices
                .iter()
                .map(|choice| {
                    let mut other = columns.clone();
                    other[choice.column] = choice.up + choice.down - columns[choice.column];
                    (badness(model, exact, choices, &other), other)
                })
                .min_by(|(a, _), (b, _)| compare(a, b))
                .filter(|(other, _)| compare(other, &bad).is_lt());
            match better {
                Some((other_bad, other)) => (bad, columns) = (other_bad, other),
                None => return (bad, columns),
            }
        }
    };
    let nearest = |choice: &Choice| {
        if choice.exact - choice.down < choice.up - choice.exact {
            choice.down
        } else {
            choice.up
        }
    };
    let (a, b) = (from(&nearest), from(&|choice| choice.down));
    if compare(&b.0, &a.0).is_lt() {
        b.1
    } else {
        a.1
    }
}

fn badness(model: &Model, exact: &[f64], choices: &[Choice], columns: &[f64]) -> Badness {
    let passed: f64 = model
        .hard
        .iter()
        .map(|hard| {
            let tolerance = 5e-7 * (hard.most.abs() + 1.0 / hard.scale);
            (dot(&hard.coefficients, columns) - hard.most - tolerance).max(0.0)
        })
        .sum();
    let mut missed = [0.0; 3];
    for window in &model.windows {
        let level = Priority::ALL
            .iter()
            .position(|priority| *priority == window.priority)
            .unwrap_or(0);
        missed[level] += (window.missed(columns) - window.missed(exact) - WINDOW_GRAIN).max(0.0);
    }
    let off = (model.acid_missing(columns) - model.acid_missing(exact)).abs();
    let distance: f64 = choices
        .iter()
        .filter(|choice| choice.up > choice.down)
        .map(|choice| ((columns[choice.column] - choice.exact) / (choice.up - choice.down)).powi(2))
        .sum();
    let [high, middle, low] = missed;
    [
        passed,
        high,
        middle,
        low,
        (off / BALANCE_GRAIN).floor(),
        distance,
    ]
}

fn compare(a: &Badness, b: &Badness) -> std::cmp::Ordering {
    a.iter()
        .zip(b)
        .map(|(a, b)| a.total_cmp(b))
        .find(|order| order.is_ne())
        .unwrap_or(std::cmp::Ordering::Equal)
}
