//! The description of the API, and whether an answer is as it says: as much of JSON
//! Schema as the description uses.

use serde_json::{Map, Value, json};

use crate::desk::{Answer, Desk};

/// The description that a server gives of itself.
pub struct Description(Value);

/// One method at one address.
pub struct Operation {
    pub method: String,
    pub path: String,
    /// Whether it takes JSON; a file is none.
    pub takes_body: bool,
}

impl Description {
    pub async fn of(desk: &Desk) -> Self {
        let answer = reqwest::get(format!("{}/api/openapi.json", desk.address)).await;
        Self(answer.unwrap().json().await.unwrap())
    }

    pub fn operations(&self) -> Vec<Operation> {
        let mut operations = Vec::new();
        for (path, item) in self.0["paths"].as_object().unwrap() {
            for (method, operation) in item.as_object().unwrap() {
                operations.push(Operation {
                    method: method.to_uppercase(),
                    path: path.clone(),
                    takes_body: operation["requestBody"]["content"]
                        .get("application/json")
                        .is_some(),
                });
            }
        }
        operations
    }

    /// Where this answer is not what the description says of the operation.
    pub fn departures(&self, operation: &Operation, answer: &Answer) -> Vec<String> {
        let told = &self.0["paths"][&operation.path][operation.method.to_lowercase()]["responses"];
        let Some(response) = told.get(answer.status.to_string()) else {
            return vec![format!("{} is not told: {}", answer.status, answer.body)];
        };
        let Some(content) = response["content"].as_object() else {
            return Vec::new();
        };
        let kind = answer.kind.as_deref().unwrap_or_default();
        let Some(media) = content.get(kind) else {
            return vec![format!("{} came as “{kind}”", answer.status)];
        };
        let mut departures = Vec::new();
        self.check(&media["schema"], &answer.body, "", &mut departures);
        departures
    }

    /// Whether a pointer leads to a place in the body that the operation takes.
    pub fn tells_of(&self, operation: &Operation, pointer: &str) -> bool {
        let told = &self.0["paths"][&operation.path][operation.method.to_lowercase()];
        let body = &told["requestBody"]["content"]["application/json"]["schema"];
        let mut parts = pointer.split('/').skip(1);
        parts
            .try_fold(body.clone(), |schema, part| self.part(&schema, part))
            .is_some()
    }

    fn part(&self, schema: &Value, part: &str) -> Option<Value> {
        let schema = self.resolved(schema);
        if let Some(choices) = schema["oneOf"].as_array() {
            return choices.iter().find_map(|choice| self.part(choice, part));
        }
        if part.parse::<usize>().is_ok() && schema.get("items").is_some() {
            return schema.get("items").cloned();
        }
        let mut known = (Map::new(), Vec::new());
        self.properties(schema, &mut known);
        let any = schema.get("additionalProperties");
        known.0.get(part).or(any).cloned()
    }

    fn resolved<'a>(&'a self, schema: &'a Value) -> &'a Value {
        match schema["$ref"].as_str() {
            Some(place) => self.0.pointer(place.trim_start_matches('#')).unwrap(),
            None => schema,
        }
    }

    /// Everything an object may hold, and what it must, through `allOf`.
    fn properties<'a>(&'a self, schema: &'a Value, into: &mut (Map<String, Value>, Vec<&'a str>)) {
        let schema = self.resolved(schema);
        for part in schema["allOf"].as_array().into_iter().flatten() {
            self.properties(part, into);
        }
        if let Some(properties) = schema["properties"].as_object() {
            into.0.extend(properties.clone());
        }
        let required = schema["required"].as_array().into_iter().flatten();
        into.1.extend(required.filter_map(Value::as_str));
    }

    fn check(&self, schema: &Value, value: &Value, at: &str, into: &mut Vec<String>) {
        let schema = self.resolved(schema);
        if let Some(choices) = schema["oneOf"].as_array() {
            let fitting = choices.iter().filter(|choice| {
                let mut departures = Vec::new();
                self.check(choice, value, at, &mut departures);
                departures.is_empty()
            });
            if fitting.count() != 1 {
                into.push(format!("{at} is not one of its choices: {value}"));
            }
            return;
        }
        let kind = match value {
            Value::Null => "null",
            Value::Bool(_) => "boolean",
            Value::Number(number) if number.is_f64() => "number",
            Value::Number(_) => "integer",
            Value::String(_) => "string",
            Value::Array(_) => "array",
            Value::Object(_) => "object",
        };
        let wanted = match &schema["type"] {
            Value::Array(kinds) => kinds.clone(),
            Value::Null => vec![],
            one => vec![one.clone()],
        };
        let fits = wanted.iter().any(|wanted| {
            *wanted == json!(kind) || (*wanted == json!("number") && kind == "integer")
        });
        if !wanted.is_empty() && !fits {
            into.push(format!("{at} is a {kind}, not {wanted:?}"));
            return;
        }
        let choices = schema["enum"].as_array();
        if choices.is_some_and(|choices| !choices.contains(value)) {
            into.push(format!("{at} is {value}, none of its choices"));
        }
        if let Some(list) = value.as_array() {
            for (index, item) in list.iter().enumerate() {
                self.check(&schema["items"], item, &format!("{at}/{index}"), into);
            }
        }
        if let Some(object) = value.as_object() {
            let mut known = (Map::new(), Vec::new());
            self.properties(schema, &mut known);
            let (properties, required) = known;
            let free = properties.is_empty() && schema.get("additionalProperties").is_none();
            for name in required.iter().filter(|name| !object.contains_key(**name)) {
                into.push(format!("{at} lacks {name}"));
            }
            for (name, item) in object {
                let at = format!("{at}/{name}");
                match properties.get(name) {
                    Some(schema) => self.check(schema, item, &at, into),
                    None if schema.get("additionalProperties").is_some() => {
                        self.check(&schema["additionalProperties"], item, &at, into);
                    }
                    None if free => {}
                    None => into.push(format!("{at} is not told")),
                }
            }
        }
    }
}
