//! What somebody typed, understood: a number, with or without "less than".

/// Whether a figure is a value or only an upper limit.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Qualifier {
    /// The figure was measured.
    Measured,
    /// The figure is the limit below which the method sees nothing: "< 0.05".
    Below,
}

impl Qualifier {
    /// The stable name in JSON and the database.
    #[must_use]
    pub const fn key(self) -> &'static str {
        match self {
            Self::Measured => "measured",
            Self::Below => "below",
        }
    }

    /// The qualifier with this [`key`](Self::key).
    #[must_use]
    pub fn from_key(key: &str) -> Option<Self> {
        [Self::Measured, Self::Below]
            .into_iter()
            .find(|qualifier| qualifier.key() == key)
    }

    /// The sign in front of the number, empty for a measured value.
    #[must_use]
    pub const fn sign(self) -> &'static str {
        match self {
            Self::Measured => "",
            Self::Below => "< ",
        }
    }
}

/// A typed number without its unit: finite and not negative.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct TypedValue {
    qualifier: Qualifier,
    number: f64,
}

/// Why a typed figure was not understood. Each says what to type instead.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum TypingError {
    /// Nothing was typed.
    #[error("Nothing was typed. Leave the line out, or type a number such as 12.5.")]
    Empty,
    /// "n.d." and its like.
    #[error(
        "\"Not detected\" depends on how little the method can see. Type < and the method's \
         limit, for example < 0.05."
    )]
    NotDetected,
    /// `>`.
    #[error(
        "A figure above the method's range cannot be used. Type the number measured after dilution."
    )]
    Above,
    /// A negative number.
    #[error("A water cannot hold less than nothing. Type a number of 0 or more.")]
    Negative,
    /// `< 0`.
    #[error("Type the method's limit after <, a number above 0, for example < 0.05.")]
    BelowNothing,
    /// "1,234": one thousand or one point two?
    #[error(
        "\"{typed}\" can be read two ways. Type {thousands} if thousands were meant, or {decimal} \
         if the comma is a decimal mark."
    )]
    ThousandsOrDecimal {
        /// What was typed.
        typed: String,
        /// How to type the larger number.
        thousands: String,
        /// How to type the smaller number.
        decimal: String,
    },
    /// Marks between thousands.
    #[error("Type the number without marks or spaces between its digits, for example 1234.5.")]
    Grouped,
    /// Not a number at all.
    #[error(
        "\"{0}\" is not a number. Type digits with one decimal mark, for example 12.5 or 12,5, or < 0.05."
    )]
    NotANumber(String),
    /// More than any quantity here can be.
    #[error("This number is too large for a water. Check the figure and its unit.")]
    TooLarge,
}

/// Largest number any unit here can need (a brine in µg/L).
const LARGEST_NUMBER: f64 = 1e9;

impl TypedValue {
    /// A number that did not come as text. Refuses NaN, infinities, negative
    /// numbers and a limit of zero.
    pub fn new(qualifier: Qualifier, number: f64) -> Result<Self, TypingError> {
        if number.is_nan() {
            return Err(TypingError::NotANumber("NaN".to_owned()));
        }
        if number < 0.0 {
            return Err(TypingError::Negative);
        }
        if number > LARGEST_NUMBER {
            return Err(TypingError::TooLarge);
        }
        if qualifier == Qualifier::Below && number == 0.0 {
            return Err(TypingError::BelowNothing);
        }
        // Minus zero is zero.
        Ok(Self {
            qualifier,
            number: number.abs(),
        })
    }

    /// Measured, or below a limit.
    #[must_use]
    pub const fn qualifier(self) -> Qualifier {
        self.qualifier
    }

    /// The number, in whatever unit stands beside it.
    #[must_use]
    pub const fn number(self) -> f64 {
        self.number
    }
}

/// Reads a figure as typed: `12.5`, `12,5`, `< 0.05`, `<0,05`.
///
/// The decimal mark may be a point or a comma. A point is always the decimal mark.
/// A comma followed by exactly three digits ("1,234") could separate thousands:
/// that is refused with both spellings, unless it starts with a zero ("0,123").
/// [`Reading::parse`](super::Reading::parse) knows the unit and so has to ask less often. Marks between
/// thousands, exponents and signs are refused.
pub fn parse_typed(text: &str) -> Result<TypedValue, TypingError> {
    match split(text)? {
        Split::Number(value) => Ok(value),
        Split::Ambiguous(both) => Err(both.question()),
    }
}

pub(super) enum Split {
    Number(TypedValue),
    Ambiguous(Ambiguous),
}

/// "1,234" read both ways.
pub(super) struct Ambiguous {
    qualifier: Qualifier,
    whole: String,
    decimals: String,
}

impl Ambiguous {
    pub(super) fn question(&self) -> TypingError {
        let sign = self.qualifier.sign();
        TypingError::ThousandsOrDecimal {
            typed: format!("{sign}{},{}", self.whole, self.decimals),
            thousands: format!("{sign}{}{}", self.whole, self.decimals),
            decimal: format!("{sign}{}.{}", self.whole, self.decimals),
        }
    }

    pub(super) fn as_thousands(&self) -> Result<TypedValue, TypingError> {
        number(self.qualifier, &self.whole, &self.decimals, "")
    }

    pub(super) fn as_decimal(&self) -> Result<TypedValue, TypingError> {
        number(self.qualifier, &self.whole, "", &self.decimals)
    }
}

