//! What people and programs send, before it is believed.
//!
//! A form and a JSON body become the same `…Body` struct: a form's dotted names
//! (`readings.3.value`) are laid out as a JSON tree first, see
//! [`Form`](crate::web::form::Form). Leaves are lenient ([`Number`], [`Flag`]), so
//! that a wrong one is reported beside its field instead of refusing the whole
//! body. [`Problems`] collects what is wrong while a body becomes a domain type.

use std::borrow::Cow;
use std::fmt::Display;

use chemistry::quantity::{Fraction, OutOfRange};
use serde::{Deserialize, Serialize};

use crate::error::{Error, FieldProblem};

/// A number as it arrived: missing, a JSON number, or text with a decimal point
/// or comma.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(untagged)]
pub enum Number {
    /// Nothing was sent.
    #[default]
    Missing,
    /// A JSON number.
    Given(f64),
    /// As typed.
    Typed(String),
}

impl Number {
    /// Whether nothing, or only blanks, was sent.
    pub fn is_missing(&self) -> bool {
        match self {
            Self::Missing => true,
            Self::Given(_) => false,
            Self::Typed(text) => text.trim().is_empty(),
        }
    }

    /// The number, or a sentence saying what would be accepted.
    pub fn parse(&self) -> Result<f64, String> {
        match self {
            Self::Missing => Err("Enter a number.".into()),
            Self::Given(number) if number.is_finite() => Ok(*number),
            Self::Given(_) => Err("Enter a finite number.".into()),
            Self::Typed(text) => parse_decimal(text),
        }
    }
}

impl From<f64> for Number {
    fn from(value: f64) -> Self {
        Self::Given(value)
    }
}

impl From<Option<f64>> for Number {
    fn from(value: Option<f64>) -> Self {
        value.map_or(Self::Missing, Self::Given)
    }
}

/// Reads a decimal number with a point or a comma, and nothing else.
fn parse_decimal(text: &str) -> Result<f64, String> {
    let text = text.trim();
    if text.is_empty() {
        return Err("Enter a number.".into());
    }
    let refused = || {
        format!(
            "“{}” is not a number. Type digits, for example 12.5 or 12,5.",
            shorten(text)
        )
    };
    let digits = text.replace('\u{2212}', "-");
    if digits.contains('.') && digits.contains(',') || digits.matches(',').count() > 1 {
        return Err(format!(
            "“{}” has two separators. Type the number without thousands separators, for example 1234.5.",
            shorten(text)
        ));
    }
    let digits = digits.replace(',', ".");
    if !digits
        .chars()
        .all(|c| c.is_ascii_digit() || matches!(c, '.' | '-' | '+' | 'e' | 'E'))
    {
        return Err(refused());
    }
    match digits.parse::<f64>() {
        Ok(number) if number.is_finite() => Ok(number),
        _ => Err(refused()),
    }
}

/// The first characters of what was typed, fit to quote in a sentence.
pub fn shorten(text: &str) -> Cow<'_, str> {
    if text.chars().count() <= 40 {
        text.into()
    } else {
        format!("{}…", text.chars().take(40).collect::<String>()).into()
    }
}

/// A share in percent, without the noise of the multiplication.
pub fn percent(share: f64) -> f64 {
    (share * 1e10).round() / 1e8
}

/// A share typed in percent.
pub fn share(percent: f64) -> Result<Fraction, OutOfRange> {
    within(percent, "%", 0.0, 100.0).map(|percent| Fraction::clamped(percent / 100.0))
}

/// A share of more than nothing typed in percent.
pub fn some_share(percent: f64) -> Result<Fraction, OutOfRange> {
    within(percent, "%", 0.01, 100.0).map(|percent| Fraction::clamped(percent / 100.0))
}

/// A number inside bounds narrower than its unit's.
pub fn within(value: f64, unit: &'static str, low: f64, high: f64) -> Result<f64, OutOfRange> {
    if (low..=high).contains(&value) {
        Ok(value)
    } else {
        Err(OutOfRange {
            value,
            unit,
            low,
            high,
        })
    }
}

/// Yes or no, as JSON booleans or as a checkbox sends it.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, utoipa::ToSchema)]
#[serde(transparent)]
pub struct Flag(pub bool);

impl<'de> Deserialize<'de> for Flag {
    fn deserialize<D: serde::Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        #[derive(Deserialize)]
        #[serde(untagged)]
        enum Sent {
            Bool(bool),
            Text(String),
        }
        Ok(match Sent::deserialize(deserializer)? {
            Sent::Bool(yes) => Self(yes),
            Sent::Text(text) => Self(matches!(text.as_str(), "on" | "true" | "yes" | "1")),
        })
    }
}

/// Why something is done, where a reason must be given.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct ReasonBody {
    /// The reason, as the record book keeps it.
    #[schema(required = true, min_length = 1, max_length = 500)]
    pub reason: String,
}

impl ReasonBody {
    /// The reason.
    pub fn given(&self) -> Result<String, Error> {
        let mut problems = Problems::new();
        let reason = problems.text("reason", &self.reason, 500);
        problems.finish()?;
        Ok(reason.unwrap_or_default())
    }
}

/// What is wrong with a body, collected field by field.
#[derive(Debug, Default)]
pub struct Problems {
    prefix: String,
    found: Vec<FieldProblem>,
}

