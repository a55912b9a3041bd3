//! Reports as laboratories print them: brought to one set of units, and judged.
//! Start with [`checks`]; the hard water they spoil in turn stands here.

mod checks;
mod inferences;
mod properties;

use chemistry::report::{
    Analyte as A, Assessment, Finding, FindingKind as Kind, Method, Reading, Report, ReportLine,
    ReportingUnit as U, SampleKind, WaterKind, assess,
};

pub(crate) fn report_of(
    lines: &[(A, U, &str)],
    kind: SampleKind,
    method: Method,
    water: WaterKind,
) -> Report {
    let lines = lines
        .iter()
        .map(|(analyte, unit, text)| ReportLine {
            reading: Reading::parse(*analyte, *unit, text).unwrap(),
            method,
        })
        .collect();
    Report::new(lines, kind, water, None).unwrap()
}

pub(crate) fn laboratory(lines: &[(A, U, &str)]) -> Assessment {
    assess(&report_of(
        lines,
        SampleKind::SingleSample,
        Method::Laboratory,
        WaterKind::Mains,
    ))
}

pub(crate) fn finding(assessment: &Assessment, kind: Kind) -> &Finding {
    let found = assessment.findings.iter().find(|f| f.kind == kind);
    found.unwrap_or_else(|| panic!("no {kind:?} in {:#?}", assessment.findings))
}

pub(crate) fn near(value: f64, expected: f64, tolerance: f64) {
    assert!(
        (value - expected).abs() <= tolerance,
        "{value} against {expected}"
    );
}

/// A hard water whose charges were added up by hand, meq/L:
/// Ca 80.0/20.039 = 3.992, Mg 12.0/12.1525 = 0.987, Na 23.0/22.990 = 1.000,
/// K 3.9/39.098 = 0.100; together 6.080.
/// Alkalinity 4.10, SO4 48.0/48.028 = 0.999, Cl 28.4/35.45 = 0.801,
/// NO3 as N 2.5/14.007 = 0.178; together 6.079.
pub(crate) const HARD_WATER: [(A, U, &str); 12] = [
    (A::Calcium, U::MgPerL, "80,0"),
    (A::Magnesium, U::MgPerL, "12.0"),
    (A::TotalHardness, U::GermanDegrees, "14,0"),
    (A::Sodium, U::MgPerL, "23.0"),
    (A::Potassium, U::MgPerL, "3.9"),
    (A::Alkalinity, U::Ks43MmolPerL, "4,10"),
    (A::Sulfate, U::MgPerL, "48.0"),
    (A::Chloride, U::MgPerL, "28.4"),
    (A::Nitrate, U::MgPerLAsN, "2.5"),
    (A::Iron, U::MgPerL, "< 0,02"),
    (A::Conductivity, U::MicrosiemensPerCm20, "510"),
    (A::Ph, U::Ph, "7.6"),
];

pub(crate) fn hard_water_with(changes: &[(A, U, &'static str)]) -> Vec<(A, U, &'static str)> {
    let mut lines = HARD_WATER.to_vec();
    for change in changes {
        lines.retain(|line| line.0 != change.0);
        lines.push(*change);
    }
    lines
}

pub(crate) fn hard_water_without(analytes: &[A]) -> Vec<(A, U, &'static str)> {
    let mut lines = HARD_WATER.to_vec();
    lines.retain(|line| !analytes.contains(&line.0));
    lines
}
