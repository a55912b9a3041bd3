//! Reports that add up, and each way in which they do not.

use chemistry::report::{
    Analyte as A, Assessment, Closure, FindingKind as Kind, Method, ReportingUnit as U, SampleKind,
    Severity, Verdict, WaterKind, assess,
};

use crate::{
    HARD_WATER, finding, hard_water_with, hard_water_without, laboratory, near, report_of,
};

#[test]
fn a_report_in_mixed_units_comes_out_as_by_hand_and_adds_up() {
    let assessment = laboratory(&HARD_WATER);
    let canonical = |analyte| assessment.figure(analyte).unwrap().canonical().get();
    // By hand: 14.0 °dH × 17.848 = 249.9; 4.10 meq/L × 50.043 = 205.2;
    // 2.5 as N × 4.4268 = 11.07; 510 µS/cm at 20 °C × 1.116 = 569.2.
    near(canonical(A::TotalHardness), 249.87, 0.01);
    near(canonical(A::Alkalinity), 205.18, 0.01);
    near(canonical(A::Nitrate), 11.067, 0.001);
    near(canonical(A::Conductivity), 569.2, 0.05);

    let balance = assessment.balance.as_ref().unwrap();
    near(balance.cations.get(), 6.080, 0.001);
    near(balance.anions.get(), 6.079, 0.001);
    assert_eq!(balance.closure(), Closure::Closed);
    // 2340 B by hand: 2.497 × 80.0 + 4.118 × 12.0 = 249.2.
    near(
        finding(&assessment, Kind::Hardness).figures[1].value,
        249.2,
        0.05,
    );
    // Quick rule, from memory: 100 times the anions is 0.9 to 1.1 of the conductivity.
    let calculated = assessment.calculated_conductivity.unwrap().get();
    assert!((0.9..=1.1).contains(&(607.9 / calculated)), "{calculated}");
    assert_eq!(
        assessment.verdict,
        Verdict::AddsUp,
        "{:#?}",
        assessment.findings
    );
}

#[test]
fn the_bands_are_those_of_standard_methods_1030_e() {
    // Source: Standard Methods 1030 E: anions to 3 meq/L ±0.2 meq/L, to 10 ±2 %,
    // beyond ±5 %. Sodium against chloride and a trace of the rest.
    let closure = |cations: f64, anions: f64| {
        let zero = |analyte| (analyte, U::MgPerL, "0".to_owned());
        let lines = [
            zero(A::Calcium),
            zero(A::Magnesium),
            zero(A::Sulfate),
            (A::Alkalinity, U::MeqPerL, "0".to_owned()),
            (A::Sodium, U::MeqPerL, format!("{cations:.4}")),
            (A::Chloride, U::MeqPerL, format!("{anions:.4}")),
        ];
        let lines: Vec<_> = lines.iter().map(|(a, u, t)| (*a, *u, t.as_str())).collect();
        laboratory(&lines).balance.unwrap().closure()
    };
    for (cations, anions, expected) in [
        (2.19, 2.0, Closure::Closed),
        (2.21, 2.0, Closure::Near),
        (1.81, 2.0, Closure::Closed),
        (2.41, 2.0, Closure::Open),
        // (a − b)/(a + b) = 1.9 % and 2.1 %, 4.9 % and 5.1 %.
        (5.0 * 1.019 / 0.981, 5.0, Closure::Closed),
        (5.0 * 1.021 / 0.979, 5.0, Closure::Near),
        (5.0 * 1.049 / 0.951, 5.0, Closure::Near),
        (5.0 * 1.051 / 0.949, 5.0, Closure::Open),
        (20.0 * 1.049 / 0.951, 20.0, Closure::Closed),
        (20.0 * 1.051 / 0.949, 20.0, Closure::Near),
    ] {
        assert_eq!(closure(cations, anions), expected, "{cations} {anions}");
    }
}

