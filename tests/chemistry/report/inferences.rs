//! What is worked out, what is assumed, and what is held against drinking-water limits.

use chemistry::ion::Ion;
use chemistry::quantity::{Celsius, MgPerLAsCaCO3};
use chemistry::report::{
    Analyte as A, FindingKind as Kind, InferenceKind, LimitSet, Method, NotEnough, Qualifier,
    Reading, Report, ReportLine, ReportingUnit as U, SampleKind, Standing, WaterKind, assess,
    potable_findings,
};

use crate::{
    HARD_WATER, finding, hard_water_with, hard_water_without, laboratory, near, report_of,
};

#[test]
fn magnesium_follows_from_total_hardness_and_calcium() {
    let assessment = laboratory(&hard_water_without(&[A::Magnesium]));
    let [magnesium] = assessment.inferences.as_slice() else {
        panic!("{:#?}", assessment.inferences);
    };
    assert_eq!(
        (magnesium.analyte(), magnesium.kind),
        (A::Magnesium, InferenceKind::RestOfHardness)
    );
    // By hand (2340 B): (249.87 − 2.497 × 80.0)/4.118 = 12.17; its standard deviation
    // from 2 % + 1 mg/L of hardness and 2.5 % of calcium:
    // √(6.00² + (2.497 × 2.00)²)/4.118 = 1.90.
    near(magnesium.figure.best(), 12.17, 0.01);
    near(magnesium.figure.sd(), 1.90, 0.01);
    // Offered, not taken.
    assert_eq!(
        assessment.composition(&[]),
        Err(NotEnough(vec![A::Magnesium]))
    );
    let composition = assessment.composition(&assessment.inferences).unwrap();
    near(composition.water.ions[Ion::Magnesium].get(), 12.17, 0.01);
    assert!(
        composition
            .assumed
            .iter()
            .any(|a| a.analyte == A::Magnesium)
    );
}

#[test]
fn calcium_is_taken_as_seven_tenths_of_a_lone_hardness_and_says_so() {
    let assessment = laboratory(&hard_water_without(&[A::Calcium, A::Magnesium]));
    let calcium = assessment
        .inferences
        .iter()
        .find(|i| i.analyte() == A::Calcium)
        .unwrap();
    // By hand: 0.70 × 249.87/2.497 = 70.05, ± 15 % of the hardness, 15.0, and a little more.
    near(calcium.figure.best(), 70.05, 0.02);
    near(calcium.figure.sd(), 15.1, 0.1);
    assert!(
        calcium.sentence.contains("70 % of the total hardness"),
        "{}",
        calcium.sentence
    );
}

#[test]
fn sodium_by_balance_needs_the_conductivity_on_its_side() {
    let assessment = laboratory(&hard_water_without(&[A::Sodium]));
    let sodium = assessment
        .inferences
        .iter()
        .find(|i| i.analyte() == A::Sodium)
        .unwrap();
    // By hand: 6.079 − (3.992 + 0.987 + 0.100) meq/L = 1.000, × 22.990 = 23.0 mg/L.
    near(sodium.figure.best(), 23.0, 0.05);
    let supported = sodium.figure.sd();
    assert!(
        supported > 0.03 * 23.0,
        "no wider than a measured sodium: {supported}"
    );

    let mut contradicted = hard_water_without(&[A::Sodium, A::Conductivity]);
    let alone = laboratory(&contradicted);
    near(alone.inferences[0].figure.sd(), 2.0 * supported, 1e-9);
    contradicted.push((A::Conductivity, U::MicrosiemensPerCm25, "900"));
    assert!(laboratory(&contradicted).inferences.is_empty());
}

#[test]
fn a_figure_below_the_limit_counts_half_and_says_so() {
    let assessment = laboratory(&hard_water_with(&[(A::Sulfate, U::MgPerL, "< 4")]));
    let sulfate = assessment.figure(A::Sulfate).unwrap();
    assert_eq!(sulfate.canonical().qualifier(), Qualifier::Below);
    near(sulfate.canonical().get(), 4.0, 1e-12);
    let composition = assessment.composition(&[]).unwrap();
    near(composition.water.ions[Ion::Sulfate].get(), 2.0, 1e-12);
    near(composition.ion_sd[Ion::Sulfate].get(), 2.0, 1e-12);
    let said = composition
        .assumed
        .iter()
        .find(|a| a.analyte == A::Sulfate)
        .unwrap();
    assert!(
        said.sentence
            .contains("below 4 mg/L; half of that is taken")
    );
}

