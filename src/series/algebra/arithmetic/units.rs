//! What sums, products and quotients are: the units that they have, and the pairs that have none.

use super::super::AlgebraError;
use super::super::span::same_reference;
use crate::series::{Adjustment, IndexKind, Prices, Quantity, Timing, Unit};

/// Whether numbers of any sign make sense, so that they can be added: all but indices and rates.
pub(super) fn is_amount(quantity: &Quantity) -> bool {
    !matches!(quantity, Quantity::Index { .. } | Quantity::Rate { .. })
}

/// Unit of a sum or a difference.
pub(super) fn sum_unit(
    operation: &'static str,
    left: &Unit,
    right: &Unit,
) -> Result<Unit, AlgebraError> {
    let clash = |reason, remedy| AlgebraError::clash(operation, (left, right), reason, remedy);
    if !is_amount(&left.quantity) {
        return Err(clash(
            "indices and rates cannot be added or subtracted",
            "Divide one by the other, or take their geometric mean.",
        ));
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

/// Unit of a product, and what the right side is divided by.
pub(super) fn product_unit(left: &Unit, right: &Unit) -> Result<(Unit, f64), AlgebraError> {
    let clash = |reason, remedy| {
        Err(AlgebraError::clash(
            "multiply",
            (left, right),
            reason,
            remedy,
        ))
    };
    match (&left.quantity, &right.quantity) {
        (amount, Quantity::Ratio) if is_amount(amount) => {
            Ok((adjusted(left.clone(), left, right), 1.0))
        }
        (Quantity::Ratio, amount) if is_amount(amount) => {
            Ok((adjusted(right.clone(), left, right), 1.0))
        }
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
        _ => match cross_rate(left, right, false) {
            Some(unit) => Ok((unit, 1.0)),
            None => clash(
                "their product has no unit here",
                "See the table of operations for the pairs that can be multiplied.",
            ),
        },
    }
}

/// Unit of a quotient, and what it is multiplied by.
pub(super) fn quotient_unit(left: &Unit, right: &Unit) -> Result<(Unit, f64), AlgebraError> {
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
        (amount, Quantity::Ratio) if is_amount(amount) => {
            Ok((adjusted(left.clone(), left, right), 1.0))
        }
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
        // a/b ÷ c/d = a/b × d/c.
        _ => match cross_rate(left, right, true) {
            Some(unit) => Ok((unit, 1.0)),
            None => clash(
                "their quotient has no unit here",
                "See the table of operations for the pairs that can be divided.",
            ),
        },
    }
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
    if let Quantity::Index {
        reference_value, ..
    } = unit.quantity
    {
        reference_value
    } else {
        1.0
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

/// The rate that two rates of one market and timing give by the currency that they share: `a/b × c/d`,
/// or `a/b × d/c` with the right one turned.
fn cross_rate(left: &Unit, right: &Unit, turn: bool) -> Option<Unit> {
    let (
        Quantity::Rate {
            numerator: a,
            denominator: b,
            rate_type,
            rate_timing,
        },
        Quantity::Rate {
            numerator,
            denominator,
            rate_type: other_type,
            rate_timing: other_timing,
        },
    ) = (&left.quantity, &right.quantity)
    else {
        return None;
    };
    let (c, d) = if turn {
        (denominator, numerator)
    } else {
        (numerator, denominator)
    };
    let (numerator, denominator) = match (b == c, a == d) {
        (true, false) => (a, d),
        (false, true) => (c, b),
        (true, true) | (false, false) => return None,
    };
    if (rate_type, rate_timing) != (other_type, other_timing) {
        return None;
    }
    let mut unit = adjusted(left.clone(), left, right);
    unit.quantity = Quantity::Rate {
        numerator: *numerator,
        denominator: *denominator,
        rate_type: *rate_type,
        rate_timing: *rate_timing,
    };
    Some(unit)
}

/// A result of two series counts as adjusted where either side is.
pub(in crate::series::algebra) fn adjusted(mut unit: Unit, left: &Unit, right: &Unit) -> Unit {
    unit.adjustment = match (&left.adjustment, &right.adjustment) {
        (Adjustment::Raw, right) => right.clone(),
        (left, _) => left.clone(),
    };
    unit
}