impl Problems {
    /// None yet.
    pub fn new() -> Self {
        Self::default()
    }

    /// Says that `field` is wrong.
    pub fn add(&mut self, field: impl Display, message: impl Into<String>) {
        let field = match (self.prefix.is_empty(), field.to_string()) {
            (true, field) => field,
            (false, field) if field.is_empty() => self.prefix.clone(),
            (false, field) => format!("{}.{field}", self.prefix),
        };
        self.found.push(FieldProblem {
            field,
            message: message.into(),
        });
    }

    /// Collects the problems of one row or part under `prefix`.
    pub fn within<T>(&mut self, prefix: impl Display, part: impl FnOnce(&mut Self) -> T) -> T {
        let outer = self.prefix.clone();
        self.prefix = if outer.is_empty() {
            prefix.to_string()
        } else {
            format!("{outer}.{prefix}")
        };
        let result = part(self);
        self.prefix = outer;
        result
    }

    /// Whether nothing was found so far.
    pub fn is_empty(&self) -> bool {
        self.found.is_empty()
    }

    /// A text that must be there, at most `longest` characters after trimming.
    pub fn text(&mut self, field: &str, text: &str, longest: usize) -> Option<String> {
        let trimmed = text.trim();
        if trimmed.is_empty() {
            self.add(field, "Fill this in.");
            return None;
        }
        self.optional_text(field, text, longest)
    }

    /// A text that may be missing; `Some("")` is never returned for blanks.
    pub fn optional_text(&mut self, field: &str, text: &str, longest: usize) -> Option<String> {
        let trimmed = text.trim();
        if trimmed.is_empty() {
            return None;
        }
        let length = trimmed.chars().count();
        if length > longest {
            self.add(
                field,
                format!("At most {longest} characters; this has {length}."),
            );
            return None;
        }
        if trimmed
            .chars()
            .any(|c| c.is_control() && !matches!(c, '\n' | '\r' | '\t'))
        {
            self.add(
                field,
                "This holds characters that cannot be printed. Type it again.",
            );
            return None;
        }
        Some(trimmed.to_owned())
    }

    /// A quantity that must be there.
    pub fn quantity<Q, E: Display>(
        &mut self,
        field: &str,
        number: &Number,
        check: impl FnOnce(f64) -> Result<Q, E>,
    ) -> Option<Q> {
        match number.parse() {
            Err(message) => {
                self.add(field, message);
                None
            }
            Ok(value) => match check(value) {
                Ok(quantity) => Some(quantity),
                Err(error) => {
                    self.add(field, format!("{error}."));
                    None
                }
            },
        }
    }

    /// A quantity that may be missing.
    pub fn optional_quantity<Q, E: Display>(
        &mut self,
        field: &str,
        number: &Number,
        check: impl FnOnce(f64) -> Result<Q, E>,
    ) -> Option<Q> {
        if number.is_missing() {
            None
        } else {
            self.quantity(field, number, check)
        }
    }

    /// Refuses a doubt whose figure is missing, which would else be dropped in silence.
    pub fn doubt_needs_figure(&mut self, field: &str, doubt: &Number, figure: &Number) {
        if figure.is_missing() && !doubt.is_missing() {
            self.add(
                field,
                "Enter the figure this belongs to, or leave this blank.",
            );
        }
    }

    /// One of a closed list, by key.
    pub fn choice<T>(
        &mut self,
        field: &str,
        key: &str,
        from_key: impl FnOnce(&str) -> Option<T>,
    ) -> Option<T> {
        let chosen = from_key(key.trim());
        if chosen.is_none() {
            let message = if key.trim().is_empty() {
                "Choose one.".to_owned()
            } else {
                format!("“{}” is not one of the choices.", shorten(key.trim()))
            };
            self.add(field, message);
        }
        chosen
    }

    /// A calendar date, `2026-03-31`.
    pub fn date(&mut self, field: &str, text: &str) -> Option<jiff::civil::Date> {
        match text.trim().parse::<jiff::civil::Date>() {
            Ok(date) if (1900..=2200).contains(&date.year()) => Some(date),
            Ok(_) => {
                self.add(field, "The year must be between 1900 and 2200.");
                None
            }
            Err(_) => {
                self.add(
                    field,
                    "Enter a date as year-month-day, for example 2026-03-31.",
                );
                None
            }
        }
    }

    /// A calendar date that may be missing.
    pub fn optional_date(&mut self, field: &str, text: &str) -> Option<jiff::civil::Date> {
        if text.trim().is_empty() {
            None
        } else {
            self.date(field, text)
        }
    }

    /// A calendar date that may be missing and, when there, is not after `today`.
    pub fn past_date(
        &mut self,
        field: &str,
        text: &str,
        today: jiff::civil::Date,
    ) -> Option<jiff::civil::Date> {
        let date = self.optional_date(field, text)?;
        if date > today {
            self.add(
                field,
                format!(
                    "{date} has not come yet; today is {today}. Enter today or an earlier day."
                ),
            );
            return None;
        }
        Some(date)
    }

    /// Ends the checking: the problems if there were any.
    pub fn finish(self) -> Result<(), Error> {
        if self.found.is_empty() {
            Ok(())
        } else {
            Err(Error::Invalid(self.found))
        }
    }
}
