//! All checks of a report, and what they come to.

use super::analyte::Analyte;
use super::balance::{IonBalance, balance, conductivity_of_ions};
use super::composition::{Composition, NotEnough, composition};
use super::figure::{Figure, Figures};
use super::finding::{Finding, FindingKind, Severity, Verdict};
use super::inference::{Inference, inferences};
use super::reading::CanonicalValue;
use super::{Report, SampleKind, bases, checks};
use crate::quantity::{Celsius, MicrosiemensPerCm};

/// A report in canonical figures, with everything the checks noticed.
#[derive(Clone, Debug, PartialEq)]
pub struct Assessment {
    figures: Figures,
    ph_temperature: Option<Celsius>,
    /// What the checks noticed, the gravest first.
    pub findings: Vec<Finding>,
    /// What they come to.
    pub verdict: Verdict,
    /// The ion balance, when enough was reported for one.
    pub balance: Option<IonBalance>,
    /// What the ions should conduct at 25 °C, when enough was reported.
    pub calculated_conductivity: Option<MicrosiemensPerCm>,
    /// What could be worked out, to be offered.
    pub inferences: Vec<Inference>,
}

impl Assessment {
    /// Every reported figure in its canonical unit, in the order of the lines.
    #[must_use]
    pub fn figures(&self) -> &[Figure] {
        self.figures.all()
    }

    /// The reported figure of one analyte.
    #[must_use]
    pub fn figure(&self, analyte: Analyte) -> Option<Figure> {
        self.figures.get(analyte)
    }

    /// Total alkalinity: as reported, or else from bicarbonate and carbonate.
    #[must_use]
    pub fn alkalinity(&self) -> Option<Figure> {
        self.figure(Analyte::Alkalinity).or_else(|| {
            let (value, sd) = self.figures.alkalinity_from_bicarbonate()?;
            let canonical = CanonicalValue::measured(Analyte::Alkalinity, value);
            Some(Figure::new(canonical, sd))
        })
    }

    /// A water to calculate with, from what was reported and the `accepted`
    /// inferences. An inference for a reported analyte changes nothing.
    ///
    /// Fails when calcium, magnesium or alkalinity are neither reported nor
    /// accepted; anything else missing counts as none and is listed as assumed.
    pub fn composition(&self, accepted: &[Inference]) -> Result<Composition, NotEnough> {
        composition(&self.figures, self.ph_temperature, accepted)
    }
}

/// Brings a report to canonical figures and makes every check its lines allow.
#[must_use]
pub fn assess(report: &Report) -> Assessment {
    let figures = Figures::new(
        report
            .lines()
            .iter()
            .map(|line| Figure::of(line, report.kind()))
            .collect(),
    );
    let balance = balance(&figures).ok();
    let calculated_conductivity = conductivity_of_ions(&figures);
    let mut findings = Vec::new();
    if let Some(balance) = &balance {
        let ratio = figures
            .best(Analyte::Conductivity)
            .zip(calculated_conductivity)
            .map(|(measured, calculated)| measured / calculated.get());
        findings.push(checks::ion_balance(balance, ratio));
    }
    findings.extend(bases::suspicious(report, &figures));
    findings.extend(checks::hardness(&figures));
    findings.extend(checks::conductivity(
        report,
        &figures,
        calculated_conductivity,
    ));
    findings.extend(checks::dissolved_solids(&figures, balance.is_some()));
    findings.extend(checks::alkalinity(report, &figures));
    findings.extend(checks::softened(&figures));
    findings.extend(checks::magnitude(report, &figures));
    findings.extend(checks::missing(&figures));
    if report.kind() == SampleKind::Average {
        call_averages_averages(&mut findings);
    }
    findings.sort_by_key(|finding| std::cmp::Reverse(finding.severity));
    Assessment {
        verdict: verdict(&findings, balance.as_ref(), &figures),
        inferences: inferences(&figures),
        ph_temperature: report.ph_temperature(),
        figures,
        findings,
        balance,
        calculated_conductivity,
    }
}

/// Averages of different days need not agree with each other, so nothing about them
/// is a contradiction.
fn call_averages_averages(findings: &mut Vec<Finding>) {
    for finding in findings.iter_mut() {
        if finding.severity == Severity::Contradiction {
            finding.severity = Severity::Doubt;
            finding.sentence.push_str(
                " These are averages, perhaps of different days, and need not agree with each other.",
            );
        }
    }
    findings.push(Finding::new(
        FindingKind::Average,
        Severity::Info,
        &[],
        "The figures are averages: water on the day can differ by 10 to 30 %. A single sample would \
         say more."
            .to_owned(),
    ));
}

fn verdict(findings: &[Finding], balance: Option<&IonBalance>, figures: &Figures) -> Verdict {
    let gravest = findings.iter().map(|finding| finding.severity).max();
    match gravest {
        Some(Severity::Contradiction) => Verdict::DoesNotAddUp,
        Some(Severity::Doubt) => Verdict::Doubtful,
        _ => match balance {
            // A balance that proves nothing needs the conductivity as a witness.
            Some(balance) if balance.is_dilute() && !figures.has(Analyte::Conductivity) => {
                Verdict::CannotBeJudged
            }
            Some(_) => Verdict::AddsUp,
            None => Verdict::CannotBeJudged,
        },
    }
}
