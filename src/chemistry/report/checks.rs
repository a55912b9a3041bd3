//! The checks that compare figures of one report with each other.
//!
//! Bands without a source beside them are this service's choice.

use super::analyte::Analyte;
use super::balance::{Closure, IonBalance, partial_balance};
use super::figure::Figures;
use super::finding::{Finding, FindingKind, Severity, amount, percent, rounded};
use super::reading::{Reading, capitalised};
use super::{Report, WaterKind};
use crate::quantity::MicrosiemensPerCm;

use FindingKind as Kind;
use Severity::{Contradiction, Doubt, Info};

/// Cations against anions.
pub(super) fn ion_balance(balance: &IonBalance, conductivity_ratio: Option<f64>) -> Finding {
    let difference = balance.percent_difference();
    let (cations, anions) = (balance.cations.get(), balance.anions.get());
    let sums = format!(
        "{} meq/L of cations against {} meq/L of anions, {} apart",
        rounded(cations),
        rounded(anions),
        percent(difference.abs())
    );
    let closure = balance.closure();
    let (severity, mut sentence) = match closure {
        Closure::Closed if balance.is_dilute() => (
            Info,
            format!("So little is dissolved that the ion balance says little: {sums}."),
        ),
        Closure::Closed => (Info, format!("The ions balance: {sums}.")),
        Closure::Near => (
            Doubt,
            format!(
                "The ions balance only roughly: {sums}, where {} is expected (Standard Methods \
                 1030 E).",
                balance.band()
            ),
        ),
        Closure::Open => (
            if balance.within_methods() {
                Doubt
            } else {
                Contradiction
            },
            format!(
                "The ions do not balance: {sums}, where {} is expected (Standard Methods 1030 E).",
                balance.band()
            ),
        ),
    };
    if closure != Closure::Closed {
        sentence.push(' ');
        sentence.push_str(which_side(cations > anions, conductivity_ratio));
        if balance.within_methods() {
            sentence.push_str(" These methods are not sharp enough to tell.");
        }
    }
    if !balance.not_reported.is_empty() {
        let names: Vec<_> = balance.not_reported.iter().map(|a| a.name()).collect();
        sentence.push_str(&format!(
            " Not reported and counted as none: {}.",
            names.join(", ")
        ));
    }
    Finding::new(Kind::IonBalance, severity, &[], sentence)
        .figure("cations", cations, "meq/L")
        .figure("anions", anions, "meq/L")
        .figure("difference", difference, "%")
}

/// Which side a misfit lies on, with the conductivity as a witness: above what the
/// ions conduct, something is missing; below, something is too high. 5 % decides.
fn which_side(more_cations: bool, measured_over_calculated: Option<f64>) -> &'static str {
    match (measured_over_calculated, more_cations) {
        (Some(1.05..), true) => {
            "The conductivity is above that of these ions, so an anion is probably missing or too low."
        }
        (Some(1.05..), false) => {
            "The conductivity is above that of these ions, so a cation is probably missing or too low."
        }
        (Some(..0.95), true) => {
            "The conductivity is below that of these ions, so a cation is probably too high."
        }
        (Some(..0.95), false) => {
            "The conductivity is below that of these ions, so an anion is probably too high."
        }
        (_, true) => "A cation is too high, or an anion is missing or too low.",
        (_, false) => "An anion is too high, or a cation is missing or too low.",
    }
}

/// Two figures of one thing: fine within `share` or three standard deviations,
/// doubtful to three times the share, then contradictory.
fn compare(first: (f64, f64), second: (f64, f64), share: f64) -> Option<Severity> {
    let difference = (first.0 - second.0).abs();
    let larger = first.0.abs().max(second.0.abs());
    let methods = 3.0 * first.1.hypot(second.1);
    if difference <= methods.max(share * larger) {
        None
    } else if difference <= methods.max(3.0 * share * larger) {
        Some(Doubt)
    } else {
        Some(Contradiction)
    }
}

