//! Electrodes and buffers against printed values, and calibrations against electrodes made
//! up for the purpose.

use chemistry::electrode::{
    Buffer, CalibrationError, Circumstances, Electrode, Part, Point, UsedBuffer, Verdict, fit,
    nernst_slope, phthalate, slope_error,
};
use chemistry::quantity::{Celsius, Days, Millivolts, Ph, PhShift, SlopePercent};
use proptest::prelude::*;

const MASH: Ph = Ph::constant(5.4);

fn celsius(value: f64) -> Celsius {
    Celsius::new(value).expect("a temperature")
}

fn ph(value: f64) -> Ph {
    Ph::new(value).expect("a pH")
}

fn electrode(slope: f64, offset: f64) -> Electrode {
    Electrode {
        slope: SlopePercent::new(slope).expect("a slope"),
        offset: Millivolts::new(offset).expect("an offset"),
    }
}

fn point(buffer: f64, temperature: f64, reading: f64) -> Point {
    Point {
        buffer: ph(buffer),
        temperature: celsius(temperature),
        reading: Millivolts::new(reading).expect("a potential"),
    }
}

#[test]
fn the_nernst_slope_is_58_17_at_20_59_16_at_25_and_67_10_at_65_degrees() {
    // Arithmetic on ln 10·R·T/F, two decimals printed.
    for (temperature, printed) in [(20.0, 58.17), (25.0, 59.16), (65.0, 67.10)] {
        let slope = nernst_slope(celsius(temperature)).get();
        assert!((slope - printed).abs() <= 0.005, "{temperature}: {slope}");
    }
}

#[test]
fn the_phthalate_standard_is_4_001_at_20_4_006_at_25_and_4_031_at_40_degrees() {
    // The equation of Hetzer, Durst, Robinson, Bates 1977; three decimals printed.
    for (temperature, printed) in [(20.0, 4.001), (25.0, 4.006), (40.0, 4.031)] {
        let found = phthalate(celsius(temperature)).expect("in range").get();
        assert!((found - printed).abs() <= 0.0005, "{temperature}: {found}");
    }
}

/// pH of phthalate, phosphate and borate at 0, 5, … 50 °C as JIS Z 8802 (2011) prints
/// them, two decimals, some of them cut instead of rounded.
const JIS: [(f64, f64, f64, f64); 11] = [
    (0.0, 4.01, 6.98, 9.46),
    (5.0, 4.01, 6.95, 9.39),
    (10.0, 4.00, 6.92, 9.33),
    (15.0, 4.00, 6.90, 9.27),
    (20.0, 4.00, 6.88, 9.22),
    (25.0, 4.01, 6.86, 9.18),
    (30.0, 4.01, 6.85, 9.14),
    (35.0, 4.02, 6.84, 9.10),
    (40.0, 4.03, 6.84, 9.07),
    (45.0, 4.04, 6.83, 9.04),
    (50.0, 4.06, 6.83, 9.01),
];

#[test]
fn the_primary_standards_are_what_another_country_prints() {
    for (temperature, phthalate, phosphate, borate) in JIS {
        for (buffer, printed) in [
            (Buffer::Nist4, phthalate),
            (Buffer::Nist7, phosphate),
            (Buffer::Nist9, borate),
        ] {
            let found = buffer.ph(celsius(temperature)).expect("in range").get();
            let off = (found - printed).abs();
            // Half a digit for rounding, a whole one where it was cut; and the phthalate
            // equation is known to differ by 0.003 from the values before it.
            assert!(
                off <= 0.0102,
                "{} at {temperature}: {found}, printed {printed}",
                buffer.name()
            );
        }
    }
}

#[test]
fn a_manual_prints_phosphate_and_borax_at_0_5_and_10_degrees_as_we_take_them() {
    // An instrument's manual, its table of NIST buffers; two decimals.
    for (temperature, phosphate, borax) in
        [(0.0, 6.98, 9.46), (5.0, 6.95, 9.40), (10.0, 6.92, 9.33)]
    {
        for (buffer, printed) in [(Buffer::Nist7, phosphate), (Buffer::Nist9, borax)] {
            let found = buffer.ph(celsius(temperature)).expect("in range").get();
            assert!((found - printed).abs() <= 0.0051, "{temperature}: {found}");
        }
    }
}

