//! How plans end, and what they say stands in the way.

use chemistry::ion::Ion;
use chemistry::mash::MashInputs;
use chemistry::material::{Substance, Vessel};
use chemistry::plan::{
    Ending, Limit, Measure, Obstacle, PlanError, Preference, Priority, Problem, Requirement,
    Shortfall, Standing, Treatment, Way, evaluate, solve, solve_all,
};
use chemistry::quantity::{DoseAmount, Fraction, Litres, MgPerL, Ph};

use crate::brewery::{bare, hard_water, item, source, window};

use Vessel::{LiquorTank, Mash};

fn closest(problem: &Problem) -> Ending {
    solve(problem, Way::ClosestToPreferred).expect("a plan")
}

fn met(ending: Ending) -> Treatment {
    match ending {
        Ending::Met(treatment) => treatment,
        other => panic!("not met: {other:?}"),
    }
}

fn missed(ending: Ending) -> (Treatment, Vec<Shortfall>) {
    match ending {
        Ending::Closest {
            treatment,
            shortfalls,
        } => (treatment, shortfalls),
        other => panic!("not closest: {other:?}"),
    }
}

fn dosed(treatment: &Treatment, material: usize) -> f64 {
    treatment
        .doses
        .iter()
        .filter(|dose| dose.material == material)
        .map(|dose| dose.amount.get())
        .sum()
}

/// Hard water, and lactic acid to bring it down.
fn hard() -> Problem {
    let mut problem = bare();
    problem.sources = vec![source(hard_water(), false, 0.002)];
    problem.shelf = vec![item(Substance::LacticAcid, &[Mash])];
    problem
}

#[test]
fn the_gypsum_for_a_sulfate_window_is_that_of_the_salt_table() {
    // One g/hL of gypsum gives 5.579 mg/L of sulfate (molar masses, IUPAC 2021), so 1000 L
    // want 179.2 g for 100 mg/L, and nothing asks for more.
    let mut problem = bare();
    problem.shelf = vec![item(Substance::Gypsum, &[Vessel::Kettle])];
    problem.spec.ions[Ion::Sulfate] = window(100.0, 110.0, Priority::High);
    problem.spec.mash_ph.high = Ph::constant(5.8);
    let treatment = met(closest(&problem));
    let exact = treatment.exact_doses[0].amount.get();
    assert!((exact - 179.24).abs() < 0.05, "{exact}");
    // Nearer would be 179 g, but that misses the window.
    assert_eq!(dosed(&treatment, 0), 180.0);
}

#[test]
fn the_acid_for_a_target_is_the_closed_form_dose_of_the_mash() {
    let problem = hard();
    let treatment = met(closest(&problem));
    let mash = MashInputs {
        grist: problem.grist.clone(),
        liquor: hard_water(),
        liquor_doubt: problem.sources[0].doubt,
        volume: problem.volumes.mash,
        additions: Vec::new(),
        settings: problem.settings,
        offset: problem.offset,
    };
    let dose = mash
        .dose_for(Ph::constant(5.4), &problem.shelf[0].material)
        .expect("a dose");
    let exact = treatment.exact_doses[0].amount.get();
    assert!(
        (exact - dose.get()).abs() < 1e-4 * dose.get(),
        "{exact} {dose}"
    );
    assert!((dosed(&treatment, 0) - exact).abs() <= 1.0);
}

#[test]
fn a_learned_offset_moves_the_dose_and_the_prediction_still_meets_the_target() {
    let mut problem = hard();
    let before = dosed(&met(closest(&problem)), 0);
    problem.offset.value = chemistry::quantity::PhShift::constant(0.08);
    let treatment = met(closest(&problem));
    assert!(dosed(&treatment, 0) > before + 10.0);
    let ph = treatment.outcome.mash.expect("a mash").ph.value.get();
    assert!((ph - 5.4).abs() < 0.005, "{ph}");
}

#[test]
fn too_little_acid_allowed_names_the_lactate_limit_and_what_lifting_it_takes() {
    let mut problem = hard();
    let needed = met(closest(&problem)).outcome.whole.ions[Ion::Lactate].get();
    problem.limits.ions[Ion::Lactate] = Some(MgPerL::constant(100.0));
    let (treatment, shortfalls) = missed(closest(&problem));
    assert!(treatment.outcome.whole.ions[Ion::Lactate].get() <= 100.0001);
    let [shortfall] = shortfalls.as_slice() else {
        panic!("{shortfalls:?}");
    };
    assert_eq!(shortfall.requirement, Requirement::MashPh);
    assert!(matches!(shortfall.standing, Standing::Above(Measure::PhShift(by)) if by.get() > 0.05));
    let lactate = Obstacle::Limit(Limit::Ion(Ion::Lactate));
    assert_eq!(shortfall.in_the_way, [lactate]);
    let relief = shortfall.relief.expect("a relief");
    assert_eq!(
        (relief.obstacle, relief.leaves),
        (lactate, Standing::Inside)
    );
    // As much as the plan without the limit used, to the millilitre of rounding.
    assert!(
        (relief.to.get() - needed).abs() < 1.5,
        "{relief:?} {needed}"
    );
}

