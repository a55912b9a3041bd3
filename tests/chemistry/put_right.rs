//! What to do about a pH read in the mash.

mod common;

use chemistry::mash::{
    Addition, Behaviour, GristItem, Groups, LiquorDoubt, Malt, MaltClass, MashInputs, Settings,
};
use chemistry::material::{DoseUnit, Material, Strength, Substance};
use chemistry::put_right::{
    Advice, Aim, Corrected, Direction, FirstStep, LeaveIt, MashCheck, ReadAgain, Remedy, Situation,
    Stop, Verdict, as_read, assess, curve, expected_after, strength,
};
use chemistry::quantity::{
    Celsius, DoseAmount, Estimate, Fraction, GramsPerMl, Kilograms, Litres, Meq, MeqPerL, MgPerL,
    Minutes, Ph, PhShift, RelativeBuffering,
};
use chemistry::reading::cooled;
use common::natural;

/// 200 kg of pale malt in 600 L of fairly soft water: predicted 5.71.
fn mash() -> MashInputs {
    MashInputs {
        grist: vec![GristItem {
            malt: Malt {
                name: "Pale malt lot 7".into(),
                behaviour: MaltClass::PaleAle.behaviour(None),
            },
            mass: Kilograms::constant(200.0),
        }],
        liquor: natural(40.0, 7.5, 60.0, 5.0),
        liquor_doubt: LiquorDoubt {
            alkalinity: MeqPerL::constant(0.05),
            calcium: MgPerL::constant(3.0),
            magnesium: MgPerL::constant(0.5),
        },
        volume: Estimate::new(Litres::constant(600.0), 6.0),
        additions: Vec::new(),
        settings: Settings::default(),
        offset: Estimate::new(PhShift::constant(0.0), 0.03),
    }
}

/// 88 % lactic acid, 11.78 mol/L.
fn acid() -> Material {
    Material::liquid(
        Substance::LacticAcid,
        Strength::WeightPercent {
            share: Fraction::constant(0.88),
            density: GramsPerMl::constant(1.206),
        },
        Estimate::new(Fraction::constant(1.0), 0.0),
    )
    .expect("an acid")
}

const AIM: Aim = Aim {
    target: Ph::constant(5.40),
    low: Ph::constant(5.30),
    high: Ph::constant(5.50),
};

/// A cooled sample at minute 20 on a meter good to 0.03.
fn read(ph: f64) -> MashCheck {
    MashCheck {
        reading: Estimate::new(Ph::new(ph).expect("a pH"), 0.03),
        sample: Celsius::constant(21.1),
        minute: Minutes::constant(20.0),
        calibrated: true,
        agrees: true,
        meter_checked: false,
    }
}