#[test]
fn technical_buffers_are_what_the_manual_prints_and_on_a_line_between() {
    // An instrument's manual, its table of technical buffers: °C, 4.01, 7.00, 10.01.
    for (temperature, four, seven, ten) in [
        (0.0, 4.00, 7.12, 10.32),
        (5.0, 4.00, 7.09, 10.25),
        (10.0, 4.00, 7.06, 10.18),
        (15.0, 4.00, 7.04, 10.12),
        (20.0, 4.00, 7.02, 10.06),
        (25.0, 4.00, 7.00, 10.01),
        (30.0, 4.01, 6.99, 9.97),
        (35.0, 4.02, 6.99, 9.93),
        (40.0, 4.03, 6.98, 9.89),
        (45.0, 4.04, 6.98, 9.86),
        (50.0, 4.06, 6.97, 9.83),
    ] {
        for (buffer, printed) in [
            (Buffer::Technical4, four),
            (Buffer::Technical7, seven),
            (Buffer::Technical10, ten),
        ] {
            let found = buffer.ph(celsius(temperature)).expect("in range").get();
            assert!((found - printed).abs() < 1e-12, "{temperature}: {found}");
        }
    }
    // Two fifths of the way from 7.04 to 7.02.
    let between = Buffer::Technical7.ph(celsius(17.0)).expect("in range");
    assert!((between.get() - 7.032).abs() < 1e-12);
}

#[test]
fn no_buffer_has_a_ph_outside_0_to_50_degrees() {
    for buffer in Buffer::ALL {
        assert_eq!(Buffer::from_key(buffer.key()), Some(buffer));
        for temperature in [-0.1, 50.1, 80.0] {
            assert!(buffer.ph(celsius(temperature)).is_err(), "{temperature}");
        }
    }
}

#[test]
fn an_ideal_electrode_calibrated_at_20_degrees_shows_slope_100_and_no_offset() {
    // 58.17 mV per pH at 20 °C: 7.02 lies 0.02 above 7, 4.00 three pH below.
    let found = fit(&[point(7.02, 20.0, -1.163), point(4.00, 20.0, 174.5)]).expect("a fit");
    assert!((found.electrode.slope.get() - 100.0).abs() < 0.02);
    assert!(found.electrode.offset.get().abs() < 0.05);
    assert_eq!(found.residual, None, "two points always lie on a line");
}

#[test]
fn the_slope_of_a_bench_example_comes_out_as_worked_by_hand() {
    // By hand: 7.00 and 4.01 at 25 °C read −8 and 164 mV. 172 mV over 2.99 pH is
    // 57.525 mV/pH; over 59.16 that is 97.2 %.
    let found = fit(&[point(7.00, 25.0, -8.0), point(4.01, 25.0, 164.0)]).expect("a fit");
    assert!((found.electrode.slope.get() - 97.24).abs() < 0.02);
    assert!((found.electrode.offset.get() + 8.0).abs() < 1e-9);
    assert_eq!(found.electrode.verdict(), Verdict::Good);
}

#[test]
fn a_third_buffer_off_the_line_shows_as_residual() {
    // By hand, at 25 °C with slope 100 %: 10, 7, 4 read 3, 0 + 6, 3 mV above the line is a
    // residual whose three parts are −2, +4, −2 mV about the best line when the middle one
    // is 6 mV high: √((4 + 16 + 4)/1) = 4.90 mV, 0.0828 pH.
    let on_line = |ph: f64| -59.159 * (ph - 7.0);
    let found = fit(&[
        point(4.0, 25.0, on_line(4.0)),
        point(7.0, 25.0, on_line(7.0) + 6.0),
        point(10.0, 25.0, on_line(10.0)),
    ])
    .expect("a fit");
    let residual = found.residual.expect("three points").get();
    assert!((residual - 0.0828).abs() < 0.0002, "{residual}");
    assert!((found.electrode.offset.get() - 2.0).abs() < 0.01);
}

