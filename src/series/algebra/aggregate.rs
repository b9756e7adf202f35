//! From a higher to a lower frequency.

use serde::{Deserialize, Serialize};
use utoipa::ToSchema;

use super::{AlgebraError, extent};
use crate::series::{Quantity, RateTiming, Series, Status, Timing, Unit};
use crate::time::{Frequency, Period};

/// How the sub-periods of one period become one number.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, Serialize, Deserialize, ToSchema)]
#[serde(rename_all = "snake_case")]
pub enum Method {
    /// Total: flows.
    Sum,
    /// Arithmetic mean: flows at annual rate, indices, rates, ratios.
    Mean,
    /// Value of the first sub-period.
    First,
    /// Value of the last sub-period: stocks.
    Last,
}

/// What becomes of incomplete periods at the beginning and the end.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Hash, Serialize, Deserialize, ToSchema)]
#[serde(rename_all = "snake_case")]
pub enum Ends {
    /// They are left off.
    #[default]
    Drop,
    /// They stay, missing.
    Missing,
}

/// A period that lacked sub-periods.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Incomplete {
    /// The period of the lower frequency.
    pub period: Period,
    /// Sub-periods with a value.
    pub held: usize,
    /// Sub-periods that it has.
    pub of: usize,
}

/// What [`aggregate`] returns.
#[derive(Clone, Debug, PartialEq)]
pub struct Aggregated {
    /// The series at the lower frequency.
    pub series: Series,
    /// The method, given or by timing.
    pub method: Method,
    /// Periods at either end left off though some of their values are held.
    pub dropped: Vec<Incomplete>,
    /// Periods inside the result that are missing for want of sub-periods.
    pub missing: Vec<Incomplete>,
    /// Periods whose mean rests on fewer values than they have sub-periods.
    pub partial: Vec<Incomplete>,
}

/// Aggregates to a lower frequency.
///
/// Without `by`: flows sum; flows at annual rate, indices, ratios and average rates take the mean;
/// stocks, year-to-date flows and end-of-period rates the last value. A sum or mean needs every
/// sub-period; `min_coverage` (a fraction, means only) asks for less. `first` and `last` need that
/// one sub-period. A week counts where it begins.
///
/// # Errors
/// `to` not lower than the frequency held; growth rates; a method that means nothing for the unit (the
/// sum of an index, a stock or annual rates, one month of a flow); `min_coverage` with another method or
/// outside (0, 1]; no period complete.
pub fn aggregate(
    series: &Series,
    to: Frequency,
    by: Option<Method>,
    min_coverage: Option<f64>,
    ends: Ends,
) -> Result<Aggregated, AlgebraError> {
    if to >= series.frequency() {
        return Err(AlgebraError::Argument {
            name: "to",
            found: to.to_string(),
            expected: format!("a frequency lower than {}", series.frequency()),
        });
    }
    let method = by.unwrap_or_else(|| default_method(&series.unit));
    let unit = aggregated_unit(&series.unit, method, to)?;
    let share = match min_coverage {
        None => 1.0,
        Some(share) if method == Method::Mean && share > 0.0 && share <= 1.0 => share,
        Some(share) => {
            return Err(AlgebraError::Argument {
                name: "min_coverage",
                found: share.to_string(),
                expected: "a fraction above 0 and at most 1, for a mean".to_owned(),
            });
        }
    };
    let cells = cells(series, to, method, share);
    let present = |c: &Cell| !c.status.is_missing();
    let (Some(first), Some(last)) = (
        cells.iter().position(present),
        cells.iter().rposition(present),
    ) else {
        return Err(AlgebraError::NoCompletePeriod {
            to,
            from: series.frequency(),
            held: extent(series),
        });
    };
    let kept = match ends {
        Ends::Drop => first..=last,
        Ends::Missing => 0..=cells.len() - 1,
    };
    let lacking = |c: &Cell| c.coverage.held > 0 && c.status.is_missing();
    let picked = |range: &[Cell], pick: &dyn Fn(&Cell) -> bool| {
        range
            .iter()
            .filter(|c| pick(c))
            .map(|c| c.coverage)
            .collect::<Vec<_>>()
    };
    let inside = &cells[kept.clone()];
    let mut dropped = picked(&cells[..*kept.start()], &lacking);
    dropped.extend(picked(&cells[*kept.end() + 1..], &lacking));
    Ok(Aggregated {
        method,
        dropped,
        missing: picked(inside, &|c| c.status.is_missing()),
        partial: picked(inside, &|c| {
            method == Method::Mean && present(c) && c.coverage.held < c.coverage.of
        }),
        series: Series::with_status(
            unit,
            inside[0].coverage.period,
            inside.iter().map(|c| c.value).collect(),
            inside.iter().map(|c| c.status).collect(),
        ),
    })
}

