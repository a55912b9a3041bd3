//! Forms: read as the same bodies the API takes, and shown again as typed.

use axum::extract::{FromRequest, Request};
use axum::http::{StatusCode, header};
use serde::Serialize;
use serde::de::DeserializeOwned;
use serde_json::{Map, Value};

use super::queued;
use crate::error::{Error, FieldProblem};

/// A form as it was typed, with what is wrong beside each field.
#[derive(Clone, Debug, Default)]
pub struct Form {
    fields: Vec<(String, String)>,
    /// What is wrong, in the order of the fields.
    pub problems: Vec<FieldProblem>,
    /// Whether a script reads the answer.
    by_script: bool,
}

impl Form {
    /// An empty form.
    pub fn empty() -> Self {
        Self::default()
    }

    /// The form that would send this body.
    pub fn of<B: Serialize>(body: &B) -> Self {
        let mut fields = Vec::new();
        if let Ok(value) = serde_json::to_value(body) {
            flatten("", &value, &mut fields);
        }
        Self {
            fields,
            ..Self::default()
        }
    }

    /// What was typed into a field; empty when nothing was.
    pub fn value(&self, name: &str) -> &str {
        self.fields
            .iter()
            .rev()
            .find(|(field, _)| field == name)
            .map_or("", |(_, value)| value.as_str())
    }

    /// Everything that was sent under this name, in order.
    pub fn values(&self, name: &str) -> impl Iterator<Item = &str> {
        let named = self.fields.iter().filter(move |(field, _)| field == name);
        named.map(|(_, value)| value.as_str())
    }

    /// Whether a field was sent at all, even empty.
    pub fn holds(&self, name: &str) -> bool {
        self.fields.iter().any(|(field, _)| field == name)
    }

    /// What was typed into a field of a row: `row("readings", 3, "value")`.
    pub fn row(&self, list: &str, index: &usize, name: &str) -> &str {
        self.value(&format!("{list}.{index}.{name}"))
    }

    /// The version of what was shown when the form was opened.
    pub fn version(&self) -> Option<i64> {
        self.value("version").parse().ok()
    }

    /// Whether a box was ticked.
    pub fn ticked(&self, name: &str) -> bool {
        matches!(self.value(name), "on" | "true" | "yes" | "1")
    }

    /// The first problem of a field.
    pub fn problem(&self, name: &str) -> Option<&str> {
        self.problems
            .iter()
            .find(|problem| problem.field == name)
            .map(|problem| problem.message.as_str())
    }

    /// The first problem of a field of a row.
    pub fn row_problem(&self, list: &str, index: &usize, name: &str) -> Option<&str> {
        self.problem(&format!("{list}.{index}.{name}"))
    }

    /// How many rows of a list were sent.
    pub fn rows(&self, list: &str) -> usize {
        let prefix = format!("{list}.");
        self.fields
            .iter()
            .filter_map(|(field, _)| {
                // As in `listed`: a row numbered beyond that is no row.
                let index = field.strip_prefix(&prefix)?.split('.').next()?;
                index.parse::<usize>().ok().filter(|_| index.len() <= 4)
            })
            .max()
            .map_or(0, |last| last + 1)
    }

    /// Sets a field, for forms that begin with a value.
    #[must_use]
    pub fn with(mut self, name: impl Into<String>, value: impl Into<String>) -> Self {
        self.fields.push((name.into(), value.into()));
        self
    }

    /// The same form with what stood in its way, and the status to answer with. Only
    /// refusals that mending or waiting can undo come back as a form, and none does to a
    /// script that asked for JSON.
    pub fn refused(mut self, error: Error) -> Result<(StatusCode, Self), Error> {
        if self.by_script {
            return Err(error);
        }
        let (status, problems) = match error {
            Error::Invalid(problems) => (StatusCode::UNPROCESSABLE_ENTITY, problems),
            Error::Conflict(message) => (
                StatusCode::CONFLICT,
                vec![FieldProblem {
                    field: String::new(),
                    message: format!("{message}."),
                }],
            ),
            Error::TooMany { .. } => {
                let message = format!("{error}.");
                (
                    StatusCode::TOO_MANY_REQUESTS,
                    vec![FieldProblem {
                        field: String::new(),
                        message,
                    }],
                )
            }
            other => return Err(other),
        };
        self.problems = problems;
        Ok((status, self))
    }

    /// A key for the hidden field `_key`: the form is applied once however often it
    /// is sent.
    pub fn key(&self) -> String {
        uuid::Uuid::now_v7().to_string()
    }

    /// The body this form sends. Leaves are text; a body that cannot be laid out
    /// at all names the field.
    pub fn body<B: DeserializeOwned>(&self) -> Result<B, Error> {
        let tree = unflatten(&self.fields);
        serde_path_to_error::deserialize(tree).map_err(|error| {
            let path = error.path().to_string().replace('[', ".").replace(']', "");
            let path = if path == "." { String::new() } else { path };
            Error::field(path, "This could not be read. Fill it in again.")
        })
    }
}

/// One option of a list, knowing whether it is chosen.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Choice {
    /// What is sent.
    pub value: String,
    /// What is read.
    pub label: String,
    /// Whether it is chosen.
    pub selected: bool,
}

