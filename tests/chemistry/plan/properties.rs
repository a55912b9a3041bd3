//! What must hold of any plan.

use std::sync::LazyLock;

use chemistry::ion::Ion;
use chemistry::plan::{Ending, Limit, Problem, Standing, Treatment, Way, evaluate, solve};
use chemistry::quantity::DoseAmount;
use chemistry::water::Water;
use proptest::prelude::*;

use crate::problems::cases;

static PROBLEMS: LazyLock<Vec<Problem>> =
    LazyLock::new(|| cases().into_iter().map(|case| case.problem).collect());

fn any_problem() -> impl Strategy<Value = Problem> {
    (0..PROBLEMS.len()).prop_map(|index| PROBLEMS[index].clone())
}

fn any_way() -> impl Strategy<Value = Way> {
    prop::sample::select(Way::ALL.to_vec())
}

/// Ions of the whole liquor, added up by hand.
fn whole(problem: &Problem, treatment: &Treatment, ion: Ion) -> f64 {
    let water: f64 = problem
        .sources
        .iter()
        .zip(&treatment.shares)
        .map(|(source, share)| share.get() * source.water.ions[ion].get())
        .sum();
    let added: f64 = treatment
        .doses
        .iter()
        .map(|dose| {
            let per_unit = problem.shelf[dose.material].material.per_unit();
            dose.amount.get() * per_unit.ions[ion].get()
        })
        .sum();
    water + added / problem.volumes.liquor.get()
}

/// Charge of the dissolved ions at the reference level of the alkalinity (H₂PO₄⁻), less
/// the alkalinity, meq/L: what neither blending nor dosing can change by itself.
fn unbalanced(water: &Water) -> f64 {
    let charges: f64 = Ion::ALL
        .into_iter()
        .map(|ion| {
            let charge = if ion == Ion::Phosphate {
                -1.0
            } else {
                f64::from(ion.charge())
            };
            charge * water.ions[ion].get() / ion.grams_per_mol()
        })
        .sum();
    charges - water.alkalinity.get()
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 200, ..ProptestConfig::default() })]

    #[test]
    fn rounding_never_hides_a_broken_limit(
        mut problem in any_problem(),
        way in any_way(),
        step in prop::sample::select(vec![0.1, 1.0, 10.0, 100.0, 1000.0]),
    ) {
        for item in &mut problem.shelf {
            item.step = DoseAmount::new(step).expect("a step");
        }
        let ending = solve(&problem, way).expect("a plan");
        let Some(treatment) = ending.treatment() else { return Ok(()) };
        for dose in &treatment.doses {
            let steps = dose.amount.get() / step;
            prop_assert!((steps - steps.round()).abs() < 1e-6, "{dose:?} in steps of {step}");
        }
        for (ion, most) in problem.limits.ions.iter() {
            let Some(most) = most else { continue };
            if whole(&problem, treatment, ion) > most.get() * (1.0 + 1e-5) {
                let named = treatment.outcome.broken.iter().any(|broken| broken.limit == Limit::Ion(ion));
                prop_assert!(named && !matches!(ending, Ending::Met(_)), "{ion:?}");
            }
        }
        for (index, item) in problem.shelf.iter().enumerate() {
            let used: f64 = treatment.doses.iter().filter(|dose| dose.material == index).map(|dose| dose.amount.get()).sum();
            if let Some(most) = item.most {
                prop_assert!(used <= most.get() + 1e-3, "{}: {used} of {most}", item.name);
            }
        }
        if matches!(ending, Ending::Met(_)) {
            prop_assert!(treatment.outcome.broken.is_empty());
            prop_assert!(treatment.outcome.findings.iter().all(|finding| finding.standing == Standing::Inside));
        }
    }

    #[test]
    fn ions_can_be_rounded_down_so_their_limits_are_kept_at_any_step(
        mut problem in any_problem(),
        step in 0.1..500.0f64,
    ) {
        // Less of anything never breaks a limit on an ion, so there is always a way.
        for item in &mut problem.shelf {
            item.step = DoseAmount::new(step).expect("a step");
        }
        let ending = solve(&problem, Way::ClosestToPreferred).expect("a plan");
        let Some(treatment) = ending.treatment() else { return Ok(()) };
        for broken in &treatment.outcome.broken {
            prop_assert!(!matches!(broken.limit, Limit::Ion(_) | Limit::Amount(_)), "{broken:?}");
        }
    }

    #[test]
    fn charge_is_conserved_by_every_plan(problem in any_problem(), way in any_way()) {
        let ending = solve(&problem, way).expect("a plan");
        let Some(treatment) = ending.treatment() else { return Ok(()) };
        let outcome = &treatment.outcome;
        let before = unbalanced(&outcome.blend);
        for water in [outcome.tank, outcome.mash_liquor, outcome.sparge_liquor, outcome.whole] {
            // Molar masses of salts and ions are rounded to five figures.
            prop_assert!((unbalanced(&water) - before).abs() < 1e-3);
        }
    }

    #[test]
    fn the_order_of_sources_and_materials_changes_nothing(
        problem in any_problem(),
        way in any_way(),
        by in 1..7usize,
    ) {
        let mut turned = problem.clone();
        let (sources, shelf) = (problem.sources.len(), problem.shelf.len());
        turned.sources.rotate_left(by % sources);
        turned.shelf.rotate_left(by % shelf);
        turned.shelf.swap(0, shelf - 1);
        let ending = solve(&problem, way).expect("a plan");
        let other = solve(&turned, way).expect("a plan");
        let (Some(one), Some(two)) = (ending.treatment(), other.treatment()) else {
            prop_assert!(ending.treatment().is_none() && other.treatment().is_none());
            return Ok(());
        };
        for (index, share) in one.shares.iter().enumerate() {
            let same = two.shares[(index + sources - by % sources) % sources];
            prop_assert!((share.get() - same.get()).abs() < 1e-3);
        }
        let litres = problem.volumes.liquor.get();
        for (index, item) in problem.shelf.iter().enumerate() {
            let found = turned.shelf.iter().position(|other| other.name == item.name).expect("the item");
            for &vessel in &item.vessels {
                let amount = |treatment: &Treatment, material: usize| -> f64 {
                    treatment.exact_doses.iter()
                        .filter(|dose| dose.material == material && dose.vessel == vessel)
                        .map(|dose| dose.amount.get() / litres)
                        .sum()
                };
                let (a, b) = (amount(one, index), amount(two, found));
                prop_assert!((a - b).abs() < 2e-3, "{} in {vessel:?}: {a} {b} per litre", item.name);
            }
        }
    }

    #[test]
    fn every_plan_is_what_the_forward_model_says_of_its_doses(problem in any_problem(), way in any_way()) {
        let ending = solve(&problem, way).expect("a plan");
        let Some(treatment) = ending.treatment() else { return Ok(()) };
        let again = evaluate(&problem, &treatment.shares, &treatment.doses).expect("an outcome");
        prop_assert_eq!(&again, &treatment.outcome);
    }
}
