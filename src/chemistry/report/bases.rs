//! Would the report make sense if a figure was meant on another basis?

use super::analyte::Analyte;
use super::balance::{Closure, IonBalance, balance};
use super::figure::{Figure, Figures};
use super::finding::{Finding, FindingKind, Severity, percent};
use super::reading::{Reading, capitalised};
use super::unit::ReportingUnit;
use super::{Qualifier, Report, ReportLine, SampleKind};

/// Units that are mistaken for the one chosen. Common practice, no source.
fn confused_with(analyte: Analyte, unit: ReportingUnit) -> &'static [ReportingUnit] {
    use Analyte as A;
    use ReportingUnit as U;
    match (analyte, unit) {
        (A::Nitrate | A::Nitrite | A::Ammonium, U::MgPerL) => &[U::MgPerLAsN],
        (A::Nitrate | A::Nitrite | A::Ammonium, U::MgPerLAsN) => &[U::MgPerL],
        (A::Sulfate, U::MgPerL) => &[U::MgPerLAsS],
        (A::Sulfate, U::MgPerLAsS) => &[U::MgPerL],
        (A::Bicarbonate, U::MgPerL) => &[U::MgPerLAsCaCO3],
        (A::Bicarbonate, U::MgPerLAsCaCO3) => &[U::MgPerL],
        (A::Alkalinity, U::MgPerLAsCaCO3) => &[U::MgPerLAsHco3, U::GermanDegrees, U::MeqPerL],
        (A::Alkalinity, U::MgPerLAsHco3) => &[U::MgPerLAsCaCO3],
        (A::Alkalinity, U::GermanDegrees) => &[U::MeqPerL, U::MgPerLAsCaCO3],
        (A::Alkalinity, U::MeqPerL | U::Ks43MmolPerL) => &[U::GermanDegrees],
        (A::Calcium | A::Magnesium, U::MgPerL) => &[U::MgPerLAsCaCO3, U::GermanDegrees],
        (A::Calcium | A::Magnesium, U::MgPerLAsCaCO3) => &[U::MgPerL],
        (A::Calcium | A::Magnesium, U::GermanDegrees) => &[U::MgPerL],
        (A::TotalHardness, U::MgPerLAsCaCO3) => &[U::GermanDegrees, U::FrenchDegrees, U::MmolPerL],
        (A::TotalHardness, U::GermanDegrees) => &[U::FrenchDegrees, U::MmolPerL, U::MgPerLAsCaCO3],
        (A::TotalHardness, U::FrenchDegrees) => &[U::GermanDegrees],
        (A::TotalHardness, U::MmolPerL) => &[U::GermanDegrees, U::MeqPerL],
        _ => &[],
    }
}

/// The figure of a line, had it been meant in `unit`; `None` when that would be
/// more than a water is likely to hold.
fn meant_in(line: &ReportLine, unit: ReportingUnit, kind: SampleKind) -> Option<Figure> {
    let analyte = line.reading.analyte();
    let reading = Reading::new(analyte, unit, line.reading.typed()).ok()?;
    let figure = Figure::of(&ReportLine { reading, ..*line }, kind);
    (figure.best() <= analyte.likely_at_most()).then_some(figure)
}

struct Alternative {
    analytes: Vec<Analyte>,
    unit: ReportingUnit,
    balance: IonBalance,
}

/// Every single change of basis, and calcium with magnesium together, under which
/// the ions balance; the closest first.
fn alternatives(report: &Report, figures: &Figures) -> Vec<Alternative> {
    let mut found = Vec::new();
    let mut consider = |analytes: Vec<Analyte>, unit, changed: &Figures| {
        if let Ok(balance) = balance(changed)
            && balance.closure() == Closure::Closed
            && !balance.is_dilute()
        {
            found.push(Alternative {
                analytes,
                unit,
                balance,
            });
        }
    };
    for line in report.lines() {
        let analyte = line.reading.analyte();
        for unit in confused_with(analyte, line.reading.unit()) {
            if let Some(figure) = meant_in(line, *unit, report.kind()) {
                consider(vec![analyte], *unit, &figures.with(figure));
            }
        }
    }
    let line = |analyte| {
        let mut lines = report.lines().iter();
        lines.find(|line| line.reading.analyte() == analyte)
    };
    if let (Some(calcium), Some(magnesium)) = (line(Analyte::Calcium), line(Analyte::Magnesium))
        && calcium.reading.unit() == magnesium.reading.unit()
    {
        for unit in confused_with(Analyte::Calcium, calcium.reading.unit()) {
            if let (Some(first), Some(second)) = (
                meant_in(calcium, *unit, report.kind()),
                meant_in(magnesium, *unit, report.kind()),
            ) {
                consider(
                    vec![Analyte::Calcium, Analyte::Magnesium],
                    *unit,
                    &figures.with(first).with(second),
                );
            }
        }
    }
    found.sort_by(|a, b| {
        let size = |x: &Alternative| x.balance.percent_difference().abs();
        size(a).total_cmp(&size(b))
    });
    found
}