/// Total hardness, its parts, calcium and magnesium against each other
/// (Standard Methods 2340 B).
pub(super) fn hardness(figures: &Figures) -> Vec<Finding> {
    use Analyte as A;
    let mut findings = Vec::new();
    let caco3 = |analyte| figures.as_caco3(analyte);
    if let (Some(total), Some(calcium), Some(magnesium)) = (
        caco3(A::TotalHardness),
        caco3(A::Calcium),
        caco3(A::Magnesium),
    ) {
        let sum = (calcium.0 + magnesium.0, calcium.1.hypot(magnesium.1));
        let severity = compare(total, sum, 0.05);
        let words = if severity.is_some() {
            "does not agree with"
        } else {
            "agrees with"
        };
        findings.push(
            Finding::new(
                Kind::Hardness,
                severity.unwrap_or(Info),
                &[A::TotalHardness, A::Calcium, A::Magnesium],
                format!(
                    "Total hardness of {} mg/L as CaCO₃ {words} calcium and magnesium, which make {}.",
                    rounded(total.0),
                    rounded(sum.0)
                ),
            )
            .figure("total hardness", total.0, "mg/L as CaCO₃")
            .figure("from calcium and magnesium", sum.0, "mg/L as CaCO₃"),
        );
    }
    for (part, ion) in [
        (A::CalciumHardness, A::Calcium),
        (A::MagnesiumHardness, A::Magnesium),
    ] {
        if let (Some(hardness), Some(from_ion)) = (caco3(part), caco3(ion))
            && let Some(severity) = compare(hardness, from_ion, 0.05)
        {
            findings.push(
                Finding::new(
                    Kind::Hardness,
                    severity,
                    &[part, ion],
                    format!(
                        "{} of {} mg/L as CaCO₃ and {}, which makes {}, do not agree.",
                        capitalised(part.name()),
                        rounded(hardness.0),
                        ion.name(),
                        rounded(from_ion.0)
                    ),
                )
                .figure("hardness", hardness.0, "mg/L as CaCO₃")
                .figure("from the ion", from_ion.0, "mg/L as CaCO₃"),
            );
        }
    }
    let Some(total) = caco3(A::TotalHardness) else {
        return findings;
    };
    let have_all = figures.has(A::Calcium) && figures.has(A::Magnesium);
    for part in [
        A::CalciumHardness,
        A::MagnesiumHardness,
        A::Calcium,
        A::Magnesium,
    ] {
        // With both ions the sum was compared above.
        if have_all && part.ion().is_some() {
            continue;
        }
        if let Some(value) = caco3(part) {
            let room = 2.0 * total.1.hypot(value.1);
            if value.0 > total.0 + room {
                findings.push(
                    Finding::new(
                        Kind::Hardness,
                        Contradiction,
                        &[part, A::TotalHardness],
                        format!(
                            "{} alone makes {} mg/L as CaCO₃, more than the total hardness of {}. A \
                             part cannot be more than the whole.",
                            capitalised(part.name()),
                            rounded(value.0),
                            rounded(total.0)
                        ),
                    )
                    .figure("part", value.0, "mg/L as CaCO₃")
                    .figure("total hardness", total.0, "mg/L as CaCO₃"),
                );
            }
        }
    }
    findings
}

/// Conductivity against what the ions conduct. The estimate is good to a few
/// percent, so 10 % is looked at and 25 % cannot be.
pub(super) fn conductivity(
    report: &Report,
    figures: &Figures,
    calculated: Option<MicrosiemensPerCm>,
) -> Option<Finding> {
    let measured = figures.best(Analyte::Conductivity)?;
    let Some(calculated) = calculated.map(MicrosiemensPerCm::get) else {
        return too_little_conductivity(figures, measured);
    };
    let difference = (measured - calculated).abs();
    let severity = if difference <= 10.0_f64.max(0.10 * calculated) {
        Info
    } else if difference <= 20.0_f64.max(0.25 * calculated) {
        Doubt
    } else {
        Contradiction
    };
    let mut sentence = format!(
        "Conductivity of {} µS/cm at 25 °C {} the {} these ions should have.",
        rounded(measured),
        if severity == Info {
            "agrees with"
        } else {
            "does not agree with"
        },
        rounded(calculated)
    );
    if severity != Info {
        sentence.push_str(if measured > calculated {
            " Something dissolved was not reported, or is reported too low."
        } else {
            " Something is reported too high."
        });
        let mut lines = report.lines().iter().map(|line| line.reading);
        let typed = lines.find(|reading| reading.analyte() == Analyte::Conductivity)?;
        let other = Analyte::Conductivity.units().iter().find(|unit| {
            Reading::new(Analyte::Conductivity, **unit, typed.typed())
                .is_ok_and(|meant| (meant.canonical().get() / calculated - 1.0).abs() < 0.05)
        });
        if let Some(unit) = other {
            sentence.push_str(&format!(
                " It would agree if it was meant in {}.",
                unit.label()
            ));
        }
    }
    Some(
        Finding::new(
            Kind::Conductivity,
            severity,
            &[Analyte::Conductivity],
            sentence,
        )
        .figure("measured", measured, "µS/cm at 25 °C")
        .figure("from the ions", calculated, "µS/cm at 25 °C"),
    )
}

