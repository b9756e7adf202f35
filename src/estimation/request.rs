//! The request: which series, which method, how.

use std::collections::BTreeSet;

use serde_json::{Map, Value};

use super::methods::{self, Method, Procedure, Takes, Terms};
use super::options::{Options, Reading};
use super::terms::Term;
use crate::document;
use crate::finding::Finding;
use crate::series::SeriesKey;
use crate::time::{Frequency, Period};

/// What to estimate, from which series, and how.
pub struct Request {
    pub(super) method: &'static Method,
    pub(super) procedure: Box<dyn Procedure>,
    pub(super) variables: Vec<Variable>,
    /// One; several for a system.
    pub(super) equations: Vec<Equation>,
    pub(super) from: Option<Period>,
    pub(super) to: Option<Period>,
    pub(super) frequency: Frequency,
    pub(super) level: f64,
}

/// Place of a variable in the request's list.
pub(super) type Id = usize;

/// An equation to estimate.
#[derive(Clone, Debug)]
pub(super) struct Equation {
    pub(super) name: String,
    pub(super) dependent: Id,
    pub(super) regressors: Vec<Id>,
    pub(super) terms: Vec<Term>,
    pub(super) pointer: String,
}

/// A series as it enters an estimation.
#[derive(Clone, Debug)]
pub(super) struct Variable {
    pub(super) pointer: String,
    pub(super) name: String,
    pub(super) source: Source,
    pub(super) transformation: Transformation,
    pub(super) lag: u16,
}

/// Where numbers come from.
#[derive(Clone, Debug)]
pub(super) enum Source {
    Stored(SeriesKey),
    /// NaN where null.
    Inline(Period, Vec<f64>),
}

/// What is done to a series first.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Transformation {
    Level,
    Log,
    Difference,
    LogDifference,
}

pub(super) const TRANSFORMATIONS: [(&str, Transformation); 4] = [
    ("level", Transformation::Level),
    ("log", Transformation::Log),
    ("difference", Transformation::Difference),
    ("log_difference", Transformation::LogDifference),
];

impl Transformation {
    pub(super) fn logs(self) -> bool {
        matches!(self, Self::Log | Self::LogDifference)
    }

    pub(super) fn differences(self) -> bool {
        matches!(self, Self::Difference | Self::LogDifference)
    }

    fn prefix(self) -> &'static str {
        match self {
            Self::Level => "",
            Self::Log => "log ",
            Self::Difference => "d.",
            Self::LogDifference => "d.log ",
        }
    }

    pub(super) fn words(self) -> &'static str {
        match self {
            Self::Level => "as it is",
            Self::Log => "natural logarithm",
            Self::Difference => "first difference",
            Self::LogDifference => "first difference of the natural logarithm",
        }
    }
}

impl Variable {
    pub(super) fn key(&self) -> Option<&SeriesKey> {
        match &self.source {
            Source::Stored(key) => Some(key),
            Source::Inline(..) => None,
        }
    }

    pub(super) fn frequency(&self) -> Frequency {
        match &self.source {
            Source::Stored(key) => key.frequency(),
            Source::Inline(from, _) => from.frequency(),
        }
    }

    /// Whether it has the numbers of another one, lag apart.
    pub(super) fn same_source(&self, other: &Self) -> bool {
        match (&self.source, &other.source) {
            (Source::Stored(a), Source::Stored(b)) => a == b,
            (Source::Inline(a, x), Source::Inline(b, y)) => {
                let bits = |v: &[f64]| v.iter().map(|v| v.to_bits()).collect::<Vec<_>>();
                a == b && bits(x) == bits(y)
            }
            (Source::Stored(_), Source::Inline(..)) | (Source::Inline(..), Source::Stored(_)) => {
                false
            }
        }
    }

    /// Whether it has the same column as another one.
    fn same_column(&self, other: &Self) -> bool {
        self.transformation == other.transformation
            && self.lag == other.lag
            && self.same_source(other)
    }

    /// A finding placed at this variable.
    pub(super) fn place(&self, finding: Finding) -> Finding {
        let name = self
            .key()
            .map_or_else(|| self.name.clone(), ToString::to_string);
        finding.at_pointer(self.pointer.clone()).at_series(name)
    }
}