#[test]
fn an_empty_shelf_has_nothing_in_the_way_but_itself() {
    let mut problem = hard();
    problem.shelf.clear();
    let (_, shortfalls) = missed(closest(&problem));
    assert_eq!(shortfalls.len(), 1);
    assert!(shortfalls[0].in_the_way.is_empty() && shortfalls[0].relief.is_none());
}

#[test]
fn nitrate_above_its_limit_in_every_blend_is_impossible_and_says_how_far() {
    let mut problem = hard();
    problem.sources.push(bare().sources[0]);
    problem.sources[1].highest = Fraction::constant(0.1);
    problem.limits.ions[Ion::Nitrate] = Some(MgPerL::constant(50.0));
    for (_, ending) in solve_all(&problem).expect("plans") {
        let Ending::Impossible(conflict) = ending else {
            panic!("{ending:?}");
        };
        // 0.9 × 60 mg/L with all the permeate there is, or more permeate than there is: the
        // excess is least, relative to the limit, by one of the two.
        let limits: Vec<Limit> = conflict.broken.iter().map(|broken| broken.limit).collect();
        assert!(
            limits == [Limit::Ion(Ion::Nitrate)] || limits == [Limit::HighestShare(1)],
            "{conflict:?}"
        );
        let reaches = conflict.broken[0].reaches.get();
        assert!((reaches - 54.0).abs() < 0.01 || (reaches - 1.0 / 6.0).abs() < 1e-4);
        assert!(conflict.left_when_lifted.is_empty());
    }
    problem.sources[1].highest = Fraction::constant(0.2);
    assert!(closest(&problem).treatment().is_some());
}

#[test]
fn shares_that_cannot_make_a_whole_are_impossible() {
    let mut problem = hard();
    problem.sources[0].highest = Fraction::constant(0.6);
    let Ending::Impossible(conflict) = closest(&problem) else {
        panic!("possible");
    };
    assert_eq!(conflict.broken[0].limit, Limit::HighestShare(0));
    assert!(conflict.left_when_lifted.is_empty());
}

#[test]
fn of_two_windows_that_exclude_each_other_the_higher_priority_is_met() {
    // Gypsum alone brings calcium and sulfate in a fixed proportion: 2.328 to 5.579.
    let both = |calcium: Priority, sulfate: Priority| {
        let mut problem = bare();
        problem.shelf = vec![item(Substance::Gypsum, &[Vessel::Kettle])];
        problem.spec.ions[Ion::Calcium] = window(80.0, 100.0, calcium);
        problem.spec.ions[Ion::Sulfate] = window(50.0, 100.0, sulfate);
        problem.spec.mash_ph.high = Ph::constant(5.8);
        missed(closest(&problem))
    };
    let (treatment, shortfalls) = both(Priority::High, Priority::Low);
    assert_eq!(shortfalls[0].requirement, Requirement::Ion(Ion::Sulfate));
    let calcium = Obstacle::Requirement(Requirement::Ion(Ion::Calcium));
    assert_eq!(shortfalls[0].in_the_way, [calcium]);
    let relief = shortfalls[0].relief.expect("a relief");
    // 100 mg/L of sulfate come with 41.7 mg/L of calcium.
    assert!(
        (relief.to.get() - 100.0 * 2.328 / 5.579).abs() < 0.1,
        "{relief:?}"
    );
    assert!((treatment.outcome.whole.ions[Ion::Calcium].get() - 80.0).abs() < 0.5);

    let (treatment, shortfalls) = both(Priority::Low, Priority::High);
    assert_eq!(shortfalls[0].requirement, Requirement::Ion(Ion::Calcium));
    assert!((treatment.outcome.whole.ions[Ion::Sulfate].get() - 100.0).abs() < 0.5);
}

#[test]
fn the_mash_ph_comes_before_every_window() {
    let mut problem = hard();
    problem.spec.ions[Ion::Lactate] = window(0.0, 50.0, Priority::High);
    let (treatment, shortfalls) = missed(closest(&problem));
    let ph = treatment.outcome.mash.expect("a mash").ph.value.get();
    assert!((ph - 5.4).abs() < 0.005, "{ph}");
    assert_eq!(shortfalls[0].requirement, Requirement::Ion(Ion::Lactate));
    let mash = Obstacle::Requirement(Requirement::MashPh);
    assert_eq!(shortfalls[0].in_the_way, [mash]);
}

