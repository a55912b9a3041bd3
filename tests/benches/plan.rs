//! How long a plan takes, beside dense eliminations of the same size in the same run.
//!
//! `cargo bench -p chemistry --bench plan`. Fails when one plan takes longer than 5 ms or
//! all four ways longer than 40 ms. The ratio to the eliminations depends less on the
//! machine than the time does.

#![expect(clippy::print_stdout, reason = "a benchmark reports to whoever ran it")]

use std::hint::black_box;
use std::process::ExitCode;
use std::time::Instant;

use chemistry::plan::{Problem, Way, evaluate, solve, solve_all};

#[path = "../chemistry/plan/problems.rs"]
mod problems;

const ONE_PLAN_MS: f64 = 5.0;
const ALL_WAYS_MS: f64 = 40.0;

/// Unknowns of the linear system in one step of an interior-point method for a large
/// shelf: 30 columns and 70 rows.
const DENSE_SIZE: usize = 100;

fn main() -> ExitCode {
    let problems: Vec<Problem> = problems::cases()
        .into_iter()
        .filter(|case| case.expected["possible"] == true)
        .map(|case| case.problem)
        .collect();
    let dense = worst_and_mean(1, 100, |_| {
        black_box(eliminated(DENSE_SIZE));
    });
    println!("one dense elimination of {DENSE_SIZE}: {:.3} ms", dense.1);

    let forward = worst_and_mean(problems.len(), 20, |index| {
        let problem = &problems[index];
        let even = 1.0 / problem.sources.len() as f64;
        let shares = vec![chemistry::quantity::Fraction::clamped(even); problem.sources.len()];
        black_box(evaluate(problem, &shares, &[])).expect("an outcome");
    });
    report("forward model", forward, dense.1);
    let mut slowest: f64 = 0.0;
    for way in Way::ALL {
        let one = worst_and_mean(problems.len(), 20, |index| {
            black_box(solve(&problems[index], way)).expect("a plan");
        });
        report(way.key(), one, dense.1);
        if way != Way::FewestAdditions {
            slowest = slowest.max(one.0);
        }
    }
    let all = worst_and_mean(problems.len(), 20, |index| {
        black_box(solve_all(&problems[index])).expect("plans");
    });
    report("all four ways", all, dense.1);

    if slowest > ONE_PLAN_MS || all.0 > ALL_WAYS_MS {
        println!(
            "too slow: {ONE_PLAN_MS} ms for one plan and {ALL_WAYS_MS} ms for all are allowed"
        );
        return ExitCode::FAILURE;
    }
    ExitCode::SUCCESS
}

/// The worst of `count` cases, each the best of `rounds`, and their mean, ms.
fn worst_and_mean(count: usize, rounds: usize, run: impl Fn(usize)) -> (f64, f64) {
    let times: Vec<f64> = (0..count)
        .map(|index| {
            (0..rounds)
                .map(|_| {
                    let start = Instant::now();
                    run(index);
                    start.elapsed().as_secs_f64() * 1000.0
                })
                .fold(f64::INFINITY, f64::min)
        })
        .collect();
    let worst = times.iter().copied().fold(0.0, f64::max);
    (worst, times.iter().sum::<f64>() / count as f64)
}

fn report(what: &str, (worst, mean): (f64, f64), dense: f64) {
    println!(
        "{what}: mean {mean:.3} ms ({:.0} eliminations), worst {worst:.3} ms ({:.0})",
        mean / dense,
        worst / dense
    );
}

/// Gaussian elimination with row pivots of a well-conditioned matrix.
fn eliminated(size: usize) -> f64 {
    let mut matrix: Vec<Vec<f64>> = (0..size)
        .map(|row| {
            (0..=size)
                .map(|column| {
                    let wave = ((row * 31 + column * 17) % 101) as f64 / 101.0;
                    if row == column { 10.0 + wave } else { wave }
                })
                .collect()
        })
        .collect();
    for pivot in 0..size {
        let best = (pivot..size)
            .max_by(|a, b| matrix[*a][pivot].abs().total_cmp(&matrix[*b][pivot].abs()))
            .unwrap_or(pivot);
        matrix.swap(pivot, best);
        let (done, rest) = matrix.split_at_mut(pivot + 1);
        let top = &done[pivot];
        for row in rest {
            let factor = row[pivot] / top[pivot];
            for (value, above) in row[pivot..].iter_mut().zip(&top[pivot..]) {
                *value -= factor * above;
            }
        }
    }
    matrix[size - 1][size] / matrix[size - 1][size - 1]
}
