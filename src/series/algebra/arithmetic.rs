//! Sums, products, quotients and geometric means.

mod units;

pub(super) use units::adjusted;

use self::units::{is_amount, product_unit, quotient_unit, sum_unit};
use super::index::rebase;
use super::{AlgebraError, Span, map_together, overlap, same_frequency, scaled};
use crate::series::{Quantity, Series, Unit};

/// `left + right`.
///
/// # Errors
/// Quantity, currency, price basis, timing, adjustment or frequency differ; indices, rates and
/// chained volumes; no common period.
pub fn add(left: &Series, right: &Series) -> Result<Series, AlgebraError> {
    sum("add", left, right, 1.0)
}

/// `left − right`.
///
/// # Errors
/// As [`add`].
pub fn subtract(left: &Series, right: &Series) -> Result<Series, AlgebraError> {
    sum("subtract", left, right, -1.0)
}

fn sum(
    operation: &'static str,
    left: &Series,
    right: &Series,
    sign: f64,
) -> Result<Series, AlgebraError> {
    let unit = sum_unit(operation, &left.unit, &right.unit)?;
    same_frequency(operation, left, right)?;
    let extent = overlap(operation, &[left, right])?;
    Ok(map_together(unit, extent, &[left, right], |v| {
        v[0] + sign * v[1]
    }))
}

/// `left × right`.
///
/// Ratio × anything but an index or rate keeps that unit; a real amount × the price index of its
/// price reference is the amount in current prices; price × volume index is a value index; rates
/// that share a currency give the cross rate.
///
/// # Errors
/// Any other pair; different frequencies; no common period.
pub fn multiply(left: &Series, right: &Series) -> Result<Series, AlgebraError> {
    const MULTIPLY: &str = "multiply";
    let (unit, scale) = product_unit(&left.unit, &right.unit)?;
    same_frequency(MULTIPLY, left, right)?;
    let extent = overlap(MULTIPLY, &[left, right])?;
    Ok(map_together(unit, extent, &[left, right], |v| {
        v[0] * (v[1] / scale)
    }))
}

/// `left ÷ right`.
///
/// Money ÷ money of one currency, price basis and timing is a ratio, current ÷ real money the
/// implicit price index (reference = 100); index ÷ index of one kind, currency and reference a ratio
/// (1 in the reference), value ÷ price index a volume index, value ÷ volume index a price index;
/// anything ÷ ratio keeps its unit; rates that share a currency give the cross rate. Division by
/// zero has no result.
///
/// # Errors
/// Any other pair; different frequencies; no common period.
pub fn divide(left: &Series, right: &Series) -> Result<Series, AlgebraError> {
    const DIVIDE: &str = "divide";
    let (unit, scale) = quotient_unit(&left.unit, &right.unit)?;
    same_frequency(DIVIDE, left, right)?;
    let extent = overlap(DIVIDE, &[left, right])?;
    Ok(map_together(unit, extent, &[left, right], |v| {
        v[0] / v[1] * scale
    }))
}

/// `−series`.
///
/// # Errors
/// Indices and rates, which are positive by nature.
pub fn negate(series: &Series) -> Result<Series, AlgebraError> {
    if is_amount(&series.unit.quantity) {
        Ok(scaled(series, -1.0, series.unit.clone()))
    } else {
        Err(AlgebraError::unsuitable(
            "negate",
            &series.unit,
            "indices and rates are positive by nature",
            "Leave the step out.",
        ))
    }
}

/// `exp(Σ w_k ln v_k / Σ w_k)` over series of one unit, weights equal unless given.
///
/// The mean of indices has their reference: in a reference of one period each stands at the reference
/// value, hence so does the mean; over several periods the mean is rebased to it. Where a part of such a
/// reference is not held, the mean has no known reference until it is rebased. A value that is not
/// positive leaves the mean without result.
///
/// # Errors
/// No series; weights of another number, or not positive; units that differ in more than the year
/// of their weights; anything but indices, rates and ratios; no common period.
pub fn geometric_mean(of: &[&Series], weights: Option<&[f64]>) -> Result<Series, AlgebraError> {
    const MEAN: &str = "geometric_mean";
    let Some((first, rest)) = of.split_first() else {
        return Err(AlgebraError::Argument {
            name: "of",
            found: "no series".to_owned(),
            expected: "at least one series".to_owned(),
        });
    };
    let weights = weights.map_or_else(|| vec![1.0; of.len()], <[f64]>::to_vec);
    if weights.len() != of.len() || weights.iter().any(|w| !(w.is_finite() && *w > 0.0)) {
        return Err(AlgebraError::Argument {
            name: "weights",
            found: format!("{weights:?}"),
            expected: format!("{} positive numbers, one a series", of.len()),
        });
    }
    let comparable = |unit: &Unit| {
        let mut unit = unit.clone();
        if let Quantity::Index { weights_year, .. } = &mut unit.quantity {
            *weights_year = None;
        }
        unit
    };
    let mut unit = comparable(&first.unit);
    for other in rest {
        if comparable(&other.unit) != unit {
            return Err(AlgebraError::clash(
                MEAN,
                (&first.unit, &other.unit),
                "a mean needs one unit throughout",
                "Rebase or convert the series to one reference and currency.",
            ));
        }
        same_frequency(MEAN, first, other)?;
    }
    let reference = match &mut unit.quantity {
        Quantity::Index {
            reference,
            reference_value,
            ..
        } => reference.take().map(|text| (text, *reference_value)),
        Quantity::Rate { .. } | Quantity::Ratio => None,
        Quantity::Money { .. }
        | Quantity::Growth { .. }
        | Quantity::Physical { .. }
        | Quantity::Count => {
            return Err(AlgebraError::unsuitable(
                MEAN,
                &first.unit,
                "geometric means are for indices, rates and ratios",
                "Add the series, or take their growth by foreign_income.",
            ));
        }
    };
    let total: f64 = weights.iter().sum();
    let mean = map_together(unit, overlap(MEAN, of)?, of, |v| {
        // A logarithm of zero would make the mean zero, which it is not.
        if v.iter().any(|v| *v <= 0.0) {
            return f64::NAN;
        }
        let logs = v.iter().zip(&weights).map(|(v, w)| w * v.ln());
        (logs.sum::<f64>() / total).exp()
    });
    Ok(match reference {
        Some((text, value)) => with_reference(mean, &text, value),
        None => mean,
    })
}

/// A mean of indices that all average `value` in a reference, brought to it where that can be done.
fn with_reference(mut mean: Series, text: &str, value: f64) -> Series {
    let Ok(span) = text.parse::<Span>() else {
        return mean;
    };
    match span.at(mean.frequency()) {
        Some((first, last)) if first == last => {
            if let Quantity::Index { reference, .. } = &mut mean.unit.quantity {
                *reference = Some(text.to_owned());
            }
            mean
        }
        _ => rebase(&mean, span, value).unwrap_or(mean),
    }
}