/// The charge-balanced waters of `phreeqc/speciation.csv` as reports.
fn balanced_waters() -> Vec<Vec<(A, f64)>> {
    let table = include_str!(concat!(
        env!("CARGO_MANIFEST_DIR"),
        "/../../tests/chemistry/phreeqc/speciation.csv"
    ));
    let columns = [
        (A::Calcium, "Ca_mg_L"),
        (A::Magnesium, "Mg_mg_L"),
        (A::Sodium, "Na_mg_L"),
        (A::Potassium, "K_mg_L"),
        (A::Sulfate, "SO4_mg_L"),
        (A::Chloride, "Cl_mg_L"),
        (A::Nitrate, "NO3_mg_L"),
        (A::Alkalinity, "alk_mg_L_CaCO3"),
        (A::Ph, "pH_at_25C_closed"),
        (A::Conductivity, "spec_cond_25C_uS_cm"),
    ];
    let mut rows = csv::Reader::from_reader(table.as_bytes());
    let headers = rows.headers().unwrap().clone();
    rows.records()
        .map(|row| {
            let row = row.unwrap();
            let at = |name| headers.iter().position(|header| header == name).unwrap();
            columns
                .iter()
                .map(|(analyte, name)| (*analyte, row[at(*name)].parse().unwrap()))
                .collect()
        })
        .collect()
}

fn assess_values(values: &[(A, f64)]) -> Assessment {
    let lines: Vec<_> = values
        .iter()
        .map(|(analyte, value)| (*analyte, analyte.canonical_unit(), format!("{value:.5}")))
        .collect();
    let lines: Vec<_> = lines.iter().map(|(a, u, t)| (*a, *u, t.as_str())).collect();
    laboratory(&lines)
}

/// Source: PHREEQC runs, electroneutral to 3e-6 meq/kgw (README of the folder).
#[test]
fn two_hundred_electroneutral_waters_balance_and_conduct() {
    for values in balanced_waters() {
        let assessment = assess_values(&values);
        let balance = assessment.balance.as_ref().unwrap();
        // Its molar masses differ from these in the fifth figure.
        near(balance.difference().get(), 0.0, 0.002);
        let conductivity = finding(&assessment, Kind::Conductivity);
        assert_eq!(conductivity.severity, Severity::Info, "{conductivity:?}");
        assert_ne!(assessment.verdict, Verdict::DoesNotAddUp, "{assessment:#?}");
    }
}

#[test]
fn the_same_waters_with_one_major_ion_doubled_are_no_longer_believed() {
    let mut spoilt = 0;
    for values in balanced_waters() {
        for (at, equivalent_mass) in [(0, 20.039), (4, 48.028), (5, 35.45), (7, 50.043)] {
            // A slip of at least 1 meq/L and a fifth of the ions.
            let meq = values[at].1 / equivalent_mass;
            let total = assess_values(&values).balance.unwrap().anions.get();
            if meq < 1.0 || meq < 0.2 * total {
                continue;
            }
            let mut wrong = values.clone();
            wrong[at].1 *= 2.0;
            let assessment = assess_values(&wrong);
            assert_ne!(assessment.verdict, Verdict::AddsUp, "{assessment:#?}");
            // Beyond 10 % apart no careful laboratory is out by chance.
            if assessment
                .balance
                .as_ref()
                .unwrap()
                .percent_difference()
                .abs()
                > 10.0
            {
                assert_eq!(assessment.verdict, Verdict::DoesNotAddUp, "{assessment:#?}");
            }
            spoilt += 1;
        }
    }
    assert!(spoilt > 100, "{spoilt}");
}

