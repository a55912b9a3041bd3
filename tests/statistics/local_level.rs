//! Today's level, against the reference figures and against what must hold for
//! any history.

use std::collections::BTreeMap;

use proptest::prelude::*;
use statistics::local_level::{
    Damping, Finding, Level, Observation, Prior, Range, Settings, SourceKind, Turn, filter, smooth,
    today,
};
use statistics::measurement::{Analyte, Precision, median};
use statistics::quantity::{Day, Days, Drift, Sd, Share, Step, Value};

use crate::measurement::{analyte, method};
use crate::reference::{Row, Within, number, rows};

fn value(value: f64) -> Value {
    Value::new(value).unwrap()
}

fn day(day: f64) -> Day {
    Day::new(day).unwrap()
}

fn sd(sd: f64) -> Sd {
    Sd::new(sd).unwrap()
}

fn drift(drift: f64) -> Drift {
    Drift::new(drift).unwrap()
}

/// A method with the same standard deviation at every level.
fn precise_to(spread: f64) -> Precision {
    Precision {
        constant: sd(spread),
        proportional: Share::constant(0.0),
        step: Step::constant(0.0),
    }
}

fn found(on: f64, measured: f64, spread: f64) -> Observation {
    Observation {
        day: day(on),
        finding: Finding::Measured(value(measured)),
        precision: precise_to(spread),
    }
}

fn below(on: f64, limit: f64, spread: f64) -> Observation {
    Observation {
        day: day(on),
        finding: Finding::Below(value(limit)),
        precision: precise_to(spread),
    }
}

/// A row of the reference whose variance is taken as printed.
fn read(row: &Row) -> Observation {
    found(
        number(row, "t"),
        number(row, "value"),
        number(row, "R").sqrt(),
    )
}

/// A drift of `change` in 90 days, whatever the level.
fn drifting(change: f64) -> Settings {
    Settings {
        change_in_90_days: Share::constant(0.0),
        // Half of it counts.
        laboratory: precise_to(2.0 * change),
        prior: None,
        supplier_range: None,
        damping: Damping::Odd,
    }
}

/// 0.5 unit² per day.
const WANDERING: f64 = 6.708_203_932_499_369;

fn undamped(settings: Settings) -> Settings {
    Settings {
        damping: Damping::Off,
        ..settings
    }
}

fn believing(prior: Prior, settings: Settings) -> Settings {
    Settings {
        prior: Some(prior),
        ..settings
    }
}

fn reference() -> serde_json::Value {
    serde_json::from_str(include_str!("qa/local_level.json")).unwrap()
}

/// The six reference series, by "source/analyte".
fn series() -> BTreeMap<String, Vec<Row>> {
    let mut series: BTreeMap<String, Vec<Row>> = BTreeMap::new();
    for row in rows(include_str!("qa/local_level.csv")) {
        series
            .entry(format!("{}/{}", row["source"], row["analyte"]))
            .or_default()
            .push(row);
    }
    assert_eq!(series.len(), 6);
    series
}

fn last(turns: &[Turn]) -> Turn {
    *turns.last().unwrap()
}

/// A row of the reference as the service would enter it.
fn entered(row: &Row) -> Observation {
    Observation {
        precision: Precision::of(method(&row["method"]), analyte(&row["analyte"])),
        ..read(row)
    }
}

fn usual(name: &str) -> Settings {
    let (source, tested) = name.split_once('/').unwrap();
    let kind = match source {
        "borehole" => SourceKind::Borehole,
        "mains" => SourceKind::SteadyMains,
        _ => panic!("{source}"),
    };
    Settings::new(kind, analyte(tested))
}

/// The reference has the same formulas and prints twelve digits; a few are lost
/// in differences and in the tail of the normal distribution.
const CLOSELY: Within = Within {
    relative: 1e-8,
    least: 0.0,
};

