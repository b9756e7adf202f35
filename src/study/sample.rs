//! From series to logs on one sample.

use std::collections::BTreeMap;

use super::document::{Document, Kind, Role};
use crate::finding::{Finding, Severity};
use crate::series::{IndexKind, Prices, Quantity, Series, SeriesKey, Status, Timing};
use crate::time::Period;

/// Logs of every input over the common sample, without gaps.
pub(super) struct Logs {
    pub(super) periods: Vec<Period>,
    by_key: BTreeMap<SeriesKey, Vec<f64>>,
    /// Share of estimated and imputed observations, by series.
    guessed: BTreeMap<SeriesKey, f64>,
    pub(super) notices: Vec<Finding>,
}

impl Logs {
    /// Logs of one input; empty for a series that is none.
    pub(super) fn of(&self, key: &SeriesKey) -> &[f64] {
        self.by_key.get(key).map_or(&[], Vec::as_slice)
    }

    /// Mean log growth a period of one input over the sample.
    pub(super) fn mean_growth(&self, key: &SeriesKey) -> f64 {
        let changes: Vec<f64> = self.of(key).windows(2).map(|w| w[1] - w[0]).collect();
        let count = u32::try_from(changes.len()).unwrap_or(u32::MAX);
        changes.iter().sum::<f64>() / f64::from(count)
    }

    /// Share of an input's observations that are estimated or imputed.
    pub(super) fn guessed(&self, key: &SeriesKey) -> f64 {
        self.guessed.get(key).copied().unwrap_or(0.0)
    }
}

/// Takes the logs of every input over the sample that all of them cover within the document's
/// bounds. Forecasts stay out.
///
/// # Errors
/// `missing_input`, `wrong_frequency`, `wrong_unit`, `no_common_sample`, `gap_in_sample` and
/// `not_positive`, each naming series and period where it has one.
pub(super) fn gather(
    document: &Document,
    inputs: &BTreeMap<SeriesKey, Series>,
) -> Result<Logs, Vec<Finding>> {
    let (mut faults, mut notices) = (Vec::new(), Vec::new());
    let mut spans: BTreeMap<&SeriesKey, (&Series, Period, Period)> = BTreeMap::new();
    for role in document.roles() {
        let place = |f: Finding| f.at_series(role.key).at_pointer(role.pointer.clone());
        let Some(series) = inputs.get(role.key) else {
            let message = format!("There is no series {}", role.key);
            faults.push(place(Finding::error("missing_input", message)));
            continue;
        };
        if series.frequency() != document.frequency {
            let message = format!(
                "{} does not have frequency {}",
                role.key, document.frequency
            );
            let found = series.frequency().to_string();
            faults.push(place(
                Finding::error("wrong_frequency", message).found(found),
            ));
            continue;
        }
        match check_unit(&role, series).map(place) {
            Some(fault) if fault.severity == Severity::Error => faults.push(fault),
            // A series may stand in several roles; one notice is enough.
            Some(notice) if !spans.contains_key(role.key) => notices.push(notice),
            Some(_) | None => {}
        }
        if spans.contains_key(role.key) {
            continue;
        }
        let used: Vec<usize> = (0..series.len()).filter(|i| usable(series, *i)).collect();
        let ends = (used.first(), used.last());
        let (Some(from), Some(to)) = (
            ends.0.and_then(|i| series.period(*i)),
            ends.1.and_then(|i| series.period(*i)),
        ) else {
            let message = format!("{} has no observation to estimate with", role.key);
            faults.push(place(Finding::error("no_common_sample", message)));
            continue;
        };
        spans.insert(role.key, (series, from, to));
    }
    if !faults.is_empty() {
        return Err(faults);
    }
    notices.extend(filtered(document, &spans));
    let periods = common_periods(document, &spans, &mut notices).map_err(|f| vec![*f])?;
    let mut by_key = BTreeMap::new();
    let mut guessed = BTreeMap::new();
    for (key, (series, ..)) in &spans {
        match logs(key, series, &periods) {
            Ok(values) => by_key.insert((*key).clone(), values),
            Err(finding) => {
                faults.push(*finding);
                continue;
            }
        };
        guessed.insert((*key).clone(), guessed_share(series, &periods));
    }
    if faults.is_empty() {
        Ok(Logs {
            periods,
            by_key,
            guessed,
            notices,
        })
    } else {
        Err(faults)
    }
}

