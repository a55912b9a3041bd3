//! The pH of a mash against measurements, common practice and itself.

mod common;

use chemistry::ion::Ion;
use chemistry::mash::{
    Addition, Behaviour, Demand, GristItem, Groups, LiquorDoubt, Malt, MaltClass, MashError,
    MashInputs, Settings,
};
use chemistry::material::{Material, Strength, Substance};
use chemistry::quantity::{
    Celsius, DoseAmount, Estimate, Fraction, GramsPerMl, Kilograms, Litres, MeqPerL, MgPerL,
    MmolPerL, Ph, PhShift, RelativeBuffering,
};
use chemistry::water::Water;
use common::{charge_of_carbon, hard, natural, water_charge};
use proptest::prelude::*;

const PURE: Estimate<Fraction> = Estimate::new(Fraction::constant(1.0), 0.0);

fn groups(ph: f64, buffering: f64) -> Behaviour {
    Behaviour::Groups(Groups::new(
        Estimate::new(Ph::new(ph).expect("a pH"), 0.1),
        Estimate::new(RelativeBuffering::new(buffering).expect("a ratio"), 0.25),
    ))
}

fn class(class: MaltClass) -> Behaviour {
    class.behaviour(None)
}

/// One kilogram of grist in these shares, with `ratio` litres of liquor.
fn mash(grist: &[(Behaviour, f64)], water: Water, ratio: f64) -> MashInputs {
    MashInputs {
        grist: grist
            .iter()
            .map(|&(behaviour, mass)| GristItem {
                malt: Malt {
                    name: "malt".into(),
                    behaviour,
                },
                mass: Kilograms::new(mass).expect("a mass"),
            })
            .collect(),
        liquor: water,
        liquor_doubt: LiquorDoubt::NONE,
        volume: Estimate::new(Litres::new(ratio).expect("a volume"), 0.0),
        additions: Vec::new(),
        settings: Settings::default(),
        offset: Estimate::new(PhShift::constant(0.0), 0.0),
    }
}

fn settled(inputs: &MashInputs) -> f64 {
    inputs.predict().expect("a pH").ph.value.get()
}

fn lactic(percent: f64, density: f64) -> Material {
    let strength = Strength::WeightPercent {
        share: Fraction::new(percent / 100.0).expect("a share"),
        density: GramsPerMl::new(density).expect("a density"),
    };
    Material::liquid(Substance::LacticAcid, strength, PURE).expect("a liquid")
}

fn with(mut inputs: MashInputs, material: &Material, amount: f64) -> MashInputs {
    let amount = DoseAmount::new(amount).expect("an amount");
    inputs
        .additions
        .push(Addition::of("addition", material, amount));
    inputs
}

#[test]
fn regression_the_default_parameters_give_what_they_gave() {
    // Not evidence: figures computed with the same model elsewhere, here only to notice
    // drift; tolerance 0.01.
    let pale = groups(5.73, 1.0);
    let pilsner = groups(5.78, 1.0);
    let crystal = groups(4.92, 0.889);
    let roast = groups(4.65, 0.75);
    let tap = natural(160.0, 7.6, 40.0, 8.0);
    let dark = [(pale, 0.80), (crystal, 0.08), (roast, 0.12)];
    let acidified = with(mash(&[(pale, 1.0)], tap, 3.0), &lactic(88.0, 1.206), 0.8);
    for (name, inputs, printed) in [
        ("R1", mash(&[(pilsner, 1.0)], Water::pure(), 3.0), 5.777),
        ("R2", mash(&[(pale, 1.0)], tap, 3.0), 5.940),
        (
            "R3",
            mash(&[(pale, 1.0)], natural(160.0, 7.6, 94.5, 8.0), 3.0),
            5.841,
        ),
        ("R4", acidified, 5.633),
        (
            "R5",
            mash(
                &[
                    (pale, 0.8),
                    (crystal, 0.1),
                    (class(MaltClass::MunichLight), 0.1),
                ],
                natural(100.0, 7.6, 60.0, 10.0),
                3.0,
            ),
            5.654,
        ),
        ("R6", mash(&dark, hard(50.0, 0.0), 3.0), 5.406),
        ("R7", mash(&dark, tap, 3.0), 5.672),
        (
            "R8",
            mash(
                &[(class(MaltClass::Wheat), 0.5), (pilsner, 0.5)],
                hard(50.0, 0.0),
                3.0,
            ),
            5.786,
        ),
    ] {
        let got = settled(&inputs);
        assert!((got - printed).abs() < 0.01, "{name}: {got}");
    }
}