fn with<T>(mash: &MashInputs, ask: impl FnOnce(Situation<'_>) -> T) -> T {
    let (acid, base) = (
        acid(),
        Material::usual(Substance::SodiumBicarbonate).expect("a base"),
    );
    ask(Situation {
        mash,
        aim: AIM,
        acid: Some(Remedy {
            material: &acid,
            cap: DoseAmount::constant(500.0),
        }),
        base: Some(Remedy {
            material: &base,
            cap: DoseAmount::constant(1000.0),
        }),
        corrected: None,
    })
}

fn advice(check: MashCheck) -> Advice {
    with(&mash(), |situation| assess(&check, &situation).advice)
}

fn first_step(advice: Advice) -> FirstStep {
    match advice {
        Advice::FirstStep(step) => step,
        other => panic!("expected a first step, not {other:?}"),
    }
}

#[test]
fn a_hot_reading_is_converted_as_worts_were_measured() {
    // J.-P. Hosom, 19 worts from 18-20 to 65 °C: 0.26 lower from pH 5.8, 0.21 from 5.5
    // (one unit of the last digit allowed): a reading at 18 °C and one at 65 °C lower by that are one wort.
    let exact = PhShift::constant(0.0);
    for (cold, fall) in [(5.8, 0.26), (5.5, 0.21)] {
        let cold_reading = Ph::new(cold).expect("a pH");
        let hot_reading = Ph::new(cold - fall).expect("a pH");
        let by_cold = cooled(cold_reading, Celsius::constant(18.0), exact);
        let by_hot = cooled(hot_reading, Celsius::constant(65.0), exact);
        let apart = by_hot.value.get() - by_cold.value.get();
        assert!(apart.abs() < 0.01, "{cold}: {apart}");
        assert!((by_hot.sd - 0.1).abs() < 1e-9);
    }
    let cold = cooled(
        Ph::constant(5.4),
        Celsius::constant(21.1),
        PhShift::constant(0.03),
    );
    assert!((cold.value.get() - 5.4).abs() < 1e-12 && (cold.sd - 0.03).abs() < 1e-12);
}

#[test]
fn a_reading_on_target_or_inside_the_window_is_left_alone() {
    assert_eq!(
        advice(read(5.43)),
        Advice::LeaveIt {
            why: LeaveIt::CannotBeTold
        }
    );
    assert_eq!(
        advice(read(5.47)),
        Advice::LeaveIt {
            why: LeaveIt::InsideWindow
        }
    );
    // On a poor meter 5.52 cannot be told from 5.40 though it lies outside the window.
    let mut poor = read(5.52);
    poor.reading.sd = 0.08;
    with(&mash(), |situation| {
        let assessment = assess(&poor, &situation);
        assert_eq!(assessment.verdict, Verdict::CannotBeTold);
        assert_eq!(
            assessment.advice,
            Advice::LeaveIt {
                why: LeaveIt::CannotBeTold
            }
        );
    });
}

#[test]
fn the_first_step_down_is_half_of_what_the_rule_of_thumb_says() {
    // Half-dose rule of the trade: meq = 0.5 · kg · B · (read − target), B about 36
    // meq/(kg·pH) below pH 5.7, good to a quarter; 11.4 meq/mL of 88 % lactic acid at 5.4.
    let step = first_step(advice(read(5.65)));
    let rule = 0.5 * 200.0 * 36.0 * (5.65 - 5.40) / 11.4;
    assert!(
        (step.dose.get() / rule - 1.0).abs() < 0.25,
        "{} {rule}",
        step.dose
    );
    assert!((step.dose.get() * 2.0 - step.full_dose.get()).abs() < 1e-9);
    assert_eq!(
        (step.direction, step.unit),
        (Direction::Lower, DoseUnit::Millilitres)
    );
    assert!(!step.capped);
    // Half of the way in acid is about half of the way in pH.
    let expected = step.expected_ph;
    assert!(
        (expected.value.get() - 5.525).abs() < 0.02,
        "{}",
        expected.value
    );
    assert!(expected.sd > 0.03 && expected.sd < 0.06, "{}", expected.sd);
    assert_eq!(step.reread_after.get(), 10.0);
}

#[test]
fn a_mash_too_low_is_raised_with_base_and_never_with_acid() {
    let step = first_step(with(&acidified(), |situation| {
        assess(&read(5.25), &situation).advice
    }));
    assert_eq!(
        (step.direction, step.unit),
        (Direction::Raise, DoseUnit::Grams)
    );
    assert!(step.dose.get() > 0.0);
    assert!(step.expected_ph.value.get() > 5.25 && step.expected_ph.value.get() < 5.40);
    let none = with(&acidified(), |mut situation| {
        situation.base = situation.acid;
        assess(&read(5.25), &situation).advice
    });
    assert_eq!(
        none,
        Advice::Stop {
            why: Stop::NoRemedy
        }
    );
}

/// The mash with the acid that a plan would have put in: predicted 5.40.
fn acidified() -> MashInputs {
    let mut mash = mash();
    let dose = mash.dose_for(AIM.target, &acid()).expect("a dose");
    mash.additions
        .push(Addition::of("lactic acid", &acid(), dose));
    mash
}

#[test]
fn the_rest_of_the_step_reaches_the_target_when_the_mash_answers_as_expected() {
    let step = first_step(advice(read(5.65)));
    let mut corrected_mash = mash();
    corrected_mash
        .additions
        .push(Addition::of("correction", &acid(), step.dose));
    let second = with(&corrected_mash, |mut situation| {
        situation.corrected = Some(Corrected {
            direction: Direction::Lower,
            given: strength(&mash(), AIM.target, &acid().contribution(step.dose)),
            first_full: step.full,
        });
        assess(&read(step.expected_ph.value.get()), &situation).advice
    });
    let second = first_step(second);
    let remainder = step.full_dose.get() - step.dose.get();
    assert!((second.full_dose.get() - remainder).abs() < 1e-3 * remainder);
}

#[test]
fn corrections_stop_at_the_cap_at_the_first_full_dose_and_at_a_change_of_direction() {
    let corrected = |direction, given: f64, first_full: f64, cap: f64| {
        with(&mash(), |mut situation| {
            if let Some(acid) = &mut situation.acid {
                acid.cap = DoseAmount::clamped(cap);
            }
            situation.corrected = Some(Corrected {
                direction,
                given: Meq::clamped(given),
                first_full: Meq::clamped(first_full),
            });
            assess(&read(5.65), &situation).advice
        })
    };
    let reached = Advice::Stop {
        why: Stop::CapReached,
    };
    assert_eq!(corrected(Direction::Lower, 500.0, 9000.0, 0.0), reached);
    assert_eq!(corrected(Direction::Lower, 1000.0, 1000.0, 500.0), reached);
    assert_eq!(
        corrected(Direction::Raise, 10.0, 1000.0, 500.0),
        Advice::Stop {
            why: Stop::AlreadyCorrectedTheOtherWay
        }
    );
    let capped = first_step(corrected(Direction::Lower, 500.0, 9000.0, 30.0));
    assert!(capped.capped);
    assert!((capped.dose.get() - 30.0).abs() < 1e-9);
    // So near the cap that the step would hardly show: half of the full dose is about 75 mL.
    assert_eq!(corrected(Direction::Lower, 500.0, 9000.0, 5.0), reached);
}

#[test]
fn nothing_is_advised_before_minute_ten_or_on_a_hot_sample() {
    let mut early = read(5.9);
    early.minute = Minutes::constant(9.9);
    assert_eq!(
        advice(early),
        Advice::ReadAgain {
            why: ReadAgain::TooEarly
        }
    );
    let mut hot = read(5.4);
    hot.sample = Celsius::constant(65.0);
    assert_eq!(
        advice(hot),
        Advice::ReadAgain {
            why: ReadAgain::CoolTheSample
        }
    );
}

#[test]
fn nothing_is_advised_on_a_meter_that_was_not_calibrated_or_readings_that_contradict() {
    let mut strange = read(5.65);
    strange.calibrated = false;
    assert_eq!(
        advice(strange),
        Advice::ReadAgain {
            why: ReadAgain::Calibrate
        }
    );
    let mut alone = read(5.65);
    alone.agrees = false;
    assert_eq!(
        advice(alone),
        Advice::ReadAgain {
            why: ReadAgain::ReadingsDisagree
        }
    );
}

#[test]
fn a_reading_too_far_off_sends_the_brewer_to_the_meter_and_then_stops() {
    let mut wild = read(6.6);
    assert_eq!(
        advice(wild),
        Advice::ReadAgain {
            why: ReadAgain::CheckTheMeter
        }
    );
    wild.meter_checked = true;
    assert_eq!(
        advice(wild),
        Advice::Stop {
            why: Stop::NotThePlannedMash
        }
    );
}

#[test]
fn no_reading_and_no_mash_leads_to_a_step_beyond_the_full_dose_or_the_cap() {
    for tenth in 30..=90 {
        let check = read(f64::from(tenth) / 10.0);
        for mash in [mash(), acidified()] {
            if let Advice::FirstStep(step) =
                with(&mash, |situation| assess(&check, &situation).advice)
            {
                assert!(step.dose.get() <= 0.5 * step.full_dose.get() + 1e-9);
                assert!(step.dose.get() <= 1000.0);
                let (read, target) = (check.reading.value.get(), AIM.target.get());
                let after = step.expected_ph.value.get();
                assert!(
                    (after - target).abs() < (read - target).abs(),
                    "{read} {after}"
                );
                assert!((after - target) * (read - target) > 0.0, "{read} {after}");
            }
        }
    }
    let mut empty = mash();
    empty.grist.clear();
    let advice = with(&empty, |situation| assess(&read(5.6), &situation).advice);
    assert!(matches!(
        advice,
        Advice::Stop {
            why: Stop::NoPrediction(_)
        }
    ));
}

/// J.-P. Hosom's mash: 0.420 kg of one US 2-row malt in 1.372 L of water with 32 to 41 mg/L
/// of alkalinity, 67 °C, 60 minutes: pH 5.62. The pH in distilled water that fits is 5.56;
/// its buffering is that of the average malt.
fn measured_mash() -> MashInputs {
    let malt = Behaviour::Groups(Groups::new(
        Estimate::new(Ph::constant(5.56), 0.02),
        Estimate::new(RelativeBuffering::constant(1.0), 0.25),
    ));
    MashInputs {
        grist: vec![GristItem {
            malt: Malt {
                name: "2-row".into(),
                behaviour: malt,
            },
            mass: Kilograms::constant(0.420),
        }],
        liquor: natural(36.5, 7.6, 10.0, 2.0),
        volume: Estimate::new(Litres::constant(1.372), 0.01),
        ..mash()
    }
}

/// Phosphoric acid, 10 % by weight, 1.053 g/mL: 1.075 mol/L.
fn phosphoric() -> Material {
    Material::liquid(
        Substance::PhosphoricAcid,
        Strength::WeightPercent {
            share: Fraction::constant(0.10),
            density: GramsPerMl::constant(1.053),
        },
        Estimate::new(Fraction::constant(1.0), 0.0),
    )
    .expect("an acid")
}

#[test]
fn acid_into_a_measured_mash_moves_it_as_was_measured() {
    // The same mash with 3.4 mL of 10 % phosphoric acid (8.8 meq/kg): 5.39 to 5.40, read
    // 5.62 without. Readings of ±0.01 either side.
    let dose = DoseAmount::constant(3.4);
    let mash = measured_mash();
    let target = Ph::constant(5.40);
    let meq = strength(&mash, target, &phosphoric().contribution(dose)).get();
    assert!((meq / 0.420 - 8.8).abs() < 0.1, "{}", meq / 0.420);
    let mut with_acid = mash.clone();
    with_acid
        .additions
        .push(Addition::of("acid", &phosphoric(), dose));
    let before = Estimate::new(Ph::constant(5.62), 0.01);
    let after = expected_after(&mash, before, &with_acid).expect("a pH");
    assert!(
        (5.37..=5.42).contains(&after.value.get()),
        "{}",
        after.value
    );
    // And the doubt it is given holds the figure that was measured.
    assert!(after.sd > 0.05 && after.sd < 0.07, "{}", after.sd);
}

#[test]
fn two_half_steps_into_a_measured_mash_come_to_the_acid_that_was_measured() {
    // Asked for 5.395 from 5.62, the full dose is the 3.4 mL that did it, to a tenth.
    let mash = as_read(&measured_mash(), Ph::constant(5.62)).expect("a mash");
    let full = mash
        .dose_for(Ph::constant(5.395), &phosphoric())
        .expect("a dose");
    assert!((full.get() / 3.4 - 1.0).abs() < 0.1, "{full}");
}

#[test]
fn a_step_of_another_acid_counts_against_the_same_first_full_dose() {
    // 11.4 meq/mL of 88 % lactic acid and 1.09 meq/mL of 10 % phosphoric at 5.4 (tables of
    // strength): ten times as many millilitres do the same.
    let of = |material: &Material, amount: f64| {
        strength(
            &mash(),
            AIM.target,
            &material.contribution(DoseAmount::constant(amount)),
        )
        .get()
    };
    assert!((of(&acid(), 1.0) - 11.45).abs() < 0.05);
    assert!((of(&phosphoric(), 1.0) - 1.091).abs() < 0.01);
    assert!((of(&acid(), 10.0) / of(&phosphoric(), 104.9) - 1.0).abs() < 0.01);
}

#[test]
fn the_chance_to_land_in_the_window_is_that_of_the_normal_distribution() {
    // Any table of the normal distribution: 68.27 % within one standard deviation, 95.0 %
    // within 1.96, 15.87 % above one.
    for (mean, sd, chance) in [
        (5.40, 0.10, 0.6827),
        (5.40, 0.10 / 1.959_964, 0.95),
        (5.50, 0.10, 0.4772),
        (5.60, 0.10, 0.1573),
        (6.60, 0.05, 0.0),
    ] {
        let found = AIM.chance(Estimate::new(Ph::constant(mean), sd)).get();
        assert!((found - chance).abs() < 2e-4, "{mean} {sd}: {found}");
    }
    assert_eq!(AIM.chance(Estimate::new(Ph::constant(5.5), 0.0)).get(), 1.0);
    assert_eq!(
        AIM.chance(Estimate::new(Ph::constant(5.51), 0.0)).get(),
        0.0
    );
}

#[test]
fn the_curve_falls_with_acid_and_passes_where_the_step_leads() {
    let step = first_step(advice(read(5.65)));
    let mash = as_read(&mash(), Ph::constant(5.65)).expect("a mash");
    let points = curve(&mash, &acid(), step.full_dose);
    assert_eq!(points.len(), 25);
    assert!((points[0].1.get() - 5.65).abs() < 1e-6);
    assert!((points[24].1.get() - AIM.target.get()).abs() < 1e-6);
    assert!(points.windows(2).all(|pair| pair[1].1 < pair[0].1));
    let halfway = points[12].1.get();
    assert!((halfway - step.expected_ph.value.get()).abs() < 1e-6);
}
