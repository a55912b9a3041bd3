//! One line of a report: what, how much, in which unit.

use super::analyte::Analyte;
use super::typed::{Qualifier, Split, TypedValue, TypingError, split};
use super::unit::ReportingUnit;

/// One understood line of a report: what, how much, in which unit.
///
/// What was typed is kept by the caller; a reading is what it means.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Reading {
    analyte: Analyte,
    unit: ReportingUnit,
    typed: TypedValue,
}

/// Why a line cannot be taken.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum ReadingError {
    /// The figure itself was not understood.
    #[error(transparent)]
    Typing(#[from] TypingError),
    /// The analyte is not reported in this unit.
    #[error("{} is not reported in {}. Choose one of: {}.", capitalised(.analyte.name()), label_or_ph(*.unit), unit_labels(*.analyte))]
    Unit {
        /// The line.
        analyte: Analyte,
        /// The unit offered.
        unit: ReportingUnit,
    },
    /// More than can be meant.
    #[error("{} of {number} {} is more than any water holds; up to {most} is accepted. Check the figure and its unit.", capitalised(.analyte.name()), .unit.label())]
    TooMuch {
        /// The line.
        analyte: Analyte,
        /// The unit it was typed in.
        unit: ReportingUnit,
        /// The number typed.
        number: f64,
        /// The most that is accepted, in the unit typed.
        most: f64,
    },
    /// A pH outside its scale, or "less than" a pH.
    #[error("A pH is a number from 0 to 14, without <.")]
    Ph,
}

fn label_or_ph(unit: ReportingUnit) -> &'static str {
    if unit == ReportingUnit::Ph {
        "pH"
    } else {
        unit.label()
    }
}

fn unit_labels(analyte: Analyte) -> String {
    let labels: Vec<_> = analyte
        .units()
        .iter()
        .map(|unit| label_or_ph(*unit))
        .collect();
    labels.join(", ")
}

/// The same words at the beginning of a sentence; "pH" keeps its small p.
pub(super) fn capitalised(words: &str) -> String {
    let mut letters = words.chars();
    match letters.next() {
        Some(first) if !words.starts_with("pH") => {
            first.to_uppercase().collect::<String>() + letters.as_str()
        }
        _ => words.to_owned(),
    }
}

impl Reading {
    /// A checked line. Refuses a unit the analyte is not reported in, a pH outside
    /// 0 to 14 and amounts no water can hold.
    pub fn new(
        analyte: Analyte,
        unit: ReportingUnit,
        typed: TypedValue,
    ) -> Result<Self, ReadingError> {
        let factor = unit
            .canonical_per_unit(analyte)
            .ok_or(ReadingError::Unit { analyte, unit })?;
        let most = analyte.accepted_at_most();
        let beyond = typed.number() * factor > most;
        if analyte == Analyte::Ph && (beyond || typed.qualifier() == Qualifier::Below) {
            return Err(ReadingError::Ph);
        }
        if beyond {
            return Err(ReadingError::TooMuch {
                analyte,
                unit,
                number: typed.number(),
                most: (most / factor).floor(),
            });
        }
        Ok(Self {
            analyte,
            unit,
            typed,
        })
    }

    /// A line from the text typed for it.
    ///
    /// "1,234" is taken as a decimal when 1234 of this unit would be more than a
    /// brewing water is likely to hold ("3,456 mmol/L" of alkalinity), and refused
    /// with both spellings otherwise.
    pub fn parse(analyte: Analyte, unit: ReportingUnit, text: &str) -> Result<Self, ReadingError> {
        let typed = match split(text)? {
            Split::Number(value) => value,
            Split::Ambiguous(both) => {
                let factor = unit
                    .canonical_per_unit(analyte)
                    .ok_or(ReadingError::Unit { analyte, unit })?;
                if both.as_thousands()?.number() * factor <= analyte.likely_at_most() {
                    return Err(both.question().into());
                }
                both.as_decimal()?
            }
        };
        Self::new(analyte, unit, typed)
    }

    /// What was measured.
    #[must_use]
    pub const fn analyte(self) -> Analyte {
        self.analyte
    }

    /// The unit it was reported in.
    #[must_use]
    pub const fn unit(self) -> ReportingUnit {
        self.unit
    }

    /// The number as it was reported.
    #[must_use]
    pub const fn typed(self) -> TypedValue {
        self.typed
    }

    /// The same figure in the canonical unit of its analyte.
    #[must_use]
    pub fn canonical(self) -> CanonicalValue {
        let factor = self.unit.canonical_per_unit(self.analyte).unwrap_or(1.0);
        CanonicalValue {
            analyte: self.analyte,
            qualifier: self.typed.qualifier(),
            value: self.typed.number() * factor,
        }
    }
}

/// A figure in the canonical unit of its analyte: see [`Analyte::canonical_unit`].
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct CanonicalValue {
    analyte: Analyte,
    qualifier: Qualifier,
    value: f64,
}

