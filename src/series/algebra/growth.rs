//! Growth rates.

use serde::{Deserialize, Serialize};
use utoipa::ToSchema;

use super::AlgebraError;
use super::{defined, observation};
use crate::series::{GrowthKind, Prices, Quantity, Series, Timing, Unit};

/// Distance over which growth is measured.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Hash, Serialize, Deserialize, ToSchema)]
#[serde(rename_all = "snake_case")]
pub enum Over {
    /// From one period to the next.
    #[default]
    Period,
    /// From the same period of the year before.
    Year,
}

impl Over {
    /// Whether from one period to the next.
    #[must_use]
    pub fn is_period(&self) -> bool {
        *self == Self::Period
    }
}

/// Growth as a fraction: `ln(v_t / v_{t−s})` or `v_t / v_{t−s} − 1`, with s = 1 or the periods of a
/// year.
///
/// `annualised` states growth over one period at annual rate: log growth times n, ratio growth
/// `(v_t / v_{t−1})^n − 1`, n periods a year. The first s periods are left off. Where a value is
/// not positive there is no growth rate ([`Status::CannotExist`](crate::series::Status)).
///
/// # Errors
/// Growth rates, prices of the year before, or period-to-period growth of a year-to-date flow;
/// weeks and days over the year or annualised; annualised growth over the year.
pub fn growth(
    series: &Series,
    kind: GrowthKind,
    over: Over,
    annualised: bool,
) -> Result<Series, AlgebraError> {
    let unit = growth_unit(&series.unit, kind, over, annualised)?;
    let per_year = series.frequency().periods_per_year();
    if annualised && over == Over::Year {
        return Err(AlgebraError::Argument {
            name: "annualised",
            found: "true with growth over the year".to_owned(),
            expected: "false: growth over the year is annual already".to_owned(),
        });
    }
    let needs_year = annualised || over == Over::Year;
    let per_year = match per_year {
        None if needs_year => {
            return Err(AlgebraError::Argument {
                name: "over",
                found: format!("the year at frequency {}", series.frequency()),
                expected: "period: weeks and days have no fixed number in a year".to_owned(),
            });
        }
        n => n.unwrap_or(1),
    };
    let lag = if over == Over::Year { per_year } else { 1 };
    let power = if annualised { per_year } else { 1 };
    let Some(start) = series.start.plus(lag) else {
        return Ok(Series::with_status(unit, series.start, vec![], vec![]));
    };
    let steps = usize::try_from(lag).unwrap_or(1);
    let (values, status) = (0..series.len().saturating_sub(steps))
        .map(|n| {
            let (now, now_status) = observation(series, start, n);
            let (before, before_status) = observation(series, series.start, n);
            let ratio = if now > 0.0 && before > 0.0 {
                now / before
            } else {
                f64::NAN
            };
            let value = match kind {
                GrowthKind::Log => ratio.ln() * f64::from(power),
                GrowthKind::Ratio => ratio.powi(power) - 1.0,
            };
            defined(value, now_status.combine(before_status))
        })
        .unzip();
    Ok(Series::with_status(unit, start, values, status))
}

fn growth_unit(
    unit: &Unit,
    growth: GrowthKind,
    over: Over,
    annualised: bool,
) -> Result<Unit, AlgebraError> {
    let refuse = |reason, remedy| Err(AlgebraError::unsuitable("growth", unit, reason, remedy));
    if let Quantity::Growth { .. } = unit.quantity {
        return refuse(
            "it is a growth rate already",
            "Take growth of the level, or subtract growth rates.",
        );
    }
    if unit.prices == Prices::PreviousYear {
        return refuse(
            "neighbouring years stand in different prices",
            "Take a chained or constant-price series.",
        );
    }
    if unit.timing == Timing::FlowYearToDate && over == Over::Period {
        return refuse(
            "a flow cumulated since the year began grows within every year",
            "Measure growth over the year, or take the flow of each period.",
        );
    }
    Ok(Unit {
        quantity: Quantity::Growth {
            growth,
            over,
            annualised,
        },
        timing: Timing::Average,
        prices: Prices::None,
        adjustment: unit.adjustment.clone(),
    })
}
