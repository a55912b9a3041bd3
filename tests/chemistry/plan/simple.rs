//! What is left on the weigh-out, and that nothing asked for is lost with the rest.

use chemistry::ion::Ion;
use chemistry::material::{Role, Substance, Vessel};
use chemistry::plan::{
    Dose, Ending, Outcome, Priority, Problem, Requirement, Treatment, Way, Window, evaluate, solve,
    solve_all,
};
use chemistry::quantity::{Fraction, MeqPerL, MgPerL, MgPerLAsCaCO3, MmolPerL};
use chemistry::water::Water;

use Vessel::{Kettle, LiquorTank, Mash, SpargeLiquor};

use crate::brewery::{bare, hard_water, item, source, window};
use crate::problems::cases;

struct Plan {
    index: usize,
    way: Way,
    problem: Problem,
    treatment: Treatment,
}

impl Plan {
    fn name(&self) -> String {
        format!("problem {}, {}", self.index, self.way.key())
    }

    /// What the optimum does, and what the treatment does before the scale.
    fn optimum_and_exact(&self) -> (Outcome, Outcome) {
        let of = |shares: &[Fraction], doses: &[Dose]| {
            evaluate(&self.problem, shares, doses).expect("an outcome")
        };
        let Treatment {
            shares,
            exact_doses,
            optimum,
            ..
        } = &self.treatment;
        (of(&optimum.shares, &optimum.doses), of(shares, exact_doses))
    }
}

fn plans_for(index: usize, problem: &Problem) -> Vec<Plan> {
    let endings = solve_all(problem).expect("plans").into_iter();
    endings
        .filter_map(|(way, ending)| {
            Some(Plan {
                index,
                way,
                problem: problem.clone(),
                treatment: ending.treatment()?.clone(),
            })
        })
        .collect()
}

fn plans() -> Vec<Plan> {
    let cases = cases().into_iter().enumerate();
    cases
        .flat_map(|(index, case)| plans_for(index, &case.problem))
        .collect()
}

fn bounds(problem: &Problem, requirement: Requirement) -> (Option<f64>, Option<f64>, Option<f64>) {
    fn of<T: Copy>(
        window: Option<Window<T>>,
        get: fn(T) -> f64,
    ) -> (Option<f64>, Option<f64>, Option<f64>) {
        window.map_or((None, None, None), |window| {
            (
                window.low.map(get),
                window.preferred.map(get),
                window.high.map(get),
            )
        })
    }
    match requirement {
        Requirement::Ion(ion) => of(problem.spec.ions[ion], MgPerL::get),
        Requirement::MashCalcium => of(problem.spec.mash_calcium, MgPerL::get),
        Requirement::SpargeAlkalinity => of(problem.spec.sparge_alkalinity, MgPerLAsCaCO3::get),
        Requirement::SulfateToChloride | Requirement::MashPh => (None, None, None),
    }
}

#[test]
fn no_way_takes_more_lines_than_its_optimum_and_together_they_take_a_third_fewer() {
    let (mut before, mut after) = (0, 0);
    for plan in plans() {
        let (optimum, simple) = (plan.treatment.optimum.lines(), plan.treatment.lines());
        assert!(simple <= optimum, "{}: {simple} {optimum}", plan.name());
        before += optimum;
        after += simple;
    }
    assert!(3 * after < 2 * before, "{before} before, {after} after");
}

#[test]
fn shares_are_whole_per_cents_or_tenths_and_none_is_a_trifle() {
    let (mut whole, mut all) = (0, 0);
    for plan in plans() {
        let shares: Vec<f64> = plan.treatment.shares.iter().map(|s| s.get()).collect();
        let on = |parts: f64| {
            let counts: Vec<f64> = shares.iter().map(|share| share * parts).collect();
            counts.iter().all(|n| (n - n.round()).abs() < 1e-9)
                && counts.iter().map(|n| n.round()).sum::<f64>() == parts
        };
        assert!(on(1000.0), "{}: {shares:?}", plan.name());
        for (share, source) in shares.iter().zip(&plan.problem.sources) {
            let asked = source.lowest.get() > 0.0 || source.highest.get() < 0.01;
            assert!(*share == 0.0 || *share >= 0.01 || asked, "{shares:?}");
            let (low, high) = (source.lowest.get(), source.highest.get());
            assert!(*share >= low - 1e-9 && *share <= high + 1e-9, "{shares:?}");
        }
        whole += usize::from(on(100.0));
        all += 1;
    }
    assert!(10 * whole > 9 * all, "{whole} of {all}");
}

