//! Acid for sparge liquor and for wort.

mod common;

use chemistry::kettle::{self, BOIL_DROP, Buffering, IN_WORT, KnownBy, Observed, Wort};
use chemistry::mash::{GristItem, LiquorDoubt, Malt, MaltClass, MashInputs, Settings};
use chemistry::material::{Material, Strength, Substance};
use chemistry::put_right::{Advice, Aim, LeaveIt, MashCheck, Remedy, Stop, Verdict};
use chemistry::quantity::{
    Celsius, DoseAmount, Drops, Estimate, Fraction, GramsPerMl, Kilograms, Litres, Meq, MeqPerLPh,
    MgPerLAsCaCO3, Minutes, Ph, PhShift, RelativeSd,
};
use chemistry::sparge::{self, SpargeAdvice, SpargeCheck};
use common::natural;

/// 88 % lactic acid, 11.78 mol/L.
fn lactic() -> Material {
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

fn remedy(material: &Material, cap: f64) -> Remedy<'_> {
    Remedy {
        material,
        cap: DoseAmount::constant(cap),
    }
}

fn tested(alkalinity: f64, sd: f64) -> SpargeCheck {
    SpargeCheck {
        alkalinity: Estimate::new(MgPerLAsCaCO3::constant(alkalinity), sd),
        volume: Litres::constant(1500.0),
        limit: sparge::USUAL_LIMIT,
        target: sparge::USUAL_TARGET,
    }
}

#[test]
fn sparge_liquor_gets_one_equivalent_of_acid_for_each_of_its_alkalinity() {
    // (160 − 25) / 50.043 = 2.698 meq/L; times 1500 L over 11.78 mmol/mL = 343.5 mL.
    let acid = lactic();
    let SpargeAdvice::Acidify(dose) = tested(160.0, 5.0).assess(Some(remedy(&acid, 1e6))) else {
        panic!("no dose")
    };
    assert!((dose.dose.get() - 343.5).abs() < 0.5, "{}", dose.dose);
    assert!((dose.after.value.get() - 25.0).abs() < 1e-6 && !dose.capped);
}

#[test]
fn acidified_sparge_liquor_reads_5_6_to_5_8_closed_when_2_75_meq_were_given_to_160_mg() {
    // Textbook at 20 °C: alkalinity 160 and pH 7.6 take 2.75 meq/L to pH 5.6 in a closed
    // vessel, 3.18 with nine tenths of the carbon dioxide lost. The same doses lead back.
    let acid = lactic();
    let water = natural(160.0, 7.6, 40.0, 8.0);
    let given = |meq: f64| {
        let amount = DoseAmount::constant(meq * 1000.0 / 11.78);
        acid.contribution(amount)
    };
    let volume = Litres::constant(1000.0);
    let at = |meq: f64| {
        sparge::ph_range(&water, MgPerLAsCaCO3::constant(160.0), &given(meq), volume).expect("a pH")
    };
    // Activities and lactate's own buffering are worth a few hundredths.
    assert!((at(2.75).0.get() - 5.6).abs() < 0.08, "{}", at(2.75).0);
    assert!((at(3.18).1.get() - 5.6).abs() < 0.15, "{}", at(3.18).1);
    assert!(at(2.75).1.get() > at(2.75).0.get() + 0.3, "it drifts up");
}

#[test]
fn a_drop_count_near_the_limit_tells_nothing_and_well_below_it_all() {
    // Half a drop of 17.1 mg/L either side, one standard deviation.
    let by = |drops| {
        let alkalinity = sparge::by_drops(Drops::constant(drops), MgPerLAsCaCO3::constant(17.1));
        SpargeCheck {
            alkalinity,
            ..tested(0.0, 0.0)
        }
        .assess(None)
    };
    assert_eq!(by(0.0), SpargeAdvice::LeaveIt);
    assert_eq!(by(2.0), SpargeAdvice::CannotBeTold);
    assert_eq!(by(6.0), SpargeAdvice::Stop(Stop::NoRemedy));
}

#[test]
fn sparge_acid_stops_at_the_cap_and_says_what_is_left() {
    let acid = lactic();
    let check = tested(160.0, 5.0);
    let SpargeAdvice::Acidify(dose) = check.assess(Some(remedy(&acid, 200.0))) else {
        panic!("no dose")
    };
    assert!(dose.capped && (dose.dose.get() - 200.0).abs() < 1e-9);
    assert!(dose.after.value.get() > 30.0, "{}", dose.after.value);
    assert_eq!(
        check.assess(Some(remedy(&acid, 3.0))),
        SpargeAdvice::Stop(Stop::CapReached)
    );
    let soda = Material::usual(Substance::SodiumBicarbonate).expect("a base");
    assert_eq!(
        check.assess(Some(remedy(&soda, 1e6))),
        SpargeAdvice::Stop(Stop::NoRemedy)
    );
}

fn mash() -> MashInputs {
    MashInputs {
        grist: vec![GristItem {
            malt: Malt {
                name: "Pale malt".into(),
                behaviour: MaltClass::PaleAle.behaviour(None),
            },
            mass: Kilograms::constant(400.0),
        }],
        liquor: natural(40.0, 7.5, 60.0, 5.0),
        liquor_doubt: LiquorDoubt::NONE,
        volume: Estimate::new(Litres::constant(1200.0), 12.0),
        additions: Vec::new(),
        settings: Settings::default(),
        offset: Estimate::new(PhShift::constant(0.0), 0.0),
    }
}