/// One period of the lower frequency.
struct Cell {
    coverage: Incomplete,
    value: f64,
    status: Status,
}

/// All periods that the series touches, each from its own run of sub-periods.
fn cells(series: &Series, to: Frequency, method: Method, share: f64) -> Vec<Cell> {
    let mut cells: Vec<Cell> = Vec::new();
    // `value` gathers the sum, or takes the one value; a mean is divided at the end.
    for i in 0..series.len() {
        let Some(own) = series.period(i) else { break };
        let period = own.convert(to);
        if cells.last().is_none_or(|c| c.coverage.period != period) {
            let of = usize::try_from(period.count_of(series.frequency())).unwrap_or(0);
            cells.push(Cell {
                coverage: Incomplete {
                    period,
                    held: 0,
                    of,
                },
                value: 0.0,
                status: Status::Missing,
            });
        }
        let Some(cell) = cells.last_mut() else { break };
        if series.status[i].is_missing() {
            continue;
        }
        let begins = own
            .plus(-1)
            .is_none_or(|before| before.convert(to) != period);
        let closes = own.plus(1).is_none_or(|next| next.convert(to) != period);
        match method {
            Method::Sum | Method::Mean => {
                cell.value += series.values[i];
                cell.status = if cell.coverage.held == 0 {
                    Status::Normal.combine(series.status[i])
                } else {
                    cell.status.combine(series.status[i])
                };
            }
            Method::First if begins => {
                (cell.value, cell.status) = (series.values[i], series.status[i])
            }
            Method::Last if closes => {
                (cell.value, cell.status) = (series.values[i], series.status[i])
            }
            Method::First | Method::Last => {}
        }
        cell.coverage.held += 1;
    }
    // A hair less, so that 0.7 of ten is seven in floating point too.
    let needed = share * (1.0 - 1e-12);
    for cell in &mut cells {
        let Incomplete { held, of, .. } = cell.coverage;
        if method == Method::Mean {
            cell.value /= held as f64;
        }
        if matches!(method, Method::Sum | Method::Mean) && (held as f64) < needed * of as f64 {
            cell.status = Status::Missing;
        }
    }
    cells
}

fn default_method(unit: &Unit) -> Method {
    match (unit.timing, &unit.quantity) {
        (Timing::Flow, _) => Method::Sum,
        (Timing::Stock | Timing::FlowYearToDate, _)
        | (
            _,
            Quantity::Rate {
                rate_timing: RateTiming::End,
                ..
            },
        ) => Method::Last,
        (Timing::FlowAnnualRate | Timing::Average, _) => Method::Mean,
    }
}

/// The unit after aggregation; refuses methods that mean nothing for it.
fn aggregated_unit(unit: &Unit, method: Method, to: Frequency) -> Result<Unit, AlgebraError> {
    let refuse = |reason, remedy| Err(AlgebraError::unsuitable("aggregate", unit, reason, remedy));
    if let Quantity::Growth { .. } = unit.quantity {
        return refuse(
            "growth rates of its parts are not the growth of the longer period",
            "Aggregate the level, then take its growth.",
        );
    }
    let mut result = unit.clone();
    match (unit.timing, method) {
        (Timing::Flow, Method::Sum) | (Timing::Stock, Method::First | Method::Last) => {}
        (Timing::Flow, Method::Mean | Method::First | Method::Last) => {
            return refuse(
                "a flow of the longer period is the sum of its parts",
                "Aggregate by sum.",
            );
        }
        (Timing::FlowAnnualRate, Method::Sum) => {
            return refuse(
                "flows at annual rate added up count the year several times",
                "Aggregate by mean.",
            );
        }
        (Timing::Stock, Method::Sum) => {
            return refuse(
                "a stock added up means nothing",
                "Aggregate by last or mean.",
            );
        }
        (Timing::Stock, Method::Mean) => result.timing = Timing::Average,
        (Timing::FlowYearToDate, Method::Last) => {
            // At the end of the year the flow since its beginning is the flow of the year.
            if to == Frequency::Annual {
                result.timing = Timing::Flow;
            }
        }
        (Timing::FlowYearToDate, Method::Sum | Method::Mean | Method::First) => {
            return refuse(
                "only the last value of a flow cumulated since the year began stands for the period",
                "Aggregate by last.",
            );
        }
        (Timing::Average, Method::Sum) => {
            return refuse(
                "a level added up over time means nothing",
                "Aggregate by mean.",
            );
        }
        (Timing::Average | Timing::FlowAnnualRate, Method::Mean | Method::First | Method::Last) => {
        }
    }
    if let (Quantity::Rate { rate_timing, .. }, Method::Mean) = (&mut result.quantity, method) {
        *rate_timing = RateTiming::Average;
    }
    Ok(result)
}