impl Request {
    /// Reads a request. Every fault is a finding with a JSON pointer and what was expected there.
    ///
    /// # Errors
    /// The findings: `invalid_json`, `unknown_field` (lists the known ones), `unknown_method`,
    /// `missing_field`, `invalid_value`, `duplicate_name`, `wrong_frequency`.
    pub fn parse(text: &str) -> Result<Self, Vec<Finding>> {
        let value = document::parse(text)?;
        let mut reading = Reading::default();
        let request = reading.request(&value);
        let request = reading.reader.finish(request)?;
        let faults = request.check();
        if faults.is_empty() {
            Ok(request)
        } else {
            Err(faults)
        }
    }

    /// Every stored series that it reads, each once, in key order.
    #[must_use]
    pub fn inputs(&self) -> Vec<SeriesKey> {
        let keys: BTreeSet<&SeriesKey> = self.variables.iter().filter_map(Variable::key).collect();
        keys.into_iter().cloned().collect()
    }

    /// Name of the method.
    #[must_use]
    pub fn method(&self) -> &'static str {
        self.method.name
    }

    /// What single fields cannot show.
    fn check(&self) -> Vec<Finding> {
        let mut faults = Vec::new();
        for (i, variable) in self.variables.iter().enumerate() {
            if variable.frequency() != self.frequency {
                let message = format!(
                    "{} has frequency {}, the dependent variable {}",
                    variable.name,
                    variable.frequency(),
                    self.frequency
                );
                let finding = Finding::error("wrong_frequency", message)
                    .found(variable.frequency().to_string())
                    .expected(self.frequency.to_string())
                    .remedy("Aggregate it by a preparation first");
                faults.push(variable.place(finding));
            }
            // Equations may share a series, which then is one column of the rows.
            let systems = self.method.takes == Takes::Equations;
            let clash = |other: &Variable| {
                other.name == variable.name && !(systems && other.same_column(variable))
            };
            if self.variables[..i].iter().any(clash) {
                let message = format!("Two variables are called '{}'", variable.name);
                let finding = Finding::error("duplicate_name", message)
                    .remedy("Give one of them a name of its own");
                faults.push(variable.place(finding));
            }
        }
        for (i, equation) in self.equations.iter().enumerate() {
            if self.equations[..i].iter().any(|e| e.name == equation.name) {
                let message = format!("Two equations are called '{}'", equation.name);
                let finding = Finding::error("duplicate_name", message)
                    .at_pointer(equation.pointer.clone())
                    .remedy("Give one of them a name of its own");
                faults.push(finding);
            }
        }
        if self.variables.len() > MOST_VARIABLES {
            faults.push(*too_many("Series", self.variables.len(), MOST_VARIABLES));
        }
        for (pointer, period) in [("/sample/from", self.from), ("/sample/to", self.to)] {
            if let Some(p) = period.filter(|p| p.frequency() != self.frequency) {
                let message = format!("{p} is not of frequency {}", self.frequency);
                faults.push(Finding::error("invalid_value", message).at_pointer(pointer));
            }
        }
        faults
    }
}

impl Reading {
    fn request(&mut self, value: &Value) -> Option<Request> {
        let mut known = vec!["method", "sample", "options"];
        let Some(map) = value.as_object() else {
            self.reader.object(value, "", &known);
            return None;
        };
        let method = self.method(map)?;
        known.extend(match method.takes {
            Takes::Equations => &["equations"][..],
            Takes::Series => &["dependent"],
            Takes::Regressors | Takes::Maybe => &["dependent", "regressors"],
        });
        if method.terms != Terms::None && method.takes != Takes::Equations {
            known.push("terms");
        }
        self.reader.unknown(map, "", &known);
        let (from, to) = self.bounds(map).unzip();
        let equations = if method.takes == Takes::Equations {
            self.equations(map)
        } else {
            self.equation(map, "", method).map(|e| vec![e])
        };
        let empty = Value::Object(Map::new());
        let options = map.get("options").filter(|v| !v.is_null());
        let options = options.unwrap_or(&empty);
        let Some(options) = options.as_object() else {
            self.reader.object(options, "/options", &["level"]);
            return None;
        };
        let mut options = Options::new(self, options);
        let level = options.number(
            "level",
            0.95,
            |l| (0.5..=0.999).contains(&l),
            "0.5 to 0.999",
        );
        let procedure = (method.read)(&mut options);
        options.finish();
        let equations = equations?;
        let frequency = self.variables[equations[0].dependent].frequency();
        Some(Request {
            method,
            procedure: procedure?,
            variables: std::mem::take(&mut self.variables),
            equations,
            from: from?,
            to: to?,
            frequency,
            level: level?,
        })
    }

