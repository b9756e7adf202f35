//! From series to transformed columns on one sample.

use std::collections::BTreeMap;

use super::request::{Request, Source, Variable, too_many};
use crate::estimate::Regressor;
use crate::finding::Finding;
use crate::series::algebra::Over;
use crate::series::{Quantity, Series, SeriesKey, Status};
use crate::time::Period;

/// The variables of a request over their common sample, without gaps.
pub(super) struct Data {
    pub(super) periods: Vec<Period>,
    /// One column a variable, in the order of the request's list.
    pub(super) columns: Vec<Regressor>,
    pub(super) notices: Vec<Finding>,
}

/// Most observations of one estimation.
const MOST_OBSERVATIONS: usize = 5000;
/// Share of estimated and imputed observations that is worth a notice.
const GUESSED: f64 = 0.1;

/// Observations of a variable before its transformation.
struct Observed<'a> {
    variable: &'a Variable,
    start: i32,
    values: Vec<f64>,
}

impl Observed<'_> {
    fn at(&self, ordinal: i32) -> Option<f64> {
        let i = usize::try_from(ordinal.checked_sub(self.start)?).ok()?;
        self.values.get(i).copied().filter(|v| v.is_finite())
    }

    /// The periods that a transformed value needs, latest first.
    fn needed(&self, ordinal: i32) -> impl Iterator<Item = i32> {
        let last = ordinal - i32::from(self.variable.lag);
        let more = i32::from(self.variable.transformation.differences());
        (0..=more).map(move |i| last - i)
    }

    /// First and last period with a transformed value.
    fn span(&self) -> Option<(i32, i32)> {
        let lag = i32::from(self.variable.lag);
        let more = i32::from(self.variable.transformation.differences());
        let present = |i: &usize| self.values[*i].is_finite();
        let from = (0..self.values.len()).find(present)?;
        let to = (0..self.values.len()).rfind(present)?;
        let place = |i: usize| i32::try_from(i).ok().map(|i| self.start + i + lag);
        let (from, to) = (place(from)? + more, place(to)?);
        (from <= to).then_some((from, to))
    }
}

/// Transforms every variable over the sample that all of them cover within the request's bounds.
/// Forecasts stay out.
///
/// # Errors
/// `missing_input`, `no_common_sample`, `gap_in_sample`, `not_positive`, `too_large`, each naming series
/// and period where it has one.
pub(super) fn gather(
    request: &Request,
    inputs: &BTreeMap<SeriesKey, Series>,
) -> Result<Data, Vec<Finding>> {
    let (mut observed, mut faults, mut notices) = (Vec::new(), Vec::new(), Vec::new());
    for variable in &request.variables {
        match observe(variable, inputs) {
            Ok(one) => observed.push(one),
            Err(finding) => faults.push(*finding),
        }
    }
    if !faults.is_empty() {
        return Err(faults);
    }
    let periods = common(request, &observed, &mut notices).map_err(|f| vec![*f])?;
    let mut columns = Vec::new();
    for one in &observed {
        match column(one, &periods) {
            Ok(values) => columns.push(Regressor::new(&one.variable.name, values)),
            Err(finding) => faults.push(*finding),
        }
        notices.extend(guessed(one.variable, inputs, &periods));
        notices.extend(overlapping(one.variable, inputs));
    }
    faults.extend(request.equations.iter().filter_map(|equation| {
        let values = &columns.get(equation.dependent)?.values;
        constant(values).then(|| {
            request.variables[equation.dependent]
                .place(does_not_vary(&columns[equation.dependent].name))
        })
    }));
    if !faults.is_empty() {
        return Err(faults);
    }
    Ok(Data {
        periods,
        columns,
        notices,
    })
}

fn observe<'a>(
    variable: &'a Variable,
    inputs: &BTreeMap<SeriesKey, Series>,
) -> Result<Observed<'a>, Box<Finding>> {
    let observed = match &variable.source {
        Source::Inline(from, values) => Observed {
            variable,
            start: from.ordinal(),
            values: values.clone(),
        },
        Source::Stored(key) => {
            let series = inputs.get(key).ok_or_else(|| {
                let finding = Finding::error("missing_input", format!("There is no series {key}"))
                    .remedy("See /v1/series for what there is");
                Box::new(variable.place(finding))
            })?;
            let usable = |(value, status): (&f64, &Status)| {
                if *status == Status::Forecast {
                    f64::NAN
                } else {
                    *value
                }
            };
            Observed {
                variable,
                start: series.start.ordinal(),
                values: series
                    .values
                    .iter()
                    .zip(&series.status)
                    .map(usable)
                    .collect(),
            }
        }
    };
    if observed.span().is_none() {
        let message = format!("{} has no observation to estimate with", variable.name);
        let finding = Finding::error("no_common_sample", message);
        return Err(Box::new(variable.place(finding)));
    }
    Ok(observed)
}

