//! The record book as a table for spreadsheets: RFC 4180, one line for each value that
//! changed.
//!
//! Somebody can name a batch `=HYPERLINK(…)`. A spreadsheet would run that, so a cell
//! that begins as a formula gets an apostrophe before it ([`harmless`]). Numbers do not:
//! −0.5 stays one.

use super::Entry;
use super::differences::differences;
use crate::error::Error;
use crate::web::format;

/// Most entries of one table: more is cut off, and said so.
pub const MOST: i64 = 10_000;

/// The byte order mark: without it, spreadsheets read UTF-8 as something else.
pub const BOM: &str = "\u{feff}";

const HEADS: [&str; 12] = [
    "entry",
    "at",
    "local_time",
    "member_name",
    "action",
    "subject_kind",
    "subject_name",
    "subject_id",
    "reason",
    "value",
    "before",
    "after",
];

/// The entries as a table with heads. One that changed nothing has one line.
pub fn table(entries: &[Entry], time_zone: &str) -> Result<String, Error> {
    let failed = |error: csv::Error| Error::internal("The table could not be written", error);
    let mut table = csv::WriterBuilder::new()
        .terminator(csv::Terminator::CRLF)
        // Quoted text keeps together where a semicolon parts cells.
        .quote_style(csv::QuoteStyle::NonNumeric)
        .from_writer(Vec::new());
    table.write_record(HEADS).map_err(failed)?;
    for entry in entries {
        let mut values = differences(entry.before.as_ref(), entry.after.as_ref());
        if values.is_empty() {
            values.push(Default::default());
        }
        for (value, before, after) in &values {
            let reason = entry.reason.clone().unwrap_or_default();
            let row = [
                &entry.seq.to_string(),
                &entry.at.to_string(),
                &format::moment(entry.at, time_zone),
                &entry.member_name,
                &entry.action,
                &entry.subject_kind,
                &entry.subject_name,
                &entry.subject_id,
                &reason,
                value,
                before,
                after,
            ];
            table
                .write_record(row.map(|cell| harmless(cell)))
                .map_err(failed)?;
        }
    }
    let bytes = table
        .into_inner()
        .map_err(|error| Error::internal("The table could not be written", error.into_error()))?;
    String::from_utf8(bytes)
        .map_err(|error| Error::internal("The table could not be written", error))
}

/// A cell that no spreadsheet takes for a formula: an apostrophe goes before `=`, `+`, `-`, `@`,
/// a tab or a line break at its beginning, and before the signs among these where a
/// spreadsheet that parts cells at semicolons, tabs or lines would begin another. A
/// negative number is no formula.
pub fn harmless(cell: &str) -> String {
    if is_number(cell) {
        return cell.to_owned();
    }
    let mut result = String::with_capacity(cell.len() + 1);
    let mut previous = None;
    for character in cell.chars() {
        let begins = match previous {
            None => matches!(character, '=' | '+' | '-' | '@' | '\t' | '\r' | '\n'),
            Some(';' | '\t' | '\r' | '\n') => matches!(character, '=' | '+' | '-' | '@'),
            Some(_) => false,
        };
        if begins {
            result.push('\'');
        }
        result.push(character);
        previous = Some(character);
    }
    result
}

/// Digits, at most one minus before them, one point or comma among them, and an exponent
/// after: nothing a spreadsheet could work out.
fn is_number(cell: &str) -> bool {
    let digits = |text: &str| !text.is_empty() && text.bytes().all(|byte| byte.is_ascii_digit());
    let unsigned = cell.strip_prefix('-').unwrap_or(cell);
    let (mantissa, exponent) = match unsigned.split_once(['e', 'E']) {
        Some((mantissa, exponent)) => (mantissa, Some(exponent)),
        None => (unsigned, None),
    };
    let mantissa = match mantissa.split_once(['.', ',']) {
        Some((whole, part)) => digits(whole) && digits(part),
        None => digits(mantissa),
    };
    mantissa && exponent.is_none_or(|it| digits(it.strip_prefix(['-', '+']).unwrap_or(it)))
}

#[cfg(test)]
mod tests {
    use super::*;

    /// The characters are those of the OWASP page “CSV Injection”.
    #[test]
    fn no_cell_is_taken_for_a_formula_and_numbers_stay_numbers() {
        for (cell, written) in [
            ("=1+1", "'=1+1"),
            ("+1-2", "'+1-2"),
            ("+49 30 1234", "'+49 30 1234"),
            ("-2+3+cmd|' /C calc'!A0", "'-2+3+cmd|' /C calc'!A0"),
            ("@SUM(A1)", "'@SUM(A1)"),
            ("\t=1", "'\t'=1"),
            ("\r=1", "'\r'=1"),
            ("a;=1+1", "a;'=1+1"),
            ("two lines\n-of text", "two lines\n'-of text"),
            ("-", "'-"),
            ("-.5", "'-.5"),
            ("-1e", "'-1e"),
            ("-0.5", "-0.5"),
            ("-3,1", "-3,1"),
            ("-1.5e-7", "-1.5e-7"),
            ("42", "42"),
            ("a-b=c", "a-b=c"),
            ("", ""),
        ] {
            assert_eq!(harmless(cell), written);
        }
    }
}