/// With only some of the ions, their charge alone may already be too much: 1 meq/L
/// of either sign goes with at least 80 µS/cm in a brewing water. (The quick rule is
/// that 100 times the sum of the anions is 0.9 to 1.1 of the conductivity.)
fn too_little_conductivity(figures: &Figures, measured: f64) -> Option<Finding> {
    let sums = partial_balance(figures);
    let charge = sums.cations.get().max(sums.anions.get());
    let least = 80.0 * charge;
    (least > measured + 10.0).then(|| {
        Finding::new(
            Kind::Conductivity,
            Doubt,
            &[Analyte::Conductivity],
            format!(
                "Conductivity of {} µS/cm at 25 °C is too little: the ions reported alone should \
                 bring at least {}.",
                rounded(measured),
                rounded(least)
            ),
        )
        .figure("measured", measured, "µS/cm at 25 °C")
        .figure("least from the ions", least, "µS/cm at 25 °C")
    })
}

/// Dissolved solids against the ions (Standard Methods 1030 E: measured over
/// calculated 1.0 to 1.2, from memory; agencies allow 20 % either way) and against
/// conductivity (0.55 to 0.81 mg/L per µS/cm, as agencies report).
pub(super) fn dissolved_solids(figures: &Figures, complete: bool) -> Vec<Finding> {
    use Analyte as A;
    let mut findings = Vec::new();
    let Some(measured) = figures.best(A::DissolvedSolids) else {
        return findings;
    };
    if complete && let Some((alkalinity, _)) = figures.alkalinity() {
        let hardness_ions = match (figures.best(A::Calcium), figures.best(A::Magnesium)) {
            (Some(calcium), Some(magnesium)) => calcium + magnesium,
            // Seven parts calcium to three magnesium, as CaCO₃: 0.353 mg per mg.
            _ => figures
                .as_caco3(A::TotalHardness)
                .map_or(0.0, |(h, _)| 0.353 * h),
        };
        let others: f64 = [
            A::Sodium,
            A::Potassium,
            A::Chloride,
            A::Sulfate,
            A::Silica,
            A::Nitrate,
            A::Fluoride,
        ]
        .into_iter()
        .filter_map(|analyte| figures.best(analyte))
        .sum();
        let calculated = 0.6 * alkalinity + hardness_ions + others;
        let ratio = measured / calculated;
        let severity = match ratio {
            0.8..=1.2 => Info,
            _ if (measured - calculated).abs() < 20.0 => Info,
            0.6..=1.5 => Doubt,
            _ => Contradiction,
        };
        findings.push(
            Finding::new(
                Kind::DissolvedSolids,
                severity,
                &[A::DissolvedSolids],
                format!(
                    "Dissolved solids of {} mg/L {} the {} these ions leave behind.",
                    rounded(measured),
                    if severity == Info {
                        "agree with"
                    } else {
                        "do not agree with"
                    },
                    rounded(calculated)
                ),
            )
            .figure("measured", measured, "mg/L")
            .figure("from the ions", calculated, "mg/L"),
        );
    }
    if let Some(conductivity) = figures.best(A::Conductivity)
        && conductivity > 20.0
    {
        let ratio = measured / conductivity;
        let severity = match ratio {
            0.55..=0.81 => None,
            // Meters print half the conductivity, or somewhat more or less.
            0.45..=0.95 => Some(Info),
            _ => Some(Doubt),
        };
        if let Some(severity) = severity {
            findings.push(
                Finding::new(
                    Kind::DissolvedSolids,
                    severity,
                    &[A::DissolvedSolids, A::Conductivity],
                    format!(
                        "Dissolved solids are {} mg/L per µS/cm; 0.55 to 0.81 is usual. A meter that \
                         computes solids from conductivity may print another factor.",
                        rounded(ratio)
                    ),
                )
                .figure("solids per conductivity", ratio, "mg/L per µS/cm"),
            );
        }
    }
    findings
}