/// The periods that every variable covers within the request's bounds.
fn common(
    request: &Request,
    observed: &[Observed<'_>],
    notices: &mut Vec<Finding>,
) -> Result<Vec<Period>, Box<Finding>> {
    let period = |ordinal| Period::from_ordinal(request.frequency, ordinal);
    let spans: Vec<(&Variable, Period, Period)> = observed
        .iter()
        .filter_map(|o| {
            let (from, to) = o.span()?;
            Some((o.variable, period(from)?, period(to)?))
        })
        .collect();
    let latest = spans.iter().max_by_key(|s| s.1);
    let earliest = spans.iter().min_by_key(|s| s.2);
    let (Some((late, from, _)), Some((early, _, to))) = (latest, earliest) else {
        let finding = Finding::error("no_common_sample", "There is no series");
        return Err(Box::new(finding));
    };
    let shortened = |variable: &Variable, asked: Period, got: Period, verb: &str| {
        let message = format!(
            "The sample {verb} at {got} instead of {asked}: {} has no more",
            variable.name
        );
        variable.place(Finding::notice("sample_shortened", message).at_period(got))
    };
    if let Some(asked) = request.from.filter(|asked| asked < from) {
        notices.push(shortened(late, asked, *from, "begins"));
    }
    if let Some(asked) = request.to.filter(|asked| asked > to) {
        notices.push(shortened(early, asked, *to, "ends"));
    }
    let first = request.from.map_or(*from, |asked| asked.max(*from));
    let last = request.to.map_or(*to, |asked| asked.min(*to));
    let periods: Vec<Period> = (first.ordinal()..=last.ordinal())
        .filter_map(period)
        .collect();
    if periods.len() < 2 {
        let series = format!(
            "The series have no two periods in common: {} begins at {from}, {} ends at {to}",
            late.name, early.name
        );
        let asked = |p: Option<Period>| p.map_or_else(|| "any".to_owned(), |p| p.to_string());
        let message = if from < to {
            format!(
                "The series are all there from {from} to {to}, and the sample asked for, {} to {}, leaves no two \
                 periods of that",
                asked(request.from),
                asked(request.to)
            )
        } else {
            series
        };
        let finding = Finding::error("no_common_sample", message).at_pointer("/sample");
        return Err(Box::new(finding));
    }
    if periods.len() > MOST_OBSERVATIONS {
        return Err(too_many("Observations", periods.len(), MOST_OBSERVATIONS));
    }
    Ok(periods)
}

fn column(observed: &Observed<'_>, periods: &[Period]) -> Result<Vec<f64>, Box<Finding>> {
    let variable = observed.variable;
    let mut values = Vec::new();
    for period in periods {
        let mut parts = Vec::new();
        for ordinal in observed.needed(period.ordinal()) {
            let at = Period::from_ordinal(period.frequency(), ordinal).unwrap_or(*period);
            let Some(value) = observed.at(ordinal) else {
                let message = format!(
                    "{} has no value at {at}, inside the sample {} to {}",
                    variable.name,
                    periods[0],
                    periods[periods.len() - 1]
                );
                let finding = Finding::error("gap_in_sample", message)
                    .at_period(at)
                    .remedy("Fill the gap, or bound the sample so that it lies outside");
                return Err(Box::new(variable.place(finding)));
            };
            if variable.transformation.logs() && value <= 0.0 {
                let message = format!("{} has no logarithm at {at}", variable.name);
                let finding = Finding::error("not_positive", message)
                    .at_period(at)
                    .found(value.to_string())
                    .expected("a value above 0");
                return Err(Box::new(variable.place(finding)));
            }
            parts.push(if variable.transformation.logs() {
                value.ln()
            } else {
                value
            });
        }
        values.push(match parts.as_slice() {
            [now, before] => now - before,
            _ => parts[0],
        });
    }
    Ok(values)
}

fn does_not_vary(name: &str) -> Finding {
    let message = format!("{name} does not vary over the sample; there is nothing to explain");
    Finding::error("constant_series", message)
        .remedy("Lengthen the sample, or take another variable")
}

/// Whether values differ by no more than rounding.
fn constant(values: &[f64]) -> bool {
    let largest = values.iter().fold(0.0_f64, |m, v| m.max(v.abs()));
    let first = values.first().copied().unwrap_or(0.0);
    values.iter().all(|v| (v - first).abs() <= 1e-12 * largest)
}

/// Growth over the year moves slowly: neighbouring values share all but two of their periods.
fn overlapping(variable: &Variable, inputs: &BTreeMap<SeriesKey, Series>) -> Option<Finding> {
    let series = inputs.get(variable.key()?)?;
    let year = i64::from(series.frequency().periods_per_year()?);
    let over_year = matches!(
        series.unit.quantity,
        Quantity::Growth {
            over: Over::Year,
            ..
        }
    );
    (over_year && year > 1).then(|| {
        let message = format!(
            "{} is growth over the year, so that errors are correlated over {} periods",
            variable.name,
            year - 1
        );
        let remedy = format!(
            "Estimate on growth from period to period, or with Newey-West errors of at least {} lags",
            year - 1
        );
        let finding = Finding::notice("overlapping_growth", message).remedy(remedy);
        variable.place(finding)
    })
}

/// A notice where many observations of a stored series are estimated or imputed.
fn guessed(
    variable: &Variable,
    inputs: &BTreeMap<SeriesKey, Series>,
    periods: &[Period],
) -> Option<Finding> {
    let series = inputs.get(variable.key()?)?;
    let count = periods
        .iter()
        .filter_map(|p| series.position(*p))
        .filter(|i| matches!(series.status[*i], Status::Estimated | Status::Imputed))
        .count();
    let share =
        f64::from(super::report::small(count)) / f64::from(super::report::small(periods.len()));
    (share > GUESSED).then(|| {
        let message = format!(
            "{:.0} per cent of {} are estimated or imputed",
            100.0 * share,
            variable.name
        );
        variable.place(Finding::notice("estimated_observations", message))
    })
}
