//! What a check has to say, and what all of them come to.

use super::analyte::Analyte;

/// How much a finding weighs.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum Severity {
    /// Good to know; nothing speaks against the report.
    Info,
    /// Something should be looked at.
    Doubt,
    /// The figures cannot all be right.
    Contradiction,
}

impl Severity {
    /// The stable name in JSON.
    #[must_use]
    pub const fn key(self) -> &'static str {
        match self {
            Self::Info => "info",
            Self::Doubt => "doubt",
            Self::Contradiction => "contradiction",
        }
    }
}

/// Which check a finding comes from.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum FindingKind {
    /// Cations against anions.
    IonBalance,
    /// Total hardness against calcium and magnesium, and its parts.
    Hardness,
    /// Conductivity against the ions.
    Conductivity,
    /// Total dissolved solids against the ions and the conductivity.
    DissolvedSolids,
    /// Alkalinity, bicarbonate, carbonate and pH against each other.
    Alkalinity,
    /// Alkalinity and hardness are the same figure.
    SameFigure,
    /// The water looks softened.
    Softened,
    /// A unit or basis that may be another.
    Basis,
    /// Averages of different days.
    Average,
    /// A figure far from what waters hold.
    Magnitude,
    /// Free chlorine against total chlorine.
    Chlorine,
    /// A figure planning needs is missing.
    Missing,
}

impl FindingKind {
    /// The stable name in JSON.
    #[must_use]
    pub const fn key(self) -> &'static str {
        match self {
            Self::IonBalance => "ion_balance",
            Self::Hardness => "hardness",
            Self::Conductivity => "conductivity",
            Self::DissolvedSolids => "dissolved_solids",
            Self::Alkalinity => "alkalinity",
            Self::SameFigure => "same_figure",
            Self::Softened => "softened",
            Self::Basis => "basis",
            Self::Average => "average",
            Self::Magnitude => "magnitude",
            Self::Chlorine => "chlorine",
            Self::Missing => "missing",
        }
    }
}

/// A number a finding rests on, unrounded.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct FindingFigure {
    /// What it is, in words.
    pub label: &'static str,
    /// The number.
    pub value: f64,
    /// Its unit as printed.
    pub unit: &'static str,
}

/// One thing a check noticed.
#[derive(Clone, Debug, PartialEq)]
pub struct Finding {
    /// Which check.
    pub kind: FindingKind,
    /// How much it weighs.
    pub severity: Severity,
    /// What it is, for the person reading; figures rounded to three digits.
    pub sentence: String,
    /// The lines it is about.
    pub analytes: Vec<Analyte>,
    /// The numbers behind the sentence.
    pub figures: Vec<FindingFigure>,
}

impl Finding {
    pub(super) fn new(
        kind: FindingKind,
        severity: Severity,
        analytes: &[Analyte],
        sentence: String,
    ) -> Self {
        Self {
            kind,
            severity,
            sentence,
            analytes: analytes.to_vec(),
            figures: Vec::new(),
        }
    }

    pub(super) fn figure(mut self, label: &'static str, value: f64, unit: &'static str) -> Self {
        self.figures.push(FindingFigure { label, value, unit });
        self
    }
}

/// Whether the figures of a report agree with each other.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Verdict {
    /// The checks that could be made agree.
    AddsUp,
    /// Something should be looked at before the report is trusted.
    Doubtful,
    /// The figures cannot all be right.
    DoesNotAddUp,
    /// Too little was reported to tell.
    CannotBeJudged,
}

impl Verdict {
    /// The stable name in JSON and the database.
    #[must_use]
    pub const fn key(self) -> &'static str {
        match self {
            Self::AddsUp => "adds_up",
            Self::Doubtful => "doubtful",
            Self::DoesNotAddUp => "does_not_add_up",
            Self::CannotBeJudged => "cannot_be_judged",
        }
    }

    /// The verdict in words.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::AddsUp => "adds up",
            Self::Doubtful => "doubtful",
            Self::DoesNotAddUp => "does not add up",
            Self::CannotBeJudged => "cannot be judged",
        }
    }
}

/// A number for a sentence: three digits, no idle zeros.
pub(super) fn rounded(value: f64) -> String {
    let size = value.abs();
    if size >= 100.0 || size == 0.0 {
        return format!("{value:.0}");
    }
    let decimals = (2.0 - size.log10().floor()).clamp(0.0, 9.0) as usize;
    let text = format!("{value:.decimals$}");
    text.trim_end_matches('0').trim_end_matches('.').to_owned()
}

/// A share of a hundred for a sentence: one decimal.
pub(super) fn percent(value: f64) -> String {
    format!("{value:.1} %")
}

/// A figure with the canonical unit of its analyte, for a sentence.
pub(super) fn amount(value: f64, analyte: Analyte) -> String {
    let text = format!("{} {}", rounded(value), analyte.canonical_unit().label());
    text.trim_end().to_owned()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn sentences_show_three_digits_and_no_idle_zeros() {
        for (value, text) in [
            (0.0, "0"),
            (100.0, "100"),
            (1234.5, "1234"),
            (45.0, "45"),
            (8.0, "8"),
            (3.456, "3.46"),
            (0.05, "0.05"),
            (0.012_345, "0.0123"),
            (-20.0, "-20"),
        ] {
            assert_eq!(rounded(value), text);
        }
        assert_eq!(amount(7.6, Analyte::Ph), "7.6");
    }
}