/// Alkalinity, bicarbonate, carbonate, hardness and pH against each other.
pub(super) fn alkalinity(report: &Report, figures: &Figures) -> Vec<Finding> {
    use Analyte as A;
    let mut findings = Vec::new();
    let ph = figures.best(A::Ph);
    if let (Some(reported), Some(summed)) = (
        figures.as_caco3(A::Alkalinity),
        figures.alkalinity_from_bicarbonate(),
    ) && let Some(severity) = compare(reported, summed, 0.05)
    {
        findings.push(
            Finding::new(
                Kind::Alkalinity,
                severity,
                &[A::Alkalinity, A::Bicarbonate],
                format!(
                    "Total alkalinity of {} mg/L as CaCO₃ does not agree with bicarbonate and \
                     carbonate, which make {}.",
                    rounded(reported.0),
                    rounded(summed.0)
                ),
            )
            .figure("total alkalinity", reported.0, "mg/L as CaCO₃")
            .figure("from bicarbonate", summed.0, "mg/L as CaCO₃"),
        );
    }
    if let (Some(ph), Some((alkalinity, _))) = (ph, figures.alkalinity())
        && ph < 4.5
        && alkalinity > 10.0
    {
        findings.push(
            Finding::new(
                Kind::Alkalinity,
                Contradiction,
                &[A::Alkalinity, A::Ph],
                format!(
                    "Alkalinity of {} mg/L as CaCO₃ at pH {} is impossible: below pH 4.5 none is left.",
                    rounded(alkalinity),
                    rounded(ph)
                ),
            )
            .figure("alkalinity", alkalinity, "mg/L as CaCO₃")
            .figure("pH", ph, ""),
        );
    }
    if let (Some(ph), Some(carbonate)) = (ph, figures.best(A::Carbonate))
        && ph < 8.0
        && carbonate > 5.0
    {
        findings.push(
            Finding::new(
                Kind::Alkalinity,
                Doubt,
                &[A::Carbonate, A::Ph],
                format!(
                    "Carbonate of {} mg/L at pH {} is too much: below pH 8 nearly all of it is \
                     bicarbonate. Perhaps alkalinity was meant.",
                    rounded(carbonate),
                    rounded(ph)
                ),
            )
            .figure("carbonate", carbonate, "mg/L")
            .figure("pH", ph, ""),
        );
    }
    let line = |analyte| {
        let mut lines = report.lines().iter().map(|line| line.reading);
        lines.find(|reading| reading.analyte() == analyte)
    };
    if let (Some(alkalinity), Some(hardness)) = (line(A::Alkalinity), line(A::TotalHardness))
        && alkalinity.typed() == hardness.typed()
        && alkalinity.unit() == hardness.unit()
        && hardness.typed().qualifier() == super::Qualifier::Measured
        && hardness.typed().number() > 0.0
    {
        findings.push(Finding::new(
            Kind::SameFigure,
            Doubt,
            &[A::Alkalinity, A::TotalHardness],
            format!(
                "Alkalinity and total hardness are both {} {}. They are different things and rarely \
                 equal: was one copied into the other?",
                rounded(hardness.typed().number()),
                hardness.unit().label()
            ),
        ));
    }
    findings
}