#[test]
fn filter_smoother_likelihood_and_forecasts_agree_with_the_reference() {
    let reference = reference();
    for (name, rows) in series() {
        let expected = &reference[&name];
        let q = drift(expected["q_ml"].as_f64().unwrap());
        let observations: Vec<Observation> = rows.iter().map(entered).collect();
        let filtered = filter(&observations, &undamped(usual(&name)), q);
        let smoothed = smooth(&filtered);
        assert_eq!(filtered.turns.len(), rows.len());
        for ((row, turn), smooth) in rows.iter().zip(&filtered.turns).zip(smoothed) {
            CLOSELY.check(turn.level.mean.get(), number(row, "a"));
            CLOSELY.check(turn.level.sd.get().powi(2), number(row, "P"));
            if let Some(predicted) = turn.predicted {
                CLOSELY.check(predicted.mean.get(), number(row, "a_pred"));
                CLOSELY.check(predicted.sd.get().powi(2), number(row, "P_pred"));
            } else {
                assert!(row["a_pred"].is_empty());
            }
            CLOSELY.check(smooth.mean.get(), number(row, "a_smooth"));
            CLOSELY.check(smooth.sd.get().powi(2), number(row, "P_smooth"));
        }
        CLOSELY.check(
            filtered.log_likelihood,
            expected["loglik"].as_f64().unwrap(),
        );
        let level = last(&filtered.turns).level;
        for (ahead, forecast) in expected["forecast_days_ahead"].as_object().unwrap() {
            let ahead = Days::new(ahead.parse().unwrap()).unwrap();
            CLOSELY.check(level.mean.get(), forecast["mean"].as_f64().unwrap());
            let spread = level.sd.get().hypot(q.over(ahead).get());
            CLOSELY.check(spread, forecast["sd"].as_f64().unwrap());
        }
    }
}

#[test]
fn todays_level_averages_over_the_drift_as_the_reference_does() {
    let reference = reference();
    for (name, rows) in series() {
        let whole: Vec<Observation> = rows.iter().map(entered).collect();
        // The reference takes the precision and the drift to expect of the first
        // eight from the whole series; here they are given as printed.
        let first: Vec<Observation> = rows[..8].iter().map(read).collect();
        let q0 = reference[&name]["grid_average"]["q0"].as_f64().unwrap();
        for (key, observations, settings) in [
            ("grid_average", &whole, usual(&name)),
            (
                "grid_average_first_8_results",
                &first,
                drifting((90.0 * q0).sqrt()),
            ),
        ] {
            let expected = &reference[&name][key];
            let end = observations.last().unwrap().day.get();
            for (ahead, spread) in expected["sd"].as_object().unwrap() {
                let ahead: f64 = ahead.parse().unwrap();
                let level = today(observations, &undamped(settings), day(end + ahead)).unwrap();
                assert!(!level.saturated, "{name}");
                assert_eq!(level.age, Some(Days::new(ahead).unwrap()));
                CLOSELY.check(level.value.get(), expected["mean"].as_f64().unwrap());
                CLOSELY.check(level.sd.get(), spread.as_f64().unwrap());
                let parts = level
                    .sd_at_last_test
                    .get()
                    .hypot(level.sd_from_ageing.get());
                CLOSELY.check(parts, level.sd.get());
                CLOSELY.check(
                    level.drift.get().log10(),
                    expected["posterior_mean_log10_q"].as_f64().unwrap(),
                );
            }
        }
    }
}

#[test]
fn the_expected_drift_of_a_source_is_the_reference_share_of_its_median() {
    let reference = reference();
    for (name, rows) in series() {
        let values: Vec<Value> = rows.iter().map(|row| value(number(row, "value"))).collect();
        let ours = usual(&name).expected_drift(median(&values).unwrap()).get();
        let theirs = reference[&name]["grid_average"]["q0"].as_f64().unwrap();
        assert!(
            (ours / theirs - 1.0).abs() < 1e-9,
            "{name}: {ours}, {theirs}"
        );
    }
}