#[test]
fn check_1_pale_malt_in_distilled_water_is_between_5_7_and_6() {
    // Briggs et al. 2004 5.8 to 6.0; Troester 5.7 to 5.8, both at second hand.
    for class in [MaltClass::Pilsner, MaltClass::PaleAle] {
        let ph = settled(&mash(&[(class.behaviour(None), 1.0)], Water::pure(), 3.0));
        assert!((5.7..=6.0).contains(&ph), "{class:?}: {ph}");
    }
}

#[test]
fn checks_2_and_3_a_mash_and_the_same_mash_with_phosphoric_acid() {
    // J.-P. Hosom: 0.420 kg of one two-row lot in 1.372 L of alkalinity 32 to 41 mg/L
    // settled at 5.62; with 3.4 mL of 10 % phosphoric acid at 5.39 to 5.40. The lot's own
    // pH, 5.56, is fitted to the first; the second took part in the fit of the groups.
    let mut inputs = mash(
        &[(groups(5.56, 1.0), 0.420)],
        natural(36.5, 7.6, 0.0, 0.0),
        1.372,
    );
    let plain = settled(&inputs);
    let phosphoric = Material::liquid(
        Substance::PhosphoricAcid,
        Strength::WeightPercent {
            share: Fraction::constant(0.10),
            density: GramsPerMl::constant(1.053),
        },
        PURE,
    )
    .expect("an acid");
    inputs = with(inputs, &phosphoric, 3.4);
    let acidified = settled(&inputs);
    assert!((plain - 5.62).abs() < 0.02, "{plain}");
    assert!((acidified - 5.395).abs() < 0.025, "{acidified}");
}

#[test]
fn check_4_acidulated_malt_lowers_the_mash_by_about_what_was_measured() {
    // T. Kraus-Weyermann: 0.5 % of the grist, 5.84 → 5.77 in the mash (and 5.96 → 5.91
    // in the laboratory). 2 to 4 % lactic acid in the malt is usual.
    let pilsner = groups(5.78, 1.0);
    let shift = |lactic: f64, share: f64| {
        let acidulated = Behaviour::Acidulated {
            base: Groups::new(
                Estimate::new(Ph::constant(5.78), 0.1),
                Estimate::new(RelativeBuffering::constant(1.0), 0.25),
            ),
            lactic: Estimate::new(Fraction::new(lactic).expect("a share"), 0.006),
        };
        let without = settled(&mash(&[(pilsner, 1.0)], Water::pure(), 3.0));
        let grist = [(pilsner, 1.0 - share), (acidulated, share)];
        settled(&mash(&grist, Water::pure(), 3.0)) - without
    };
    // A flat buffering of 33 would give −0.050 at 3 % lactic acid; the groups buffer 27
    // there, which is nearer to the measured mash. Meter good to about 0.03.
    let three_percent = shift(0.03, 0.005);
    assert!((-0.07..=-0.05).contains(&three_percent), "{three_percent}");
}

#[test]
fn check_5_calcium_lowers_a_mash_as_in_taylors_series() {
    // D. G. Taylor 1990 in Briggs et al. 2004, at second hand; thickness not stated.
    // The series took part in the fit. Worst at 100 mg/L, where calcium does more than
    // in proportion: 0.08.
    for (calcium, measured, model) in [
        (0.0, 5.74, 5.73),
        (100.0, 5.48, 5.56),
        (200.0, 5.39, 5.42),
        (300.0, 5.28, 5.30),
    ] {
        let inputs = mash(&[(class(MaltClass::PaleAle), 1.0)], hard(calcium, 0.0), 3.0);
        let got = settled(&inputs);
        assert!((got - model).abs() < 0.01, "{calcium}: {got}");
        assert!((got - measured).abs() < 0.085, "{calcium}: {got}");
    }
}

#[test]
fn check_6_calcium_in_cold_wort_does_far_less_than_in_a_mash() {
    // J.-P. Hosom: pale wort of 1.037, calcium added cold, overnight: 5.92, 5.88, 5.84,
    // 5.83 at 0, 50, 100, 150 mg/L. A wort of 1.037 holds the extract of about 0.12 kg of
    // malt per litre (0.096 kg of extract, 80 % yield: assumed).
    let wort = |calcium: f64, release: f64| {
        let mut inputs = mash(&[(groups(5.92, 1.0), 0.12)], hard(calcium, 0.0), 1.0);
        inputs.settings.calcium_release = Estimate::new(Fraction::clamped(release), 0.0);
        settled(&inputs)
    };
    for (calcium, measured) in [(0.0, 5.92), (50.0, 5.88), (100.0, 5.84), (150.0, 5.83)] {
        let fitted = wort(calcium, 0.045);
        assert!((fitted - measured).abs() < 0.02, "{calcium}: {fitted}");
    }
    // The reaction of a mash would take it far too low.
    assert!(wort(150.0, 0.35) < 5.83 - 0.2);
}