fn usable(series: &Series, i: usize) -> bool {
    series.values[i].is_finite() && series.status[i] != Status::Forecast
}

/// A notice of seasonally adjusted series: the filter reaches over years.
fn filtered(
    document: &Document,
    spans: &BTreeMap<&SeriesKey, (&Series, Period, Period)>,
) -> Option<Finding> {
    let adjusted = |(_, (series, ..)): &(&&SeriesKey, &(&Series, Period, Period))| {
        !series.unit.adjustment.is_raw()
    };
    let keys: Vec<String> = spans
        .iter()
        .filter(adjusted)
        .map(|(key, _)| key.to_string())
        .collect();
    let yearly = document.frequency.periods_per_year() == Some(1);
    (!yearly && !keys.is_empty()).then(|| {
        let message = format!(
            "Seasonally adjusted: {}. The filter reaches over years, which moves lags, unit-root tests and tests of a \
             level relation",
            keys.join(", ")
        );
        Finding::notice("filtered_series", message)
    })
}

/// The periods that every series covers within the document's bounds.
fn common_periods(
    document: &Document,
    spans: &BTreeMap<&SeriesKey, (&Series, Period, Period)>,
    notices: &mut Vec<Finding>,
) -> Result<Vec<Period>, Box<Finding>> {
    let latest = spans.iter().max_by_key(|(_, s)| s.1);
    let earliest = spans.iter().min_by_key(|(_, s)| s.2);
    let (Some((late, (_, from, _))), Some((early, (_, _, to)))) = (latest, earliest) else {
        return Err(Box::new(Finding::error(
            "no_common_sample",
            "There is no series",
        )));
    };
    let shorten = |key: &SeriesKey, asked: Period, got: Period, verb: &str| {
        let message = format!("The sample {verb} at {got} instead of {asked}: {key} has no more");
        Finding::notice("sample_shortened", message)
            .at_series(key)
            .at_period(got)
    };
    if let Some(asked) = document.sample.from.filter(|asked| asked < from) {
        notices.push(shorten(late, asked, *from, "begins"));
    }
    if let Some(asked) = document.sample.to.filter(|asked| asked > to) {
        notices.push(shorten(early, asked, *to, "ends"));
    }
    let first = document.sample.from.map_or(*from, |asked| asked.max(*from));
    let last = document.sample.to.map_or(*to, |asked| asked.min(*to));
    let periods: Vec<Period> = (first.ordinal()..=last.ordinal())
        .filter_map(|ordinal| Period::from_ordinal(document.frequency, ordinal))
        .collect();
    if periods.len() < 2 {
        let series = format!(
            "The series have no two periods in common: {late} begins at {from}, {early} ends at {to}"
        );
        let asked = |p: Option<Period>| p.map_or_else(|| "any".to_owned(), |p| p.to_string());
        let message = if from < to {
            format!(
                "The series are all there from {from} to {to}, and the sample asked for, {} to {}, leaves no two \
                 periods of that",
                asked(document.sample.from),
                asked(document.sample.to)
            )
        } else {
            series
        };
        return Err(Box::new(
            Finding::error("no_common_sample", message).at_pointer("/sample"),
        ));
    }
    Ok(periods)
}

