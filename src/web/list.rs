//! Lists on pages: columns that sort, and pages of a long list.

use super::form::Form;

/// A column head that sorts.
#[derive(Clone, Debug)]
pub struct Column {
    /// What it says.
    pub label: &'static str,
    /// Where it leads: the same list, sorted by it.
    pub address: String,
    /// `ascending`, `descending` or `none`.
    pub direction: &'static str,
    /// `number` for figures, which stand to the right.
    pub kind: &'static str,
}

/// The order somebody asked for.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Sorted {
    /// The column, one of those offered.
    pub key: &'static str,
    /// Whether from the greatest down.
    pub descending: bool,
}

impl Sorted {
    /// Reads `?sort=` and `?order=`; the first column counts where nothing known is
    /// asked. `columns`: key, label and kind of each.
    pub fn asked(typed: &Form, columns: &[(&'static str, &'static str, &'static str)]) -> Self {
        let wanted = typed.value("sort");
        let known = columns
            .iter()
            .map(|(key, ..)| *key)
            .find(|key| *key == wanted);
        Self {
            key: known
                .or(columns.first().map(|(key, ..)| *key))
                .unwrap_or(""),
            descending: typed.value("order") == "descending",
        }
    }

    /// The address of this list in this order.
    pub fn address(self, list: &str) -> String {
        let order = if self.descending {
            "&order=descending"
        } else {
            ""
        };
        with_query(list, &format!("sort={}{order}", self.key))
    }

    /// The heads of the columns; the sorted one turns the order round.
    pub fn columns(
        self,
        list: &str,
        columns: &[(&'static str, &'static str, &'static str)],
    ) -> Vec<Column> {
        columns
            .iter()
            .map(|column| self.column(list, *column))
            .collect()
    }

    /// The head of one column.
    pub fn column(
        self,
        list: &str,
        (key, label, kind): (&'static str, &'static str, &'static str),
    ) -> Column {
        let sorted = key == self.key;
        let turned = Self {
            key,
            descending: sorted && !self.descending,
        };
        Column {
            label,
            address: turned.address(list),
            direction: match (sorted, self.descending) {
                (false, _) => "none",
                (true, false) => "ascending",
                (true, true) => "descending",
            },
            kind,
        }
    }
}

/// The neighbours of one page of a long list.
#[derive(Clone, Debug)]
pub struct Pager {
    /// The page before.
    pub earlier: Option<String>,
    /// The page after.
    pub later: Option<String>,
    /// What is shown: “41 to 60 of 212”.
    pub words: String,
}

impl Pager {
    /// The part of `all` that `?after=` asks for, at most `most` long, and the way to the
    /// others when there are any.
    pub fn cut<T>(all: Vec<T>, most: usize, typed: &Form, list: &str) -> (Vec<T>, Option<Self>) {
        let total = all.len();
        if total <= most {
            return (all, None);
        }
        let first = typed.value("after").parse().unwrap_or(0);
        let first = if first < total { first } else { 0 };
        let shown: Vec<T> = all.into_iter().skip(first).take(most).collect();
        let last = first + shown.len();
        let address = |after: usize| with_query(list, &format!("after={after}"));
        let pager = Self {
            earlier: (first > 0).then(|| address(first.saturating_sub(most))),
            later: (last < total).then(|| address(last)),
            words: format!("{} to {last} of {total}", first + 1),
        };
        (shown, Some(pager))
    }
}

fn with_query(address: &str, query: &str) -> String {
    let joint = if address.contains('?') { '&' } else { '?' };
    format!("{address}{joint}{query}")
}
