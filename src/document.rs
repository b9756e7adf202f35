//! Reading JSON documents field by field, so that every fault has its pointer and all faults are told
//! at once.
//!
//! A room reads its document in an `impl Reader` of its own and ends with [`Reader::finish`].

use serde::de::DeserializeOwned;
use serde_json::{Map, Value};

use crate::finding::Finding;

/// Reads JSON objects field by field and collects what is wrong with them.
#[derive(Default)]
pub struct Reader {
    findings: Vec<Finding>,
}

/// The JSON value of a text.
///
/// # Errors
/// `invalid_json` with its line.
pub fn parse(text: &str) -> Result<Value, Vec<Finding>> {
    serde_json::from_str(text).map_err(|e| {
        let line = u64::try_from(e.line()).unwrap_or_default();
        let message = format!("The document is not JSON: {e}");
        vec![Finding::error("invalid_json", message).at_line(line)]
    })
}

/// A name as it stands in a JSON pointer (RFC 6901).
#[must_use]
pub fn escaped(name: &str) -> String {
    name.replace('~', "~0").replace('/', "~1")
}

impl Reader {
    /// What was read, unless there was a fault.
    ///
    /// # Errors
    /// Every fault found.
    pub fn finish<T>(self, read: Option<T>) -> Result<T, Vec<Finding>> {
        match read {
            Some(read) if self.findings.is_empty() => Ok(read),
            _ => Err(self.findings),
        }
    }

    /// Notes a fault.
    pub fn fault(&mut self, finding: Finding) {
        self.findings.push(finding);
    }

    /// Notes that a value at a pointer is not what it should be.
    pub fn invalid(&mut self, pointer: &str, message: impl Into<String>, expected: &str) {
        let finding = Finding::error("invalid_value", message).at_pointer(pointer);
        self.fault(finding.expected(expected));
    }

    /// A list that holds at least one element.
    pub fn list<T: DeserializeOwned>(
        &mut self,
        map: &Map<String, Value>,
        name: &str,
    ) -> Option<Vec<T>> {
        let list: Vec<Value> = self.field(map, "", name)?;
        if list.is_empty() {
            let message = format!("{name} is empty");
            let finding = Finding::error("invalid_value", message).at_pointer(format!("/{name}"));
            self.findings.push(finding);
            return None;
        }
        let items: Vec<Option<T>> = list
            .iter()
            .enumerate()
            .map(|(i, v)| self.value(v, &format!("/{name}/{i}")))
            .collect();
        items.into_iter().collect()
    }

    /// An object inside the document.
    pub fn part<'a>(
        &mut self,
        map: &'a Map<String, Value>,
        name: &str,
        known: &[&str],
    ) -> Option<&'a Map<String, Value>> {
        let Some(value) = map.get(name) else {
            self.missing(&format!("/{name}"), name);
            return None;
        };
        self.object(value, &format!("/{name}"), known)
    }

    /// An object whose fields are among the known ones.
    pub fn object<'a>(
        &mut self,
        value: &'a Value,
        pointer: &str,
        known: &[&str],
    ) -> Option<&'a Map<String, Value>> {
        let Some(map) = value.as_object() else {
            let finding = Finding::error("invalid_value", "An object is expected here")
                .at_pointer(pointer)
                .expected(format!("an object with {}", known.join(", ")));
            self.findings.push(finding);
            return None;
        };
        self.unknown(map, pointer, known);
        Some(map)
    }

    /// Notes every field that is not among the known ones.
    pub fn unknown(&mut self, map: &Map<String, Value>, pointer: &str, known: &[&str]) {
        for name in map.keys().filter(|name| !known.contains(&name.as_str())) {
            let finding = Finding::error("unknown_field", format!("There is no field '{name}'"))
                .at_pointer(format!("{pointer}/{}", escaped(name)))
                .found(name.clone());
            self.findings.push(if known.is_empty() {
                finding.expected("no fields")
            } else {
                finding.expected(format!("one of {}", known.join(", ")))
            });
        }
    }

    /// A field; an absent one reads as null, which optional types take.
    pub fn field<T: DeserializeOwned>(
        &mut self,
        map: &Map<String, Value>,
        pointer: &str,
        name: &str,
    ) -> Option<T> {
        let pointer = format!("{pointer}/{name}");
        match map.get(name) {
            Some(value) => self.value(value, &pointer),
            None => serde_json::from_value(Value::Null).ok().or_else(|| {
                self.missing(&pointer, name);
                None
            }),
        }
    }

    /// A value of a type.
    pub fn value<T: DeserializeOwned>(&mut self, value: &Value, pointer: &str) -> Option<T> {
        match serde_json::from_value(value.clone()) {
            Ok(value) => Some(value),
            Err(error) => {
                let finding = Finding::error("invalid_value", error.to_string())
                    .at_pointer(pointer)
                    .found(value.to_string());
                self.findings.push(finding);
                None
            }
        }
    }

    /// Notes that a required field is not there.
    pub fn missing(&mut self, pointer: &str, name: &str) {
        let finding = Finding::error("missing_field", format!("The field '{name}' is required"));
        self.findings.push(finding.at_pointer(pointer));
    }
}