pub(super) fn split(text: &str) -> Result<Split, TypingError> {
    let text = text.trim();
    if text.is_empty() {
        return Err(TypingError::Empty);
    }
    if is_not_detected(text) {
        return Err(TypingError::NotDetected);
    }
    if text.starts_with(['>', '≥']) {
        return Err(TypingError::Above);
    }
    let (qualifier, digits) = match text.strip_prefix(['<', '≤']) {
        Some(rest) => (Qualifier::Below, rest.trim_start()),
        None => (Qualifier::Measured, text),
    };
    let not_a_number = || TypingError::NotANumber(shortened(text));
    if let Some(rest) = digits.strip_prefix(['-', '−', '–']) {
        return Err(
            if rest.trim_start().starts_with(|c: char| c.is_ascii_digit()) {
                TypingError::Negative
            } else {
                not_a_number()
            },
        );
    }
    let is_mark = |c: char| c == ',' || c == '.';
    let is_gap = |c: char| c.is_whitespace() || c == '\'' || c == '’';
    if !digits.chars().any(|c| c.is_ascii_digit())
        || !digits
            .chars()
            .all(|c| c.is_ascii_digit() || is_mark(c) || is_gap(c))
    {
        return Err(not_a_number());
    }
    if digits.contains(is_gap) || digits.chars().filter(|c| is_mark(*c)).count() > 1 {
        return Err(TypingError::Grouped);
    }
    let (whole, decimals) = digits.split_once(is_mark).unwrap_or((digits, ""));
    let could_be_thousands = digits.contains(',')
        && decimals.len() == 3
        && (1..=3).contains(&whole.len())
        && !whole.starts_with('0');
    if could_be_thousands {
        return Ok(Split::Ambiguous(Ambiguous {
            qualifier,
            whole: whole.to_owned(),
            decimals: decimals.to_owned(),
        }));
    }
    number(qualifier, whole, "", decimals).map(Split::Number)
}

/// Puts checked digits together: `whole` and `more` before the point.
fn number(
    qualifier: Qualifier,
    whole: &str,
    more: &str,
    decimals: &str,
) -> Result<TypedValue, TypingError> {
    let text = format!("0{whole}{more}.{decimals}0");
    let number = text
        .parse()
        .map_err(|_| TypingError::NotANumber(shortened(&text)))?;
    TypedValue::new(qualifier, number)
}

/// Usual ways to print that nothing was found. Common practice, no source.
fn is_not_detected(text: &str) -> bool {
    let plain: String = text
        .chars()
        .filter(|c| c.is_alphabetic())
        .flat_map(char::to_lowercase)
        .collect();
    let only_words = !text.contains(|c: char| c.is_ascii_digit());
    only_words
        && matches!(
            plain.as_str(),
            "nd" | "nn"
                | "bdl"
                | "bld"
                | "lod"
                | "bloq"
                | "loq"
                | "notdetected"
                | "nil"
                | "none"
                | "trace"
                | "traces"
        )
}

/// Enough of what was typed to recognise it in a sentence.
fn shortened(text: &str) -> String {
    const SHOWN: usize = 24;
    match text.char_indices().nth(SHOWN) {
        Some((end, _)) => format!("{}…", &text[..end]),
        None => text.to_owned(),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn measured(number: f64) -> TypedValue {
        TypedValue::new(Qualifier::Measured, number).unwrap()
    }

    fn below(number: f64) -> TypedValue {
        TypedValue::new(Qualifier::Below, number).unwrap()
    }

    #[test]
    fn decimal_comma_and_point_mean_the_same() {
        for (text, value) in [
            ("3,1", measured(3.1)),
            ("3.1", measured(3.1)),
            (" 12.5 ", measured(12.5)),
            ("< 0.05", below(0.05)),
            ("<0,05", below(0.05)),
            ("≤ 2", below(2.0)),
            ("0", measured(0.0)),
            (".5", measured(0.5)),
            ("7,", measured(7.0)),
            ("0,123", measured(0.123)),
            ("1.234", measured(1.234)),
            ("1,2340", measured(1.234)),
            ("1234", measured(1234.0)),
            ("1234,567", measured(1234.567)),
        ] {
            assert_eq!(parse_typed(text), Ok(value), "{text:?}");
        }
    }

    #[test]
    fn what_is_not_a_plain_number_is_refused_with_what_to_type() {
        use TypingError as E;
        for (text, error) in [
            ("", E::Empty),
            ("  ", E::Empty),
            ("n.d.", E::NotDetected),
            ("ND", E::NotDetected),
            ("<LOD", E::NotDetected),
            ("not detected", E::NotDetected),
            ("> 500", E::Above),
            ("-3", E::Negative),
            ("−3", E::Negative),
            ("< 0", E::BelowNothing),
            ("1,234.5", E::Grouped),
            ("1 234", E::Grouped),
            ("1'234", E::Grouped),
            ("1.2.3", E::Grouped),
            ("99999999999", E::TooLarge),
        ] {
            assert_eq!(parse_typed(text), Err(error), "{text:?}");
        }
        for text in [
            "abc", "NaN", "inf", "1e308", "1e3", "12 mg/L", "<", ",", "-", "٣",
        ] {
            let refused = parse_typed(text);
            assert!(
                matches!(refused, Err(E::NotANumber(_))),
                "{text:?} {refused:?}"
            );
        }
    }

    #[test]
    fn each_spelling_offered_for_an_ambiguous_number_is_accepted() {
        let Err(TypingError::ThousandsOrDecimal {
            thousands, decimal, ..
        }) = parse_typed("<1,234")
        else {
            panic!("not asked back");
        };
        assert_eq!(parse_typed(&thousands), Ok(below(1234.0)));
        assert_eq!(parse_typed(&decimal), Ok(below(1.234)));
    }

    #[test]
    fn not_a_number_and_infinity_are_refused_from_json_too() {
        for number in [f64::NAN, f64::INFINITY, f64::NEG_INFINITY, 1e308, -0.1] {
            assert!(
                TypedValue::new(Qualifier::Measured, number).is_err(),
                "{number}"
            );
        }
    }
}
