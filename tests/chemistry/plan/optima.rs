//! Each step of the strict order against SciPy's optimum of the same problem.

use chemistry::plan::{Ending, Way, solve};
use serde_json::Value;

use crate::problems::cases;

/// Steps agree within a millionth of themselves; below one in their own scale, of that.
fn agree(ours: f64, theirs: &Value) -> bool {
    let theirs = theirs.as_f64().expect("a number");
    (ours - theirs).abs() <= 1e-6 * theirs.abs().max(1.0)
}

#[test]
fn every_step_of_the_strict_order_reaches_the_optimum_that_scipy_finds() {
    let (mut compared, mut ways) = (0, [0; 4]);
    let mut wrong = Vec::new();
    for (index, case) in cases().iter().enumerate() {
        let possible = case.expected["possible"] == true;
        for (place, way) in Way::ALL.into_iter().enumerate() {
            let ending = solve(&case.problem, way).expect("a plan");
            let Some(treatment) = ending.treatment() else {
                assert!(!possible, "problem {index} is possible");
                continue;
            };
            assert!(possible, "problem {index} is impossible");
            let reached = treatment.reached;
            let litres = case.problem.volumes.mash.value.get();
            let acid = case.expected["acid_missing_meq"].as_f64().expect("acid") / litres;
            let mut steps = vec![
                (
                    "acid",
                    reached.acid_missing.get() / litres,
                    Value::from(acid),
                ),
                (
                    "discouraged",
                    reached.discouraged.get(),
                    case.expected["discouraged"].clone(),
                ),
            ];
            for level in 0..3 {
                let theirs = case.expected["missed"][level].clone();
                steps.push(("missed", reached.missed[level].get(), theirs));
            }
            let theirs = &case.expected["ways"][way.key()];
            if !theirs.is_null() {
                steps.push((
                    "chosen by",
                    reached.chosen_by.get(),
                    theirs["chosen_by"].clone(),
                ));
                steps.push((
                    "distance",
                    reached.distance.get(),
                    theirs["distance"].clone(),
                ));
                ways[place] += 1;
            }
            for (step, ours, theirs) in steps {
                compared += 1;
                if !agree(ours, &theirs) {
                    wrong.push(format!(
                        "problem {index}, {}, {step}: {ours} against {theirs}",
                        way.key()
                    ));
                }
            }
        }
    }
    assert!(
        wrong.is_empty(),
        "{} of {compared}:\n{}",
        wrong.len(),
        wrong.join("\n")
    );
    assert!(ways[0] >= 50 && ways[1] >= 25, "too few cases: {ways:?}");
}

#[test]
fn a_plan_put_back_through_the_forward_model_mashes_at_its_target_before_rounding() {
    let mut reached = 0;
    for (index, case) in cases().iter().enumerate() {
        for way in Way::ALL {
            let ending = solve(&case.problem, way).expect("a plan");
            let Some(treatment) = ending.treatment() else {
                continue;
            };
            if treatment.reached.acid_missing.get().abs() > 1e-6 {
                continue;
            }
            let exact =
                chemistry::plan::evaluate(&case.problem, &treatment.shares, &treatment.exact_doses)
                    .expect("an outcome");
            let ph = exact.mash.expect("a mash").ph.value.get();
            let target = case.problem.spec.mash_ph.target.get();
            assert!(
                (ph - target).abs() < 0.001,
                "problem {index}: {ph} for {target}"
            );
            reached += 1;
        }
    }
    assert!(reached > 100, "{reached}");
}

#[test]
fn the_random_problems_end_in_all_three_ways() {
    let mut endings = [0; 3];
    for case in cases() {
        match solve(&case.problem, Way::ClosestToPreferred).expect("a plan") {
            Ending::Met(_) => endings[0] += 1,
            Ending::Closest { .. } => endings[1] += 1,
            Ending::Impossible(_) => endings[2] += 1,
        }
    }
    assert!(endings.iter().all(|count| *count > 0), "{endings:?}");
}