#[test]
fn a_discouraged_material_is_left_until_nothing_else_will_do() {
    let mut problem = hard();
    problem.shelf.push(item(Substance::PhosphoricAcid, &[Mash]));
    problem.shelf[0].preference = Preference::Discouraged;
    for (way, ending) in solve_all(&problem).expect("plans") {
        assert_eq!(dosed(&met(ending), 0), 0.0, "{way:?}");
    }
    problem.shelf[1].most = Some(DoseAmount::constant(50.0));
    for (way, ending) in solve_all(&problem).expect("plans") {
        let treatment = met(ending);
        assert!(dosed(&treatment, 0) > 0.0, "{way:?}");
        assert!((dosed(&treatment, 1) - 50.0).abs() < 1.5, "{way:?}");
    }
    problem.shelf[0].preference = Preference::Avoided;
    let (_, shortfalls) = missed(closest(&problem));
    assert_eq!(
        shortfalls[0].in_the_way,
        [Obstacle::Limit(Limit::Amount(1))]
    );
}

#[test]
fn acid_and_base_never_meet_in_a_mash_that_can_do_without() {
    let mut problem = hard();
    problem
        .shelf
        .push(item(Substance::SodiumBicarbonate, &[Mash]));
    // Sodium would be liked, and only the base brings it.
    problem.spec.ions[Ion::Sodium] = window(0.0, 100.0, Priority::High).map(|mut window| {
        window.preferred = Some(MgPerL::constant(60.0));
        window
    });
    for (way, ending) in solve_all(&problem).expect("plans") {
        let treatment = met(ending);
        assert_eq!(dosed(&treatment, 1), 0.0, "{way:?}");
    }
}

#[test]
fn each_way_is_the_best_of_the_four_at_what_it_looks_at() {
    let mut problem = hard();
    problem.sources.push(bare().sources[0]);
    for (substance, vessels) in [
        (Substance::Gypsum, &[LiquorTank, Mash][..]),
        (Substance::CalciumChlorideDihydrate, &[LiquorTank, Mash]),
        (Substance::EpsomSalt, &[LiquorTank]),
        (Substance::SodiumChloride, &[LiquorTank]),
    ] {
        problem.shelf.push(item(substance, vessels));
    }
    problem.spec.ions[Ion::Calcium] = window(60.0, 120.0, Priority::High);
    problem.spec.ions[Ion::Sulfate] = window(80.0, 160.0, Priority::Middle);
    problem.spec.ions[Ion::Chloride] = window(50.0, 100.0, Priority::Middle);
    let treatments = solve_all(&problem)
        .expect("plans")
        .map(|(_, ending)| met(ending));
    let least = |figure: &dyn Fn(&Treatment) -> f64, which: usize| {
        let own = figure(&treatments[which]);
        for other in &treatments {
            assert!(own <= figure(other) * (1.0 + 1e-3) + 1e-3, "{which}: {own}");
        }
    };
    least(&|treatment| treatment.reached.distance.get(), 0);
    least(&|treatment| treatment.doses.len() as f64, 1);
    least(&|treatment| treatment.shares[1].get(), 2);
    least(&|treatment| treatment.outcome.cost.get(), 3);
}

#[test]
fn a_scale_too_coarse_for_the_window_is_said_to_be_that() {
    // Some 190 mL are wanted; nothing or 400 mL can be measured.
    let mut problem = hard();
    problem.shelf[0].step = DoseAmount::constant(400.0);
    let (treatment, shortfalls) = missed(closest(&problem));
    assert_eq!(shortfalls[0].requirement, Requirement::MashPh);
    assert!(shortfalls[0].in_the_way.is_empty());
    assert_eq!(treatment.reached.acid_missing.get(), 0.0);
}

#[test]
fn what_makes_no_sense_is_refused_with_a_reason() {
    let mut problem = bare();
    problem.volumes.sparge = Litres::constant(600.0);
    assert_eq!(solve(&problem, Way::Cheapest), Err(PlanError::Volumes));
    let mut problem = bare();
    problem.sources.clear();
    assert_eq!(solve(&problem, Way::Cheapest), Err(PlanError::NoSource));
    let mut problem = bare();
    problem.spec.ions[Ion::Calcium] = window(90.0, 50.0, Priority::Low);
    let upside_down = PlanError::UpsideDown(Requirement::Ion(Ion::Calcium));
    assert_eq!(solve(&problem, Way::Cheapest), Err(upside_down));
    let mut problem = bare();
    problem.shelf = vec![item(Substance::EpsomSalt, &Vessel::ALL); 33];
    let too_many = PlanError::TooManyAdditions(132);
    assert_eq!(solve(&problem, Way::FewestAdditions), Err(too_many));
    assert_eq!(
        evaluate(&bare(), &[Fraction::constant(0.9)], &[]),
        Err(PlanError::Shares)
    );
}
