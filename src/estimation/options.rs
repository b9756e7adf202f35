//! Reading a method's options: every name asked for is a known one.

use std::collections::BTreeMap;

use serde::de::DeserializeOwned;
use serde_json::{Map, Value};

use super::request::{Id, Variable};
use crate::document::{Reader, escaped};
use crate::estimate::{Deterministic, Restriction};
use crate::time::Period;

/// A request while it is read.
#[derive(Default)]
pub(super) struct Reading {
    pub(super) reader: Reader,
    pub(super) variables: Vec<Variable>,
}

/// The options of a method while they are read. Absent and null take the default.
pub(super) struct Options<'a> {
    reading: &'a mut Reading,
    map: &'a Map<String, Value>,
    known: Vec<&'static str>,
}

const AT: &str = "/options";

impl<'a> Options<'a> {
    pub(super) fn new(reading: &'a mut Reading, map: &'a Map<String, Value>) -> Self {
        Self {
            reading,
            map,
            known: Vec::new(),
        }
    }

    /// Refuses options that nobody asked for.
    pub(super) fn finish(self) {
        self.reading.reader.unknown(self.map, AT, &self.known);
    }

    fn raw(&mut self, name: &'static str) -> Option<&'a Value> {
        self.known.push(name);
        self.map.get(name).filter(|v| !v.is_null())
    }

    /// Whether an option is given.
    pub(super) fn given(&self, name: &str) -> bool {
        self.map.get(name).is_some_and(|v| !v.is_null())
    }

    /// Refuses an option.
    pub(super) fn refuse(&mut self, name: &str, message: impl Into<String>, expected: &str) {
        let pointer = format!("{AT}/{name}");
        self.reading.reader.invalid(&pointer, message, expected);
    }

    /// Refuses options that another one makes meaningless.
    pub(super) fn useless(&mut self, names: &[&'static str], why: &str) {
        for name in names {
            self.known.push(name);
            if self.given(name) {
                self.refuse(
                    name,
                    format!("{name} has no use: {why}"),
                    "this option left out",
                );
            }
        }
    }

    fn typed<T: DeserializeOwned>(&mut self, name: &'static str) -> Option<Option<T>> {
        match self.raw(name) {
            None => Some(None),
            Some(value) => {
                let pointer = format!("{AT}/{name}");
                self.reading.reader.value(value, &pointer).map(Some)
            }
        }
    }

    pub(super) fn flag(&mut self, name: &'static str, default: bool) -> Option<bool> {
        Some(self.typed(name)?.unwrap_or(default))
    }

    pub(super) fn number(
        &mut self,
        name: &'static str,
        default: f64,
        valid: impl Fn(f64) -> bool,
        expected: &str,
    ) -> Option<f64> {
        let value = self.typed::<f64>(name)?.unwrap_or(default);
        if valid(value) {
            return Some(value);
        }
        self.refuse(name, format!("{name} is {value}"), expected);
        None
    }

    /// A whole number between bounds, if it is given.
    pub(super) fn maybe_count(
        &mut self,
        name: &'static str,
        least: usize,
        most: usize,
    ) -> Option<Option<usize>> {
        let value = self.typed::<usize>(name)?;
        if value.is_none_or(|v| (least..=most).contains(&v)) {
            return Some(value);
        }
        let expected = format!("a whole number from {least} to {most}");
        self.refuse(name, format!("{name} lies outside its range"), &expected);
        None
    }

    pub(super) fn count(
        &mut self,
        name: &'static str,
        default: usize,
        least: usize,
        most: usize,
    ) -> Option<usize> {
        Some(self.maybe_count(name, least, most)?.unwrap_or(default))
    }

    /// One of several names.
    pub(super) fn maybe_choice<T: Copy>(
        &mut self,
        name: &'static str,
        choices: &[(&str, T)],
    ) -> Option<Option<T>> {
        let Some(text) = self.typed::<String>(name)? else {
            return Some(None);
        };
        let found = choices.iter().find(|(n, _)| *n == text).map(|(_, v)| *v);
        if found.is_none() {
            let names: Vec<&str> = choices.iter().map(|(n, _)| *n).collect();
            let message = format!("'{text}' is no value of {name}");
            self.refuse(name, message, &format!("one of {}", names.join(", ")));
            return None;
        }
        Some(found)
    }

    /// One of several names, the first where none is given.
    pub(super) fn choice<T: Copy>(
        &mut self,
        name: &'static str,
        choices: &[(&str, T)],
    ) -> Option<T> {
        let found = self.maybe_choice(name, choices)?;
        found.or_else(|| choices.first().map(|(_, v)| *v))
    }

    /// A number, or one of several names.
    pub(super) fn number_or_choice<T: Copy>(
        &mut self,
        name: &'static str,
        choices: &[(&str, T)],
    ) -> Option<Result<f64, T>> {
        match self.map.get(name) {
            Some(Value::Number(_)) => self.typed::<f64>(name)?.map(Ok),
            _ => self.choice(name, choices).map(Err),
        }
    }

    pub(super) fn names(&mut self, name: &'static str) -> Option<Vec<String>> {
        Some(self.typed(name)?.unwrap_or_default())
    }

    /// A whole number for all, or a list of them; each at most 24.
    pub(super) fn counts(&mut self, name: &'static str) -> Option<Option<Vec<usize>>> {
        let counts = match self.map.get(name) {
            Some(Value::Number(_)) => self.typed::<usize>(name)?.map(|one| vec![one]),
            _ => self.typed::<Vec<usize>>(name)?,
        };
        if counts.iter().flatten().any(|c| *c > 24) {
            self.refuse(
                name,
                format!("{name} lies outside its range"),
                "0 to 24 each",
            );
            return None;
        }
        Some(counts)
    }

    /// A list of objects that give each name a number.
    pub(super) fn maps(&mut self, name: &'static str) -> Option<Vec<BTreeMap<String, f64>>> {
        Some(self.typed(name)?.unwrap_or_default())
    }

    pub(super) fn period(&mut self, name: &'static str) -> Option<Option<Period>> {
        self.typed(name)
    }

    /// A series, if it is given.
    pub(super) fn variable(&mut self, name: &'static str) -> Option<Option<Id>> {
        match self.raw(name) {
            None => Some(None),
            Some(value) => {
                let pointer = format!("{AT}/{name}");
                self.reading.variable(value, &pointer).map(Some)
            }
        }
    }

    /// A list of series.
    pub(super) fn variables(&mut self, name: &'static str) -> Option<Vec<Id>> {
        let list: Vec<Value> = self.typed(name)?.unwrap_or_default();
        let read: Vec<Option<Id>> = list
            .iter()
            .enumerate()
            .map(|(i, v)| self.reading.variable(v, &format!("{AT}/{name}/{i}")))
            .collect();
        read.into_iter().collect()
    }

    /// Linear restrictions: `[{"terms": {"income": 1, "price": -2}, "value": 0}]`.
    pub(super) fn restrictions(&mut self, name: &'static str) -> Option<Vec<Restriction>> {
        let list: Vec<Value> = self.typed(name)?.unwrap_or_default();
        let mut read = Vec::new();
        for (i, value) in list.iter().enumerate() {
            let pointer = format!("{AT}/{name}/{i}");
            let reader = &mut self.reading.reader;
            let map = reader.object(value, &pointer, &["terms", "value"]);
            read.push(map.and_then(|map| {
                let terms: Map<String, Value> = reader.field(map, &pointer, "terms")?;
                let sum: Option<f64> = reader.field(map, &pointer, "value")?;
                let weight = |(name, weight): (&String, &Value)| {
                    let at = format!("{pointer}/terms/{}", escaped(name));
                    let weight: f64 = reader.value(weight, &at)?;
                    Some((name.clone(), weight))
                };
                let terms: Option<Vec<(String, f64)>> = terms.iter().map(weight).collect();
                Some(Restriction {
                    terms: terms?,
                    value: sum.unwrap_or(0.0),
                })
            }));
        }
        read.into_iter().collect()
    }

    /// Deterministic terms of a test, the first of the allowed ones by default.
    pub(super) fn deterministic(&mut self, allowed: &[Deterministic]) -> Option<Deterministic> {
        let choices: Vec<(&str, Deterministic)> = allowed
            .iter()
            .map(|d| (deterministic_name(*d), *d))
            .collect();
        self.choice("deterministic", &choices)
    }
}

/// Name of deterministic terms in options.
pub(super) fn deterministic_name(deterministic: Deterministic) -> &'static str {
    match deterministic {
        Deterministic::None => "none",
        Deterministic::Constant => "constant",
        Deterministic::Trend => "trend",
        Deterministic::QuadraticTrend => "quadratic_trend",
    }
}

/// Deterministic terms in words.
pub(super) fn deterministic_words(deterministic: Deterministic) -> &'static str {
    match deterministic {
        Deterministic::None => "no deterministic term",
        Deterministic::Constant => "a constant",
        Deterministic::Trend => "a constant and a linear trend",
        Deterministic::QuadraticTrend => "a constant, a linear and a quadratic trend",
    }
}