#[test]
fn expected_drift_is_at_least_half_a_laboratory_sd_in_ninety_days() {
    let settings = Settings {
        laboratory: precise_to(2.0),
        ..Settings::new(SourceKind::Borehole, Analyte::Calcium)
    };
    let change = settings
        .expected_drift(value(0.0))
        .over(Days::constant(90.0));
    assert!((change.get() - 1.0).abs() < 1e-12);
}

#[test]
fn odd_results_are_damped_as_in_the_reference() {
    let q = drift(reference()["robust"]["q"].as_f64().unwrap());
    let rows = rows(include_str!("qa/local_level_robust.csv"));
    let observations: Vec<Observation> = rows.iter().map(read).collect();
    let settings = drifting(1.0);
    for (settings, mean, variance) in [
        (undamped(settings), "a_plain", "P_plain"),
        (settings, "a_robust", "P_robust"),
    ] {
        let filtered = filter(&observations, &settings, q);
        assert_eq!(filtered.turns.len(), rows.len());
        for (row, turn) in rows.iter().zip(filtered.turns) {
            CLOSELY.check(turn.level.mean.get(), number(row, mean));
            CLOSELY.check(turn.level.sd.get().powi(2), number(row, variance));
            if settings.damping == Damping::Odd {
                CLOSELY.check(turn.weight.get(), number(row, "weight"));
            }
        }
    }
}

#[test]
fn less_than_results_count_as_in_the_reference() {
    let rows = rows(include_str!("qa/local_level_censored.csv"));
    let observations: Vec<Observation> = rows
        .iter()
        .map(|row| match row["censored"].as_str() {
            "1" => below(
                number(row, "t"),
                number(row, "lod"),
                number(row, "R").sqrt(),
            ),
            _ => read(row),
        })
        .collect();
    let expected = &reference()["censored"];
    let number_of = |name: &str| expected[name].as_f64().unwrap();
    let prior = Prior {
        mean: value(number_of("a0")),
        sd: sd(number_of("P0").sqrt()),
    };
    let settings = undamped(believing(prior, drifting(1.0)));
    let filtered = filter(&observations, &settings, drift(number_of("q")));
    assert_eq!(filtered.turns.len(), rows.len());
    for (row, turn) in rows.iter().zip(&filtered.turns) {
        let predicted = turn.predicted.unwrap();
        CLOSELY.check(predicted.mean.get(), number(row, "a_pred"));
        CLOSELY.check(predicted.sd.get().powi(2), number(row, "P_pred"));
        CLOSELY.check(turn.level.mean.get(), number(row, "a"));
        CLOSELY.check(turn.level.sd.get().powi(2), number(row, "P"));
    }
    CLOSELY.check(filtered.log_likelihood, number_of("loglik"));
}

/// Mean and variance of a standard normal below `z`, by Simpson's rule.
fn truncated_normal(z: f64) -> (f64, f64) {
    // Far enough down that what is left is under 1e-16 of the whole.
    let reach = if z > -2.0 { 12.0 + z } else { 40.0 / -z };
    let intervals = 20_000;
    let step = reach / f64::from(intervals);
    let mut sums = [0.0; 3];
    for i in 0..=intervals {
        let depth = f64::from(i) * step;
        let simpson = match i {
            _ if i == 0 || i == intervals => 1.0,
            _ if i % 2 == 1 => 4.0,
            _ => 2.0,
        };
        // Density at z - depth, scaled so that it does not vanish in the tail.
        let scale = if z < 0.0 { z * z } else { 0.0 };
        let density = simpson * (-((z - depth).powi(2) - scale) / 2.0).exp();
        sums[0] += density;
        sums[1] += density * depth;
        sums[2] += density * depth * depth;
    }
    let depth = sums[1] / sums[0];
    (z - depth, sums[2] / sums[0] - depth * depth)
}