const WORT: Litres = Litres::constant(2000.0);

fn learned(in_kettle: Option<Observed>, in_mash: Option<Observed>) -> Buffering {
    kettle::buffering(&mash(), Ph::constant(5.3), WORT, in_kettle, in_mash).expect("a buffering")
}

#[test]
fn wort_buffering_is_the_mash_scaled_until_the_batch_itself_teaches_better() {
    // The group model at s = 1: B(5.2) = 53 and B(5.4) = 42 meq/(kg·pH), so about 47 at
    // 5.3, plus a little for the liquor; 0.2 kg/L of wort and 0.8 of it: 7.5 to 8.
    let model = learned(None, None);
    assert_eq!(model.known_by, KnownBy::MashModel);
    assert!((7.3..8.3).contains(&model.value.get()), "{}", model.value);
    assert!(
        model.relative_sd.get() > IN_WORT.sd,
        "{}",
        model.relative_sd
    );

    // 3600 meq that moved the mash by 0.2: 45 meq/(kg·pH), some of it less than the model.
    let observed = Observed {
        acid: Meq::constant(3600.0),
        from: Ph::constant(5.60),
        to: Ph::constant(5.40),
    };
    let by_mash = learned(None, Some(observed));
    assert_eq!(by_mash.known_by, KnownBy::MashStep);
    assert!(by_mash.value.get() > model.value.get(), "{}", by_mash.value);
    assert!(by_mash.relative_sd.get() < model.relative_sd.get());

    // 1200 meq that moved 2000 L of wort by 0.1: 6 meq/(L·pH).
    let observed = Observed {
        acid: Meq::constant(1200.0),
        from: Ph::constant(5.50),
        to: Ph::constant(5.40),
    };
    let by_kettle = learned(Some(observed), None);
    assert_eq!(by_kettle.known_by, KnownBy::KettleStep);
    assert!((by_kettle.value.get() - 6.0).abs() < 1e-6);
}

#[test]
fn a_step_that_hardly_moved_the_ph_or_moved_it_the_wrong_way_teaches_nothing() {
    for to in [5.48, 5.50, 5.60] {
        let observed = Observed {
            acid: Meq::constant(500.0),
            from: Ph::constant(5.50),
            to: Ph::new(to).expect("a pH"),
        };
        assert_eq!(learned(Some(observed), None).known_by, KnownBy::MashModel);
        assert_eq!(learned(None, Some(observed)).known_by, KnownBy::MashModel);
    }
}

fn wort(acid: Option<Remedy<'_>>, boil_to_come: bool) -> Wort<'_> {
    Wort {
        volume: WORT,
        aim: Aim {
            target: kettle::USUAL_TARGET,
            low: Ph::constant(5.0),
            high: Ph::constant(5.3),
        },
        boil_to_come,
        buffering: Buffering {
            value: MeqPerLPh::constant(6.0),
            relative_sd: RelativeSd::constant(0.3),
            known_by: KnownBy::MashModel,
        },
        acid,
    }
}

fn read(ph: f64) -> MashCheck {
    MashCheck {
        reading: Estimate::new(Ph::new(ph).expect("a pH"), 0.03),
        sample: Celsius::constant(20.0),
        minute: Minutes::constant(0.0),
        calibrated: true,
        agrees: true,
        meter_checked: false,
    }
}

#[test]
fn late_acid_is_half_of_buffering_times_volume_times_the_way_to_go() {
    // 6 meq/(L·pH) · 2000 L · (5.40 − 5.20) = 2400 meq; 88 % lactic acid has 11.27 meq/mL
    // at 5.2 (table of strengths): 213 mL in full, 106.5 mL first.
    let acid = lactic();
    let late = kettle::assess(&read(5.40), &wort(Some(remedy(&acid, 1e6)), false));
    let Advice::FirstStep(step) = late.advice else {
        panic!("{late:?}")
    };
    assert!((step.dose.get() - 106.5).abs() < 0.5, "{}", step.dose);
    assert!((step.expected_ph.value.get() - 5.30).abs() < 1e-6);
    // 0.03 of the reading and 0.3 of the 0.1 moved.
    assert!((step.expected_ph.sd - 0.03_f64.hypot(0.03)).abs() < 1e-6);
}

#[test]
fn before_the_boil_its_fall_is_counted_with_its_doubt() {
    let acid = lactic();
    let late = kettle::assess(&read(5.40), &wort(Some(remedy(&acid, 1e6)), true));
    let expected = 5.40 - BOIL_DROP.value.get();
    assert!((late.at_cast_out.value.get() - expected).abs() < 1e-9);
    assert_eq!(late.verdict, Verdict::CannotBeTold);
    assert_eq!(
        late.advice,
        Advice::LeaveIt {
            why: LeaveIt::CannotBeTold
        }
    );
}

#[test]
fn wort_is_never_raised_and_without_an_acid_at_hand_nothing_is_advised() {
    let low = kettle::assess(&read(4.8), &wort(None, false));
    assert_eq!(
        low.advice,
        Advice::LeaveIt {
            why: LeaveIt::NeverRaised
        }
    );
    let high = kettle::assess(&read(5.6), &wort(None, false));
    assert_eq!(
        high.advice,
        Advice::Stop {
            why: Stop::NoRemedy
        }
    );
}
