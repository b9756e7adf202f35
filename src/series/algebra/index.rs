//! Rebasing and linking.

use super::span::same_reference;
use super::{AlgebraError, Span, observed, overlap, same_frequency, scaled};
use crate::series::{Prices, Quantity, Series, Unit};
use crate::time::Period;

/// An index brought to the reference `reference` = `reference_value`.
///
/// The factor is `reference_value` over the mean of the index in the reference; where the index
/// states that very reference, over its stated reference value (published rounding stays, and the
/// reference need not be held). Growth is preserved.
///
/// # Errors
/// Not an index; reference not fully covered; mean or reference value not positive.
pub fn rebase(
    index: &Series,
    reference: Span,
    reference_value: f64,
) -> Result<Series, AlgebraError> {
    if !(reference_value.is_finite() && reference_value > 0.0) {
        return Err(AlgebraError::Argument {
            name: "reference_value",
            found: reference_value.to_string(),
            expected: "a number above zero, such as 100".to_owned(),
        });
    }
    let level = reference_level("rebase", index, reference)?;
    let mut unit = index.unit.clone();
    if let Quantity::Index {
        reference: stated,
        reference_value: value,
        ..
    } = &mut unit.quantity
    {
        *stated = Some(reference.to_string());
        *value = reference_value;
    }
    Ok(scaled(index, reference_value / level, unit))
}

/// The level of an index in a reference; see [`rebase`].
pub(super) fn reference_level(
    operation: &'static str,
    index: &Series,
    reference: Span,
) -> Result<f64, AlgebraError> {
    let Quantity::Index {
        reference: stated,
        reference_value,
        ..
    } = &index.unit.quantity
    else {
        return Err(AlgebraError::unsuitable(
            operation,
            &index.unit,
            "only index numbers have a reference period",
            "Take an index.",
        ));
    };
    match stated {
        Some(stated)
            if same_reference(stated, &reference.to_string()) && *reference_value > 0.0 =>
        {
            Ok(*reference_value)
        }
        _ => reference.average_of(operation, index),
    }
}

/// What [`link`] found.
#[derive(Clone, Debug, PartialEq)]
pub struct Linked {
    /// The linked series, in the target's unit and level.
    pub series: Series,
    /// What the other series was multiplied by.
    pub factor: f64,
    /// First and last period on which the factor rests.
    pub overlap: (Period, Period),
    /// Number of periods on which the factor rests.
    pub periods: usize,
    /// Largest over smallest one-period factor in all common periods, less one (a fraction).
    pub spread: f64,
}

/// Links `other` to the level of `target`: within the target's first and last value the target
/// stands as it is (holes included), elsewhere `other × factor`. Growth inside each part is kept.
///
/// `factor = mean(target) / mean(other)` over the span `over`, or over all common periods. Values
/// that are forecasts do not count.
///
/// # Errors
/// Frequencies, currencies, kinds, price bases, timing or adjustment differ (references may
/// differ); growth rates; no common period; `over` not fully covered by both; a value in the
/// overlap that is not positive.
pub fn link(target: &Series, other: &Series, over: Option<Span>) -> Result<Linked, AlgebraError> {
    const LINK: &str = "link";
    same_frequency(LINK, target, other)?;
    linkable(&target.unit, &other.unit)?;
    let (start, len) = overlap(LINK, &[target, other])?;
    let common: Vec<(Period, f64, f64)> = (0..len)
        .filter_map(|n| {
            let period = start.plus(i32::try_from(n).ok()?)?;
            Some((period, observed(target, period)?, observed(other, period)?))
        })
        .collect();
    let basis: Vec<(Period, f64, f64)> = match over {
        None => common.clone(),
        Some(span) => {
            span.values_of(target)?;
            span.values_of(other)?;
            let range = span.at(target.frequency());
            common
                .iter()
                .filter(|c| range.is_some_and(|(first, last)| first <= c.0 && c.0 <= last))
                .copied()
                .collect()
        }
    };
    let (Some(first), Some(last)) = (basis.first(), basis.last()) else {
        return Err(AlgebraError::NoOverlap {
            operation: LINK,
            left: super::extent(target),
            right: super::extent(other),
        });
    };
    if let Some((period, a, b)) = common.iter().find(|c| c.1 <= 0.0 || c.2 <= 0.0) {
        return Err(AlgebraError::NotPositive {
            operation: LINK,
            what: "every value of the overlap".to_owned(),
            place: period.to_string(),
            value: a.min(*b),
        });
    }
    let factor = basis.iter().map(|c| c.1).sum::<f64>() / basis.iter().map(|c| c.2).sum::<f64>();
    let ratios = common.iter().map(|c| c.1 / c.2);
    let spread = ratios.clone().fold(f64::MIN, f64::max) / ratios.fold(f64::MAX, f64::min) - 1.0;
    Ok(Linked {
        series: joined(target, &scaled(other, factor, target.unit.clone())),
        factor,
        overlap: (first.0, last.0),
        periods: basis.len(),
        spread,
    })
}

/// The target between its first and last value, `other` before and after.
fn joined(target: &Series, other: &Series) -> Series {
    let present = |series: &Series| {
        let first = series.values.iter().position(|v| v.is_finite());
        let last = series.values.iter().rposition(|v| v.is_finite());
        first
            .and_then(|i| series.period(i))
            .zip(last.and_then(|i| series.period(i)))
    };
    let Some((first, last)) = present(target) else {
        return other.clone();
    };
    let start = target.start.min(other.start);
    let end = target.end().max(other.end()).unwrap_or(last);
    let n = usize::try_from(end.ordinal() - start.ordinal()).unwrap_or(0) + 1;
    let (values, status) = (0..n)
        .map(|n| {
            let own = i32::try_from(n)
                .ok()
                .and_then(|n| start.plus(n))
                .is_some_and(|period| first <= period && period <= last);
            super::observation(if own { target } else { other }, start, n)
        })
        .unzip();
    Series::with_status(target.unit.clone(), start, values, status)
}

/// Whether two units differ in nothing but their reference.
fn linkable(target: &Unit, other: &Unit) -> Result<(), AlgebraError> {
    if let Quantity::Growth { .. } = target.quantity {
        return Err(AlgebraError::unsuitable(
            "link",
            target,
            "growth rates have no level to link",
            "Link the levels and take growth afterwards.",
        ));
    }
    let same_quantity = match (&target.quantity, &other.quantity) {
        (
            Quantity::Index { currency, kind, .. },
            Quantity::Index {
                currency: other_currency,
                kind: other_kind,
                ..
            },
        ) => currency == other_currency && kind == other_kind,
        (target, other) => target == other,
    };
    let same_basis = match (&target.prices, &other.prices) {
        (Prices::Deflated { .. }, Prices::Deflated { .. })
        | (Prices::Constant { .. }, Prices::Constant { .. })
        | (Prices::Chained { .. }, Prices::Chained { .. }) => true,
        (target, other) => target == other,
    };
    if same_quantity
        && same_basis
        && target.timing == other.timing
        && target.adjustment == other.adjustment
    {
        Ok(())
    } else {
        Err(AlgebraError::clash(
            "link",
            (target, other),
            "only the reference period may differ",
            "Convert, deflate or adjust one side to match the other before linking.",
        ))
    }
}