#[test]
fn check_7_pale_mashes_in_soft_water_lie_between_5_7_and_5_9() {
    // J.-P. Hosom: most worts, alkalinity 32 to 41 mg/L.
    let water = natural(36.5, 7.6, 0.0, 0.0);
    let ph = settled(&mash(&[(class(MaltClass::PaleAle), 1.0)], water, 3.27));
    assert!((5.7..=5.9).contains(&ph), "{ph}");
}

#[test]
fn check_8_ten_german_degrees_of_residual_alkalinity_are_worth_0_3() {
    // A. Staudt, brau!magazin 2015, for cast wort of 12 °P: +0.3, one digit. Ten degrees
    // of alkalinity and no calcium, 17.848 mg/L as CaCO₃ each.
    let pale = class(MaltClass::PaleAle);
    let at = |water| settled(&mash(&[(pale, 1.0)], water, 3.0));
    let shift = at(natural(178.48, 7.6, 0.0, 0.0)) - at(Water::pure());
    assert!((shift - 0.3).abs() < 0.05, "{shift}");
}

#[test]
fn a_pilsner_mash_in_alkaline_water_is_where_it_was_computed_to_be() {
    // Computed elsewhere with the same model: 5.99, 6.05, and 0.06 more at 4 L/kg.
    let pilsner = class(MaltClass::Pilsner);
    let at = |water, ratio| settled(&mash(&[(pilsner, 1.0)], water, ratio));
    let hard_tap = at(natural(160.0, 7.6, 40.0, 8.0), 3.0);
    assert!((hard_tap - 5.99).abs() < 0.01, "{hard_tap}");
    let soft_tap = at(natural(160.0, 7.6, 10.0, 2.0), 3.0);
    assert!((soft_tap - 6.05).abs() < 0.01, "{soft_tap}");
    let thin = at(natural(160.0, 7.6, 40.0, 8.0), 4.0) - hard_tap;
    assert!((thin - 0.06).abs() < 0.015, "{thin}");
}

#[test]
fn common_practice_pale_malt_settles_at_5_8_in_distilled_and_6_2_in_alkaline_water() {
    // Common practice, no source: about 5.8 (allow 0.1) and about 6.2 at an alkalinity of
    // 161 mg/L (point within 0.25, the shift at least 0.15). No hardness is told with it.
    for class in [MaltClass::Pilsner, MaltClass::PaleAle] {
        let at = |water| settled(&mash(&[(class.behaviour(None), 1.0)], water, 3.0));
        let distilled = at(Water::pure());
        let tap = at(natural(161.0, 7.5, 0.0, 0.0));
        assert!((distilled - 5.8).abs() < 0.1, "{class:?}: {distilled}");
        assert!((tap - 6.2).abs() < 0.25, "{class:?}: {tap}");
        assert!(tap - distilled > 0.15);
    }
}

#[test]
fn common_practice_the_ph_of_the_water_hardly_matters_beside_its_alkalinity() {
    // Common practice, no source. Alkalinity 161 against 40 is the comparison.
    let at = |alkalinity, ph| {
        let water = natural(alkalinity, ph, 40.0, 8.0);
        settled(&mash(&[(class(MaltClass::PaleAle), 1.0)], water, 3.0))
    };
    let by_ph = (at(161.0, 7.5) - at(161.0, 7.0)).abs();
    let by_alkalinity = at(161.0, 7.0) - at(40.0, 7.0);
    assert!(by_ph < 0.02, "{by_ph}");
    assert!(by_alkalinity > 8.0 * by_ph, "{by_alkalinity} {by_ph}");
}

