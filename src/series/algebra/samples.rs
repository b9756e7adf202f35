//! Units and random series for tests.

use proptest::prelude::*;

use super::{AlgebraError, Span};
use crate::finding::Finding;
use crate::series::{
    Adjustment, CurrencyCode, IndexKind, Prices, Quantity, RateTiming, RateType, Series, Status,
    Timing, Unit,
};
use crate::time::{Frequency, Period};

pub(crate) fn currency(code: &str) -> CurrencyCode {
    CurrencyCode::parse(code).unwrap()
}

pub(crate) fn money(code: &str) -> Unit {
    Unit::money_flow(currency(code))
}

pub(crate) fn real_money(code: &str, reference: &str) -> Unit {
    Unit {
        prices: Prices::Constant {
            price_reference: Some(reference.to_owned()),
        },
        ..money(code)
    }
}

pub(crate) fn index(kind: IndexKind, code: Option<&str>, reference: Option<&str>) -> Unit {
    Unit {
        quantity: Quantity::Index {
            currency: code.map(currency),
            kind,
            weights_year: None,
            reference: reference.map(str::to_owned),
            reference_value: 100.0,
        },
        timing: Timing::Average,
        prices: Prices::None,
        adjustment: Adjustment::Raw,
    }
}

pub(crate) fn price_index(code: &str) -> Unit {
    index(IndexKind::Price, Some(code), None)
}

pub(crate) fn rate(numerator: &str, denominator: &str) -> Unit {
    Unit {
        quantity: Quantity::Rate {
            numerator: currency(numerator),
            denominator: currency(denominator),
            rate_type: RateType::Official,
            rate_timing: RateTiming::Average,
        },
        timing: Timing::Average,
        prices: Prices::None,
        adjustment: Adjustment::Raw,
    }
}

pub(crate) fn series(unit: Unit, start: &str, values: &[f64]) -> Series {
    Series::new(unit, start.parse::<Period>().unwrap(), values.to_vec())
}

/// Positive values without holes, from a month or quarter or year near 2000.
pub(crate) fn whole(
    unit: Unit,
    frequency: Frequency,
    len: std::ops::Range<usize>,
) -> impl Strategy<Value = Series> {
    (0..30_i32, prop::collection::vec(0.5..200.0_f64, len)).prop_map(move |(shift, values)| {
        let start = Period::in_year(frequency, 2000, 1)
            .unwrap()
            .plus(shift)
            .unwrap();
        Series::new(unit.clone(), start, values)
    })
}

/// Any values and statuses, holes included.
pub(crate) fn ragged(
    unit: Unit,
    frequency: Frequency,
    len: std::ops::Range<usize>,
) -> impl Strategy<Value = Series> {
    let observation = (
        -100.0..100.0_f64,
        prop_oneof![
            6 => Just(Status::Normal),
            2 => (0..Status::ALL.len()).prop_map(|i| Status::ALL[i]),
        ],
    );
    (0..30_i32, prop::collection::vec(observation, len)).prop_map(move |(shift, rows)| {
        let start = Period::in_year(frequency, 2000, 1)
            .unwrap()
            .plus(shift)
            .unwrap();
        let (values, status) = rows.into_iter().unzip();
        Series::with_status(unit.clone(), start, values, status)
    })
}

/// Whether two numbers are equal to `units` in the last place of the larger.
pub(crate) fn near(a: f64, b: f64, units: f64) -> bool {
    (a.is_nan() && b.is_nan()) || (a - b).abs() <= units * f64::EPSILON * a.abs().max(b.abs())
}

/// NaN exactly where missing, no −0, no infinity.
pub(crate) fn well_formed(series: &Series) -> bool {
    series.values.len() == series.status.len()
        && series.values.iter().zip(&series.status).all(|(v, s)| {
            v.is_nan() == s.is_missing() && !v.is_infinite() && v.to_bits() != (-0.0_f64).to_bits()
        })
}

pub(crate) fn span(text: &str) -> Span {
    text.parse().unwrap()
}

pub(crate) fn annual(unit: Unit) -> Series {
    series(unit, "2014", &[90.0, 100.0, 110.0])
}

/// The code, and that both sides are named in the message.
pub(crate) fn refused(result: Result<Series, AlgebraError>, code: &str, sides: [&str; 2]) {
    let error = result.expect_err("a refusal");
    let finding = Finding::from(error);
    assert_eq!(finding.code, code, "{}", finding.message);
    assert!(finding.found.is_some() && finding.expected.is_some() && finding.remedy.is_some());
    for side in sides {
        assert!(
            finding.message.contains(side),
            "{side}: {}",
            finding.message
        );
    }
}