#[test]
fn each_way_stays_within_its_band_of_the_optimum() {
    for plan in plans() {
        let (best, simple) = plan.optimum_and_exact();
        let treatment = &plan.treatment;
        let (by, problem) = (treatment.reached.chosen_by.get(), &plan.problem);
        match plan.way {
            Way::ClosestToPreferred => {
                for (a, b) in best.findings.iter().zip(&simple.findings) {
                    if bounds(problem, a.requirement).1.is_some() {
                        let (a, b) = (a.value.get(), b.value.get());
                        let band = 1f64.max(0.02 * a) * (1.0 + 1e-4);
                        assert!((a - b).abs() <= band, "{}: {a} {b}", plan.name());
                    }
                }
            }
            Way::FewestAdditions => {
                assert!(treatment.exact_doses.len() as f64 <= by, "{}", plan.name());
            }
            Way::LeastBlendingWater => {
                let sources = problem.sources.iter().zip(&treatment.shares);
                let share: f64 = sources
                    .filter(|(source, _)| source.blending)
                    .map(|(_, share)| share.get())
                    .sum();
                // Or the next whole per cent.
                let most = (by + 0.005).max((by * 100.0).ceil() / 100.0);
                assert!(share <= most + 1e-5, "{}: {share} {by}", plan.name());
            }
            Way::Cheapest => {
                let cost = simple.cost.get() / problem.volumes.liquor.get();
                assert!(cost <= by * 1.01 + 1e-5, "{}: {cost} {by}", plan.name());
            }
        }
    }
}

#[test]
fn limits_mash_and_windows_stand_as_the_optimum_left_them() {
    for plan in plans() {
        let (best, simple) = plan.optimum_and_exact();
        assert!(simple.broken.is_empty(), "{}", plan.name());
        let litres = plan.problem.volumes.mash.value.get();
        let missing = |outcome: &Outcome| outcome.acid_missing.get().abs() / litres;
        // Half a thousandth of a meq/L for rounded shares, and the solver's accuracy.
        assert!(missing(&simple) <= missing(&best) + 6e-4, "{}", plan.name());
        for (a, b) in best.findings.iter().zip(&simple.findings) {
            let (low, preferred, high) = bounds(&plan.problem, a.requirement);
            let miss = |value: f64| {
                (low.map_or(0.0, |low| low - value))
                    .max(high.map_or(0.0, |high| value - high))
                    .max(0.0)
            };
            let (was, is) = (miss(a.value.get()), miss(b.value.get()));
            let figure = preferred.or(low).or(high).unwrap_or(0.0);
            let scale = 10f64.max(figure).max(high.unwrap_or(0.0) / 2.0);
            // Met windows stay met; where one cannot be, it may share that with others of
            // its priority.
            let band = if was > 1e-3 * scale {
                1f64.max(0.02 * a.value.get())
            } else {
                0.0
            };
            let most = was + band + 6e-4 * scale;
            assert!(
                is <= most,
                "{}: {:?} {is} {was}",
                plan.name(),
                a.requirement
            );
        }
        let sums = |outcome: &Outcome| {
            let mut sums = [0.0; 3];
            for finding in &outcome.findings {
                if let Requirement::Ion(ion) = finding.requirement {
                    let window = plan.problem.spec.ions[ion].expect("a window");
                    let (low, preferred, high) = bounds(&plan.problem, finding.requirement);
                    let value = finding.value.get();
                    let scale = [low, preferred, high.map(|high| high / 2.0)];
                    let scale = scale.into_iter().flatten().fold(10.0, f64::max);
                    let below = low.map_or(0.0, |low| low - value);
                    let above = high.map_or(0.0, |high| value - high);
                    sums[window.priority as usize] += below.max(above).max(0.0) / scale;
                }
            }
            sums
        };
        // Where only ions have windows, what is missed can be added up here.
        if plan.problem.spec.mash_calcium.is_none()
            && plan.problem.spec.sulfate_to_chloride.is_none()
            && plan.problem.spec.sparge_alkalinity.is_none()
        {
            for (is, was) in sums(&simple).into_iter().zip(sums(&best)) {
                let room = 6e-4 * best.findings.len() as f64;
                assert!(is <= was + room, "{}: {is} {was}", plan.name());
            }
        }
    }
}