    fn method(&mut self, map: &Map<String, Value>) -> Option<&'static Method> {
        let name: String = self.reader.field(map, "", "method")?;
        let found = methods::METHODS.iter().find(|m| m.name == name);
        if found.is_none() {
            let names: Vec<&str> = methods::METHODS.iter().map(|m| m.name).collect();
            let message = format!("There is no method '{name}'");
            let finding = Finding::error("unknown_method", message)
                .at_pointer("/method")
                .found(name)
                .expected(format!("one of {}", names.join(", ")));
            self.reader.fault(finding);
        }
        found
    }

    fn bounds(&mut self, map: &Map<String, Value>) -> Option<(Option<Period>, Option<Period>)> {
        if map.get("sample").is_none_or(Value::is_null) {
            return Some((None, None));
        }
        let sample = self.reader.part(map, "sample", &["from", "to"])?;
        let from: Option<Option<Period>> = self.reader.field(sample, "/sample", "from");
        let to: Option<Option<Period>> = self.reader.field(sample, "/sample", "to");
        Some((from?, to?))
    }

    fn equations(&mut self, map: &Map<String, Value>) -> Option<Vec<Equation>> {
        let list: Vec<Value> = self.reader.list(map, "equations")?;
        let method = methods::METHODS
            .iter()
            .find(|m| m.takes == Takes::Equations)?;
        let mut equations = Vec::new();
        for (i, value) in list.iter().enumerate() {
            let pointer = format!("/equations/{i}");
            let known = ["name", "dependent", "regressors", "terms"];
            let read = self.reader.object(value, &pointer, &known);
            equations.push(read.and_then(|map| {
                let mut equation = self.equation(map, &pointer, method)?;
                let name: Option<String> = self.reader.field(map, &pointer, "name")?;
                equation.name = name.unwrap_or(equation.name);
                Some(equation)
            }));
        }
        equations.into_iter().collect()
    }

    fn equation(
        &mut self,
        map: &Map<String, Value>,
        base: &str,
        method: &Method,
    ) -> Option<Equation> {
        let dependent = match map.get("dependent") {
            Some(value) => self.variable(value, &format!("{base}/dependent")),
            None => {
                self.reader
                    .missing(&format!("{base}/dependent"), "dependent");
                None
            }
        };
        let pointer = format!("{base}/regressors");
        let list: Option<Option<Vec<Value>>> = self.reader.field(map, base, "regressors");
        let list = list?.unwrap_or_default();
        let ids: Vec<Option<Id>> = list
            .iter()
            .enumerate()
            .map(|(i, v)| self.variable(v, &format!("{pointer}/{i}")))
            .collect();
        if list.is_empty() && method.takes == Takes::Regressors {
            let message = format!("{} needs at least one regressor", method.title);
            self.reader.invalid(&pointer, message, "a list of series");
        }
        let terms = self.terms(map, base, method);
        let dependent = dependent?;
        Some(Equation {
            name: self.variables[dependent].name.clone(),
            dependent,
            regressors: ids.into_iter().collect::<Option<_>>()?,
            terms: terms?,
            pointer: base.to_owned(),
        })
    }

    fn terms(
        &mut self,
        map: &Map<String, Value>,
        base: &str,
        method: &Method,
    ) -> Option<Vec<Term>> {
        let given: Option<Option<Vec<String>>> = self.reader.field(map, base, "terms");
        let Some(given) = given? else {
            return Some(if method.terms == Terms::All {
                vec![Term::Constant]
            } else {
                Vec::new()
            });
        };
        let mut terms = Vec::new();
        for (i, text) in given.iter().enumerate() {
            let pointer = format!("{base}/terms/{i}");
            let term = match Term::parse(text) {
                Ok(term) => term,
                Err(finding) => {
                    self.reader.fault(finding.at_pointer(pointer));
                    continue;
                }
            };
            if method.terms == Terms::Dummies && matches!(term, Term::Constant | Term::Trend) {
                let message = format!("{} has its constant and trend by an option", method.title);
                let expected =
                    "seasonal, impulse:PERIOD, step:PERIOD; options/case or options/deterministic";
                self.reader.invalid(&pointer, message, expected);
            } else if terms.contains(&term) {
                let message = format!("'{text}' stands twice");
                self.reader.invalid(&pointer, message, "each term once");
            }
            terms.push(term);
        }
        Some(terms)
    }

    /// A variable, by key or as an object; it is added to the request's list.
    pub(super) fn variable(&mut self, value: &Value, pointer: &str) -> Option<Id> {
        let known = ["series", "name", "values", "from", "transformation", "lag"];
        let empty = Map::new();
        let map = if value.is_string() {
            &empty
        } else {
            self.reader.object(value, pointer, &known)?
        };
        let name: Option<Option<String>> = self.reader.field(map, pointer, "name");
        let lag: Option<Option<u16>> = self.reader.field(map, pointer, "lag");
        let transformation = self.transformation(map, pointer);
        let source = if value.is_string() {
            self.reader.value(value, pointer).map(Source::Stored)
        } else {
            self.source(map, pointer)
        };
        let (source, transformation, lag) = (source?, transformation?, lag?.unwrap_or(0));
        let name = name?;
        if let Some(name) = &name
            && let Err(why) = check_name(name)
        {
            let at = format!("{pointer}/name");
            let expected = "1 to 80 characters on one line, no name of a term";
            self.reader
                .invalid(&at, format!("'{name}' {why}"), expected);
            return None;
        }
        let name = match (&source, name) {
            (_, Some(name)) => name,
            (Source::Stored(key), None) => {
                let lagged = if lag == 0 {
                    String::new()
                } else {
                    format!(".L{lag}")
                };
                format!("{}{key}{lagged}", transformation.prefix())
            }
            (Source::Inline(..), None) => {
                self.reader.missing(&format!("{pointer}/name"), "name");
                return None;
            }
        };
        self.variables.push(Variable {
            pointer: pointer.to_owned(),
            name,
            source,
            transformation,
            lag,
        });
        Some(self.variables.len() - 1)
    }

    fn transformation(
        &mut self,
        map: &Map<String, Value>,
        pointer: &str,
    ) -> Option<Transformation> {
        let name: Option<String> = self.reader.field(map, pointer, "transformation")?;
        let Some(name) = name else {
            return Some(Transformation::Level);
        };
        let found = TRANSFORMATIONS.iter().find(|(n, _)| *n == name);
        if found.is_none() {
            let names = TRANSFORMATIONS.map(|(n, _)| n).join(", ");
            let message = format!("There is no transformation '{name}'");
            let at = format!("{pointer}/transformation");
            self.reader.invalid(&at, message, &names);
        }
        found.map(|(_, t)| *t)
    }

    fn source(&mut self, map: &Map<String, Value>, pointer: &str) -> Option<Source> {
        match (map.get("series"), map.get("values")) {
            (Some(key), None) => {
                if map.contains_key("from") {
                    let at = format!("{pointer}/from");
                    let message = "A stored series knows its own periods";
                    self.reader
                        .invalid(&at, message, "sample.from to bound the sample");
                }
                let at = format!("{pointer}/series");
                self.reader.value(key, &at).map(Source::Stored)
            }
            (None, Some(values)) => {
                let at = format!("{pointer}/values");
                let values: Option<Vec<Option<f64>>> = self.reader.value(values, &at);
                let from: Option<Period> = self.reader.field(map, pointer, "from");
                let values = values?.into_iter().map(|v| v.unwrap_or(f64::NAN)).collect();
                Some(Source::Inline(from?, values))
            }
            _ => {
                let message = "Numbers come from a stored series or from the request";
                let expected = "either series, or name, values and from";
                self.reader.invalid(pointer, message, expected);
                None
            }
        }
    }
}

/// Most series of a request.
const MOST_VARIABLES: usize = 50;

/// Whether a name can stand in every table: short, on one line, and not that of a term.
fn check_name(name: &str) -> Result<(), &'static str> {
    let term = ["constant", "const", "trend", "period"].contains(&name)
        || ["season ", "impulse ", "step "]
            .iter()
            .any(|t| name.starts_with(t));
    if term {
        Err("is the name of a term")
    } else if name.is_empty() || name.chars().count() > 80 || name.chars().any(char::is_control) {
        Err("does not fit a table")
    } else {
        Ok(())
    }
}

/// A finding that a document of this size cannot be estimated in reasonable time.
pub(super) fn too_many(what: &str, found: usize, most: usize) -> Box<Finding> {
    let message = format!("{what}: {found}, more than the {most} that one estimation may take");
    Box::new(
        Finding::error("too_large", message)
            .found(found.to_string())
            .expected(format!("at most {most}"))
            .remedy("Shorten the sample, aggregate to a lower frequency, or ask for less"),
    )
}

impl std::fmt::Debug for Request {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.debug_struct("Request")
            .field("method", &self.method.name)
            .field("variables", &self.variables)
            .finish_non_exhaustive()
    }
}
