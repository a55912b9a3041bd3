//! The forward model by itself: what shares and doses do.

use chemistry::ion::Ion;
use chemistry::material::{Substance, Vessel};
use chemistry::plan::{Broken, Dose, Limit, Measure, Priority, Requirement, Standing, evaluate};
use chemistry::quantity::{DoseAmount, Fraction, MgPerL};

use crate::brewery::{bare, hard_water, item, source, window};

const ALL: [Fraction; 1] = [Fraction::constant(1.0)];

fn dose(material: usize, vessel: Vessel, amount: f64) -> Dose {
    Dose {
        material,
        vessel,
        amount: DoseAmount::new(amount).expect("an amount"),
    }
}

#[test]
fn a_gram_reaches_the_waters_its_vessel_feeds_and_no_other() {
    // 100 g of calcium chloride dihydrate hold 27.26 g of calcium (40.078 / 147.008): over
    // 1000 L in all, 500 L of mash liquor, 400 L of sparge liquor.
    let mut problem = bare();
    problem.shelf = vec![item(Substance::CalciumChlorideDihydrate, &Vessel::ALL)];
    for (vessel, in_tank, in_mash, in_sparge) in [
        (Vessel::LiquorTank, 27.26, 27.26, 27.26),
        (Vessel::Mash, 0.0, 54.52, 0.0),
        (Vessel::SpargeLiquor, 0.0, 0.0, 68.15),
        (Vessel::Kettle, 0.0, 0.0, 0.0),
    ] {
        let outcome = evaluate(&problem, &ALL, &[dose(0, vessel, 100.0)]).expect("an outcome");
        let calcium = |water: &chemistry::water::Water| water.ions[Ion::Calcium].get();
        for (found, expected) in [
            (calcium(&outcome.tank), in_tank),
            (calcium(&outcome.mash_liquor), in_mash),
            (calcium(&outcome.sparge_liquor), in_sparge),
            (calcium(&outcome.whole), 27.26),
            (calcium(&outcome.blend), 0.0),
        ] {
            assert!(
                (found - expected).abs() < 0.01,
                "{vessel:?}: {found} {expected}"
            );
        }
    }
}

#[test]
fn only_what_reaches_the_mash_moves_its_ph() {
    let mut problem = bare();
    problem.sources = vec![source(hard_water(), false, 0.002)];
    problem.shelf = vec![item(Substance::LacticAcid, &Vessel::ALL)];
    let ph = |vessel, amount| {
        let outcome = evaluate(&problem, &ALL, &[dose(0, vessel, amount)]).expect("an outcome");
        outcome.mash.expect("a mash").ph.value.get()
    };
    let untouched = ph(Vessel::Kettle, 0.0);
    assert_eq!(ph(Vessel::SpargeLiquor, 200.0), untouched);
    assert_eq!(ph(Vessel::Kettle, 200.0), untouched);
    // Half of what is in the tank goes to the mash.
    let difference = ph(Vessel::LiquorTank, 200.0) - ph(Vessel::Mash, 100.0);
    assert!(difference.abs() < 1e-6 && ph(Vessel::Mash, 100.0) < untouched - 0.05);
}

#[test]
fn a_half_and_half_blend_is_the_mean_and_costs_the_mean() {
    let mut problem = bare();
    problem.sources.push(source(hard_water(), false, 0.002));
    let half = [Fraction::constant(0.5); 2];
    let outcome = evaluate(&problem, &half, &[]).expect("an outcome");
    assert!((outcome.blend.ions[Ion::Calcium].get() - 50.0).abs() < 1e-9);
    assert!((outcome.blend.alkalinity.get() - 2.0).abs() < 1e-9);
    // 500 L at 0.01 and 500 L at 0.002.
    assert!((outcome.cost.get() - 6.0).abs() < 1e-9);
}

#[test]
fn two_tested_waters_of_one_kind_are_known_better_than_one() {
    // Independent errors of half the water each: 1/√2 of the error of one.
    let mut problem = bare();
    problem.sources = vec![source(hard_water(), false, 0.002); 2];
    let effect = |shares: [f64; 2]| {
        let shares = shares.map(Fraction::clamped);
        let outcome = evaluate(&problem, &shares, &[]).expect("an outcome");
        let influences = outcome.mash.expect("a mash").influences;
        influences
            .iter()
            .find(|influence| influence.name == "alkalinity of the liquor")
            .map(|influence| influence.effect.get())
            .expect("an influence")
    };
    let ratio = effect([0.5, 0.5]) / effect([1.0, 0.0]);
    assert!((ratio - 0.5f64.sqrt()).abs() < 1e-6, "{ratio}");
}

#[test]
fn a_limit_passed_by_hand_is_named_with_the_figure_that_passes_it() {
    let mut problem = bare();
    problem.shelf = vec![item(Substance::SodiumChloride, &Vessel::ALL)];
    problem.limits.ions[Ion::Sodium] = Some(MgPerL::constant(100.0));
    problem.spec.ions[Ion::Chloride] = window(0.0, 100.0, Priority::Low);
    // 300 g in 1000 L: sodium 118.0, chloride 182.0 mg/L (22.990 and 35.45 of 58.44).
    let outcome = evaluate(&problem, &ALL, &[dose(0, Vessel::Kettle, 300.0)]).expect("an outcome");
    let [Broken { limit, reaches }] = outcome.broken[..] else {
        panic!("{:?}", outcome.broken);
    };
    assert_eq!(limit, Limit::Ion(Ion::Sodium));
    assert!((reaches.get() - 118.02).abs() < 0.01);
    let chloride = outcome
        .finding(Requirement::Ion(Ion::Chloride))
        .expect("a finding");
    assert!(
        matches!(chloride.standing, Standing::Above(Measure::Concentration(by)) if (by.get() - 81.98).abs() < 0.01)
    );
}

#[test]
fn the_room_left_is_what_can_still_be_added_before_a_limit() {
    let mut problem = bare();
    problem.sources = vec![source(hard_water(), false, 0.002)];
    problem.shelf = vec![item(Substance::LacticAcid, &Vessel::ALL)];
    problem.limits.ions[Ion::Lactate] = Some(MgPerL::constant(300.0));
    let outcome = evaluate(&problem, &ALL, &[dose(0, Vessel::Mash, 100.0)]).expect("an outcome");
    // 80 % by weight, 1.190 g/mL: 0.9414 g of lactate a millilitre, so 318.7 mL for 300 mg/L.
    assert!(
        (outcome.room[0].get() - 218.7).abs() < 0.1,
        "{}",
        outcome.room[0]
    );
    problem.shelf[0].most = Some(DoseAmount::constant(150.0));
    let outcome = evaluate(&problem, &ALL, &[dose(0, Vessel::Mash, 100.0)]).expect("an outcome");
    assert!((outcome.room[0].get() - 50.0).abs() < 1e-9);
}

#[test]
fn the_ratio_is_named_only_where_there_is_something_to_compare() {
    let problem = bare();
    let outcome = evaluate(&problem, &ALL, &[]).expect("an outcome");
    assert_eq!(outcome.sulfate_to_chloride, None);
    let mut problem = bare();
    problem.sources = vec![source(hard_water(), false, 0.002)];
    let outcome = evaluate(&problem, &ALL, &[]).expect("an outcome");
    assert_eq!(
        outcome.sulfate_to_chloride.map(|ratio| ratio.get()),
        Some(1.5)
    );
}