#[test]
fn a_less_than_far_below_the_level_is_exact_in_the_tail() {
    let prior = Prior {
        mean: value(0.0),
        sd: sd(1.0),
    };
    for z in [
        -30.0, -12.0, -6.0, -5.0, -4.0, -2.01, -2.0, -1.99, -1.0, 0.5, 2.0,
    ] {
        // A method so precise that the level itself is known to lie below.
        let observations = [below(0.0, z, 1e-7)];
        let settings = believing(prior, drifting(1.0));
        let level = last(&filter(&observations, &settings, drift(1.0)).turns).level;
        let (mean, variance) = truncated_normal(z);
        CLOSELY.check(level.mean.get(), mean);
        CLOSELY.check(level.sd.get().powi(2), variance);
    }
}

/// A year of a level near 100, found to within 3.
fn steady() -> Vec<Observation> {
    (0..12_u8)
        .map(|month| found(f64::from(month) * 30.0, 100.0, 3.0))
        .collect()
}

#[test]
fn a_repeat_that_agrees_within_fourteen_days_lifts_the_damping_of_both() {
    let jump = |repeats: &[Observation]| {
        let mut observations = steady();
        observations.push(found(360.0, 140.0, 3.0));
        observations.extend(repeats);
        observations
    };
    let damped = |observations: &[Observation]| {
        let filtered = filter(observations, &drifting(3.0), drift(0.1));
        filtered.turns[12].weight.get() < 0.5
    };
    assert!(damped(&jump(&[])));

    let confirmed = jump(&[found(374.0, 136.0, 3.0)]);
    assert_eq!(
        filter(&confirmed, &drifting(3.0), drift(0.1)).turns,
        filter(&confirmed, &undamped(drifting(3.0)), drift(0.1)).turns
    );

    // Too late; too far, 8.5 being two standard deviations of the difference of
    // two results; too coarse to tell.
    for repeat in [
        found(375.0, 140.0, 3.0),
        found(374.0, 131.0, 3.0),
        found(374.0, 140.0, 10.0),
    ] {
        assert!(damped(&jump(&[repeat])), "{repeat:?}");
    }
}

#[test]
fn one_slip_hardly_moves_the_level_wherever_it_stands() {
    let settings = Settings::new(SourceKind::SteadyMains, Analyte::Alkalinity);
    for slip in 0..12 {
        for wrong in [1e6, 1000.0, 171.0, 10.0] {
            let mut observations = steady();
            observations[slip].finding = Finding::Measured(value(wrong));
            let level = today(&observations, &settings, day(330.0)).unwrap();
            let off = (level.value.get() - 100.0).abs();
            // The last one could be true, and moves the level by up to 2.5
            // standard deviations; then the next ones correct it.
            let allowed = if slip == 11 {
                2.5 * level.sd.get()
            } else {
                3.0
            };
            assert!(off < allowed, "{slip} {wrong}: {level:?}");
            assert!(level.sd.get() < 6.0, "{slip} {wrong}: {level:?}");
        }
    }
}

#[test]
fn a_jump_is_believed_from_the_second_result_that_shows_it() {
    let settings = Settings::new(SourceKind::SteadyMains, Analyte::Alkalinity);
    // The second a week later, a month later, half a year later.
    for wait in [7.0, 30.0, 180.0] {
        let mut observations = steady();
        observations.push(found(360.0, 140.0, 3.0));
        let level = today(&observations, &settings, day(360.0)).unwrap();
        assert!(level.value.get() < 110.0, "{level:?}");
        observations.push(found(360.0 + wait, 138.0, 3.0));
        let level = today(&observations, &settings, day(360.0 + wait)).unwrap();
        assert!((level.value.get() - 138.5).abs() < 2.0, "{wait} {level:?}");
    }
}