#[test]
fn nitrate_printed_as_nitrogen_and_typed_as_nitrate_is_found() {
    // 9.8 mg/L as N is 0.700 meq/L, as NO3 0.158: sodium is raised by 0.52 meq/L
    // (12.0 mg/L) so that the water balances as N only.
    let typed = hard_water_with(&[
        (A::Nitrate, U::MgPerL, "9.8"),
        (A::Sodium, U::MgPerL, "35.0"),
        (A::Conductivity, U::MicrosiemensPerCm20, "550"),
    ]);
    let assessment = laboratory(&typed);
    let basis = finding(&assessment, Kind::Basis);
    assert_eq!(basis.severity, Severity::Doubt);
    assert_eq!(basis.analytes, [A::Nitrate]);
    assert!(
        basis.sentence.contains("if nitrate was meant in mg/L as N"),
        "{}",
        basis.sentence
    );
    assert_eq!(assessment.verdict, Verdict::Doubtful);
    // The typed basis put right, the water adds up.
    let right = hard_water_with(&[
        (A::Nitrate, U::MgPerLAsN, "9.8"),
        (A::Sodium, U::MgPerL, "35.0"),
        (A::Conductivity, U::MicrosiemensPerCm20, "550"),
    ]);
    assert_eq!(laboratory(&right).verdict, Verdict::AddsUp);
}

#[test]
fn nitrate_that_could_be_either_is_asked_about_when_nothing_decides() {
    let assessment = laboratory(&[(A::Nitrate, U::MgPerL, "9.8")]);
    let basis = finding(&assessment, Kind::Basis);
    assert_eq!(basis.severity, Severity::Info);
    // 9.8 × 4.4268 = 43.4.
    near(basis.figures[0].value, 43.38, 0.01);
    assert!(
        basis
            .sentence
            .starts_with("Nitrate 9.8 mg/L: as the ion, or as N?")
    );
}

#[test]
fn bicarbonate_printed_as_calcium_carbonate_is_found() {
    // 205 mg/L as CaCO3 is 4.10 meq/L; as HCO3 it would be 3.36.
    let mut typed = hard_water_without(&[A::Alkalinity]);
    typed.push((A::Bicarbonate, U::MgPerL, "205"));
    let assessment = laboratory(&typed);
    let bases: Vec<_> = assessment
        .findings
        .iter()
        .filter(|f| f.kind == Kind::Basis)
        .collect();
    assert!(
        bases.iter().any(|f| f.analytes == [A::Bicarbonate]),
        "{bases:#?}"
    );
}

#[test]
fn calcium_and_magnesium_printed_as_calcium_carbonate_are_found_together() {
    // 80.0 × 2.497 = 199.8 and 12.0 × 4.118 = 49.4.
    let assessment = laboratory(&hard_water_with(&[
        (A::Calcium, U::MgPerL, "199.8"),
        (A::Magnesium, U::MgPerL, "49.4"),
    ]));
    assert_eq!(assessment.verdict, Verdict::DoesNotAddUp);
    let basis = finding(&assessment, Kind::Basis);
    assert_eq!(basis.analytes, [A::Calcium, A::Magnesium]);
    assert!(
        basis
            .sentence
            .contains("if calcium and magnesium were meant in mg/L as CaCO₃")
    );
}

#[test]
fn a_missing_anion_and_a_missing_cation_are_told_apart_by_conductivity() {
    // A chloride of 0 leaves the cations over and the conductivity above the ions;
    // a sodium of 0 the anions.
    let anion = laboratory(&hard_water_with(&[(A::Chloride, U::MgPerL, "0")]));
    assert!(
        finding(&anion, Kind::IonBalance)
            .sentence
            .contains("an anion is probably missing")
    );
    let cation = laboratory(&hard_water_with(&[(A::Sodium, U::MgPerL, "0")]));
    assert!(
        finding(&cation, Kind::IonBalance)
            .sentence
            .contains("a cation is probably missing")
    );
}

#[test]
fn a_conductivity_in_the_wrong_unit_is_named() {
    let assessment = laboratory(&hard_water_with(&[(
        A::Conductivity,
        U::MicrosiemensPerCm25,
        "0.57",
    )]));
    let conductivity = finding(&assessment, Kind::Conductivity);
    assert_eq!(conductivity.severity, Severity::Contradiction);
    assert!(
        conductivity.sentence.contains("meant in mS/cm at 25 °C"),
        "{}",
        conductivity.sentence
    );
}

