//! Steps and their operands.

use std::fmt;

use serde::de::value::MapAccessDeserializer;
use serde::de::{MapAccess, Visitor};
use serde::{Deserialize, Deserializer, Serialize};
use utoipa::ToSchema;

use crate::finding::counted;
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
        #[serde(default = "three")]
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

fn three() -> WeightYears {
    WeightYears::Three
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
    pub(super) fn misplaced(&self, first: bool) -> Option<&'static str> {
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

    /// The step in words.
    pub(super) fn words(&self) -> String {
        let list = |of: &[InputRef]| {
            of.iter()
                .map(ToString::to_string)
                .collect::<Vec<_>>()
                .join(", ")
        };
        let option = |name: &str, value: Option<String>| {
            value.map_or_else(String::new, |value| format!("{name}{value}"))
        };
        let weights = |years: &WeightYears| match years {
            WeightYears::One => "weights of the year before",
            WeightYears::Three => "mean weights of the three years before",
        };
        match self {
            Self::Take(series) => format!("take {series}"),
            Self::Add(of) => format!("add {}", list(of)),
            Self::Subtract(of) => format!("subtract {}", list(of)),
            Self::Multiply(of) => format!("multiply {}", list(of)),
            Self::Divide(of) => format!("divide {}", list(of)),
            Self::GeometricMean { of, weights } => format!(
                "geometric mean of {}{}",
                list(of),
                option(", weights ", weights.as_ref().map(|w| format!("{w:?}")))
            ),
            Self::Link { target, with, over } => format!(
                "link {with} to the level of {target} over {}",
                option(
                    "",
                    over.map(|o| o.to_string())
                        .or(Some("all common periods".to_owned()))
                )
            ),
            Self::ForeignIncome {
                partners,
                reference,
                reference_value,
                weight_years,
            } => format!(
                "foreign income of {} ({}), {}, {reference} = {reference_value}",
                counted(partners.len(), "partner"),
                partners
                    .iter()
                    .map(|p| p.income.to_string())
                    .collect::<Vec<_>>()
                    .join(", "),
                weights(weight_years)
            ),
            Self::RealExchangeRate {
                home_price,
                foreign_price,
                rate,
                reference,
                reference_value,
            } => format!(
                "real exchange rate (up: real appreciation): {home_price} over {foreign_price}{}, {reference} = {reference_value}",
                option(" at ", rate.as_ref().map(ToString::to_string))
            ),
            Self::RealEffectiveExchangeRate {
                home_price,
                partners,
                reference,
                reference_value,
                weight_years,
            } => format!(
                "real effective exchange rate (up: real appreciation): {home_price} over the prices of {} ({}), {}, {reference} = {reference_value}",
                counted(partners.len(), "partner"),
                partners
                    .iter()
                    .map(|p| p.price.to_string())
                    .collect::<Vec<_>>()
                    .join(", "),
                weights(weight_years)
            ),
            Self::Rebase {
                reference,
                reference_value,
            } => format!("rebase to {reference} = {reference_value}"),
            Self::Deflate { by, reference } => format!("deflate by {by}, prices of {reference}"),
            Self::Convert { to, rates, at } => format!(
                "convert to {to} by {rates}{}",
                option(" at the rate of ", at.map(|at| at.to_string()))
            ),
            Self::Aggregate {
                to,
                by,
                min_coverage,
                ..
            } => format!(
                "aggregate to {to}{}{}",
                option(" by ", by.map(|by| format!("{by:?}").to_lowercase())),
                option(", coverage at least ", min_coverage.map(|c| c.to_string()))
            ),
            Self::Growth {
                kind,
                over,
                annualised,
            } => format!(
                "{:?} growth over the {:?}{}",
                kind,
                over,
                if *annualised { ", at annual rate" } else { "" }
            )
            .to_lowercase(),
            Self::Negate {} => "negate".to_owned(),
        }
    }
}
