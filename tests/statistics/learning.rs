//! Learning from mash readings, against the reference figures and against what
//! must hold for any history.

use proptest::prelude::*;
use statistics::learning::{Damping, Effect, Learned, Outcome, Prior, learn};
use statistics::quantity::{Sd, Share, Value};

use crate::reference::{Row, Within, number, rows};

/// What the reference learns besides the bias, with the standard deviations of
/// its prior. A new lot of base malt moves it by 0.02, on top of the lots before.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
enum Thing {
    BaseMalt,
    Crystal,
    Roasted,
    Wheat,
    BufferScale,
    NewLot(u32),
}

const THINGS: [(Thing, &str, f64); 5] = [
    (Thing::BaseMalt, "base_malt", 0.04),
    (Thing::Crystal, "crystal", 0.06),
    (Thing::Roasted, "roasted", 0.08),
    (Thing::Wheat, "wheat", 0.05),
    (Thing::BufferScale, "buffer_scale", 0.15),
];

const LOT: f64 = 0.02;

/// No drift at all, as near as the type allows.
const STILL: Prior = Prior {
    bias_per_brew: Sd::constant(1e-12),
    ..Prior::DEFAULT
};

/// The reference has the same formulas and prints twelve digits. Below 0.001 pH
/// those allow an absolute comparison only.
const CLOSELY: Within = Within {
    relative: 1e-9,
    least: 1e-3,
};

fn undamped(prior: Prior) -> Prior {
    Prior {
        damping: Damping::Off,
        ..prior
    }
}

fn reference() -> serde_json::Value {
    serde_json::from_str(include_str!("qa/bayes.json")).unwrap()
}

fn effect<K>(of: K, size: f64, prior: f64) -> Effect<K> {
    Effect {
        of,
        size: Value::new(size).unwrap(),
        prior: Sd::new(prior).unwrap(),
    }
}

/// Base malt after so many changes of lot.
fn base_malt(size: f64, lots: u32) -> Vec<Effect<Thing>> {
    let mut effects = vec![effect(Thing::BaseMalt, size, 0.04)];
    effects.extend((1..=lots).map(|lot| effect(Thing::NewLot(lot), size, LOT)));
    effects
}

/// The forty readings of the reference, and the changes of lot before each.
fn history(lots_differ: bool) -> (Vec<Outcome<Thing>>, Vec<u32>) {
    let mut changes = 0;
    let mut lots = Vec::new();
    let outcome =
        |row: &Row| {
            assert_eq!(number(row, "h_offset"), 1.0);
            changes += u32::from(lots_differ && row["new_lot"] == "1");
            lots.push(changes);
            let mut effects = base_malt(number(row, "h_base_malt"), changes);
            effects.extend(THINGS[1..].iter().map(|&(thing, name, prior)| {
                effect(thing, number(row, &format!("h_{name}")), prior)
            }));
            Outcome {
                effects,
                residual: Value::new(number(row, "residual")).unwrap(),
                sd: Sd::new(number(row, "R").sqrt()).unwrap(),
            }
        };
    let outcomes: Vec<_> = rows(include_str!("qa/bayes_data.csv"))
        .iter()
        .map(outcome)
        .collect();
    assert_eq!(outcomes.len(), 40);
    (outcomes, lots)
}

#[test]
fn the_belief_after_every_reading_agrees_with_the_reference() {
    let (outcomes, lots) = history(true);
    for (prior, text) in [
        (
            undamped(Prior::DEFAULT),
            include_str!("qa/bayes_recursive_plain.csv"),
        ),
        (
            Prior::DEFAULT,
            include_str!("qa/bayes_recursive_robust.csv"),
        ),
    ] {
        let table = rows(text);
        assert_eq!(table.len(), 40);
        for (i, row) in table.iter().enumerate() {
            let learned = learn(&outcomes[..=i], &prior);
            let turn = learned.turns()[i];
            CLOSELY.check(turn.predicted.value.get(), number(row, "predicted"));
            CLOSELY.check(turn.predicted.sd.get(), number(row, "sd_pred"));
            CLOSELY.check(turn.weight.get(), number(row, "weight"));
            CLOSELY.check(learned.bias().value.get(), number(row, "m_offset"));
            CLOSELY.check(learned.bias().sd.get(), number(row, "sd_offset"));
            for (thing, name, prior) in THINGS {
                let effects = match thing {
                    Thing::BaseMalt => base_malt(1.0, lots[i]),
                    thing => vec![effect(thing, 1.0, prior)],
                };
                let shift = learned.shift_of(&effects);
                CLOSELY.check(shift.value.get(), number(row, &format!("m_{name}")));
                CLOSELY.check(shift.sd.get(), number(row, &format!("sd_{name}")));
            }
        }
    }
}

