//! Constant, trend and dummies by name.

use crate::estimate::Regressor;
use crate::finding::Finding;
use crate::time::Period;

/// A term that is no series.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(super) enum Term {
    Constant,
    Trend,
    Seasonal,
    Impulse(Period),
    Step(Period),
}

impl Term {
    /// `constant`, `trend`, `seasonal`, `impulse:2009`, `step:1990-Q1`.
    pub(super) fn parse(text: &str) -> Result<Self, Box<Finding>> {
        let known = "constant, trend, seasonal, impulse:PERIOD or step:PERIOD";
        match text {
            "constant" => return Ok(Self::Constant),
            "trend" => return Ok(Self::Trend),
            "seasonal" => return Ok(Self::Seasonal),
            _ => {}
        }
        let dummy = match text.split_once(':') {
            Some(("impulse", period)) => Some((Self::Impulse as fn(Period) -> Self, period)),
            Some(("step", period)) => Some((Self::Step as fn(Period) -> Self, period)),
            _ => None,
        };
        let Some((make, period)) = dummy else {
            let message = format!("There is no term '{text}'");
            let finding = Finding::error("unknown_term", message).found(text);
            return Err(Box::new(finding.expected(known)));
        };
        let period: Period = period.parse().map_err(|e: crate::time::PeriodError| {
            let finding = Finding::error("invalid_value", e.to_string()).found(text);
            Box::new(finding.expected(e.expected))
        })?;
        Ok(make(period))
    }
}

/// The columns of terms over a sample; `base` is the pointer of their equation.
///
/// # Errors
/// `outside_sample` for a dummy that would be constant, `invalid_value` for seasons of a frequency
/// that has none.
pub(super) fn columns(
    terms: &[Term],
    base: &str,
    periods: &[Period],
    centred: bool,
) -> Result<Vec<Regressor>, Box<Finding>> {
    let n = periods.len();
    let mut columns = Vec::new();
    for (i, term) in terms.iter().enumerate() {
        let pointer = format!("{base}/terms/{i}");
        let place = |period: &Period| {
            let at = periods.iter().position(|p| p == period);
            at.ok_or_else(|| {
                let message = format!("{period} does not lie in the sample");
                let (first, last) = (periods[0], periods[n - 1]);
                Box::new(
                    Finding::error("outside_sample", message)
                        .at_pointer(pointer.clone())
                        .at_period(period)
                        .expected(format!("a period from {first} to {last}")),
                )
            })
        };
        match term {
            Term::Constant => columns.push(Regressor::new("constant", vec![1.0; n])),
            Term::Trend => columns.push(Regressor::trend(n)),
            Term::Seasonal => {
                let frequency = periods[0].frequency();
                let seasons = frequency.periods_per_year().filter(|s| *s > 1);
                let Some(seasons) = seasons.and_then(|s| usize::try_from(s).ok()) else {
                    let message = format!("The frequency {frequency} has no seasons");
                    let finding = Finding::error("invalid_value", message).at_pointer(pointer);
                    return Err(Box::new(finding.expected("a frequency of S, Q or M")));
                };
                let first = usize::try_from(periods[0].ordinal()).unwrap_or(0) % seasons;
                columns.extend(Regressor::seasonal(n, seasons, first, centred));
            }
            Term::Impulse(period) => {
                let name = format!("impulse {period}");
                columns.push(Regressor::impulse(&name, n, place(period)?));
            }
            Term::Step(period) => {
                let name = format!("step {period}");
                columns.push(Regressor::step(&name, n, place(period)?));
            }
        }
    }
    Ok(columns)
}
