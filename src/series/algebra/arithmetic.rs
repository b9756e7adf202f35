//! Sums, products, quotients and geometric means.

use super::span::same_reference;
use super::{AlgebraError, map_together, overlap, same_frequency, scaled};
use crate::series::{Adjustment, IndexKind, Prices, Quantity, Series, Timing, Unit};

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

fn sum_unit(operation: &'static str, left: &Unit, right: &Unit) -> Result<Unit, AlgebraError> {
    let clash = |reason, remedy| AlgebraError::clash(operation, (left, right), reason, remedy);
    match &left.quantity {
        Quantity::Index { .. } | Quantity::Rate { .. } => {
            return Err(clash(
                "indices and rates cannot be added or subtracted",
                "Divide one by the other, or take their geometric mean.",
            ));
        }
        Quantity::Money { .. }
        | Quantity::Ratio
        | Quantity::Growth { .. }
        | Quantity::Physical { .. }
        | Quantity::Count => {}
    }
    if left.quantity != right.quantity {
        return Err(clash(
            "the quantities differ",
            "Convert both to one currency or unit first.",
        ));
    }
    if left.timing != right.timing || left.adjustment != right.adjustment {
        return Err(clash(
            "timing or seasonal adjustment differs",
            "Take both sides as the same kind of flow or stock, both raw or both adjusted.",
        ));
    }
    let prices = match (&left.prices, &right.prices) {
        (Prices::Chained { .. }, _) | (_, Prices::Chained { .. }) => {
            return Err(clash(
                "chained volumes do not add up",
                "Add in current prices or in prices of the year before, then deflate or chain.",
            ));
        }
        (a, b) if unstated(a) || unstated(b) => return Err(clash(UNSTATED, SEND_REFERENCE)),
        (
            Prices::Deflated {
                deflator: a,
                price_reference,
            },
            Prices::Deflated { deflator: b, .. },
        ) if one_period(&left.prices, &right.prices) && a != b => Prices::Deflated {
            deflator: format!("{a}, {b}"),
            price_reference: price_reference.clone(),
        },
        // Not all of the sum is known to stand in constant prices proper.
        (Prices::Constant { .. }, deflated @ Prices::Deflated { .. })
            if one_period(&left.prices, deflated) =>
        {
            deflated.clone()
        }
        (a, b) if a == b || one_period(a, b) => a.clone(),
        _ => {
            return Err(clash(
                "the price bases differ",
                "Bring both sides to prices of one period.",
            ));
        }
    };
    Ok(Unit {
        prices,
        ..left.clone()
    })
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

/// Unit of a product, and what the right side is divided by.
fn product_unit(left: &Unit, right: &Unit) -> Result<(Unit, f64), AlgebraError> {
    let clash = |reason, remedy| {
        Err(AlgebraError::clash(
            "multiply",
            (left, right),
            reason,
            remedy,
        ))
    };
    match (&left.quantity, &right.quantity) {
        (
            Quantity::Money { .. }
            | Quantity::Ratio
            | Quantity::Growth { .. }
            | Quantity::Physical { .. }
            | Quantity::Count,
            Quantity::Ratio,
        ) => Ok((adjusted(left.clone(), left, right), 1.0)),
        (
            Quantity::Ratio,
            Quantity::Money { .. }
            | Quantity::Growth { .. }
            | Quantity::Physical { .. }
            | Quantity::Count,
        ) => Ok((adjusted(right.clone(), left, right), 1.0)),
        (
            Quantity::Money { currency },
            Quantity::Index {
                currency: Some(prices_in),
                kind: IndexKind::Price | IndexKind::UnitValue,
                reference: Some(reference),
                reference_value,
                ..
            },
        ) if currency == prices_in
            && price_reference(&left.prices).is_some_and(|p| same_reference(p, reference)) =>
        {
            let mut unit = adjusted(left.clone(), left, right);
            unit.prices = Prices::Current;
            Ok((unit, *reference_value))
        }
        (Quantity::Money { .. }, Quantity::Index { .. }) => clash(
            "only a real amount times the price index of its own price reference has a meaning",
            "Rebase the index to the period of the amount's prices.",
        ),
        (Quantity::Money { .. }, Quantity::Rate { .. }) => clash(
            "multiplying by a rate hides its direction",
            "Use convert, which knows both currencies.",
        ),
        (
            Quantity::Index {
                kind: IndexKind::Price | IndexKind::UnitValue,
                ..
            },
            Quantity::Index {
                kind: IndexKind::Volume,
                ..
            },
        )
        | (
            Quantity::Index {
                kind: IndexKind::Volume,
                ..
            },
            Quantity::Index {
                kind: IndexKind::Price | IndexKind::UnitValue,
                ..
            },
        ) => match common_reference(left, right) {
            Some(scale) => Ok((index_unit(IndexKind::Value, left, right), scale)),
            None => clash(
                "the indices have no common reference",
                "Rebase both to one period.",
            ),
        },
        (
            Quantity::Rate {
                numerator: a,
                denominator: b,
                rate_type,
                rate_timing,
            },
            Quantity::Rate {
                numerator: c,
                denominator: d,
                rate_type: other_type,
                rate_timing: other_timing,
            },
        ) if rate_type == other_type
            && rate_timing == other_timing
            && (b == c || a == d)
            && (a, b) != (d, c) =>
        {
            let (numerator, denominator) = if b == c { (*a, *d) } else { (*c, *b) };
            let mut unit = adjusted(left.clone(), left, right);
            unit.quantity = Quantity::Rate {
                numerator,
                denominator,
                rate_type: *rate_type,
                rate_timing: *rate_timing,
            };
            Ok((unit, 1.0))
        }
        _ => clash(
            "their product has no unit here",
            "See the table of operations for the pairs that can be multiplied.",
        ),
    }
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

/// Unit of a quotient, and what it is multiplied by.
fn quotient_unit(left: &Unit, right: &Unit) -> Result<(Unit, f64), AlgebraError> {
    let clash = |reason, remedy| Err(AlgebraError::clash("divide", (left, right), reason, remedy));
    let ratio = || adjusted(Unit::ratio(), left, right);
    match (&left.quantity, &right.quantity) {
        (Quantity::Money { currency }, Quantity::Money { currency: other }) => {
            if currency != other || left.timing != right.timing {
                return clash(
                    "currency or timing differs",
                    "Convert both to one currency, and take both as the same kind of flow or stock.",
                );
            }
            match (&left.prices, &right.prices) {
                (a, b) if unstated(a) || unstated(b) => clash(UNSTATED, SEND_REFERENCE),
                (a, b) if a == b => Ok((ratio(), 1.0)),
                (Prices::Current, real) if price_reference(real).is_some() => {
                    let quantity = Quantity::Index {
                        currency: Some(*currency),
                        kind: IndexKind::Price,
                        weights_year: None,
                        reference: price_reference(real).map(str::to_owned),
                        reference_value: 100.0,
                    };
                    Ok((
                        Unit {
                            quantity,
                            ..ratio()
                        },
                        100.0,
                    ))
                }
                (a, b) if one_period(a, b) => Ok((ratio(), 1.0)),
                _ => clash(
                    "the price bases differ",
                    "Bring both sides to prices of one period.",
                ),
            }
        }
        (Quantity::Money { .. }, Quantity::Index { .. }) => clash(
            "dividing money by an index does not say in whose prices the result stands",
            "Use deflate, which states the reference.",
        ),
        (Quantity::Money { .. }, Quantity::Rate { .. }) => clash(
            "dividing by a rate hides its direction",
            "Use convert, which knows both currencies.",
        ),
        (
            Quantity::Money { .. }
            | Quantity::Ratio
            | Quantity::Growth { .. }
            | Quantity::Physical { .. }
            | Quantity::Count,
            Quantity::Ratio,
        ) => Ok((adjusted(left.clone(), left, right), 1.0)),
        (Quantity::Physical { physical_unit: a }, Quantity::Physical { physical_unit: b })
            if a == b && left.timing == right.timing =>
        {
            Ok((ratio(), 1.0))
        }
        (Quantity::Count, Quantity::Count) if left.timing == right.timing => Ok((ratio(), 1.0)),
        (
            Quantity::Index {
                kind: a, currency, ..
            },
            Quantity::Index {
                kind: b,
                currency: other,
                ..
            },
        ) => {
            let prices = |kind| matches!(kind, IndexKind::Price | IndexKind::UnitValue);
            let Some(value) = common_reference(left, right) else {
                return clash(
                    "the indices have no common reference",
                    "Rebase both to one period.",
                );
            };
            match (a, b) {
                (IndexKind::Value, b) if prices(*b) && currency == other => {
                    Ok((index_unit(IndexKind::Volume, left, right), value))
                }
                (IndexKind::Value, IndexKind::Volume) => {
                    Ok((index_unit(IndexKind::Price, left, right), value))
                }
                (a, b) if (a == b || prices(*a) && prices(*b)) && currency == other => {
                    Ok((ratio(), value / left_value(left)))
                }
                _ => clash(
                    "kinds or currencies of the indices differ",
                    "Convert one side, or take real_exchange_rate for prices in two currencies.",
                ),
            }
        }
        (
            Quantity::Rate {
                numerator: a,
                denominator: b,
                rate_type,
                rate_timing,
            },
            Quantity::Rate {
                numerator: c,
                denominator: d,
                rate_type: other_type,
                rate_timing: other_timing,
            },
        ) if rate_type == other_type && rate_timing == other_timing && (a == c) != (b == d) => {
            // (A per B) ÷ (C per B) = A per C; (A per B) ÷ (A per D) = D per B.
            let (numerator, denominator) = if b == d { (*a, *c) } else { (*d, *b) };
            let mut unit = adjusted(left.clone(), left, right);
            unit.quantity = Quantity::Rate {
                numerator,
                denominator,
                rate_type: *rate_type,
                rate_timing: *rate_timing,
            };
            Ok((unit, 1.0))
        }
        _ => clash(
            "their quotient has no unit here",
            "See the table of operations for the pairs that can be divided.",
        ),
    }
}

/// `−series`.
///
/// # Errors
/// Indices and rates, which are positive by nature.
pub fn negate(series: &Series) -> Result<Series, AlgebraError> {
    match series.unit.quantity {
        Quantity::Index { .. } | Quantity::Rate { .. } => Err(AlgebraError::unsuitable(
            "negate",
            &series.unit,
            "indices and rates are positive by nature",
            "Leave the step out.",
        )),
        Quantity::Money { .. }
        | Quantity::Ratio
        | Quantity::Growth { .. }
        | Quantity::Physical { .. }
        | Quantity::Count => Ok(scaled(series, -1.0, series.unit.clone())),
    }
}

/// `exp(Σ w_k ln v_k / Σ w_k)` over series of one unit, weights equal unless given.
///
/// The result of indices has no known reference until it is rebased. A value that is not positive
/// leaves the mean without result.
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
    match &mut unit.quantity {
        Quantity::Index { reference, .. } => *reference = None,
        Quantity::Rate { .. } | Quantity::Ratio => {}
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
    }
    let total: f64 = weights.iter().sum();
    Ok(map_together(unit, overlap(MEAN, of)?, of, |v| {
        // A logarithm of zero would make the mean zero, which it is not.
        if v.iter().any(|v| *v <= 0.0) {
            return f64::NAN;
        }
        let logs = v.iter().zip(&weights).map(|(v, w)| w * v.ln());
        (logs.sum::<f64>() / total).exp()
    }))
}

/// The period in whose prices a real amount stands.
fn price_reference(prices: &Prices) -> Option<&str> {
    match prices {
        Prices::Constant { price_reference } | Prices::Chained { price_reference } => {
            price_reference.as_deref()
        }
        Prices::Deflated {
            price_reference, ..
        } => Some(price_reference),
        Prices::None | Prices::Current | Prices::PreviousYear => None,
    }
}

const UNSTATED: &str = "the period of the prices is not stated";
const SEND_REFERENCE: &str = "Send the series again with its price reference.";

/// Whether an amount is said to be real without saying in whose prices.
fn unstated(prices: &Prices) -> bool {
    matches!(
        prices,
        Prices::Constant {
            price_reference: None
        } | Prices::Chained {
            price_reference: None
        }
    )
}

/// Whether two real amounts stand in prices of one period.
fn one_period(left: &Prices, right: &Prices) -> bool {
    match (price_reference(left), price_reference(right)) {
        (Some(a), Some(b)) => same_reference(a, b),
        _ => false,
    }
}

/// The right index's value in the reference that both indices state.
fn common_reference(left: &Unit, right: &Unit) -> Option<f64> {
    match (&left.quantity, &right.quantity) {
        (
            Quantity::Index {
                reference: Some(a), ..
            },
            Quantity::Index {
                reference: Some(b),
                reference_value,
                ..
            },
        ) => same_reference(a, b).then_some(*reference_value),
        _ => None,
    }
}

fn left_value(unit: &Unit) -> f64 {
    match unit.quantity {
        Quantity::Index {
            reference_value, ..
        } => reference_value,
        Quantity::Money { .. }
        | Quantity::Rate { .. }
        | Quantity::Ratio
        | Quantity::Growth { .. }
        | Quantity::Physical { .. }
        | Quantity::Count => 1.0,
    }
}

/// An index made of two: the left one's reference, the currency of whichever has one.
fn index_unit(kind: IndexKind, left: &Unit, right: &Unit) -> Unit {
    let mut unit = adjusted(left.clone(), left, right);
    if let (
        Quantity::Index {
            currency,
            kind: own,
            weights_year,
            ..
        },
        Quantity::Index {
            currency: other, ..
        },
    ) = (&mut unit.quantity, &right.quantity)
    {
        *own = kind;
        *weights_year = None;
        *currency = if kind == IndexKind::Volume {
            None
        } else {
            currency.or(*other)
        };
    }
    unit.timing = Timing::Average;
    unit
}

/// A product or quotient counts as adjusted where either side is.
fn adjusted(mut unit: Unit, left: &Unit, right: &Unit) -> Unit {
    unit.adjustment = match (&left.adjustment, &right.adjustment) {
        (Adjustment::Raw, right) => right.clone(),
        (left, _) => left.clone(),
    };
    unit
}
