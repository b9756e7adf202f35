//! The document: outputs and their steps, read with a JSON pointer for every fault.

use std::collections::{BTreeMap, BTreeSet};
use std::fmt;

use serde::de::{MapAccess, Visitor};
use serde::{Deserialize, Deserializer};
use serde_json::Value;

use super::fault;
use super::step::{InputRef, Step};
use crate::finding::Finding;
use crate::series::SeriesKey;

/// A preparation: outputs by key, each a list of steps.
#[derive(Clone, Debug, PartialEq)]
pub struct Document {
    title: Option<String>,
    outputs: BTreeMap<SeriesKey, Vec<Step>>,
    // Keys of the outputs, each after those on which it depends.
    order: Vec<SeriesKey>,
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields, expecting = "an object with outputs")]
struct Raw {
    #[serde(default)]
    title: Option<String>,
    outputs: RawOutputs,
}

/// Outputs as they come, repeated keys included (a map would keep the last silently).
struct RawOutputs(Vec<(String, Vec<Value>)>);

impl<'de> Deserialize<'de> for RawOutputs {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        struct Pairs;
        impl<'de> Visitor<'de> for Pairs {
            type Value = RawOutputs;

            fn expecting(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
                f.write_str("an object of series keys, each with a list of steps")
            }

            fn visit_map<A: MapAccess<'de>>(self, mut map: A) -> Result<RawOutputs, A::Error> {
                let mut outputs = Vec::new();
                while let Some(pair) = map.next_entry()? {
                    outputs.push(pair);
                }
                Ok(RawOutputs(outputs))
            }
        }
        deserializer.deserialize_map(Pairs)
    }
}

impl Document {
    /// Reads a document. What only the inputs' units can tell is checked by [`plan`](super::plan).
    ///
    /// # Errors
    /// All faults found, each with its JSON pointer: text that is no JSON (line and column), unknown
    /// or missing fields, keys that are none, steps out of place, outputs given twice or depending
    /// on themselves.
    pub fn parse(text: &str) -> Result<Self, Vec<Finding>> {
        if text.trim_start().starts_with('[') {
            return Err(vec![fault::not_an_object("")]);
        }
        let raw: Raw =
            serde_json::from_str(text).map_err(|e| vec![fault::of_json(text, "", &e)])?;
        let mut faults = Vec::new();
        let mut outputs = BTreeMap::new();
        for (name, steps) in raw.outputs.0 {
            let pointer = fault::output_pointer(&name);
            let steps = parse_steps(&pointer, &steps, &mut faults);
            match name.parse::<SeriesKey>() {
                Err(error) => faults.push(
                    Finding::error("invalid_key", error.to_string())
                        .at_pointer(pointer)
                        .found(name)
                        .expected(SeriesKey::PLACES.join(".")),
                ),
                Ok(key) => {
                    if outputs.insert(key, steps).is_some() {
                        faults.push(
                            Finding::error(
                                "duplicate_output",
                                format!("the output {name} is given twice"),
                            )
                            .at_pointer(pointer)
                            .remedy("Keep one of them, or give them different keys."),
                        );
                    }
                }
            }
        }
        if outputs.is_empty() && faults.is_empty() {
            faults.push(
                Finding::error("no_outputs", "a preparation has at least one output")
                    .at_pointer("/outputs"),
            );
        }
        let order = order(&outputs, &mut faults);
        if faults.is_empty() {
            Ok(Self {
                title: raw.title,
                outputs,
                order,
            })
        } else {
            Err(faults)
        }
    }

    /// The title, if any.
    #[must_use]
    pub fn title(&self) -> Option<&str> {
        self.title.as_deref()
    }

    /// Outputs in the order of evaluation: each after those on which it depends, by key otherwise.
    pub fn outputs(&self) -> impl Iterator<Item = (&SeriesKey, &[Step])> {
        self.order
            .iter()
            .filter_map(|key| Some((key, self.outputs.get(key)?.as_slice())))
    }

    /// Whether the document itself makes the series.
    #[must_use]
    pub fn makes(&self, key: &SeriesKey) -> bool {
        self.outputs.contains_key(key)
    }

    /// Series that must come from the store, sorted.
    #[must_use]
    pub fn inputs(&self) -> Vec<InputRef> {
        let named = self.outputs.values().flatten().flat_map(Step::operands);
        let stored: BTreeSet<&InputRef> = named.filter(|o| !self.makes(&o.key)).collect();
        stored.into_iter().cloned().collect()
    }
}

