//! Malts by themselves: classes, measured coefficients, bench titrations.

use chemistry::mash::malt::distilled_ph_from_sheet;
use chemistry::mash::titration::{self, Jar, TitrationError};
use chemistry::mash::{Behaviour, Groups, MaltClass, Taylor};
use chemistry::quantity::{Ebc, Estimate, Lovibond, MeqPerKg, Ph, RelativeBuffering, RelativeSd};

fn groups(ph: f64, buffering: f64) -> Behaviour {
    Behaviour::Groups(Groups::new(
        Estimate::new(Ph::new(ph).expect("a pH"), 0.1),
        Estimate::new(RelativeBuffering::new(buffering).expect("a ratio"), 0.25),
    ))
}

#[test]
fn crystal_malt_grows_more_acid_with_its_colour_as_printed() {
    // Printed relative bufferings at 10 to 120 °L, and acidity to pH 5.7 of 0.45·L + 6
    // meq/kg (Troester 2009, from memory).
    for (lovibond, printed) in [
        (10.0, 0.52),
        (20.0, 0.65),
        (40.0, 0.80),
        (60.0, 0.89),
        (80.0, 0.93),
        (120.0, 0.97),
    ] {
        let colour = Lovibond::new(lovibond).expect("a colour");
        let behaviour = MaltClass::Crystal.behaviour(Some(colour));
        let Behaviour::Groups(groups) = behaviour else {
            panic!("crystal malt is described by groups");
        };
        assert!(
            (groups.buffering.value.get() - printed).abs() < 0.006,
            "{lovibond}"
        );
        let acidity = -behaviour.acid_demand(Ph::constant(5.7)).get();
        assert!(
            (acidity - (0.45 * lovibond + 6.0)).abs() < 1e-6,
            "{acidity}"
        );
    }
    // Roasted malt about 41 meq/kg to pH 5.7 whatever its colour (same source).
    let roasted = -MaltClass::Roasted
        .behaviour(None)
        .acid_demand(Ph::constant(5.7))
        .get();
    assert!((roasted - 41.0).abs() < 1.0, "{roasted}");
}

#[test]
fn colours_convert_as_the_trade_does() {
    // EBC = 1.97·SRM, SRM = 1.3546·°L − 0.76, from memory: 10 °L is 25.2 EBC.
    let ebc: Ebc = Lovibond::constant(10.0).into();
    assert!((ebc.get() - 25.2).abs() < 0.05, "{ebc}");
    let back: Lovibond = ebc.into();
    assert!((back.get() - 10.0).abs() < 1e-9);
}

#[test]
fn measured_coefficients_follow_the_cubic_and_never_turn_over() {
    // With a1 = −34, a2 = +10 the plain cubic turns at u = 1.7 (34 = 2·10·1.7).
    let taylor = |a: [f64; 3]| {
        let ph = Estimate::new(Ph::constant(5.7), 0.05);
        Behaviour::Taylor(Taylor::new(ph, a, RelativeSd::constant(0.1)).expect("coefficients"))
    };
    let malt = taylor([-34.0, 10.0, 0.0]);
    for u in [-0.6, -0.3, 0.2, 0.5] {
        let cubic = -34.0 * u + 10.0 * u * u;
        let got = malt.acid_demand(Ph::new(5.7 + u).expect("a pH")).get();
        assert!((got - cubic).abs() < 1e-9, "{u}: {got}");
    }
    for a in [[-34.0, 10.0, 0.0], [-40.0, -20.0, 30.0], [-10.0, 0.0, 0.0]] {
        let malt = taylor(a);
        let mut previous = f64::INFINITY;
        for step in 0..=120 {
            let ph = Ph::new(3.0 + 0.05 * f64::from(step)).expect("a pH");
            let demand = malt.acid_demand(ph).get();
            // 18 meq/(kg·pH) is the least buffering: 0.9 per step.
            assert!(demand <= previous - 0.9 + 1e-9, "{a:?} at {ph}");
            previous = demand;
        }
    }
    let ph = Estimate::new(Ph::constant(5.7), 0.05);
    assert!(Taylor::new(ph, [34.0, 0.0, 0.0], RelativeSd::constant(0.1)).is_err());
    assert!(Taylor::new(ph, [f64::NAN, 0.0, 0.0], RelativeSd::constant(0.1)).is_err());
}

#[test]
fn a_sheet_wort_ph_is_taken_a_tenth_lower_with_its_doubt() {
    // T. Kraus-Weyermann: 5.84 in the mash, 5.96 in the laboratory wort of the same malt.
    let estimate = distilled_ph_from_sheet(Ph::constant(5.96));
    assert!((estimate.value.get() - 5.84).abs() < estimate.sd);
}

#[test]
fn a_bench_titration_gives_back_the_malt_it_was_made_of() {
    let truth = groups(5.66, 1.18);
    // Jars at 0, +5, +10 and −5 meq/kg: solve truth for its pH by bisection.
    let jar = |acid: f64| {
        let (mut low, mut high) = (3.0, 9.0);
        for _ in 0..60 {
            let middle = f64::midpoint(low, high);
            let needs = truth.acid_demand(Ph::new(middle).expect("a pH")).get();
            if needs > acid {
                low = middle
            } else {
                high = middle
            }
        }
        Jar {
            acid: MeqPerKg::new(acid).expect("an amount"),
            ph: Ph::new(low).expect("a pH"),
        }
    };
    let jars = [jar(0.0), jar(5.0), jar(10.0), jar(-5.0)];
    let fit = titration::fit(&jars).expect("a fit");
    assert!((fit.groups.distilled_ph.value.get() - 5.66).abs() < 1e-6);
    assert!((fit.groups.buffering.value.get() - 1.18).abs() < 1e-6);
    assert!(fit.left_over.get() < 1e-6);
    // Four readings of 0.03 cannot fix the pH better than half of that, nor worse than one.
    let sd = fit.groups.distilled_ph.sd;
    assert!((0.012..0.03).contains(&sd), "{sd}");
    let relative = fit.groups.buffering.sd / fit.groups.buffering.value.get();
    assert!((0.03..0.25).contains(&relative), "{relative}");

    assert_eq!(titration::fit(&jars[..2]), Err(TitrationError::TooFewJars));
    let rising = [jar(0.0), jar(5.0), jar(10.0)].map(|jar| Jar {
        acid: MeqPerKg::clamped(-jar.acid.get()),
        ..jar
    });
    assert_eq!(titration::fit(&rising), Err(TitrationError::NoBuffering));
    assert_eq!(
        titration::fit(&[jar(5.0); 3]),
        Err(TitrationError::NoBuffering)
    );
}

#[test]
fn every_class_is_found_by_its_key() {
    for class in MaltClass::ALL {
        assert_eq!(MaltClass::from_key(class.key()), Some(class));
        assert!(class.colours().0 < class.colours().1);
    }
}

#[test]
fn buffering_of_an_average_pale_malt_is_that_of_the_three_groups() {
    // Whole figures printed with the groups, meq/(kg·pH): computed elsewhere.
    let malt = groups(5.73, 1.0);
    for (ph, printed) in [
        (5.0, 65.0),
        (5.2, 53.0),
        (5.4, 42.0),
        (5.6, 33.0),
        (5.8, 27.0),
        (6.0, 25.0),
        (6.2, 25.0),
    ] {
        let got = malt.buffering(Ph::new(ph).expect("a pH")).get();
        assert!((got - printed).abs() <= 0.6, "{ph}: {got}");
    }
}
