//! Whether a result is what its key says.

use std::collections::{BTreeMap, BTreeSet};

use super::step::InputRef;
use crate::finding::Finding;
use crate::series::{CurrencyCode, Quantity, Series, SeriesKey, Unit};

/// The money of an area, as the series of it that are inputs say.
#[derive(Debug, Default)]
pub(super) struct Moneys {
    /// Its own: in series without a currency in their key, and against the one in the key of a rate.
    own: BTreeSet<CurrencyCode>,
    /// Currencies that stand in keys, as no own money does that is known.
    named: BTreeSet<CurrencyCode>,
}

/// The money of each area.
pub(super) fn moneys(inputs: &BTreeMap<InputRef, Series>) -> BTreeMap<&str, Moneys> {
    let mut moneys: BTreeMap<&str, Moneys> = BTreeMap::new();
    for (input, series) in inputs {
        let money = moneys.entry(input.key.area()).or_default();
        let named = CurrencyCode::parse(input.key.currency()).ok();
        money.named.extend(named);
        if let Quantity::Rate {
            numerator,
            denominator,
            ..
        } = series.unit.quantity
        {
            let own = match named {
                Some(named) if named == denominator => Some(numerator),
                Some(named) if named == numerator => Some(denominator),
                _ => None,
            };
            money.own.extend(own);
        } else if let Quantity::Money { currency } = series.unit.quantity
            && named.is_none()
        {
            money.own.insert(currency);
        }
    }
    moneys
}

/// Where a result contradicts the key that it is to have.
pub(super) fn disagreement(
    key: &SeriesKey,
    series: &Series,
    moneys: &BTreeMap<&str, Moneys>,
) -> Option<Finding> {
    if series.frequency() != key.frequency() {
        return Some(
            Finding::error(
                "frequency_mismatch",
                format!(
                    "the key says frequency {}, the steps give {}",
                    key.frequency(),
                    series.frequency()
                ),
            )
            .found(series.frequency().to_string())
            .expected(key.frequency().to_string())
            .remedy("Correct the key, or aggregate to its frequency."),
        );
    }
    let held = currencies(&series.unit);
    let (fits, expected) = if key.currency().is_empty() {
        // Rates name two currencies, one of them foreign.
        let rate = matches!(series.unit.quantity, Quantity::Rate { .. });
        let fits = |money: &Moneys, c: &CurrencyCode| {
            money.own.contains(c) || money.own.is_empty() && !money.named.contains(c)
        };
        let money = moneys.get(key.area());
        let own: Vec<&str> = money
            .iter()
            .flat_map(|m| &m.own)
            .map(CurrencyCode::as_str)
            .collect();
        let of_area = format!("the money of {}", key.area());
        (
            rate || money.is_none_or(|money| held.iter().all(|c| fits(money, c))),
            if own.is_empty() {
                of_area
            } else {
                format!("{}, {of_area}", own.join(" or "))
            },
        )
    } else {
        (
            held.is_empty() || held.iter().any(|c| c.as_str() == key.currency()),
            key.currency().to_owned(),
        )
    };
    (!fits).then(|| {
        Finding::error(
            "currency_mismatch",
            format!("the key says {expected}, the steps give {}", series.unit),
        )
        .found(series.unit.to_string())
        .expected(expected)
        .remedy("Correct the currency in the key, or convert.")
    })
}

fn currencies(unit: &Unit) -> Vec<CurrencyCode> {
    match unit.quantity {
        Quantity::Money { currency } => vec![currency],
        Quantity::Index { currency, .. } => currency.into_iter().collect(),
        Quantity::Rate {
            numerator,
            denominator,
            ..
        } => vec![numerator, denominator],
        Quantity::Ratio | Quantity::Growth { .. } | Quantity::Physical { .. } | Quantity::Count => {
            vec![]
        }
    }
}
