//! What differs between two states of a thing: leaf by leaf, in words.

use chemistry::report::ReportingUnit;
use serde_json::Value;

/// Each value that differs: its name, as it was, as it is.
pub(super) fn differences(
    before: Option<&Value>,
    after: Option<&Value>,
) -> Vec<(String, String, String)> {
    let mut found = Vec::new();
    compare("", before, after, &mut found);
    found
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
        compare(&full, child(before, &key), child(after, &key), into);
    }
}

fn children(value: Option<&Value>) -> Vec<String> {
    match value {
        Some(Value::Object(map)) => map.keys().cloned().collect(),
        Some(Value::Array(list)) => (0..list.len()).map(|i| i.to_string()).collect(),
        _ => Vec::new(),
    }
}

fn child<'a>(value: Option<&'a Value>, key: &str) -> Option<&'a Value> {
    match value? {
        Value::Object(map) => map.get(key),
        Value::Array(list) => list.get(key.parse::<usize>().ok()?),
        _ => None,
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