fn parse_steps(pointer: &str, values: &[Value], faults: &mut Vec<Finding>) -> Vec<Step> {
    if values.is_empty() {
        faults.push(
            Finding::error("no_steps", "an output has at least one step")
                .at_pointer(pointer)
                .remedy("Begin with {\"take\": key}."),
        );
    }
    let mut steps = Vec::new();
    for (i, value) in values.iter().enumerate() {
        let pointer = format!("{pointer}/{i}");
        match parse_step(&pointer, value) {
            Err(finding) => faults.push(*finding),
            Ok(step) => {
                if let Some(reason) = step.misplaced(i == 0) {
                    let name = value.as_object().and_then(|o| o.keys().next());
                    let name = name.map_or("the step", String::as_str);
                    faults.push(
                        Finding::error("misplaced_step", format!("{name}: {reason}"))
                            .at_pointer(pointer),
                    );
                }
                steps.push(step);
            }
        }
    }
    steps
}

fn parse_step(pointer: &str, value: &Value) -> Result<Step, Box<Finding>> {
    let text = value.to_string();
    let fault = |e| Box::new(fault::of_json(&text, pointer, &e));
    // The reader would take a list for the fields in their order; a document names its fields.
    if let Some((name, Value::Array(_))) = value.as_object().and_then(|o| o.iter().next())
        && !["add", "subtract", "multiply", "divide"].contains(&name.as_str())
    {
        return Err(Box::new(fault::not_an_object(&format!("{pointer}/{name}"))));
    }
    if value.get("take").is_some() && value.get("segment").is_some() {
        return serde_json::from_str(&text).map(Step::Take).map_err(fault);
    }
    serde_json::from_str(&text).map_err(fault)
}

/// Keys in an order of evaluation that does not depend on the order of the document (Kahn's
/// algorithm, smallest ready key first); faults where outputs depend on themselves.
fn order(outputs: &BTreeMap<SeriesKey, Vec<Step>>, faults: &mut Vec<Finding>) -> Vec<SeriesKey> {
    let mut waits: BTreeMap<&SeriesKey, BTreeSet<&SeriesKey>> = outputs
        .iter()
        .map(|(key, steps)| {
            let operands = steps.iter().flat_map(Step::operands).map(|o| &o.key);
            (key, operands.filter(|k| outputs.contains_key(k)).collect())
        })
        .collect();
    let mut feeds: BTreeMap<&SeriesKey, Vec<&SeriesKey>> = BTreeMap::new();
    for (key, needs) in &waits {
        for need in needs {
            feeds.entry(need).or_default().push(key);
        }
    }
    let mut ready: BTreeSet<&SeriesKey> = waits
        .iter()
        .filter(|(_, needs)| needs.is_empty())
        .map(|(key, _)| *key)
        .collect();
    let mut order = Vec::new();
    while let Some(key) = ready.pop_first() {
        waits.remove(key);
        order.push(key.clone());
        for fed in feeds.get(key).into_iter().flatten() {
            if let Some(needs) = waits.get_mut(fed) {
                needs.remove(key);
                if needs.is_empty() {
                    ready.insert(fed);
                }
            }
        }
    }
    // Whatever still waits leads into a cycle: walk along needs until a key comes back.
    while let Some((first, _)) = waits.first_key_value() {
        let mut path: Vec<&SeriesKey> = Vec::new();
        let mut at = Some(*first);
        while let Some(key) = at.filter(|key| !path.contains(key)) {
            path.push(key);
            at = waits.get(key).and_then(|needs| {
                needs
                    .iter()
                    .find(|need| waits.contains_key(**need))
                    .copied()
            });
        }
        if let Some(start) = at.and_then(|key| path.iter().position(|k| *k == key)) {
            let cycle: Vec<String> = path[start..]
                .iter()
                .chain([&path[start]])
                .map(ToString::to_string)
                .collect();
            faults.push(
                Finding::error(
                    "cycle",
                    format!("outputs depend on themselves: {}", cycle.join(" needs ")),
                )
                .at_pointer(fault::output_pointer(&cycle[0]))
                .at_series(&cycle[0])
                .remedy("Give the result another key than the series that it is made from."),
            );
        }
        for key in path {
            waits.remove(key);
        }
    }
    order
}