#[test]
fn of_two_results_that_disagree_neither_is_believed_until_a_third() {
    let settings = Settings::new(SourceKind::SteadyMains, Analyte::Alkalinity);
    for (first, second) in [(1000.0, 100.0), (100.0, 1000.0)] {
        let mut observations = vec![found(0.0, first, 3.0), found(30.0, second, 3.0)];
        let level = today(&observations, &settings, day(30.0)).unwrap();
        // Halfway, and unsure enough to hold both.
        assert!((level.value.get() - 550.0).abs() < 1.0, "{level:?}");
        assert!((level.sd.get() - 450.0).abs() < 1.0, "{level:?}");

        observations.push(found(60.0, 104.0, 3.0));
        let level = today(&observations, &settings, day(60.0)).unwrap();
        assert!((level.value.get() - 104.0).abs() < 5.0, "{level:?}");
        assert!(level.sd.get() < 10.0, "{level:?}");
    }
}

#[test]
fn a_suppliers_average_is_believed_until_tests_speak_and_does_not_age() {
    assert_eq!(today(&[], &drifting(WANDERING), day(0.0)), None);
    let prior = Prior {
        mean: value(120.0),
        sd: sd(15.0),
    };
    let settings = believing(prior, drifting(WANDERING));
    for on in [0.0, 5000.0] {
        let level = today(&[], &settings, day(on)).unwrap();
        assert!((level.value.get() - 120.0).abs() < 1e-9);
        assert!((level.sd.get() - 15.0).abs() < 1e-9);
        assert_eq!(level.age, None);
    }
    // One test of sd 3 at 130: weight 225/(225+9) by hand, whatever its date.
    for on in [0.0, 5000.0] {
        let level = today(&[found(on, 130.0, 3.0)], &settings, day(on)).unwrap();
        assert!((level.value.get() - (120.0 + 10.0 * 225.0 / 234.0)).abs() < 1e-9);
        assert!((level.sd.get().powi(2) - 225.0 * 9.0 / 234.0).abs() < 1e-9);
    }
}

#[test]
fn less_than_results_alone_give_a_level_between_nothing_and_the_limit() {
    // Half the limit, and an even spread below it with the method's own error:
    // 0.25/12 + 0.0001, by hand.
    let one = [below(0.0, 0.5, 0.01)];
    let level = today(&one, &drifting(0.01), day(0.0)).unwrap();
    assert!((level.value.get() - 0.25).abs() < 1e-12);
    assert!((level.sd.get().powi(2) - (0.25 / 12.0 + 0.0001)).abs() < 1e-12);

    let many: Vec<Observation> = (0..12)
        .map(|i| below(30.0 * f64::from(i), 0.5, 0.01))
        .collect();
    let level = today(&many, &drifting(0.01), day(330.0)).unwrap();
    assert!(
        level.value.get() > 0.0 && level.value.get() < 0.25,
        "{level:?}"
    );
}

#[test]
fn an_untested_source_saturates_at_half_the_range_it_is_known_to_span() {
    let two = [found(0.0, 100.0, 3.0), found(30.0, 104.0, 3.0)];
    // Two results span no range worth the name: ten years on, it has grown on.
    let unlimited = today(&two, &drifting(WANDERING), day(3650.0)).unwrap();
    assert!(!unlimited.saturated && unlimited.sd.get() > 30.0);

    let ranging = |least: f64, greatest: f64| Settings {
        supplier_range: Some(Range {
            least: value(least),
            greatest: value(greatest),
        }),
        ..drifting(WANDERING)
    };
    let capped = today(&two, &ranging(80.0, 120.0), day(3650.0)).unwrap();
    assert!(capped.saturated);
    assert!((capped.sd.get() - 20.0).abs() < 1e-9);
    let parts = capped
        .sd_at_last_test
        .get()
        .hypot(capped.sd_from_ageing.get());
    assert!((parts - 20.0).abs() < 1e-9);

    // A range narrower than a test can tell never makes the level surer than the
    // test did.
    let narrow = today(&two, &ranging(100.0, 100.0), day(3650.0)).unwrap();
    assert_eq!(narrow.sd, narrow.sd_at_last_test);

    // Twelve results in a year, from 90 to 112: half the span.
    let year: Vec<Observation> = (0..12_u8)
        .map(|i| found(f64::from(i) * 34.0, 90.0 + 2.0 * f64::from(i), 3.0))
        .collect();
    let level = today(&year, &drifting(WANDERING), day(9999.0)).unwrap();
    assert!((level.sd.get() - 11.0).abs() < 1e-9);
}

