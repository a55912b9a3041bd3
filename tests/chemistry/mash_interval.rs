//! The interval of a mash pH against drawing every input at random.

mod common;

use chemistry::ion::Ion;
use chemistry::mash::{
    Addition, Behaviour, GristItem, Groups, InfluenceKind, LiquorDoubt, Malt, MaltClass,
    MashInputs, Settings,
};
use chemistry::material::{Material, Substance};
use chemistry::quantity::{
    DoseAmount, Estimate, Fraction, Kilograms, Litres, Lovibond, MeqPerL, MgPerL, MmolPerL, Ph,
    PhShift, RelativeBuffering,
};
use common::natural;

/// A brewery's mash with every input in doubt.
fn brewery() -> MashInputs {
    let item = |name: &str, class: MaltClass, kilograms: f64| GristItem {
        malt: Malt {
            name: name.into(),
            behaviour: class.behaviour(Some(Lovibond::constant(60.0))),
        },
        mass: Kilograms::new(kilograms).expect("a mass"),
    };
    let acid = Material::usual(Substance::LacticAcid).expect("an acid");
    MashInputs {
        grist: vec![
            item("Pale malt lot 7", MaltClass::PaleAle, 180.0),
            item("Crystal lot 2", MaltClass::Crystal, 20.0),
        ],
        liquor: natural(160.0, 7.6, 40.0, 8.0),
        liquor_doubt: LiquorDoubt {
            alkalinity: MeqPerL::constant(0.19), // 6 %
            calcium: MgPerL::constant(2.0),
            magnesium: MgPerL::constant(0.4),
        },
        volume: Estimate::new(Litres::constant(600.0), 9.0),
        additions: vec![Addition::of(
            "lactic acid",
            &acid,
            DoseAmount::constant(100.0),
        )],
        settings: Settings::default(),
        offset: Estimate::new(PhShift::constant(0.05), 0.03),
    }
}

/// Standard normal numbers from a linear congruential generator (Knuth's MMIX
/// constants) through the polar form of Box and Muller.
struct Normal(u64);

impl Normal {
    fn uniform(&mut self) -> f64 {
        self.0 = self
            .0
            .wrapping_mul(6_364_136_223_846_793_005)
            .wrapping_add(1_442_695_040_888_963_407);
        ((self.0 >> 11) as f64 + 0.5) / (1u64 << 53) as f64
    }

    fn draw(&mut self) -> f64 {
        (-2.0 * self.uniform().ln()).sqrt() * (std::f64::consts::TAU * self.uniform()).cos()
    }
}

fn drawn(inputs: &MashInputs, normal: &mut Normal) -> MashInputs {
    let mut drawn = inputs.clone();
    for item in &mut drawn.grist {
        let Behaviour::Groups(groups) = item.malt.behaviour else {
            panic!("this grist is described by groups");
        };
        let ph = groups.distilled_ph.value.get() + groups.distilled_ph.sd * normal.draw();
        let buffering = groups.buffering.value.get() + groups.buffering.sd * normal.draw();
        item.malt.behaviour = Behaviour::Groups(Groups::new(
            Estimate::new(Ph::clamped(ph), 0.0),
            Estimate::new(RelativeBuffering::clamped(buffering.max(0.1)), 0.0),
        ));
    }
    let reaction = normal.draw();
    let moved = |estimate: Estimate<Fraction>, by: f64| {
        Estimate::new(
            Fraction::clamped(estimate.value.get() + by * estimate.sd),
            0.0,
        )
    };
    drawn.settings = Settings {
        calcium_release: moved(inputs.settings.calcium_release, reaction),
        magnesium_release: moved(inputs.settings.magnesium_release, reaction),
        carbon_dioxide_lost: moved(inputs.settings.carbon_dioxide_lost, normal.draw()),
    };
    let more = inputs.liquor_doubt.alkalinity.get() * normal.draw();
    let water = &mut drawn.liquor;
    water.alkalinity = MeqPerL::clamped(water.alkalinity.get() + more);
    water.carbon = MmolPerL::clamped(water.carbon.get() + more);
    for (ion, sd) in [
        (Ion::Calcium, inputs.liquor_doubt.calcium),
        (Ion::Magnesium, inputs.liquor_doubt.magnesium),
    ] {
        water.ions[ion] = MgPerL::clamped(water.ions[ion].get() + sd.get() * normal.draw());
    }
    drawn.volume.value =
        Litres::clamped(inputs.volume.value.get() + inputs.volume.sd * normal.draw());
    for addition in &mut drawn.additions {
        let scale = (1.0 + addition.relative_sd.get() * normal.draw()).max(0.0);
        addition.brings = addition.brings.times(DoseAmount::clamped(scale));
    }
    drawn.offset.value =
        PhShift::clamped(inputs.offset.value.get() + inputs.offset.sd * normal.draw());
    drawn
}