#[test]
fn damping_finds_the_two_planted_errors() {
    let learned = learn(&history(true).0, &Prior::DEFAULT);
    let reference = reference();
    let planted = reference["outliers_planted_at"].as_array().unwrap();
    assert_eq!(planted.len(), 2);
    for planted in planted {
        let planted = usize::try_from(planted.as_u64().unwrap()).unwrap();
        assert!(learned.turns()[planted].weight.get() < 0.6);
    }
}

#[test]
fn one_reading_after_another_gives_the_batch_solution() {
    let (outcomes, _) = history(false);
    let learned = learn(&outcomes, &undamped(STILL));
    let batch = &reference()["batch_no_process_noise"];
    let mean: Vec<f64> = serde_json::from_value(batch["mean"].clone()).unwrap();
    let covariance: Vec<Vec<f64>> = serde_json::from_value(batch["cov"].clone()).unwrap();
    CLOSELY.check(learned.bias().value.get(), mean[0]);
    for (i, (thing, _, prior)) in THINGS.into_iter().enumerate() {
        let shift = learned.shift_of(&[effect(thing, 1.0, prior)]);
        CLOSELY.check(shift.value.get(), mean[i + 1]);
    }
    // The whole covariance, seen through forty different mashes.
    for outcome in &outcomes {
        let prediction = learned.predict_learned(&outcome.effects).shift;
        let mut h = vec![1.0];
        h.extend(outcome.effects.iter().map(|effect| effect.size.get()));
        let shift: f64 = h.iter().zip(&mean).map(|(h, m)| h * m).sum();
        let variance: f64 = (0..6)
            .flat_map(|i| (0..6).map(move |j| (i, j)))
            .map(|(i, j)| h[i] * covariance[i][j] * h[j])
            .sum();
        CLOSELY.check(prediction.value.get(), shift);
        CLOSELY.check(prediction.sd.get(), variance.sqrt());
    }
}

#[test]
fn leaving_one_out_agrees_with_the_reference() {
    let learned = learn(&history(false).0, &undamped(STILL));
    let table = rows(include_str!("qa/bayes_loo.csv"));
    assert_eq!(learned.left_out().len(), table.len());
    for (row, left_out) in table.iter().zip(learned.left_out()) {
        CLOSELY.check(left_out.value.get(), number(row, "loo_error"));
        CLOSELY.check(left_out.sd.get(), number(row, "loo_sd"));
    }
    let skill = reference()["loo"]["skill"].as_f64().unwrap();
    CLOSELY.check(learned.skill().unwrap().get(), skill);
}

/// (S⁻¹r)ᵢ/(S⁻¹)ᵢᵢ and 1/(S⁻¹)ᵢᵢ with S written out in full and inverted by
/// elimination: the slow textbook way, drift between brews included.
fn left_out_by_inversion<K: PartialEq>(prior: &Prior, outcomes: &[Outcome<K>]) -> Vec<(f64, f64)> {
    let n = outcomes.len();
    let mut wide = vec![vec![0.0; 2 * n]; n];
    for i in 0..n {
        for j in 0..n {
            let brews = f64::from(u32::try_from(i.min(j)).unwrap());
            let bias = prior.bias.get().powi(2) + brews * prior.bias_per_brew.get().powi(2);
            let shared = outcomes[i].effects.iter().flat_map(|a| {
                let others = outcomes[j].effects.iter().filter(|b| b.of == a.of);
                others.map(|b| a.size.get() * a.prior.get().powi(2) * b.size.get())
            });
            wide[i][j] = bias + shared.sum::<f64>();
        }
        wide[i][i] += outcomes[i].sd.get().powi(2);
        wide[i][n + i] = 1.0;
    }
    for pivot in 0..n {
        let scale = wide[pivot][pivot];
        wide[pivot].iter_mut().for_each(|x| *x /= scale);
        let pivot_row = wide[pivot].clone();
        for (i, row) in wide.iter_mut().enumerate() {
            if i != pivot {
                let factor = row[pivot];
                row.iter_mut()
                    .zip(&pivot_row)
                    .for_each(|(x, p)| *x -= factor * p);
            }
        }
    }
    (0..n)
        .map(|i| {
            let inverse = &wide[i][n..];
            let weighed: f64 = inverse
                .iter()
                .zip(outcomes)
                .map(|(s, outcome)| s * outcome.residual.get())
                .sum();
            (weighed / inverse[i], (1.0 / inverse[i]).sqrt())
        })
        .collect()
}

