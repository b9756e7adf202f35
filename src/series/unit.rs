//! Units: what the numbers of a series are. Every operation of the algebra checks them.

use std::fmt;

use serde::{Deserialize, Serialize};
use utoipa::ToSchema;

use super::CurrencyCode;
use super::algebra::Over;

/// What the numbers of a series are. Two vintages with different units never merge: the second
/// opens a segment.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct Unit {
    /// Money, index, rate, ratio, quantity or count.
    #[serde(flatten)]
    pub quantity: Quantity,
    /// Flow, stock or average.
    pub timing: Timing,
    /// Price basis.
    #[serde(default, skip_serializing_if = "Prices::is_none")]
    pub prices: Prices,
    /// Raw or seasonally adjusted.
    #[serde(default, skip_serializing_if = "Adjustment::is_raw")]
    pub adjustment: Adjustment,
}

/// What is counted.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
#[serde(tag = "quantity", rename_all = "snake_case")]
pub enum Quantity {
    /// Money in whole units of a currency (not thousands or millions).
    Money {
        /// ISO 4217 or declared code.
        #[schema(value_type = String)]
        currency: CurrencyCode,
    },
    /// An index number.
    Index {
        /// Currency of the prices measured, where they are prices.
        #[schema(value_type = Option<String>)]
        #[serde(default, skip_serializing_if = "Option::is_none")]
        currency: Option<CurrencyCode>,
        /// What the index measures.
        kind: IndexKind,
        /// Year of the weights, where stated.
        #[serde(default, skip_serializing_if = "Option::is_none")]
        weights_year: Option<i32>,
        /// Reference period, such as `2015` or `2015-Q1`; unknown where absent.
        #[serde(default, skip_serializing_if = "Option::is_none")]
        reference: Option<String>,
        /// Value in the reference period: 100 unless stated.
        reference_value: f64,
    },
    /// A price of one currency in another: `numerator` per unit of `denominator`.
    Rate {
        /// The currency in which the price is expressed.
        #[schema(value_type = String)]
        numerator: CurrencyCode,
        /// The currency that is priced.
        #[schema(value_type = String)]
        denominator: CurrencyCode,
        /// Market.
        rate_type: RateType,
        /// Average over or value at the end of the period.
        rate_timing: RateTiming,
    },
    /// A pure number: a share, a weight, a ratio of two amounts.
    Ratio,
    /// A growth rate, as a fraction (0.02 for two per cent or two log points).
    Growth {
        /// `log` for differences of logarithms, `ratio` for relative changes.
        growth: GrowthKind,
        /// Distance over which it is measured: `period` unless stated.
        #[serde(default, skip_serializing_if = "Over::is_period")]
        over: Over,
        /// Whether growth over one period is stated at annual rate.
        #[serde(default, skip_serializing_if = "std::ops::Not::not")]
        annualised: bool,
    },
    /// A physical quantity.
    Physical {
        /// Unit of measurement, such as `tonne`.
        physical_unit: String,
    },
    /// A count of persons or things.
    Count,
}

/// What an index measures.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, Serialize, Deserialize, ToSchema)]
#[serde(rename_all = "snake_case")]
pub enum IndexKind {
    /// Prices.
    Price,
    /// Unit values (value over quantity), a stand-in for prices.
    UnitValue,
    /// Volumes.
    Volume,
    /// Values.
    Value,
    /// A real or nominal exchange rate, or relative price, as an index.
    ExchangeRate,
}

/// Kinds of growth.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, Serialize, Deserialize, ToSchema)]
#[serde(rename_all = "snake_case")]
pub enum GrowthKind {
    /// Difference of natural logarithms.
    Log,
    /// Relative change: this value over the one before, less one.
    Ratio,
}

/// Market of an exchange rate.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Hash, Serialize, Deserialize, ToSchema)]
#[serde(rename_all = "snake_case")]
pub enum RateType {
    /// Official or reference rate.
    #[default]
    Official,
    /// Rate at which banks deal with customers.
    Commercial,
    /// Rate of an unofficial market.
    Parallel,
    /// Weighted by transactions.
    TransactionWeighted,
}

/// Which moment of the period an exchange rate stands for.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Hash, Serialize, Deserialize, ToSchema)]
#[serde(rename_all = "snake_case")]
pub enum RateTiming {
    /// Mean over the period.
    #[default]
    Average,
    /// Value at its end.
    End,
}

/// How numbers relate to the length of their period.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, Serialize, Deserialize, ToSchema)]
#[serde(rename_all = "snake_case")]
pub enum Timing {
    /// An amount per period: sums over time.
    Flow,
    /// A flow stated at annual rate: averages over time.
    FlowAnnualRate,
    /// A flow cumulated since the year began.
    FlowYearToDate,
    /// An amount at a moment: the last counts.
    Stock,
    /// A level over the period (indices, rates, ratios): averages over time.
    Average,
}