#[test]
fn an_electrode_is_good_from_95_to_102_per_cent_and_useless_below_92_and_above_105() {
    for (slope, offset, verdict) in [
        (95.0, 0.0, Verdict::Good),
        (102.0, -30.0, Verdict::Good),
        (94.9, 0.0, Verdict::Ageing),
        (92.0, 0.0, Verdict::Ageing),
        (102.1, 0.0, Verdict::Ageing),
        (105.0, 0.0, Verdict::Ageing),
        (99.0, 30.5, Verdict::Ageing),
        (91.9, 0.0, Verdict::DoNotUse),
        (105.1, 0.0, Verdict::DoNotUse),
        (99.0, -61.0, Verdict::DoNotUse),
        (0.0, 0.0, Verdict::DoNotUse),
    ] {
        assert_eq!(
            electrode(slope, offset).verdict(),
            verdict,
            "{slope} {offset}"
        );
    }
}

#[test]
fn slips_are_told_by_their_cause() {
    let right = [point(7.02, 20.0, -6.0), point(4.00, 20.0, 165.0)];
    assert!(fit(&right).is_ok());
    let swapped = [point(7.02, 20.0, 165.0), point(4.00, 20.0, -6.0)];
    assert_eq!(fit(&swapped), Err(CalibrationError::Swapped));
    let sign = [point(7.02, 20.0, 6.0), point(4.00, 20.0, -165.0)];
    assert_eq!(fit(&sign), Err(CalibrationError::Sign));
    // Symmetrical about 7: nothing tells one slip from the other.
    let either = [point(4.0, 25.0, -175.0), point(10.01, 25.0, 176.0)];
    assert_eq!(fit(&either), Err(CalibrationError::SwappedOrSign));
    assert_eq!(fit(&right[..1]), Err(CalibrationError::Count(1)));
    assert_eq!(fit(&[]), Err(CalibrationError::Count(0)));
    let apart = [point(7.04, 14.0, -6.0), point(4.00, 20.0, 165.0)];
    assert!(matches!(
        fit(&apart),
        Err(CalibrationError::Temperatures(_, _))
    ));
    let near = [point(7.02, 20.0, -6.0), point(6.88, 20.0, 2.0)];
    assert!(matches!(fit(&near), Err(CalibrationError::TooNear(_))));
    let steep = [point(7.02, 20.0, -6.0), point(4.00, 20.0, 265.0)];
    assert!(matches!(fit(&steep), Err(CalibrationError::Impossible(_))));
}

#[test]
fn a_cracked_bulb_gives_the_same_everywhere_and_is_kept_as_useless() {
    let found = fit(&[point(7.02, 20.0, 12.0), point(4.00, 20.0, 11.0)]).expect("a fit");
    assert!(found.electrode.slope.get().abs() < 1.0);
    assert_eq!(found.electrode.verdict(), Verdict::DoNotUse);
}

#[test]
fn one_per_cent_of_slope_is_0_016_ph_in_a_mash() {
    // (7 − 5.4) / 100.
    let error = slope_error(SlopePercent::constant(1.0), MASH);
    assert!((error.get() - 0.016).abs() < 1e-12);
}

const FRESH: [UsedBuffer; 2] = [
    UsedBuffer {
        ph: Ph::constant(7.02),
        stale: false,
    },
    UsedBuffer {
        ph: Ph::constant(4.00),
        stale: false,
    },
];

fn today(buffers: &[UsedBuffer]) -> Circumstances<'_> {
    Circumstances {
        buffers,
        scatter: None,
        resolution: PhShift::constant(0.01),
        compensated: true,
        age: Days::constant(0.0),
    }
}

fn part(circumstances: &Circumstances<'_>, wanted: Part) -> f64 {
    let doubt = circumstances.doubt(MASH);
    let found = doubt.parts.iter().find(|(part, _)| *part == wanted);
    found.map_or(0.0, |(_, sd)| sd.get())
}

#[test]
fn a_fresh_calibration_leaves_the_0_03_that_practice_knows_and_little_more() {
    let doubt = today(&FRESH).doubt(MASH);
    assert!((0.03..0.035).contains(&doubt.sd.get()), "{}", doubt.sd);
    let squares: f64 = doubt.parts.iter().map(|(_, sd)| sd.get().powi(2)).sum();
    assert!((squares.sqrt() - doubt.sd.get()).abs() < 1e-12);
}