#[test]
fn common_practice_dark_malt_gypsum_and_calcium_chloride_lower_and_bicarbonate_raises() {
    // Common practice, no source.
    let pale = class(MaltClass::PaleAle);
    let plain = mash(&[(pale, 1.0)], natural(100.0, 7.5, 40.0, 8.0), 3.0);
    let base = settled(&plain);
    for dark in [
        MaltClass::Crystal,
        MaltClass::Roasted,
        MaltClass::MunichDark,
    ] {
        let grist = [(pale, 0.9), (class(dark), 0.1)];
        assert!(
            settled(&mash(&grist, plain.liquor, 3.0)) < base - 0.02,
            "{dark:?}"
        );
    }
    for (substance, raises) in [
        (Substance::Gypsum, false),
        (Substance::CalciumChlorideDihydrate, false),
        (Substance::SodiumBicarbonate, true),
        (Substance::SlakedLime, true),
        (Substance::Chalk, true),
        (Substance::LacticAcid, false),
        (Substance::CitricAcidAnhydrous, false),
    ] {
        let material = Material::usual(substance).expect("a usual material");
        let ph = settled(&with(plain.clone(), &material, 1.0));
        assert_eq!(ph > base, raises, "{substance:?}: {ph} from {base}");
        assert!((ph - base).abs() > 0.005, "{substance:?}: {ph} from {base}");
    }
    // Common salt has no part in it.
    let salt = Material::usual(Substance::SodiumChloride).expect("a usual material");
    assert!((settled(&with(plain, &salt, 1.0)) - base).abs() < 1e-8);
}

#[test]
fn one_ph_unit_is_tenfold() {
    // By the definition of pH: pure water needs ten times the acid to be brought to pH 3.
    let acid = |ph| {
        let demand = Demand::at(Ph::new(ph).expect("a pH"), &Settings::default());
        demand.alkalinity(&Water::pure()).get()
    };
    // Hydroxide at pH 4 is 7e-7 of the hydrogen ion.
    assert!((acid(3.0) / acid(4.0) - 10.0).abs() < 1e-5);
}

#[test]
fn the_demand_of_natural_water_equals_the_textbook_form() {
    // S(pH) = C f(pH_w) − C r/(1+r) + w(pH_w) − w(pH), the form printed with the balance.
    let settings = Settings::default();
    for (alkalinity, ph_of_water) in [(160.0, 7.6), (30.0, 6.5), (300.0, 8.3)] {
        let water = natural(alkalinity, ph_of_water, 0.0, 0.0);
        for ph in [4.0, 5.2, 5.6, 6.0, 7.0] {
            let carbon = water.carbon.get();
            let ratio = (1.0 - 0.5) * 10f64.powf(ph - common::PK1);
            let textbook = carbon * charge_of_carbon(ph_of_water) - carbon * ratio / (1.0 + ratio)
                + water_charge(ph_of_water)
                - water_charge(ph);
            let got = Demand::at(Ph::new(ph).expect("a pH"), &settings).alkalinity(&water);
            assert!((got.get() - textbook).abs() < 1e-9, "{alkalinity} {ph}");
        }
    }
}

#[test]
fn an_acid_in_the_liquor_or_in_the_mash_is_the_same_acid() {
    // The demand falls by n(pH) per mole wherever the acid went in: in the liquor it has
    // lowered the alkalinity by its full equivalents and left its anion.
    for substance in [
        Substance::LacticAcid,
        Substance::PhosphoricAcid,
        Substance::HydrochloricAcid,
        Substance::SulfuricAcid,
        Substance::CitricAcidMonohydrate,
    ] {
        let acid = Material::usual(substance).expect("a usual acid");
        let plain = mash(
            &[(class(MaltClass::PaleAle), 1.0)],
            natural(160.0, 7.6, 40.0, 8.0),
            3.0,
        );
        let dose = acid.contribution(DoseAmount::constant(0.5));
        let mut in_liquor = plain.clone();
        in_liquor.liquor = dose.added_to(&plain.liquor, Litres::constant(3.0));
        let in_mash = with(plain, &acid, 0.5);
        assert!(
            (settled(&in_liquor) - settled(&in_mash)).abs() < 1e-8,
            "{substance:?}"
        );
        // … and the demand falls by moles times protons released, the textbook dose.
        let ph = Ph::constant(5.4);
        let demand = Demand::at(ph, &Settings::default())
            .contribution(&dose)
            .get();
        let anion = substance.acid().expect("an acid");
        let released = anion.protons_released(ph, Celsius::constant(20.0)).get();
        let textbook = -dose.millimoles(anion.anion()).get() * released;
        assert!((demand - textbook).abs() < 1e-9, "{substance:?}");
    }
}