/// Much sodium and alkalinity with next to no hardness: an ion-exchange softener.
pub(super) fn softened(figures: &Figures) -> Option<Finding> {
    use Analyte as A;
    let hardness = figures.as_caco3(A::TotalHardness).or_else(|| {
        let calcium = figures.as_caco3(A::Calcium)?;
        let magnesium = figures.as_caco3(A::Magnesium)?;
        Some((calcium.0 + magnesium.0, calcium.1))
    })?;
    let sodium = figures.best(A::Sodium)?;
    let (alkalinity, _) = figures.alkalinity()?;
    // "High" is not given a figure where the rule is stated: 50 mg/L each, chosen.
    (hardness.0 < 10.0 && sodium > 50.0 && alkalinity > 50.0).then(|| {
        Finding::new(
            Kind::Softened,
            Doubt,
            &[A::Sodium, A::TotalHardness, A::Alkalinity],
            format!(
                "Sodium of {} mg/L with hardness of only {} mg/L as CaCO₃ looks like softened water. \
                 Was the sample taken behind a softener, and is the liquor?",
                rounded(sodium),
                rounded(hardness.0)
            ),
        )
        .figure("sodium", sodium, "mg/L")
        .figure("hardness", hardness.0, "mg/L as CaCO₃")
    })
}

/// Figures far from what waters hold, and free chlorine above total.
pub(super) fn magnitude(report: &Report, figures: &Figures) -> Vec<Finding> {
    let mut findings = Vec::new();
    for figure in figures.all() {
        let analyte = figure.analyte();
        let value = figure.canonical().get();
        let least = if analyte == Analyte::Ph { 4.5 } else { 0.0 };
        if value > analyte.likely_at_most() || value < least {
            findings.push(Finding::new(
                Kind::Magnitude,
                Doubt,
                &[analyte],
                format!(
                    "{} of {} is far from what brewing waters hold. Check the figure, the decimal \
                     mark and the unit.",
                    capitalised(analyte.name()),
                    amount(value, analyte)
                ),
            ));
        }
    }
    // Permeate above this is raw water, or the membrane is gone; chosen.
    const PERMEATE_MOST: [(Analyte, f64); 3] = [
        (Analyte::Conductivity, 200.0),
        (Analyte::Alkalinity, 60.0),
        (Analyte::TotalHardness, 40.0),
    ];
    if report.water_kind() == WaterKind::Permeate {
        for (analyte, most) in PERMEATE_MOST {
            if let Some(value) = figures.best(analyte)
                && value > most
            {
                findings.push(Finding::new(
                    Kind::Magnitude,
                    Doubt,
                    &[analyte],
                    format!(
                        "{} of {} is much for permeate. Check the sample point and the membrane.",
                        capitalised(analyte.name()),
                        amount(value, analyte)
                    ),
                ));
            }
        }
    }
    if let (Some(free), Some(total)) = (
        figures.get(Analyte::FreeChlorine),
        figures.get(Analyte::TotalChlorine),
    ) && free.best() > total.best() + 2.0 * free.sd().hypot(total.sd())
    {
        findings.push(Finding::new(
            Kind::Chlorine,
            Contradiction,
            &[Analyte::FreeChlorine, Analyte::TotalChlorine],
            format!(
                "Free chlorine of {} mg/L is more than total chlorine of {} mg/L. A part cannot be \
                 more than the whole.",
                rounded(free.best()),
                rounded(total.best())
            ),
        ));
    }
    findings
}

/// What planning needs and was not reported, and what each gap costs.
pub(super) fn missing(figures: &Figures) -> Vec<Finding> {
    use Analyte as A;
    let known = |analyte| match analyte {
        A::Calcium => figures.has(A::Calcium) || figures.has(A::CalciumHardness),
        A::Magnesium => figures.has(A::Magnesium) || figures.has(A::MagnesiumHardness),
        A::Alkalinity => figures.alkalinity().is_some(),
        other => figures.has(other),
    };
    A::NEEDED
        .into_iter()
        .filter(|analyte| !known(*analyte))
        .map(|analyte| {
            let cost = match analyte {
                A::Calcium => "without it neither mash pH nor a calcium addition can be planned",
                A::Magnesium => "without it its small part in mash pH and its taste are guessed",
                A::Alkalinity => {
                    "without it mash pH cannot be predicted; it matters more than any other figure"
                }
                A::Sodium => "without it the ion balance is open and saltiness is unknown",
                A::Chloride => "without it fullness and the sulfate to chloride ratio are unknown",
                _ => "without it dryness and the sulfate to chloride ratio are unknown",
            };
            Finding::new(
                Kind::Missing,
                Info,
                &[analyte],
                format!("{} was not reported: {cost}.", capitalised(analyte.name())),
            )
        })
        .collect()
}
