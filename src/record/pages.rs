//! The record book to read and print.

use askama::Template;
use askama_web::WebTemplate;
use axum::Router;
use axum::extract::State;
use axum::routing::get;
use chemistry::report::ReportingUnit;
use serde_json::Value;

use super::{Entry, operations};
use crate::db::Db;
use crate::error::Error;
use crate::web::App;
use crate::web::form::Form;
use crate::web::format;
use crate::web::layout::{Framer, Page};

/// Entries on one page.
const PAGE: i64 = 40;

/// The pages.
pub fn routes() -> Router<App> {
    Router::new().route("/record", get(show))
}

#[derive(Template, WebTemplate)]
#[template(path = "record/book.html")]
struct BookPage {
    page: Page,
    entries: Vec<Line>,
    older: Option<i64>,
    newest: bool,
}

/// One entry as it is printed.
pub struct Line {
    /// When, in the brewery's time zone.
    pub at: String,
    /// The machine's form of it.
    pub instant: String,
    /// Who.
    pub who: String,
    /// What was done to what.
    pub what: String,
    /// Why.
    pub reason: String,
    /// Each value that differs: its name, as it was, as it is.
    pub differences: Vec<(String, String, String)>,
}

impl Line {
    /// An entry in words.
    pub fn of(entry: &Entry, time_zone: &str) -> Self {
        let mut differences = Vec::new();
        compare(
            "",
            entry.before.as_ref(),
            entry.after.as_ref(),
            &mut differences,
        );
        Self {
            at: format::moment(entry.at, time_zone),
            instant: entry.at.to_string(),
            who: entry.member_name.clone(),
            what: format!(
                "{} {} “{}”",
                entry.action, entry.subject_kind, entry.subject_name
            ),
            reason: entry.reason.clone().unwrap_or_default(),
            differences,
        }
    }
}

/// Collects the leaves in which two trees differ.
fn compare(
    name: &str,
    before: Option<&Value>,
    after: Option<&Value>,
    into: &mut Vec<(String, String, String)>,
) {
    if before == after {
        return;
    }
    let children = |value: Option<&Value>| -> Vec<String> {
        match value {
            Some(Value::Object(map)) => map.keys().cloned().collect(),
            Some(Value::Array(list)) => (0..list.len()).map(|i| i.to_string()).collect(),
            _ => Vec::new(),
        }
    };
    let child = |value: Option<&'_ Value>, key: &str| -> Option<Value> {
        match value? {
            Value::Object(map) => map.get(key).cloned(),
            Value::Array(list) => list.get(key.parse::<usize>().ok()?).cloned(),
            _ => None,
        }
    };
    let mut keys = children(before);
    for key in children(after) {
        if !keys.contains(&key) {
            keys.push(key);
        }
    }
    if keys.is_empty() {
        let (was, is) = (leaf(before), leaf(after));
        if was != is {
            into.push((name.replace('_', " "), was, is));
        }
        return;
    }
    for key in keys {
        let full = match (name.is_empty(), key.parse::<usize>()) {
            (true, _) => key.clone(),
            (false, Ok(index)) => format!("{name} {}", index + 1),
            (false, Err(_)) => format!("{name}, {key}"),
        };
        compare(
            &full,
            child(before, &key).as_ref(),
            child(after, &key).as_ref(),
            into,
        );
    }
}

fn leaf(value: Option<&Value>) -> String {
    match value {
        None | Some(Value::Null) => String::new(),
        Some(Value::String(text)) => in_words(text),
        Some(Value::Bool(yes)) => if *yes { "yes" } else { "no" }.into(),
        Some(Value::Object(_) | Value::Array(_)) => String::new(),
        Some(other) => other.to_string(),
    }
}

/// Keys of units and bases as reports print them; everything else as it stands.
fn in_words(text: &str) -> String {
    ReportingUnit::from_key(text).map_or_else(|| text.to_owned(), |unit| unit.label().to_owned())
}

async fn show(State(db): State<Db>, framer: Framer, asked: Form) -> Result<BookPage, Error> {
    let page = framer.page("Record book", "record").await;
    let before = asked.value("before").parse::<i64>().ok();
    let mut entries = operations::page(&db, &framer.member, before, PAGE + 1).await?;
    let more = entries.len() > usize::try_from(PAGE).unwrap_or(usize::MAX);
    entries.truncate(usize::try_from(PAGE).unwrap_or(usize::MAX));
    Ok(BookPage {
        older: if more {
            entries.last().map(|entry| entry.seq)
        } else {
            None
        },
        newest: before.is_none(),
        entries: entries
            .iter()
            .map(|entry| Line::of(entry, &page.settings.time_zone))
            .collect(),
        page,
    })
}
