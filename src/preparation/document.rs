//! The document: outputs and their steps, read with a JSON pointer for every fault.

use std::collections::{BTreeMap, BTreeSet};
use std::fmt;

use serde::de::value::MapAccessDeserializer;
use serde::de::{MapAccess, Visitor};
use serde::{Deserialize, Deserializer, Serialize};
use serde_json::Value;
use utoipa::ToSchema;

use super::fault;
use crate::finding::Finding;
use crate::series::algebra::{Ends, Method, Over, Span, WeightYears};
use crate::series::{CurrencyCode, GrowthKind, SeriesKey};
use crate::time::Frequency;

/// A series as an operand: a key, or in a document also `{"take": key, "segment": n}`.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, ToSchema)]
pub struct InputRef {
    /// Which series.
    #[schema(value_type = String)]
    pub key: SeriesKey,
    /// Which of its segments, where it has several; the current one where absent.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub segment: Option<i32>,
}

impl fmt::Display for InputRef {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}", self.key)?;
        self.segment
            .map_or(Ok(()), |segment| write!(f, " (segment {segment})"))
    }
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct WithSegment {
    take: SeriesKey,
    segment: Option<i32>,
}

impl<'de> Deserialize<'de> for InputRef {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        struct KeyOrObject;
        impl<'de> Visitor<'de> for KeyOrObject {
            type Value = InputRef;

            fn expecting(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
                f.write_str("a series key or {\"take\": key, \"segment\": n}")
            }

            fn visit_str<E: serde::de::Error>(self, text: &str) -> Result<InputRef, E> {
                let key = text.parse().map_err(E::custom)?;
                Ok(InputRef { key, segment: None })
            }

            fn visit_map<A: MapAccess<'de>>(self, map: A) -> Result<InputRef, A::Error> {
                let WithSegment { take, segment } =
                    WithSegment::deserialize(MapAccessDeserializer::new(map))?;
                Ok(InputRef { key: take, segment })
            }
        }
        deserializer.deserialize_any(KeyOrObject)
    }
}

/// One step of an output. The table of the [module](super) says what each does.
#[derive(Clone, Debug, PartialEq, Deserialize)]
#[serde(rename_all = "snake_case", deny_unknown_fields)]
#[expect(missing_docs, reason = "fields carry the names of the table of steps")]
pub enum Step {
    /// Begins with a series.
    Take(InputRef),
    /// Adds series, to what came before or to the first named.
    Add(Vec<InputRef>),
    /// Subtracts series, from what came before or from the first named.
    Subtract(Vec<InputRef>),
    /// Multiplies by series.
    Multiply(Vec<InputRef>),
    /// Divides by series.
    Divide(Vec<InputRef>),
    /// Geometric mean of series.
    GeometricMean {
        of: Vec<InputRef>,
        #[serde(default)]
        weights: Option<Vec<f64>>,
    },
    /// One series continued by another at the first one's level.
    Link {
        target: InputRef,
        with: InputRef,
        #[serde(default)]
        over: Option<Span>,
    },
    /// Weighted growth of partners' real income.
    ForeignIncome {
        partners: Vec<IncomePartner>,
        reference: Span,
        #[serde(default = "hundred")]
        reference_value: f64,
        #[serde(default)]
        weight_years: WeightYears,
    },
    /// Home prices over foreign prices in home money; up is a real appreciation.
    RealExchangeRate {
        home_price: InputRef,
        foreign_price: InputRef,
        #[serde(default)]
        rate: Option<InputRef>,
        reference: Span,
        #[serde(default = "hundred")]
        reference_value: f64,
    },
    /// Weighted real exchange rates against partners; up is a real appreciation.
    RealEffectiveExchangeRate {
        home_price: InputRef,
        partners: Vec<PricePartner>,
        reference: Span,
        #[serde(default = "hundred")]
        reference_value: f64,
        #[serde(default)]
        weight_years: WeightYears,
    },
    /// Index to another reference.
    Rebase {
        reference: Span,
        #[serde(default = "hundred")]
        reference_value: f64,
    },
    /// Nominal money over a price index.
    Deflate { by: InputRef, reference: Span },
    /// Another currency.
    Convert {
        to: CurrencyCode,
        rates: InputRef,
        #[serde(default)]
        at: Option<Span>,
    },
    /// A lower frequency.
    Aggregate {
        to: Frequency,
        #[serde(default)]
        by: Option<Method>,
        #[serde(default)]
        min_coverage: Option<f64>,
        #[serde(default)]
        ends: Ends,
    },
    /// Growth rates.
    Growth {
        kind: GrowthKind,
        #[serde(default)]
        over: Over,
        #[serde(default)]
        annualised: bool,
    },
    /// The other sign.
    Negate {},
}