#[test]
fn leaving_one_out_with_drift_equals_inverting_the_whole_covariance() {
    let (outcomes, _) = history(true);
    let learned = learn(&outcomes, &Prior::DEFAULT);
    for (left_out, (error, sd)) in learned
        .left_out()
        .iter()
        .zip(left_out_by_inversion(&Prior::DEFAULT, &outcomes))
    {
        CLOSELY.check(left_out.value.get(), error);
        CLOSELY.check(left_out.sd.get(), sd);
    }
}

#[test]
fn what_is_learned_is_used_from_five_readings_on_and_only_if_it_foretells() {
    let (outcomes, _) = history(true);
    let next = &outcomes[39].effects;
    let four = learn(&outcomes[..4], &Prior::DEFAULT);
    assert!(four.skill().unwrap().get() > 0.0 && !four.in_use());
    assert_eq!(four.predict(next), four.predict_untrained(next));
    let five = learn(&outcomes[..5], &Prior::DEFAULT);
    assert!(five.skill().unwrap().get() > 0.0 && five.in_use());
    assert_eq!(five.predict(next), five.predict_learned(next));

    // Residuals that swing from side to side of one mash teach nothing.
    let swinging: Vec<Outcome<Thing>> = (0..12)
        .map(|i| Outcome {
            residual: Value::constant(if i % 2 == 0 { 0.05 } else { -0.05 }),
            ..outcomes[0].clone()
        })
        .collect();
    let swinging = learn(&swinging, &Prior::DEFAULT);
    assert!(swinging.skill().unwrap().get() < 0.0 && !swinging.in_use());
}

#[test]
fn the_untrained_shift_is_none_with_the_priors_parts_added_as_squares() {
    let learned = learn(&history(true).0, &Prior::DEFAULT);
    // By hand: bias 0.08, a malt of 0.04 at share 0.5 named twice, so 1.0, and a
    // lot of 0.02 at 0.5: 0.0064 + 0.0016 + 0.0001.
    let mash = [
        effect(Thing::BaseMalt, 0.5, 0.04),
        effect(Thing::BaseMalt, 0.5, 0.04),
        effect(Thing::NewLot(99), 0.5, 0.02),
    ];
    let untrained = learned.predict_untrained(&mash).shift;
    assert_eq!(untrained.value.get(), 0.0);
    assert!((untrained.sd.get().powi(2) - 0.0081).abs() < 1e-12);
}

#[test]
fn a_new_lot_of_a_known_malt_starts_from_what_the_malt_has_taught() {
    // Two malts, told apart by their shares; the first reads 0.06 high.
    let mash = |share: f64, lots: (u32, u32)| {
        vec![
            effect((1, 0), share, 0.04),
            effect((1, lots.0), share, 0.02),
            effect((2, 0), 1.0 - share, 0.04),
            effect((2, lots.1), 1.0 - share, 0.02),
        ]
    };
    let outcomes: Vec<Outcome<(u32, u32)>> = (0..40_u32)
        .map(|i| {
            let share = f64::from(i % 5) / 4.0;
            Outcome {
                effects: mash(share, (1 + i / 10, 1 + i / 10)),
                residual: Value::new(0.06 * share).unwrap(),
                sd: Sd::constant(0.01),
            }
        })
        .collect();
    let learned = learn(&outcomes, &Prior::DEFAULT);
    let new = mash(1.0, (99, 99));
    let prediction = learned.predict(&new);
    assert!(
        (prediction.shift.value.get() - 0.06).abs() < 0.01,
        "{prediction:?}"
    );
    // Not surer than one lot differs from the next, surer than the untrained.
    assert!(prediction.shift.sd.get() > 0.02);
    assert!(prediction.shift.sd < learned.predict_untrained(&new).shift.sd);
    // The lot just brewed is known better than a new one.
    let same = learned.predict(&mash(1.0, (4, 4)));
    assert!(same.shift.sd < prediction.shift.sd);
}