#[test]
fn later_tests_do_not_speak_of_an_earlier_day() {
    let mut observations = steady();
    let before = today(&observations, &drifting(WANDERING), day(340.0));
    observations.push(found(341.0, 180.0, 3.0));
    observations.push(below(350.0, 20.0, 3.0));
    let after = today(&observations, &drifting(WANDERING), day(340.0));
    assert_eq!(after, before);
}

/// Whole days, values and standard deviations of an ordinary history.
fn any_observation() -> impl Strategy<Value = Observation> {
    (
        0..2000_u16,
        0.1..300.0_f64,
        0.5..10.0_f64,
        prop::bool::weighted(0.2),
    )
        .prop_map(|(on, level, spread, censored)| {
            let on = f64::from(on);
            if censored {
                below(on, level, spread)
            } else {
                found(on, level, spread)
            }
        })
}

fn any_history() -> impl Strategy<Value = Vec<Observation>> {
    prop::collection::vec(any_observation(), 1..20)
}

/// Anything the types accept.
fn extreme_observation() -> impl Strategy<Value = Observation> {
    let magnitude = || (-12.0..11.0_f64).prop_map(|power| 10_f64.powf(power));
    (
        -1e6..1e6_f64,
        magnitude(),
        magnitude(),
        any::<bool>(),
        any::<bool>(),
    )
        .prop_map(|(on, level, spread, negative, censored)| {
            let level = if negative { -level } else { level };
            if censored {
                below(on, level, spread)
            } else {
                found(on, level, spread)
            }
        })
}

/// What is believed where a history starts from a prior.
const USUAL: Prior = Prior {
    mean: Value::constant(100.0),
    sd: Sd::constant(50.0),
};

fn wandering() -> Settings {
    believing(USUAL, drifting(WANDERING))
}

fn close(a: f64, b: f64, within: f64) -> bool {
    (a - b).abs() <= within * a.abs().max(b.abs()).max(1e-6)
}

fn scaled(observation: &Observation, factor: f64, shift: f64) -> Observation {
    let finding = match observation.finding {
        Finding::Measured(v) => Finding::Measured(value(v.get() * factor)),
        Finding::Below(v) => Finding::Below(value(v.get() * factor)),
    };
    Observation {
        day: day(observation.day.get() + shift),
        finding,
        precision: precise_to(observation.precision.constant.get() * factor),
    }
}