#[test]
fn what_was_not_reported_is_listed_as_assumed() {
    let assessment = laboratory(&[
        (A::Calcium, U::MgPerL, "60"),
        (A::Magnesium, U::MgPerL, "8"),
        (A::Alkalinity, U::MgPerLAsCaCO3, "150"),
    ]);
    let composition = assessment.composition(&[]).unwrap();
    near(composition.water.ph.get(), 7.6, 1e-12);
    let assumed: Vec<_> = composition.assumed.iter().map(|a| a.analyte).collect();
    assert_eq!(
        assumed,
        [
            A::Sodium,
            A::Potassium,
            A::Sulfate,
            A::Chloride,
            A::Nitrate,
            A::Ph
        ]
    );
    assert!(composition.ion_sd[Ion::Sodium].get() >= 20.0);
}

#[test]
fn a_kit_is_known_less_well_than_a_laboratory_by_its_drop() {
    let lines = [(A::Alkalinity, U::MgPerLAsCaCO3, "150")];
    let sd = |method| {
        let report = report_of(&lines, SampleKind::SingleSample, method, WaterKind::Mains);
        assess(&report).figure(A::Alkalinity).unwrap().sd()
    };
    // By hand: 2 % + 1 = 4; √((4 % + 2)² + (17.1/2)²) = 11.7.
    near(sd(Method::Laboratory), 4.0, 1e-9);
    let drop = MgPerLAsCaCO3::constant(17.1);
    near(sd(Method::DropKit { drop }), 11.7, 0.05);
}

#[test]
fn permeate_that_reads_like_mains_is_doubted() {
    let report = report_of(
        &[(A::Conductivity, U::MicrosiemensPerCm25, "480")],
        SampleKind::SingleSample,
        Method::Meter,
        WaterKind::Permeate,
    );
    assert!(
        finding(&assess(&report), Kind::Magnitude)
            .sentence
            .contains("membrane")
    );
}

#[test]
fn potable_limits_are_compared_in_their_own_basis() {
    // Source: 10 mg/L as N is 44.3 mg/L of nitrate (40 CFR 141); 50 mg/L in the EU
    // and with WHO.
    let above = |nitrate: &'static str, set| {
        let assessment = laboratory(&[(A::Nitrate, U::MgPerL, nitrate)]);
        potable_findings(assessment.figures(), set)
            .into_iter()
            .next()
    };
    let found = above("45", LimitSet::UnitedStates).unwrap();
    assert_eq!(found.standing, Standing::Above);
    near(found.limit.high(), 44.3, 0.05);
    assert_eq!(
        found.sentence,
        "Nitrate of 45 mg/L is above the guideline value of 10 mg/L as N for drinking water of \
         the United States."
    );
    assert!(above("44", LimitSet::UnitedStates).is_none());
    assert!(above("45", LimitSet::EuropeanUnion).is_none());
    assert!(above("51", LimitSet::WorldHealthOrganization).is_some());
    // A detection limit above the value proves nothing either way.
    assert_eq!(
        above("< 60", LimitSet::EuropeanUnion).unwrap().standing,
        Standing::CannotTell
    );
}

#[test]
fn no_potable_finding_speaks_of_the_law() {
    for set in LimitSet::ALL {
        for limit in set.limits() {
            let text = format!("{:.4}", limit.high() * 1.05);
            let unit = limit.analyte().canonical_unit();
            let assessment = laboratory(&[(limit.analyte(), unit, &text)]);
            let findings = potable_findings(assessment.figures(), set);
            let [found] = findings.as_slice() else {
                panic!("{set:?} {limit:?}");
            };
            for word in ["law", "legal", "permit", "allowed", "complian"] {
                assert!(!found.sentence.contains(word), "{}", found.sentence);
            }
        }
    }
}

#[test]
fn a_ph_temperature_is_carried_into_the_water() {
    let lines = HARD_WATER.map(|(analyte, unit, text)| ReportLine {
        reading: Reading::parse(analyte, unit, text).unwrap(),
        method: Method::Laboratory,
    });
    let at = Some(Celsius::constant(12.0));
    let report = Report::new(
        lines.to_vec(),
        SampleKind::SingleSample,
        WaterKind::Borehole,
        at,
    )
    .unwrap();
    let composition = assess(&report).composition(&[]).unwrap();
    assert_eq!(composition.water.temperature, Celsius::constant(12.0));
    assert!(composition.assumed.iter().all(|a| a.analyte != A::Ph));
}