/// A partner of [`Step::ForeignIncome`].
#[derive(Clone, Debug, PartialEq, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct IncomePartner {
    /// Its real income.
    pub income: InputRef,
    /// Its annual weights.
    pub weights: InputRef,
}

/// A partner of [`Step::RealEffectiveExchangeRate`].
#[derive(Clone, Debug, PartialEq, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct PricePartner {
    /// Its price index.
    pub price: InputRef,
    /// Exchange rate between home and partner money; none where both share one.
    #[serde(default)]
    pub rate: Option<InputRef>,
    /// Its annual weights.
    pub weights: InputRef,
}

fn hundred() -> f64 {
    100.0
}

impl Step {
    /// All series that the step names.
    #[must_use]
    pub fn operands(&self) -> Vec<&InputRef> {
        match self {
            Self::Take(series) | Self::Deflate { by: series, .. } => vec![series],
            Self::Convert { rates, .. } => vec![rates],
            Self::Add(of)
            | Self::Subtract(of)
            | Self::Multiply(of)
            | Self::Divide(of)
            | Self::GeometricMean { of, .. } => of.iter().collect(),
            Self::Link { target, with, .. } => vec![target, with],
            Self::ForeignIncome { partners, .. } => partners
                .iter()
                .flat_map(|p| [&p.income, &p.weights])
                .collect(),
            Self::RealExchangeRate {
                home_price,
                foreign_price,
                rate,
                ..
            } => [home_price, foreign_price]
                .into_iter()
                .chain(rate)
                .collect(),
            Self::RealEffectiveExchangeRate {
                home_price,
                partners,
                ..
            } => std::iter::once(home_price)
                .chain(
                    partners
                        .iter()
                        .flat_map(|p| [&p.price, &p.weights].into_iter().chain(&p.rate)),
                )
                .collect(),
            Self::Rebase { .. }
            | Self::Aggregate { .. }
            | Self::Growth { .. }
            | Self::Negate {} => vec![],
        }
    }

    /// Why the step cannot stand where it does: first, or after others.
    fn misplaced(&self, first: bool) -> Option<&'static str> {
        match self {
            Self::Take(_)
            | Self::GeometricMean { .. }
            | Self::Link { .. }
            | Self::ForeignIncome { .. }
            | Self::RealExchangeRate { .. }
            | Self::RealEffectiveExchangeRate { .. } => {
                (!first).then_some("it begins an output and can only stand first")
            }
            Self::Add(of) | Self::Subtract(of) | Self::Multiply(of) | Self::Divide(of) => {
                match (first, of.len()) {
                    (true, 0 | 1) => Some("as the first step it names at least two series"),
                    (false, 0) => Some("it names at least one series"),
                    _ => None,
                }
            }
            Self::Rebase { .. }
            | Self::Deflate { .. }
            | Self::Convert { .. }
            | Self::Aggregate { .. }
            | Self::Growth { .. }
            | Self::Negate {} => first.then_some("it needs a series before it; begin with take"),
        }
    }
}

/// A preparation: outputs by key, each a list of steps.
#[derive(Clone, Debug, PartialEq)]
pub struct Document {
    title: Option<String>,
    outputs: BTreeMap<SeriesKey, Vec<Step>>,
    // Keys of the outputs, each after those on which it depends.
    order: Vec<SeriesKey>,
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
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
            Err(finding) => faults.push(finding),
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

fn parse_step(pointer: &str, value: &Value) -> Result<Step, Finding> {
    let text = value.to_string();
    let fault = |e| fault::of_json(&text, pointer, &e);
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