impl CanonicalValue {
    /// A figure that was worked out rather than read.
    pub(super) const fn measured(analyte: Analyte, value: f64) -> Self {
        Self {
            analyte,
            qualifier: Qualifier::Measured,
            value,
        }
    }

    /// What it is a figure of.
    #[must_use]
    pub const fn analyte(self) -> Analyte {
        self.analyte
    }

    /// Measured, or below a limit.
    #[must_use]
    pub const fn qualifier(self) -> Qualifier {
        self.qualifier
    }

    /// The number, in [`Analyte::canonical_unit`].
    #[must_use]
    pub const fn get(self) -> f64 {
        self.value
    }

    /// The same figure as it would be reported in `unit`, `None` when the analyte
    /// is not reported in it.
    #[must_use]
    pub fn reported_in(self, unit: ReportingUnit) -> Option<TypedValue> {
        let factor = unit.canonical_per_unit(self.analyte)?;
        TypedValue::new(self.qualifier, self.value / factor).ok()
    }
}

#[cfg(test)]
mod tests {
    use super::super::typed::parse_typed;
    use super::*;
    use proptest::prelude::*;

    fn measured(number: f64) -> TypedValue {
        TypedValue::new(Qualifier::Measured, number).unwrap()
    }

    #[test]
    fn one_comma_two_three_four_is_asked_back_with_both_spellings() {
        let sentence = parse_typed("1,234").unwrap_err().to_string();
        assert!(
            sentence.contains("Type 1234 if") && sentence.contains("or 1.234 if"),
            "{sentence}"
        );
        // Conductivity of 1234 µS/cm is a likely water, so the question stands.
        let conductivity = Reading::parse(
            Analyte::Conductivity,
            ReportingUnit::MicrosiemensPerCm25,
            "1,234",
        );
        assert!(conductivity.is_err());
        // Nobody has 3456 mmol/L of alkalinity: this is a decimal comma.
        let alkalinity =
            Reading::parse(Analyte::Alkalinity, ReportingUnit::Ks43MmolPerL, "3,456").unwrap();
        assert_eq!(alkalinity.typed(), measured(3.456));
    }

    #[test]
    fn a_ph_of_15_and_a_ph_below_a_limit_are_refused() {
        for text in ["15", "< 7"] {
            let refused = Reading::parse(Analyte::Ph, ReportingUnit::Ph, text);
            assert_eq!(refused, Err(ReadingError::Ph), "{text}");
        }
    }

    #[test]
    fn a_unit_the_analyte_is_not_reported_in_is_refused_with_those_it_is() {
        let refused = Reading::parse(Analyte::Sulfate, ReportingUnit::GermanDegrees, "5");
        assert_eq!(
            refused.unwrap_err().to_string(),
            "Sulfate is not reported in °dH. Choose one of: mg/L, mg/L as S, mmol/L, meq/L."
        );
    }

    fn any_choice() -> impl Strategy<Value = (Analyte, ReportingUnit)> {
        prop::sample::select(
            Analyte::ALL
                .into_iter()
                .flat_map(|analyte| analyte.units().iter().map(move |unit| (analyte, *unit)))
                .collect::<Vec<_>>(),
        )
    }

    proptest! {
        #[test]
        fn a_figure_brought_to_the_canonical_unit_and_back_is_the_same(
            (analyte, unit) in any_choice(),
            number in 1e-6..10.0_f64,
            is_below in any::<bool>(),
        ) {
            let qualifier = if is_below && analyte != Analyte::Ph { Qualifier::Below } else { Qualifier::Measured };
            let typed = TypedValue::new(qualifier, number).unwrap();
            let reading = Reading::new(analyte, unit, typed).unwrap();
            let back = reading.canonical().reported_in(unit).unwrap();
            prop_assert!((back.number() / number - 1.0).abs() < 1e-12);
            prop_assert_eq!(back.qualifier(), qualifier);
        }

        #[test]
        fn one_amount_is_the_same_whichever_unit_it_passes_through(
            (analyte, unit) in any_choice(),
            value in 1e-3..10.0_f64,
        ) {
            let canonical = Reading::new(analyte, analyte.canonical_unit(), measured(value)).unwrap().canonical();
            let through = Reading::new(analyte, unit, canonical.reported_in(unit).unwrap()).unwrap().canonical();
            prop_assert!((through.get() / value - 1.0).abs() < 1e-12);
        }

        #[test]
        fn no_text_brings_the_reader_down(text in "\\PC*") {
            let _ = parse_typed(&text);
            for (analyte, unit) in [(Analyte::Ph, ReportingUnit::Ph), (Analyte::Calcium, ReportingUnit::GermanDegrees)] {
                let _ = Reading::parse(analyte, unit, &text);
            }
        }
    }
}