/// Half-widths over the plain standard deviation.
fn multiple(learned: &Learned<Thing>, coverage: f64) -> f64 {
    let prediction = learned.predict_learned(&history(true).0[39].effects);
    let plain = prediction.shift.sd.get().hypot(0.03);
    let coverage = Share::new(coverage).unwrap();
    prediction.half_width(Sd::constant(0.03), coverage).get() / plain
}

#[test]
fn intervals_are_students_with_eight_degrees_of_freedom_before_any_reading() {
    // Printed tables of Student's t, 8 degrees of freedom, two-sided (from
    // memory): 1.860 at 90 %, 2.306 at 95 %, 3.355 at 99 %. Half a last digit.
    let untrained = learn(&[], &Prior::DEFAULT);
    for (coverage, printed) in [(0.90, 1.860), (0.95, 2.306), (0.99, 3.355)] {
        let ours = multiple(&untrained, coverage);
        assert!((ours - printed).abs() <= 0.0005, "{coverage}: {ours}");
    }
    // Certainty is no interval; what is given for it is finite.
    assert!(multiple(&untrained, 1.0) < 10.0);
}

#[test]
fn intervals_widen_by_what_undamped_readings_showed() {
    let learned = learn(&history(true).0, &Prior::DEFAULT);
    let undamped = learned
        .turns()
        .iter()
        .filter(|turn| turn.weight.get() >= 1.0)
        .count();
    assert_eq!(undamped, 37);
    // bayes.json: mean z² of the unflagged readings. Printed table, t at 95 %:
    // 2.0141 with 45 degrees of freedom (from memory), half a last digit.
    let mean = reference()["mean_z2_unflagged"].as_f64().unwrap();
    let scale = (8.0 + 37.0 * mean) / 45.0;
    let ours = multiple(&learned, 0.95) / scale.sqrt();
    assert!((ours - 2.0141).abs() <= 0.00005, "{ours}");
}

fn any_outcome() -> impl Strategy<Value = Outcome<u32>> {
    (
        prop::array::uniform4(0.0..2.0_f64),
        0..4_u32,
        -0.5..0.5_f64,
        0.01..0.1_f64,
    )
        .prop_map(|(sizes, lot, residual, sd)| {
            let mut effects: Vec<Effect<u32>> = (0..4_u32)
                .zip(sizes)
                .map(|(thing, size)| effect(thing, size, 0.05))
                .collect();
            effects.push(effect(100 + lot, sizes[0], LOT));
            Outcome {
                effects,
                residual: Value::new(residual).unwrap(),
                sd: Sd::new(sd).unwrap(),
            }
        })
}

proptest! {
    #[test]
    fn a_reading_never_makes_a_shift_less_sure_without_drift(
        history in prop::collection::vec(any_outcome(), 1..20), next in any_outcome(),
    ) {
        let sd = |history: &[Outcome<u32>]| {
            learn(history, &STILL).predict_learned(&next.effects).shift.sd.get()
        };
        prop_assert!(sd(&history) <= sd(&history[..history.len() - 1]) * (1.0 + 1e-9));
    }

    #[test]
    fn leaving_one_out_equals_learning_without_it(
        mut history in prop::collection::vec(any_outcome(), 1..15), which in 0..15_usize,
    ) {
        let which = which % history.len();
        let foretold = learn(&history, &undamped(STILL)).left_out()[which];
        let left = history.remove(which);
        let shift = learn(&history, &undamped(STILL)).predict_learned(&left.effects).shift;
        let expected = left.residual.get() - shift.value.get();
        prop_assert!((foretold.value.get() - expected).abs() < 1e-9, "{foretold:?} {expected}");
        prop_assert!((foretold.sd.get() - shift.sd.get().hypot(left.sd.get())).abs() < 1e-9);
    }
}