#[test]
fn a_dose_worked_out_for_a_target_reaches_it() {
    let mut inputs = mash(
        &[
            (class(MaltClass::PaleAle), 0.9),
            (class(MaltClass::Crystal), 0.1),
        ],
        natural(160.0, 7.6, 40.0, 8.0),
        3.0,
    );
    inputs.offset = Estimate::new(PhShift::constant(0.07), 0.05);
    let target = Ph::constant(5.40);
    let acid = lactic(80.0, 1.19);
    let dose = inputs.dose_for(target, &acid).expect("a dose").get();
    let there = with(inputs.clone(), &acid, dose);
    assert!((settled(&there) - 5.40).abs() < 1e-7);
    assert!(there.acid_demand(target).expect("a demand").get().abs() < 1e-9);
    let bicarbonate = Material::usual(Substance::SodiumBicarbonate).expect("a base");
    assert_eq!(
        inputs.dose_for(target, &bicarbonate),
        Err(MashError::WrongDirection)
    );
    let dose = there
        .dose_for(Ph::constant(5.6), &bicarbonate)
        .expect("a dose")
        .get();
    assert!((settled(&with(there, &bicarbonate, dose)) - 5.6).abs() < 1e-7);
}

#[test]
fn a_mash_that_cannot_be_says_why() {
    let pale = class(MaltClass::PaleAle);
    let mut empty = mash(&[(pale, 1.0)], Water::pure(), 3.0);
    empty.grist.clear();
    assert_eq!(empty.predict(), Err(MashError::NoGrist));
    let dry = mash(&[(pale, 1.0)], Water::pure(), 0.0);
    assert_eq!(dry.predict(), Err(MashError::NoLiquor));
    let drowned = with(
        mash(&[(pale, 1.0)], Water::pure(), 3.0),
        &lactic(88.0, 1.206),
        5_000.0,
    );
    assert_eq!(drowned.predict(), Err(MashError::OutsideScale));
}

fn any_water() -> impl Strategy<Value = Water> {
    (-2.0..8.0f64, 0.0..9.0f64, 0.0..200.0f64, 0.0..4.0f64).prop_map(
        |(alkalinity, carbon, calcium, lactate)| {
            let mut water = hard(calcium, calcium / 8.0);
            water.alkalinity = MeqPerL::clamped(alkalinity);
            water.carbon = MmolPerL::clamped(carbon);
            water.ions[Ion::Lactate] = MgPerL::clamped(lactate * 89.07);
            water.ions[Ion::Phosphate] = MgPerL::clamped(lactate * 30.0);
            water
        },
    )
}

proptest! {
    #[test]
    fn more_acid_never_raises_the_ph(
        water in any_water(),
        dark in 0.0..0.3f64,
        ratio in 1.5..6.0f64,
        amount in 0.0..2.0f64,
        which in 0usize..6,
    ) {
        let acid = [
            Substance::LacticAcid,
            Substance::PhosphoricAcid,
            Substance::HydrochloricAcid,
            Substance::SulfuricAcid,
            Substance::CitricAcidAnhydrous,
            Substance::CitricAcidMonohydrate,
        ][which];
        let acid = Material::usual(acid).expect("a usual acid");
        let grist = [
            (class(MaltClass::PaleAle), 1.0 - dark),
            (class(MaltClass::Roasted), dark),
        ];
        let plain = mash(&grist, water, ratio);
        prop_assert!(settled(&with(plain.clone(), &acid, amount)) <= settled(&plain) + 1e-8);
    }

    #[test]
    fn the_balance_falls_with_rising_ph(water in any_water(), low in 3.0..8.9f64, step in 0.01..1.0f64) {
        let inputs = mash(&[(class(MaltClass::Acidulated), 0.1), (class(MaltClass::Wheat), 0.9)], water, 3.0);
        let at = |ph: f64| inputs.acid_demand(Ph::clamped(ph)).expect("a demand").get();
        prop_assert!(at(low + step) < at(low));
    }

    #[test]
    fn twice_of_everything_settles_at_the_same_ph(water in any_water(), ratio in 1.5..6.0f64, acid in 0.0..1.0f64) {
        let grist = [(class(MaltClass::Pilsner), 1.0), (class(MaltClass::Crystal), 0.1)];
        let once = with(mash(&grist, water, ratio), &lactic(80.0, 1.19), acid);
        let double = grist.map(|(malt, mass)| (malt, 2.0 * mass));
        let twice = with(mash(&double, water, 2.0 * ratio), &lactic(80.0, 1.19), 2.0 * acid);
        prop_assert!((settled(&once) - settled(&twice)).abs() < 1e-8);
    }
}
