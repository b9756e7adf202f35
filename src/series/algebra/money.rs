//! Deflating and converting amounts of money.

use super::index::reference_level;
use super::span::same_reference;
use super::{AlgebraError, Span, all_positive, map_together, overlap, same_frequency};
use crate::series::{CurrencyCode, IndexKind, Prices, Quantity, Series, Timing, Unit};

/// `nominal ÷ (index / level of the index in the reference)`: the amount in prices of `reference`,
/// labelled "deflated by `deflator`" (constant prices only where the index is a Paasche index).
///
/// The level is that of [`rebase`](super::rebase). No price in a period: missing.
///
/// # Errors
/// Amount not in current prices, or cumulated since the year began; index that does not measure
/// prices, or prices in another or an unstated currency; different frequencies; reference not
/// covered; a price that is not positive.
pub fn deflate(
    nominal: &Series,
    index: &Series,
    deflator: &str,
    reference: Span,
) -> Result<Series, AlgebraError> {
    const DEFLATE: &str = "deflate";
    let unit = deflated_unit(&nominal.unit, &index.unit, deflator, reference)?;
    same_frequency(DEFLATE, nominal, index)?;
    overlap(DEFLATE, &[nominal, index])?;
    all_positive(DEFLATE, "the price index", index)?;
    let level = reference_level(DEFLATE, index, reference)?;
    let extent = (nominal.start, nominal.len());
    Ok(map_together(unit, extent, &[nominal, index], |v| {
        v[0] / (v[1] / level)
    }))
}

fn deflated_unit(
    nominal: &Unit,
    index: &Unit,
    deflator: &str,
    reference: Span,
) -> Result<Unit, AlgebraError> {
    let clash = |reason, remedy| AlgebraError::clash("deflate", (nominal, index), reason, remedy);
    let Quantity::Money { currency } = nominal.quantity else {
        return Err(AlgebraError::unsuitable(
            "deflate",
            nominal,
            "only money at current prices is deflated",
            "Take an amount of money at current prices.",
        ));
    };
    if nominal.prices != Prices::Current {
        return Err(clash(
            "the amount is not in current prices",
            "Take the nominal series, or leave the step out: this one is real already.",
        ));
    }
    if nominal.timing == Timing::FlowYearToDate {
        return Err(AlgebraError::unsuitable(
            "deflate",
            nominal,
            "prices of one period cannot deflate a flow cumulated since the year began",
            "Take the flow of each period.",
        ));
    }
    let Quantity::Index {
        kind: IndexKind::Price | IndexKind::UnitValue,
        currency: prices_in,
        ..
    } = index.quantity
    else {
        return Err(clash(
            "the deflator is not a price or unit value index",
            "Deflate by a price index.",
        ));
    };
    if prices_in != Some(currency) {
        return Err(clash(
            match prices_in {
                Some(_) => "the index measures prices in another currency",
                None => "the index does not say in which currency its prices are",
            },
            "Convert one side, or take an index of prices in the currency of the amount.",
        ));
    }
    Ok(Unit {
        prices: Prices::Deflated {
            deflator: deflator.to_owned(),
            price_reference: reference.to_string(),
        },
        ..nominal.clone()
    })
}

/// An amount or a price index in the currency `to`.
///
/// Amounts in current prices and price indices take the rate of the same period. Real amounts take
/// one fixed rate, the mean over `at`, which must be the period of their prices. A rate quoted the
/// other way round divides: by the rate of the period, or by the mean of the rate as quoted. A
/// converted index has no known reference until it is rebased.
///
/// # Errors
/// Neither money nor a price index; rate between other currencies; real amount without `at` or
/// with another period, `at` for something else; different frequencies (without `at`); `at` not
/// covered; a rate that is not positive.
pub fn convert(
    amount: &Series,
    to: CurrencyCode,
    rates: &Series,
    at: Option<Span>,
) -> Result<Series, AlgebraError> {
    const CONVERT: &str = "convert";
    let (unit, direct) = converted_unit(&amount.unit, to, &rates.unit, at)?;
    let apply = |value: f64, rate: f64| if direct { value * rate } else { value / rate };
    let extent = (amount.start, amount.len());
    if let Some(at) = at {
        let rate = at.average_of(CONVERT, rates)?;
        return Ok(map_together(unit, extent, &[amount], |v| apply(v[0], rate)));
    }
    same_frequency(CONVERT, amount, rates)?;
    overlap(CONVERT, &[amount, rates])?;
    all_positive(CONVERT, "the exchange rate", rates)?;
    Ok(map_together(unit, extent, &[amount, rates], |v| {
        apply(v[0], v[1])
    }))
}

/// Whether an exchange rate is quoted as `to` per unit of `from`, so that it multiplies; `None` where it is
/// not between the two.
pub(super) fn quoted(rate: &Unit, from: CurrencyCode, to: CurrencyCode) -> Option<bool> {
    let Quantity::Rate {
        numerator,
        denominator,
        ..
    } = rate.quantity
    else {
        return None;
    };
    let direct = (numerator, denominator) == (to, from);
    (direct || (numerator, denominator) == (from, to)).then_some(direct)
}

/// The converted unit, and whether the rate multiplies.
fn converted_unit(
    amount: &Unit,
    to: CurrencyCode,
    rates: &Unit,
    at: Option<Span>,
) -> Result<(Unit, bool), AlgebraError> {
    let clash = |reason, remedy| AlgebraError::clash("convert", (amount, rates), reason, remedy);
    let mut unit = amount.clone();
    if let Quantity::Index { reference, .. } = &mut unit.quantity {
        *reference = None;
    }
    let (Quantity::Money { currency }
    | Quantity::Index {
        currency: Some(currency),
        kind: IndexKind::Price | IndexKind::UnitValue,
        ..
    }) = &mut unit.quantity
    else {
        return Err(AlgebraError::unsuitable(
            "convert",
            amount,
            "only money and indices of prices in a stated currency can change currency",
            "Take an amount of money or a price index with its currency.",
        ));
    };
    let from = std::mem::replace(currency, to);
    let Some(direct) = quoted(rates, from, to) else {
        return Err(clash(
            "it is not an exchange rate between the currency of the amount and the one asked for",
            "Take the rate between the two, or form it first from two rates by multiply or divide.",
        ));
    };
    let fixed = at.map(|at| at.to_string());
    match (&amount.prices, fixed) {
        (Prices::Current | Prices::None, None) => Ok((unit, direct)),
        (Prices::Current | Prices::None, Some(_)) => Err(clash(
            "a fixed rate is for real amounts, at the period of their prices",
            "Leave out 'at', or deflate before converting.",
        )),
        (Prices::PreviousYear, _) => Err(clash(
            "prices of the year before change their period every year",
            "Convert at current prices, then deflate by an index of prices in that currency.",
        )),
        (Prices::Constant { .. } | Prices::Chained { .. } | Prices::Deflated { .. }, None) => {
            Err(clash(
                "a real amount takes the rate of the period of its prices only",
                "Set 'at' to that period, or convert at current prices and then deflate.",
            ))
        }
        (
            Prices::Constant {
                price_reference: Some(stated),
            }
            | Prices::Chained {
                price_reference: Some(stated),
            }
            | Prices::Deflated {
                price_reference: stated,
                ..
            },
            Some(at),
        ) if !same_reference(stated, &at) => Err(clash(
            "'at' is not the period of the amount's prices",
            "Set 'at' to the period of the prices, or deflate to prices of that period.",
        )),
        (Prices::Constant { .. } | Prices::Chained { .. } | Prices::Deflated { .. }, Some(_)) => {
            Ok((unit, direct))
        }
    }
}
