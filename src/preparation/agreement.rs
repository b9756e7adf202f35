//! Whether a result is what its key says.

use std::collections::{BTreeMap, BTreeSet};

use super::step::InputRef;
use crate::finding::Finding;
use crate::series::{CurrencyCode, Quantity, Series, SeriesKey, Unit};

/// Own money of each area, as its series without a currency in their key say.
pub(super) fn own_money(
    inputs: &BTreeMap<InputRef, Series>,
) -> BTreeMap<&str, BTreeSet<CurrencyCode>> {
    let mut money: BTreeMap<&str, BTreeSet<CurrencyCode>> = BTreeMap::new();
    for (input, series) in inputs {
        if let Quantity::Money { currency } = series.unit.quantity
            && input.key.currency().is_empty()
        {
            money.entry(input.key.area()).or_default().insert(currency);
        }
    }
    money
}

/// Where a result contradicts the key that it is to have.
pub(super) fn disagreement(
    key: &SeriesKey,
    series: &Series,
    own_money: &BTreeMap<&str, BTreeSet<CurrencyCode>>,
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
    let own = own_money.get(key.area());
    let (fits, expected) = if key.currency().is_empty() {
        let money = matches!(series.unit.quantity, Quantity::Money { .. });
        let own = own.filter(|_| money);
        (
            own.is_none_or(|own| held.iter().any(|c| own.contains(c))),
            own.map_or_else(String::new, |own| {
                let codes: Vec<&str> = own.iter().map(CurrencyCode::as_str).collect();
                format!("{}, the money of {}", codes.join(" or "), key.area())
            }),
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