/// Price basis of money and volume measures.
#[derive(Clone, Debug, Default, PartialEq, Eq, Hash, Serialize, Deserialize, ToSchema)]
#[serde(tag = "basis", rename_all = "snake_case")]
pub enum Prices {
    /// Does not apply (indices, rates, ratios).
    #[default]
    None,
    /// Prices of the period itself: nominal.
    Current,
    /// Prices of one fixed period.
    Constant {
        /// The price reference period, such as `2015`.
        #[serde(default, skip_serializing_if = "Option::is_none")]
        price_reference: Option<String>,
    },
    /// Chain-linked volumes in prices of a reference period; not additive.
    Chained {
        /// The reference period.
        #[serde(default, skip_serializing_if = "Option::is_none")]
        price_reference: Option<String>,
    },
    /// Prices of the year before.
    PreviousYear,
    /// Divided by a price index here: "deflated by …", which is constant-price only with a Paasche
    /// deflator.
    Deflated {
        /// Key of the deflator.
        deflator: String,
        /// The period in whose prices the result stands.
        price_reference: String,
    },
}

impl Prices {
    /// Whether no price basis applies.
    #[must_use]
    pub fn is_none(&self) -> bool {
        *self == Self::None
    }
}

/// Seasonal adjustment.
#[derive(Clone, Debug, Default, PartialEq, Eq, Hash, Serialize, Deserialize, ToSchema)]
#[serde(rename_all = "snake_case")]
pub enum Adjustment {
    /// As observed.
    #[default]
    Raw,
    /// Seasonally adjusted by the source or by the named party.
    SeasonallyAdjusted(String),
}

impl Adjustment {
    /// Whether not adjusted.
    #[must_use]
    pub fn is_raw(&self) -> bool {
        *self == Self::Raw
    }
}

impl Unit {
    /// Money per period at current prices.
    #[must_use]
    pub fn money_flow(currency: CurrencyCode) -> Self {
        Self {
            quantity: Quantity::Money { currency },
            timing: Timing::Flow,
            prices: Prices::Current,
            adjustment: Adjustment::Raw,
        }
    }

    /// A pure number, averaged over time.
    #[must_use]
    pub fn ratio() -> Self {
        Self {
            quantity: Quantity::Ratio,
            timing: Timing::Average,
            prices: Prices::None,
            adjustment: Adjustment::Raw,
        }
    }
}

impl fmt::Display for Unit {
    /// A phrase for messages and tables, such as `XAD, flow, current prices`.
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match &self.quantity {
            Quantity::Money { currency } => write!(f, "{currency}")?,
            Quantity::Index {
                currency,
                kind,
                reference,
                reference_value,
                ..
            } => {
                match kind {
                    IndexKind::Price => write!(f, "price index")?,
                    IndexKind::UnitValue => write!(f, "unit value index")?,
                    IndexKind::Volume => write!(f, "volume index")?,
                    IndexKind::Value => write!(f, "value index")?,
                    IndexKind::ExchangeRate => write!(f, "relative price index")?,
                }
                if let Some(reference) = reference {
                    write!(f, ", {reference} = {reference_value}")?;
                }
                if let Some(currency) = currency {
                    write!(f, ", of prices in {currency}")?;
                }
            }
            Quantity::Rate {
                numerator,
                denominator,
                ..
            } => write!(f, "{numerator} per {denominator}")?,
            Quantity::Ratio => write!(f, "ratio")?,
            Quantity::Growth {
                growth,
                over,
                annualised,
            } => {
                match growth {
                    GrowthKind::Log => write!(f, "log growth")?,
                    GrowthKind::Ratio => write!(f, "growth rate")?,
                }
                if *over == Over::Year {
                    write!(f, " over the year")?;
                }
                if *annualised {
                    write!(f, " at annual rate")?;
                }
            }
            Quantity::Physical { physical_unit } => write!(f, "{physical_unit}")?,
            Quantity::Count => write!(f, "count")?,
        }
        match self.timing {
            Timing::Flow => write!(f, ", flow")?,
            Timing::FlowAnnualRate => write!(f, ", flow at annual rate")?,
            Timing::FlowYearToDate => write!(f, ", year-to-date flow")?,
            Timing::Stock => write!(f, ", stock")?,
            Timing::Average => {}
        }
        let reference =
            |r: &Option<String>| r.clone().unwrap_or_else(|| "an unstated period".into());
        match &self.prices {
            Prices::None => {}
            Prices::Current => write!(f, ", current prices")?,
            Prices::Constant { price_reference } => {
                write!(f, ", constant prices of {}", reference(price_reference))?;
            }
            Prices::Chained { price_reference } => {
                write!(
                    f,
                    ", chained volumes in prices of {}",
                    reference(price_reference)
                )?;
            }
            Prices::PreviousYear => write!(f, ", prices of the previous year")?,
            Prices::Deflated {
                deflator,
                price_reference,
            } => write!(f, ", deflated by {deflator}, prices of {price_reference}")?,
        }
        match &self.adjustment {
            Adjustment::Raw => Ok(()),
            Adjustment::SeasonallyAdjusted(by) => write!(f, ", seasonally adjusted by {by}"),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Units stored before growth told its distance are read as growth over one period.
    #[test]
    fn growth_tells_its_distance_and_may_leave_it_out() {
        let plain = r#"{"quantity":"growth","growth":"log","timing":"average"}"#;
        let unit: Unit = serde_json::from_str(plain).unwrap();
        assert_eq!(unit.to_string(), "log growth");
        assert_eq!(serde_json::to_string(&unit).unwrap(), plain);
        let yearly = plain.replace("\"log\"", "\"ratio\",\"over\":\"year\"");
        let unit: Unit = serde_json::from_str(&yearly).unwrap();
        assert_eq!(unit.to_string(), "growth rate over the year");
        assert_eq!(serde_json::to_string(&unit).unwrap(), yearly);
    }
}