/// A line: a source, or a material in a vessel.
#[derive(Clone, Copy, Debug, PartialEq)]
enum Line {
    Source(usize),
    Addition(usize, Vessel),
}

fn lines_of(problem: &Problem) -> Vec<Line> {
    let sources = (0..problem.sources.len()).map(Line::Source);
    let additions = problem.shelf.iter().enumerate().flat_map(|(index, item)| {
        let vessels = item.vessels.iter();
        vessels.map(move |vessel| Line::Addition(index, *vessel))
    });
    sources.chain(additions).collect()
}

/// The same problem with these lines only.
fn with_only(problem: &Problem, lines: &[Line]) -> Problem {
    let mut problem = problem.clone();
    for (index, source) in problem.sources.iter_mut().enumerate() {
        if !lines.contains(&Line::Source(index)) {
            source.highest = Fraction::constant(0.0);
        }
    }
    for (index, item) in problem.shelf.iter_mut().enumerate() {
        let kept = |vessel: &Vessel| lines.contains(&Line::Addition(index, *vessel));
        item.vessels.retain(kept);
    }
    problem
}

/// Whether acid and base would meet among these lines.
fn opposed(problem: &Problem, lines: &[Line]) -> bool {
    let regions = [
        &[Vessel::LiquorTank, Vessel::Mash][..],
        &[Vessel::SpargeLiquor],
        &[Vessel::Kettle],
    ];
    regions.into_iter().any(|vessels| {
        let has = |role: Role| {
            lines.iter().any(|line| match line {
                Line::Addition(index, vessel) => {
                    let material = &problem.shelf[*index].material;
                    vessels.contains(vessel) && material.substance().role() == role
                }
                Line::Source(_) => false,
            })
        };
        has(Role::Acid) && has(Role::Base)
    })
}

/// Every choice of `count` from `lines` that `suits`.
fn any_of(lines: &[Line], count: usize, suits: &mut impl FnMut(&[Line]) -> bool) -> bool {
    fn grow(
        from: &[Line],
        left: usize,
        taken: &mut Vec<Line>,
        suits: &mut impl FnMut(&[Line]) -> bool,
    ) -> bool {
        if left == 0 {
            return suits(taken);
        }
        (0..from.len()).any(|place| {
            taken.push(from[place]);
            let found = grow(&from[place + 1..], left - 1, taken, suits);
            taken.pop();
            found
        })
    }
    grow(lines, count, &mut Vec::new(), suits)
}

