//! Readings put together, and what they prove at each stage.

use chemistry::put_right::Aim;
use chemistry::quantity::{Celsius, Estimate, Ph, PhShift};
use chemistry::reading::{Repeat, agree, together};
use chemistry::stages::{Evidence, SAFE_PACKAGE, Stage, Standing};

/// At the temperature the conversion does nothing to.
fn repeat(ph: f64, sd: f64, calibration: u8) -> Repeat<u8> {
    Repeat {
        ph: Ph::new(ph).expect("a pH"),
        sample: Celsius::constant(21.1),
        meter_sd: PhShift::new(sd).expect("a doubt"),
        calibration,
    }
}

fn near(found: Estimate<Ph>, ph: f64, sd: f64) {
    assert!((found.value.get() - ph).abs() < 1e-6, "{}", found.value);
    assert!((found.sd - sd).abs() < 1e-6, "{}", found.sd);
}

#[test]
fn repeats_on_one_calibration_share_its_error_and_average_only_the_rest() {
    // Worked by hand: 0.0292² = 0.02² + 0.0212² (to rounding). The mean of n has
    // √(0.0212² + 0.02²/n), and never less than what the calibration puts in.
    let shared = (0.03_f64.powi(2) - 0.02_f64.powi(2)).sqrt();
    let two = together(&[repeat(5.42, 0.03, 1), repeat(5.46, 0.03, 1)]).expect("a mean");
    near(two, 5.44, (shared.powi(2) + 0.0004 / 2.0).sqrt());
    let hundred: Vec<_> = (0..100).map(|_| repeat(5.4, 0.03, 1)).collect();
    let many = together(&hundred).expect("a mean");
    assert!(many.sd > shared && many.sd < shared + 0.001, "{}", many.sd);
    near(
        together(&[repeat(5.4, 0.03, 1)]).expect("itself"),
        5.4,
        0.03,
    );
    assert!(together::<u8>(&[]).is_none());
}

#[test]
fn two_meters_are_weighed_by_one_over_their_variance() {
    // By hand: weights 1/0.03² and 1/0.06², four to one; 1/√(1111.1 + 277.8) = 0.02683.
    let both = together(&[repeat(5.40, 0.03, 1), repeat(5.50, 0.06, 2)]).expect("a mean");
    near(both, (4.0 * 5.40 + 5.50) / 5.0, 0.026_832_8);
}

#[test]
fn the_doubt_of_the_conversion_does_not_average_out() {
    let mut warm = repeat(5.4, 0.03, 1);
    warm.sample = Celsius::constant(65.0);
    let two = together(&[warm, warm]).expect("a mean");
    assert!(two.sd > 0.1, "{}", two.sd);
}

#[test]
fn readings_a_tenth_apart_are_the_last_that_repeat_each_other() {
    let (low, edge, high) = (Ph::constant(5.4), Ph::constant(5.5), Ph::constant(5.51));
    assert!(agree(low, edge) && agree(edge, low) && !agree(low, high));
}

const AIM: Aim = Aim {
    target: Ph::constant(5.40),
    low: Ph::constant(5.30),
    high: Ph::constant(5.50),
};

#[test]
fn each_stage_has_the_window_the_sources_print() {
    // MacWilliam 1975 for the end of fermentation (ales 3.8 to 4.2, lagers 4.2 to 4.8), a
    // supplier's note for boiled wort; the others are custom, from memory.
    for (stage, low, high) in [
        (Stage::Mash, Some(5.30), Some(5.50)),
        (Stage::FirstRunnings, Some(5.30), Some(5.50)),
        (Stage::LastRunnings, None, Some(5.8)),
        (Stage::KettleFull, Some(5.2), Some(5.5)),
        (Stage::EndOfBoil, Some(5.0), Some(5.3)),
        (Stage::EndOfFermentation, Some(3.8), Some(4.8)),
        (Stage::Package, Some(4.1), Some(4.6)),
        (Stage::Liquor, Some(5.6), Some(5.8)),
    ] {
        let window = stage.window(AIM);
        let edge = |ph: Option<Ph>| ph.map(Ph::get);
        assert_eq!(
            (edge(window.low), edge(window.high)),
            (low, high),
            "{stage:?}"
        );
        assert_eq!(Stage::from_key(stage.key()), Some(stage));
    }
    assert_eq!(Stage::LastRunnings.window(AIM).evidence, Evidence::Custom);
    assert_eq!(Stage::Package.window(AIM).high, Some(SAFE_PACKAGE));
}

#[test]
fn a_reading_proves_a_side_only_when_its_own_error_leaves_no_other() {
    // 1.645 · 0.03 = 0.049 either side.
    let window = Stage::EndOfBoil.window(AIM);
    for (ph, standing) in [
        (5.15, Standing::Inside),
        (5.28, Standing::CannotBeTold),
        (5.34, Standing::CannotBeTold),
        (5.36, Standing::Above),
        (5.02, Standing::CannotBeTold),
        (4.94, Standing::Below),
    ] {
        let reading = Estimate::new(Ph::new(ph).expect("a pH"), 0.03);
        assert_eq!(window.standing(reading), standing, "{ph}");
    }
    let open = Stage::LastRunnings.window(AIM);
    let low = Estimate::new(Ph::constant(4.0), 0.03);
    assert_eq!(open.standing(low), Standing::Inside);
}
