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