#[test]
fn no_smaller_choice_of_lines_stays_within_the_bands_of_small_problems() {
    // Each choice of one line fewer is put to the solver as a problem of its own: it must
    // miss more than the optimum did, or what the way looks at must leave its band.
    let mut tried = [0; 4];
    let (mut choices, mut unsettled) = (0, 0);
    let mut plans = plans();
    // With one vessel for each material, and less and less preferred.
    let mut small = three_sources();
    for item in &mut small.shelf {
        item.vessels.retain(|vessel| *vessel == Mash);
    }
    for (index, ion) in [Ion::Iron, Ion::Sodium, Ion::Chloride]
        .into_iter()
        .enumerate()
    {
        if let Some(window) = &mut small.spec.ions[ion] {
            window.preferred = None;
        }
        plans.extend(plans_for(1000 + index, &small));
    }
    for plan in plans {
        let (problem, reached) = (&plan.problem, plan.treatment.reached);
        let lines = lines_of(problem);
        let forced = problem
            .sources
            .iter()
            .any(|source| source.lowest.get() > 0.0);
        let count = plan.treatment.lines();
        if lines.len() > if plan.index < 1000 { 8 } else { 10 } || forced || count < 2 {
            continue;
        }
        // The bands of preferred figures as windows, where all windows are met.
        let mut asked = problem.clone();
        if plan.way == Way::ClosestToPreferred {
            if reached.missed.iter().any(|missed| missed.get() > 0.0) {
                continue;
            }
            let (best, _) = plan.optimum_and_exact();
            for ion in Ion::ALL {
                let window = asked.spec.ions[ion].as_mut();
                let Some(window) = window.filter(|window| window.preferred.is_some()) else {
                    continue;
                };
                let at = best.whole.ions[ion].get();
                let band = 1f64.max(0.02 * at);
                let low = window.low.map_or(0.0, MgPerL::get).max(at - band);
                let high = window
                    .high
                    .map_or(f64::INFINITY, MgPerL::get)
                    .min(at + band);
                window.low = Some(MgPerL::clamped(low));
                window.high = Some(MgPerL::clamped(high.max(low)));
            }
        }
        let mut suits = |choice: &[Line]| {
            choices += 1;
            if opposed(problem, choice) || !choice.iter().any(|l| matches!(l, Line::Source(_))) {
                return false;
            }
            let additions = choice
                .iter()
                .filter(|l| matches!(l, Line::Addition(..)))
                .count();
            if plan.way == Way::FewestAdditions && additions as f64 > reached.chosen_by.get() {
                return false;
            }
            let Ok(ending) = solve(&with_only(&asked, choice), plan.way) else {
                unsettled += 1;
                return false;
            };
            let Some(other) = ending.treatment().map(|treatment| treatment.reached) else {
                return false;
            };
            let by = reached.chosen_by.get();
            let most = match plan.way {
                Way::ClosestToPreferred | Way::FewestAdditions => f64::INFINITY,
                Way::LeastBlendingWater => by + 0.005,
                Way::Cheapest => by * 1.01,
            };
            let same = |a: f64, b: f64| (a - b).abs() < 1e-6 * (1.0 + b.abs());
            let mut missed = other.missed.iter().zip(&reached.missed);
            same(other.acid_missing.get(), reached.acid_missing.get())
                && missed.all(|(a, b)| same(a.get(), b.get()))
                && same(other.discouraged.get(), reached.discouraged.get())
                && other.chosen_by.get() <= most - 1e-6 * most.abs().min(1.0)
        };
        tried[plan.way as usize] += 1;
        let found = any_of(&lines, count - 1, &mut suits);
        assert!(!found, "{}: {count} lines", plan.name());
    }
    assert!(tried.iter().all(|count| *count >= 3), "{tried:?}");
    // A choice the solver gives up on is not a simpler plan anybody could have had.
    assert!(100 * unsettled <= choices, "{unsettled} of {choices}");
}

/// Hard mains, a soft borehole and permeate; four salts, a base and two acids.
fn three_sources() -> Problem {
    let mut soft = Water::pure();
    for (ion, amount) in [
        (Ion::Calcium, 22.0),
        (Ion::Magnesium, 4.0),
        (Ion::Sodium, 18.0),
        (Ion::Chloride, 24.0),
        (Ion::Sulfate, 15.0),
        (Ion::Nitrate, 8.0),
    ] {
        soft.ions[ion] = MgPerL::new(amount).expect("an ion");
    }
    soft.alkalinity = MeqPerL::constant(1.2);
    soft.carbon = MmolPerL::constant(1.4);
    let mut hard = hard_water();
    hard.ions[Ion::Magnesium] = MgPerL::constant(9.0);
    hard.ions[Ion::Sodium] = MgPerL::constant(20.0);
    let mut problem = bare();
    problem.sources = vec![
        source(hard, false, 0.002),
        source(soft, false, 0.001),
        source(Water::pure(), true, 0.008),
    ];
    problem.shelf = [
        (Substance::Gypsum, &[LiquorTank, Mash, Kettle][..]),
        (
            Substance::CalciumChlorideDihydrate,
            &[LiquorTank, Mash, Kettle],
        ),
        (Substance::EpsomSalt, &[LiquorTank, Mash, Kettle]),
        (Substance::SodiumChloride, &[LiquorTank, Mash, Kettle]),
        (Substance::SodiumBicarbonate, &[Mash]),
        (Substance::LacticAcid, &[LiquorTank, Mash, SpargeLiquor]),
        (Substance::PhosphoricAcid, &[LiquorTank, Mash, SpargeLiquor]),
    ]
    .map(|(substance, vessels)| item(substance, vessels))
    .to_vec();
    for (ion, low, preferred, high) in [
        (Ion::Calcium, 60.0, 90.0, 130.0),
        (Ion::Magnesium, 3.0, 8.0, 15.0),
        (Ion::Sodium, 5.0, 25.0, 60.0),
        (Ion::Chloride, 50.0, 80.0, 120.0),
        (Ion::Sulfate, 80.0, 130.0, 200.0),
    ] {
        problem.spec.ions[ion] = window(low, high, Priority::Middle).map(|mut window| {
            window.preferred = Some(MgPerL::new(preferred).expect("a figure"));
            window
        });
    }
    problem.limits.ions[Ion::Nitrate] = Some(MgPerL::constant(50.0));
    problem
}