#[test]
fn a_buffer_weighs_by_how_near_it_lies_to_the_mash() {
    // By hand: at 5.4 between 7.02 and 4.00 the weights are 1.4/3.02 and 1.62/3.02. Both
    // fresh, evenly spread over ±0.02: 0.011547·√(0.46358² + 0.53642²) = 0.008187.
    let found = part(&today(&FRESH), Part::Buffers);
    assert!((found - 0.008_187).abs() < 2e-6, "{found}");
    // Outside its buffers the line is a long lever: 7.02 and 10.06.
    let wrong_side = [
        FRESH[0],
        UsedBuffer {
            ph: Ph::constant(10.06),
            stale: false,
        },
    ];
    // By hand: weights 4.66/3.04 and −1.62/3.04, 0.011547·√(1.53289² + 0.53289²) = 0.018739.
    let found = part(&today(&wrong_side), Part::Buffers);
    assert!((found - 0.018_739).abs() < 2e-6, "{found}");
}

#[test]
fn whatever_makes_a_reading_worse_makes_its_doubt_larger() {
    let sd = |circumstances: Circumstances<'_>| circumstances.doubt(MASH).sd.get();
    let best = sd(today(&FRESH));
    let stale = [
        FRESH[0],
        UsedBuffer {
            stale: true,
            ..FRESH[1]
        },
    ];
    let worse = [
        sd(today(&stale)),
        sd(Circumstances {
            scatter: Some(PhShift::constant(0.05)),
            ..today(&FRESH)
        }),
        sd(Circumstances {
            resolution: PhShift::constant(0.1),
            ..today(&FRESH)
        }),
        sd(Circumstances {
            compensated: false,
            ..today(&FRESH)
        }),
        sd(Circumstances {
            age: Days::constant(3.0),
            ..today(&FRESH)
        }),
    ];
    for worse in worse {
        assert!(worse > best + 0.001, "{worse} {best}");
    }
    // Age is not worse than knowing nothing.
    let years = Circumstances {
        age: Days::constant(900.0),
        ..today(&FRESH)
    };
    assert!((part(&years, Part::Age) - 0.3).abs() < 1e-12);
}

#[test]
fn a_meter_that_does_not_correct_for_warmth_is_a_hundredth_or_two_worse() {
    // By hand: five degrees are 5/293.15 = 1.706 % of slope, evenly spread 0.985 %, times
    // 0.016 pH for each per cent: 0.01576.
    let circumstances = Circumstances {
        compensated: false,
        ..today(&FRESH)
    };
    let found = part(&circumstances, Part::Slope);
    assert!((found - 0.015_76).abs() < 1e-5, "{found}");
}

proptest! {
    #[test]
    fn a_calibration_finds_the_electrode_that_gave_its_readings(
        slope in 40.0..110.0_f64,
        offset in -80.0..80.0_f64,
        temperature in 5.0..45.0_f64,
        apart in -4.9..4.9_f64,
    ) {
        let made = electrode(slope, offset);
        let points: Vec<Point> = [(Buffer::Technical7, 0.0), (Buffer::Technical4, apart), (Buffer::Technical10, apart / 2.0)]
            .into_iter()
            .map(|(buffer, warmer)| {
                let temperature = celsius((temperature + warmer).clamp(0.0, 50.0));
                let ph = buffer.ph(temperature).expect("in range");
                Point { buffer: ph, temperature, reading: made.millivolts(ph, temperature) }
            })
            .collect();
        let found = fit(&points).expect("a fit");
        prop_assert!((found.electrode.slope.get() - slope).abs() < 1e-6);
        prop_assert!((found.electrode.offset.get() - offset).abs() < 1e-6);
        prop_assert!(found.residual.expect("three points").get() < 1e-6);
    }

    #[test]
    fn no_readings_at_all_make_a_calibration_panic(
        readings in proptest::collection::vec((0.0..14.0_f64, 0.0..50.0_f64, -2000.0..2000.0_f64), 0..8),
    ) {
        let points: Vec<Point> = readings.iter().map(|&(ph, c, mv)| point(ph, c, mv)).collect();
        if let Ok(found) = fit(&points) {
            prop_assert!((-20.1..=120.1).contains(&found.electrode.slope.get()));
        }
    }
}