fn logs(key: &SeriesKey, series: &Series, periods: &[Period]) -> Result<Vec<f64>, Box<Finding>> {
    let at = |p: &Period| series.position(*p).filter(|i| usable(series, *i));
    let gaps: Vec<&Period> = periods.iter().filter(|p| at(p).is_none()).collect();
    if let Some(first) = gaps.first() {
        let message = format!(
            "{key} lacks {} of the {} periods of the sample, first {first}",
            gaps.len(),
            periods.len()
        );
        let finding = Finding::error("gap_in_sample", message)
            .at_series(key)
            .at_period(first)
            .remedy("Fill the gap, or bound the sample so that it lies outside");
        return Err(Box::new(finding));
    }
    let values: Vec<f64> = periods
        .iter()
        .filter_map(|p| at(p).map(|i| series.values[i]))
        .collect();
    if let Some(i) = values.iter().position(|v| *v <= 0.0) {
        let message = format!(
            "{key} is not positive at {}: it has no logarithm",
            periods[i]
        );
        let finding = Finding::error("not_positive", message)
            .at_series(key)
            .at_period(periods[i])
            .found(values[i].to_string())
            .expected("a value above 0");
        return Err(Box::new(finding));
    }
    Ok(values.into_iter().map(f64::ln).collect())
}

fn guessed_share(series: &Series, periods: &[Period]) -> f64 {
    let guessed = |p: &&Period| {
        let status = series.position(**p).map(|i| series.status[i]);
        matches!(status, Some(Status::Estimated | Status::Imputed))
    };
    share(periods.iter().filter(guessed).count(), periods.len())
}

#[expect(clippy::cast_precision_loss, reason = "counts of periods are small")]
fn share(part: usize, whole: usize) -> f64 {
    part as f64 / whole as f64
}

/// Whether a series may stand in its role: an error, a notice, or nothing to say.
fn check_unit(role: &Role<'_>, series: &Series) -> Option<Finding> {
    let unit = &series.unit;
    let wrong = |expected: &str| {
        let message = format!("{} is {unit}; expected {expected}", role.key);
        Finding::error("wrong_unit", message)
            .found(unit.to_string())
            .expected(expected)
    };
    match role.kind {
        Kind::Any => None,
        Kind::RelativePrice => match &unit.quantity {
            Quantity::Ratio
            | Quantity::Index {
                kind: IndexKind::ExchangeRate,
                ..
            } => None,
            Quantity::Index {
                kind: IndexKind::Price | IndexKind::UnitValue,
                ..
            } => Some(
                wrong("one price over another, or a real exchange rate")
                    .remedy("Divide it by the other price in a preparation"),
            ),
            Quantity::Index { .. }
            | Quantity::Money { .. }
            | Quantity::Rate { .. }
            | Quantity::Growth { .. }
            | Quantity::Physical { .. }
            | Quantity::Count => Some(wrong("a ratio or an index of relative prices")),
        },
        Kind::Volume => {
            let expected = "an amount at constant prices, a volume index, a quantity or a count";
            if unit.timing == Timing::FlowYearToDate {
                return Some(wrong("an amount per period, not one since the year began"));
            }
            match &unit.quantity {
                Quantity::Money { .. } if unit.prices == Prices::PreviousYear => {
                    Some(wrong(expected))
                }
                Quantity::Money { .. } if unit.prices == Prices::Current => {
                    let message = format!(
                        "{} is at current prices ({unit}): its growth mixes volumes and prices",
                        role.key
                    );
                    Some(
                        Finding::notice("current_price_volume", message)
                            .expected(expected)
                            .remedy("Deflate it first"),
                    )
                }
                Quantity::Money { .. }
                | Quantity::Index {
                    kind: IndexKind::Volume,
                    ..
                }
                | Quantity::Physical { .. }
                | Quantity::Count => None,
                Quantity::Index { .. }
                | Quantity::Ratio
                | Quantity::Rate { .. }
                | Quantity::Growth { .. } => Some(wrong(expected)),
            }
        }
    }
}