#[test]
fn a_brewery_with_three_sources_weighs_each_salt_once_and_one_acid() {
    // Five preferred figures, the mash pH and the whole of the shares are seven
    // conditions: with seven amounts to choose they can all be met, with fewer only if
    // the bands happen to allow it. The optimum spreads them over twice as many.
    let problem = three_sources();
    for (way, ending) in solve_all(&problem).expect("plans") {
        let treatment = ending.treatment().expect("a treatment");
        let used = |substance: Substance| {
            let of = |dose: &&Dose| problem.shelf[dose.material].material.substance() == substance;
            treatment.doses.iter().filter(of).count()
        };
        assert!(treatment.lines() <= 7, "{way:?}: {}", treatment.lines());
        let acids = used(Substance::LacticAcid) + used(Substance::PhosphoricAcid);
        assert!(acids <= 1, "{way:?}: {acids} acids");
        for item in &problem.shelf {
            assert!(
                used(item.material.substance()) <= 1,
                "{way:?}: {}",
                item.name
            );
        }
        if way == Way::ClosestToPreferred {
            assert_eq!(acids, 1);
            assert!(treatment.optimum.lines() >= 11);
        }
    }
}

/// Hard water, permeate and acid, with a window for sulfate that only the hard water
/// brings: 60 mg/L of it.
fn sulfate_between(low: f64, high: f64) -> Vec<f64> {
    let mut problem = bare();
    problem.sources.push(source(hard_water(), false, 0.002));
    problem.shelf = vec![item(Substance::LacticAcid, &[Mash])];
    problem.spec.ions[Ion::Sulfate] = window(low, high, Priority::High);
    let ending = solve(&problem, Way::ClosestToPreferred).expect("a plan");
    let treatment = ending.treatment().expect("a treatment");
    let ph = treatment.outcome.mash.as_ref().expect("a mash").ph.value;
    assert!((ph.get() - 5.4).abs() < 0.005, "{ph}");
    assert!(matches!(ending, Ending::Met(_)), "{ending:?}");
    treatment.shares.iter().map(|share| share.get()).collect()
}

#[test]
fn a_window_between_whole_per_cents_takes_tenths() {
    // 58 % of 60 mg/L is 34.8, 59 % is 35.4, 58.4 % is 35.04.
    assert_eq!(sulfate_between(34.7, 35.3), [0.42, 0.58]);
    assert_eq!(sulfate_between(35.0, 35.07), [0.416, 0.584]);
}

#[test]
fn a_limit_that_no_grid_keeps_leaves_the_shares_exact() {
    let mut problem = bare();
    problem.sources.push(source(hard_water(), false, 0.002));
    problem.sources[1].lowest = Fraction::constant(0.58371);
    problem.sources[1].highest = Fraction::constant(0.58379);
    problem.shelf = vec![item(Substance::LacticAcid, &[Mash])];
    for (way, ending) in solve_all(&problem).expect("plans") {
        let treatment = ending.treatment().expect("a treatment");
        assert!(treatment.outcome.broken.is_empty(), "{way:?}");
        let share = treatment.shares[1].get();
        assert!(share > 0.583709 && share < 0.583791, "{way:?}: {share}");
        assert!((share + treatment.shares[0].get() - 1.0).abs() < 1e-12);
    }
}

#[test]
fn a_share_of_less_than_a_per_cent_is_none_unless_it_is_asked_for() {
    // The cheapest takes all the hard water that 0.2 mg/L of nitrate allow: 0.33 % of it.
    let mut problem = bare();
    problem.sources.push(source(hard_water(), false, 0.002));
    problem.shelf = vec![item(Substance::LacticAcid, &[Mash])];
    problem.limits.ions[Ion::Nitrate] = Some(MgPerL::constant(0.2));
    let shares = |problem: &Problem| -> Vec<f64> {
        let ending = solve(problem, Way::Cheapest).expect("a plan");
        let treatment = ending.treatment().expect("a treatment");
        treatment.shares.iter().map(|share| share.get()).collect()
    };
    assert_eq!(shares(&problem), [1.0, 0.0]);
    problem.sources[1].lowest = Fraction::constant(0.002);
    assert!(shares(&problem)[1] >= 0.002);
}
