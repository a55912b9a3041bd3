//! Reading the reference tables, and comparing with them.

use std::collections::HashMap;

/// A row of a table, by column.
pub(crate) type Row = HashMap<String, String>;

pub(crate) fn rows(text: &str) -> Vec<Row> {
    csv::Reader::from_reader(text.as_bytes())
        .deserialize()
        .map(Result::unwrap)
        .collect()
}

pub(crate) fn number(row: &Row, column: &str) -> f64 {
    row[column].parse().unwrap()
}

/// How closely two figures must agree.
#[derive(Clone, Copy)]
pub(crate) struct Within {
    /// Relative to the reference.
    pub(crate) relative: f64,
    /// A smaller reference counts as this large.
    pub(crate) least: f64,
}

impl Within {
    #[track_caller]
    pub(crate) fn check(self, ours: f64, reference: f64) {
        let deviation = (ours - reference).abs() / reference.abs().max(self.least);
        assert!(
            deviation < self.relative,
            "{ours} against {reference}: {deviation:e}"
        );
    }
}