proptest! {
    #[test]
    fn uncertainty_never_shrinks_without_a_test(
        history in any_history(), wait in 0.0..4000.0_f64, more in 0.0..4000.0_f64,
        range in prop::option::of((0.0..100.0_f64, 100.0..300.0_f64)),
        prior in prop::option::of(Just(USUAL)),
    ) {
        let settings = Settings {
            prior,
            supplier_range: range.map(|(a, b)| Range { least: value(a), greatest: value(b) }),
            ..drifting(WANDERING)
        };
        let sooner = today(&history, &settings, day(2000.0 + wait)).unwrap();
        let later = today(&history, &settings, day(2000.0 + wait + more)).unwrap();
        prop_assert!(later.sd >= sooner.sd);
        prop_assert!(sooner.sd >= sooner.sd_at_last_test);
        prop_assert_eq!(later.value, sooner.value);
        prop_assert_eq!(later.sd_at_last_test, sooner.sd_at_last_test);
    }

    #[test]
    fn a_less_than_never_raises_the_level_nor_widens_it(
        mut history in any_history(), limit in 0.01..300.0_f64, spread in 0.5..10.0_f64,
        q in 0.001..10.0_f64, later in 0.0..500.0_f64,
    ) {
        let before = filter(&history, &wandering(), drift(q));
        history.push(below(2000.0 + later, limit, spread));
        let after = last(&filter(&history, &wandering(), drift(q)).turns);
        let predicted = after.predicted.unwrap();
        prop_assert_eq!(predicted.mean, last(&before.turns).level.mean);
        prop_assert!(after.level.mean <= predicted.mean);
        prop_assert!(after.level.sd <= predicted.sd);
    }

    #[test]
    fn the_order_of_results_of_one_day_does_not_matter_without_damping(
        results in prop::collection::vec((0.0..300.0_f64, 0.5..10.0_f64), 2..6),
        before in 0.0..300.0_f64, turn in 0..6_usize,
    ) {
        let mut observations = vec![found(0.0, before, 3.0)];
        observations.extend(results.iter().map(|&(level, spread)| found(50.0, level, spread)));
        let settings = undamped(drifting(WANDERING));
        let straight = filter(&observations, &settings, drift(0.5));
        let places = results.len();
        observations[1..].rotate_left(turn % places);
        observations[1..].swap(0, places - 1);
        let turned = filter(&observations, &settings, drift(0.5));
        let (a, b) = (last(&straight.turns).level, last(&turned.turns).level);
        prop_assert!(close(a.mean.get(), b.mean.get(), 1e-10), "{a:?} {b:?}");
        prop_assert!(close(a.sd.get(), b.sd.get(), 1e-10), "{a:?} {b:?}");
        prop_assert!(close(straight.log_likelihood, turned.log_likelihood, 1e-9));
    }

    #[test]
    fn a_change_of_unit_or_of_the_first_day_changes_nothing(
        history in any_history(), factor in 0.001..100.0_f64, shift in -3000..3000_i16,
    ) {
        let shift = f64::from(shift);
        let moved: Vec<Observation> = history.iter().map(|o| scaled(o, factor, shift)).collect();
        let a: Level = today(&history, &drifting(WANDERING), day(2100.0)).unwrap();
        let b = today(&moved, &drifting(WANDERING * factor), day(2100.0 + shift)).unwrap();
        prop_assert!(close(a.value.get() * factor, b.value.get(), 1e-9), "{a:?} {b:?}");
        prop_assert!(close(a.sd.get() * factor, b.sd.get(), 1e-9), "{a:?} {b:?}");
        prop_assert_eq!(a.age, b.age);
        prop_assert_eq!(a.saturated, b.saturated);
    }

    #[test]
    fn the_order_in_which_results_were_entered_does_not_matter(
        days in prop::collection::btree_set(0..2000_u16, 2..15), turn in 0..15_usize,
    ) {
        let mut observations: Vec<Observation> = days
            .iter()
            .map(|&d| found(f64::from(d), 100.0 + f64::from(d % 37), 3.0))
            .collect();
        let straight = today(&observations, &drifting(WANDERING), day(2100.0));
        let places = observations.len();
        observations.rotate_left(turn % places);
        prop_assert_eq!(today(&observations, &drifting(WANDERING), day(2100.0)), straight);
    }

    #[test]
    fn a_worthless_result_leaves_the_level_alone(history in any_history(), level in 0.0..300.0_f64) {
        let known = last(&filter(&history, &wandering(), drift(0.5)).turns).level;
        let mut more = history.clone();
        more.push(found(2000.0, level, 1e9));
        let after = last(&filter(&more, &wandering(), drift(0.5)).turns).level;
        prop_assert!(close(after.mean.get(), known.mean.get(), 1e-9));
    }

    #[test]
    fn whatever_is_entered_the_level_is_a_number(
        history in prop::collection::vec(extreme_observation(), 1..12), change in -12.0..5.0_f64,
        prior in prop::option::of(Just(USUAL)),
    ) {
        let settings = Settings { prior, ..drifting(10_f64.powf(change)) };
        let level = today(&history, &settings, day(1e6)).unwrap();
        // A calculation that lost its way would come back as the greatest value.
        prop_assert!(level.value.get() < Value::HIGH, "{level:?}");
        prop_assert!(level.sd.get() < Sd::HIGH, "{level:?}");
    }
}