/// Bases to ask about.
pub(super) fn suspicious(report: &Report, figures: &Figures) -> Vec<Finding> {
    /// More guesses than this help nobody; chosen.
    const MOST_SHOWN: usize = 3;
    let typed = balance(figures).ok();
    let closed = typed
        .as_ref()
        .map(|balance| balance.closure() == Closure::Closed);
    let mut findings = Vec::new();
    if let Some(typed) = typed.filter(|_| closed == Some(false)) {
        let before = typed.percent_difference().abs();
        for found in alternatives(report, figures)
            .into_iter()
            .filter(|found| found.balance.percent_difference().abs() < before / 2.0)
            .take(MOST_SHOWN)
        {
            let after = found.balance.percent_difference().abs();
            let names: Vec<_> = found.analytes.iter().map(|a| a.name()).collect();
            let verb = if names.len() > 1 { "were" } else { "was" };
            let sentence = format!(
                "The balance closes to {} if {} {verb} meant in {}. Ask whoever made the analysis.",
                percent(after),
                names.join(" and "),
                found.unit.label(),
            );
            findings.push(
                Finding::new(
                    FindingKind::Basis,
                    Severity::Doubt,
                    &found.analytes,
                    sentence,
                )
                .figure("difference as typed", before, "%")
                .figure("difference then", after, "%"),
            );
        }
    }
    for analyte in [Analyte::Nitrate, Analyte::Sulfate] {
        let already = findings.iter().any(|f| f.analytes.contains(&analyte));
        if !already && let Some(finding) = question(report, figures, analyte, closed) {
            findings.push(finding);
        }
    }
    findings
}

/// Nitrate that could be as N, and sulfate that could be as S, where the balance
/// does not decide: asked, not judged.
fn question(
    report: &Report,
    figures: &Figures,
    analyte: Analyte,
    closed: Option<bool>,
) -> Option<Finding> {
    let line = report.lines().iter().find(|line| {
        line.reading.analyte() == analyte && line.reading.unit() == ReportingUnit::MgPerL
    })?;
    let typed = line.reading.typed();
    if typed.qualifier() == Qualifier::Below {
        return None;
    }
    let (unit, why) = match analyte {
        // 11.3 mg/L as N is the 50 mg/L of nitrate few waters exceed.
        Analyte::Nitrate if (1.0..=11.3).contains(&typed.number()) => (
            ReportingUnit::MgPerLAsN,
            "reports from the United States usually print nitrogen",
        ),
        // Less than 3 mg/L beside much calcium; 60 mg/L is chosen for "much".
        Analyte::Sulfate if typed.number() < 3.0 && figures.best(Analyte::Calcium)? > 60.0 => (
            ReportingUnit::MgPerLAsS,
            "so little sulfate beside so much calcium is unusual",
        ),
        _ => return None,
    };
    let meant = meant_in(line, unit, report.kind())?;
    // As typed it balances and otherwise not: answered.
    if closed == Some(true)
        && balance(&figures.with(meant)).is_ok_and(|b| b.closure() != Closure::Closed)
    {
        return None;
    }
    Some(
        Finding::new(
            FindingKind::Basis,
            Severity::Info,
            &[analyte],
            format!(
                "{} {} mg/L: as the ion, or {}? Check the report; {why}.",
                capitalised(analyte.name()),
                typed.number(),
                unit.label().trim_start_matches("mg/L "),
            ),
        )
        .figure("if meant so", meant.best(), "mg/L"),
    )
}