#[test]
fn the_first_order_interval_agrees_with_four_thousand_random_mashes() {
    // Monte Carlo as the outside method. Its own standard error of a standard deviation
    // from 4000 draws is 1.1 %; curvature is allowed the rest of 8 %.
    let inputs = brewery();
    let predicted = inputs.predict().expect("a pH");
    let mut normal = Normal(20_261_201);
    let draws: Vec<f64> = (0..4000)
        .map(|_| {
            let mash = drawn(&inputs, &mut normal);
            mash.predict().expect("a pH").ph.value.get()
        })
        .collect();
    let mean = draws.iter().sum::<f64>() / draws.len() as f64;
    let variance = draws.iter().map(|ph| (ph - mean).powi(2)).sum::<f64>();
    let sd = (variance / (draws.len() - 1) as f64).sqrt();
    assert!((predicted.ph.sd / sd - 1.0).abs() < 0.08, "{sd}");
    assert!((mean - predicted.ph.value.get()).abs() < 0.02, "{mean}");
    let (low, high) = predicted.interval;
    let inside = draws
        .iter()
        .filter(|ph| (low.get()..=high.get()).contains(*ph))
        .count();
    let coverage = inside as f64 / draws.len() as f64;
    assert!((coverage - 0.90).abs() < 0.03, "{coverage}");
}

#[test]
fn the_shares_add_up_and_name_the_lot() {
    let predicted = brewery().predict().expect("a pH");
    let sum: f64 = predicted
        .influences
        .iter()
        .map(|influence| influence.share.get())
        .sum();
    assert!((sum - 1.0).abs() < 1e-9);
    assert_eq!(predicted.influences[0].name, "pH of Pale malt lot 7");
    assert_eq!(predicted.influences[0].kind, InfluenceKind::MaltPh);
    let shares: Vec<f64> = predicted
        .influences
        .iter()
        .map(|influence| influence.share.get())
        .collect();
    assert!(shares.is_sorted_by(|a, b| a >= b));
}

#[test]
fn each_part_of_the_doubt_is_as_large_as_it_was_computed_elsewhere() {
    // Regression, not evidence: pale grist at 3 L/kg from class defaults, one input at a
    // time: pH of the malt 0.09, buffering 0.05, calcium reaction 0.024, carbon dioxide
    // 0.017, alkalinity (6 %) 0.015, together 0.11 to 0.12. Those used a flat buffering;
    // the groups buffer less where this mash settles than at the malt's own pH, so its pH
    // counts in full: 0.102.
    let mut inputs = brewery();
    inputs.grist.truncate(1);
    inputs.volume = Estimate::new(Litres::constant(540.0), 0.0);
    inputs.additions.clear();
    inputs.offset.sd = 0.0;
    let predicted = inputs.predict().expect("a pH");
    let effect = |kind: InfluenceKind| {
        predicted
            .influences
            .iter()
            .find(|influence| influence.kind == kind)
            .map_or(0.0, |influence| influence.effect.get().abs())
    };
    for (kind, printed, doubt) in [
        (InfluenceKind::MaltPh, 0.09, 0.012),
        (InfluenceKind::MaltBuffering, 0.05, 0.01),
        (InfluenceKind::CalciumReaction, 0.024, 0.006),
        (InfluenceKind::CarbonDioxideLoss, 0.017, 0.006),
        (InfluenceKind::Alkalinity, 0.015, 0.003),
    ] {
        assert!(
            (effect(kind) - printed).abs() < doubt,
            "{kind:?}: {}",
            effect(kind)
        );
    }
    assert!(
        (0.11..0.12).contains(&predicted.ph.sd),
        "{}",
        predicted.ph.sd
    );
}

#[test]
fn measuring_the_malt_halves_the_interval() {
    // Computed elsewhere: a measured malt pH (0.04) and a learned buffering (10 %) bring
    // the total to about 0.05.
    let mut inputs = brewery();
    inputs.grist.truncate(1);
    inputs.volume = Estimate::new(Litres::constant(540.0), 0.0);
    inputs.additions.clear();
    inputs.offset.sd = 0.0;
    let before = inputs.predict().expect("a pH").ph.sd;
    inputs.grist[0].malt.behaviour = Behaviour::Groups(Groups::new(
        Estimate::new(Ph::constant(5.73), 0.04),
        Estimate::new(RelativeBuffering::constant(1.0), 0.10),
    ));
    let after = inputs.predict().expect("a pH").ph.sd;
    assert!((after - 0.05).abs() < 0.01, "{after}");
    assert!(after < 0.55 * before);
}

#[test]
fn one_lot_on_two_lines_is_no_better_known_than_on_one() {
    let whole = brewery();
    let mut split = whole.clone();
    split.grist[0].mass = Kilograms::constant(90.0);
    let other_half = split.grist[0].clone();
    split.grist.push(other_half);
    let sd = |inputs: &MashInputs| inputs.predict().expect("a pH").ph.sd;
    assert!((sd(&whole) - sd(&split)).abs() < 1e-6);
}