#[test]
fn impossible_pairs_are_contradictions() {
    for (kind, changes) in [
        (
            Kind::Hardness,
            vec![(A::CalciumHardness, U::MgPerLAsCaCO3, "300")],
        ),
        (
            Kind::Hardness,
            vec![(A::TotalHardness, U::GermanDegrees, "8")],
        ),
        (Kind::Alkalinity, vec![(A::Ph, U::Ph, "4.2")]),
        (Kind::Alkalinity, vec![(A::Bicarbonate, U::MgPerL, "150")]),
        (
            Kind::DissolvedSolids,
            vec![(A::DissolvedSolids, U::MgPerL, "900")],
        ),
        (
            Kind::Chlorine,
            vec![
                (A::FreeChlorine, U::MgPerL, "0.8"),
                (A::TotalChlorine, U::MgPerL, "0.5"),
            ],
        ),
    ] {
        let assessment = laboratory(&hard_water_with(&changes));
        let worst = assessment
            .findings
            .iter()
            .find(|f| f.severity == Severity::Contradiction);
        assert_eq!(worst.map(|f| f.kind), Some(kind), "{changes:?}");
        assert_eq!(assessment.verdict, Verdict::DoesNotAddUp);
    }
}

#[test]
fn calculated_solids_follow_the_sum_by_hand() {
    // 0.6 × 205.2 + 80 + 12 + 23 + 3.9 + 28.4 + 48 + 11.07 = 329.5.
    let assessment = laboratory(&hard_water_with(&[(A::DissolvedSolids, U::MgPerL, "350")]));
    let solids = finding(&assessment, Kind::DissolvedSolids);
    near(solids.figures[1].value, 329.5, 0.1);
    assert_eq!(solids.severity, Severity::Info);
}

#[test]
fn alkalinity_and_hardness_of_the_same_figure_are_doubted() {
    let assessment = laboratory(&[
        (A::Alkalinity, U::GermanDegrees, "8"),
        (A::TotalHardness, U::GermanDegrees, "8,0"),
    ]);
    assert_eq!(
        finding(&assessment, Kind::SameFigure).severity,
        Severity::Doubt
    );
}

#[test]
fn softened_water_is_recognised() {
    let assessment = laboratory(&hard_water_with(&[
        (A::Calcium, U::MgPerL, "1"),
        (A::Magnesium, U::MgPerL, "0.3"),
        (A::TotalHardness, U::MgPerLAsCaCO3, "4"),
        (A::Sodium, U::MgPerL, "136"),
    ]));
    assert_eq!(
        assessment.balance.as_ref().unwrap().closure(),
        Closure::Closed
    );
    assert!(
        finding(&assessment, Kind::Softened)
            .sentence
            .contains("softener")
    );
}

#[test]
fn averages_that_do_not_balance_are_called_averages() {
    let lines = hard_water_with(&[(A::Chloride, U::MgPerL, "90")]);
    let report = report_of(
        &lines,
        SampleKind::Average,
        Method::Laboratory,
        WaterKind::Mains,
    );
    let assessment = assess(&report);
    assert_eq!(assessment.verdict, Verdict::Doubtful);
    assert!(
        finding(&assessment, Kind::Average)
            .sentence
            .contains("averages")
    );
    // The same lines of one sample are a contradiction.
    assert_eq!(laboratory(&lines).verdict, Verdict::DoesNotAddUp);
    // And each average is known less well: 20 % of 90 beside the method's 2.5 %.
    near(assessment.figure(A::Chloride).unwrap().sd(), 18.14, 0.01);
}

#[test]
fn every_gap_says_what_it_costs_and_too_little_cannot_be_judged() {
    let assessment = laboratory(&[(A::TotalHardness, U::GermanDegrees, "14")]);
    let gaps = assessment
        .findings
        .iter()
        .filter(|f| f.kind == Kind::Missing);
    assert_eq!(gaps.count(), A::NEEDED.len());
    assert_eq!(assessment.verdict, Verdict::CannotBeJudged);
}