impl Choice {
    /// Options from pairs of value and label, with `chosen` marked.
    pub fn list<V: Into<String>, L: Into<String>>(
        pairs: impl IntoIterator<Item = (V, L)>,
        chosen: &str,
    ) -> Vec<Self> {
        pairs
            .into_iter()
            .map(|(value, label)| {
                let value = value.into();
                Self {
                    selected: value == chosen,
                    value,
                    label: label.into(),
                }
            })
            .collect()
    }
}

/// Most fields a form may send.
const MOST_FIELDS: usize = 2_000;

impl<S: Send + Sync> FromRequest<S> for Form {
    type Rejection = Error;

    async fn from_request(request: Request, state: &S) -> Result<Self, Error> {
        let by_script = queued::by_script(request.headers());
        let is_form = request
            .headers()
            .get(header::CONTENT_TYPE)
            .and_then(|value| value.to_str().ok())
            .is_some_and(|value| value.starts_with("application/x-www-form-urlencoded"));
        if request.method().is_safe() {
            let query = request
                .uri()
                .query()
                .unwrap_or_default()
                .as_bytes()
                .to_vec();
            return Self::read(&query);
        }
        if !is_form {
            return Err(Error::field("", "Send this as a form."));
        }
        let bytes = axum::body::Bytes::from_request(request, state)
            .await
            .map_err(|_| {
                Error::field(
                    "",
                    "The form is too large or was cut off. Send at most 1 MB.",
                )
            })?;
        Ok(Self {
            by_script,
            ..Self::read(&bytes)?
        })
    }
}

impl Form {
    fn read(bytes: &[u8]) -> Result<Self, Error> {
        let fields: Vec<(String, String)> = form_urlencoded::parse(bytes).into_owned().collect();
        if fields.len() > MOST_FIELDS {
            return Err(Error::field("", format!("At most {MOST_FIELDS} fields.")));
        }
        Ok(Self {
            fields,
            ..Self::default()
        })
    }
}

/// A text fit to stand in a query.
pub fn percent(text: &str) -> String {
    form_urlencoded::byte_serialize(text.as_bytes()).collect()
}

fn flatten(prefix: &str, value: &Value, into: &mut Vec<(String, String)>) {
    let join = |key: &str| {
        if prefix.is_empty() {
            key.to_owned()
        } else {
            format!("{prefix}.{key}")
        }
    };
    match value {
        Value::Null => {}
        Value::Object(map) => map
            .iter()
            .for_each(|(key, value)| flatten(&join(key), value, into)),
        Value::Array(list) => list
            .iter()
            .enumerate()
            .for_each(|(i, value)| flatten(&join(&i.to_string()), value, into)),
        Value::String(text) => into.push((prefix.to_owned(), text.clone())),
        // A number as people write it: 50, not 50.0.
        Value::Number(number) => {
            let text = number
                .as_f64()
                .map_or_else(|| number.to_string(), |n| n.to_string());
            into.push((prefix.to_owned(), text));
        }
        Value::Bool(yes) => into.push((prefix.to_owned(), yes.to_string())),
    }
}

/// Lays dotted names out as a tree: numbered children become a list, in order.
fn unflatten(fields: &[(String, String)]) -> Value {
    let mut root = Value::Object(Map::new());
    for (name, value) in fields {
        if name.is_empty() || name.starts_with('_') {
            continue;
        }
        let mut here = &mut root;
        for part in name.split('.').take(6) {
            if !here.is_object() {
                *here = Value::Object(Map::new());
            }
            // Just made an object: indexing adds the part where it is missing.
            here = &mut here[part];
        }
        *here = Value::String(value.clone());
    }
    listed(root)
}

fn listed(value: Value) -> Value {
    let Value::Object(map) = value else {
        return value;
    };
    let numbered = !map.is_empty()
        && map
            .keys()
            .all(|key| key.len() <= 4 && key.parse::<usize>().is_ok());
    if !numbered {
        return Value::Object(
            map.into_iter()
                .map(|(key, value)| (key, listed(value)))
                .collect(),
        );
    }
    let mut rows: Vec<(usize, Value)> = map
        .into_iter()
        .filter_map(|(key, value)| Some((key.parse().ok()?, listed(value))))
        .collect();
    rows.sort_by_key(|(index, _)| *index);
    let length = rows
        .last()
        .map_or(0, |(index, _)| index + 1)
        .min(MOST_FIELDS);
    let mut list = vec![Value::Object(Map::new()); length];
    for (index, value) in rows {
        if let Some(place) = list.get_mut(index) {
            *place = value;
        }
    }
    Value::Array(list)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn dotted_names_become_the_tree_the_api_would_send() {
        let form = Form::empty()
            .with("name", "Well")
            .with("readings.1.value", "3,1")
            .with("readings.0.value", "2");
        let body: Value = form.body().unwrap();
        assert_eq!(
            body,
            serde_json::json!({"name": "Well", "readings": [{"value": "2"}, {"value": "3,1"}]})
        );
        assert_eq!(form.rows("readings"), 2);
    }
}
