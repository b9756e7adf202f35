//! Conversion, real exchange rates and foreign income worked by hand.

use super::samples::*;
use super::*;
use crate::series::Adjustment;

fn at(reference: &str) -> Reference {
    Reference {
        span: span(reference),
        value: 100.0,
    }
}

/// 100 XAD at 4 XAD per XBD are 25 XBD, whichever way the rate is quoted.
#[test]
fn converts_both_ways_and_refuses_mixed_bases() {
    let direct = annual(rate("XBD", "XAD"));
    let indirect = series(rate("XAD", "XBD"), "2014", &[2.0, 4.0, 5.0]);
    let nominal = annual(money("XAD"));
    let to = |code, amount: &Series, rates: &Series, at: Option<&str>| {
        convert(amount, currency(code), rates, at.map(span))
    };
    assert_eq!(
        to("XBD", &nominal, &indirect, None).unwrap().values,
        [45.0, 25.0, 22.0]
    );
    assert_eq!(
        to("XBD", &nominal, &direct, None).unwrap().values,
        [8100.0, 10000.0, 12100.0]
    );
    let even = |s: &Series| s.len() == 3 && s.values.iter().all(|v| near(*v, 25.0, 4.0));
    let deflated = deflate(
        &nominal,
        &annual(price_index("XAD")),
        "A.XAA.p",
        span("2015"),
    )
    .unwrap();
    let fixed = to("XBD", &deflated, &indirect, Some("2015")).unwrap();
    assert!(even(&fixed));
    assert_eq!(
        fixed.unit.to_string(),
        "XBD, flow, deflated by A.XAA.p, prices of 2015"
    );
    refused(
        to("XBD", &deflated, &indirect, None),
        "unit_clash",
        ["deflated by", "XAD per XBD"],
    );
    refused(
        to("XBD", &deflated, &indirect, Some("2014")),
        "unit_clash",
        ["prices of 2015", "XAD per XBD"],
    );
    refused(
        to("XBD", &nominal, &indirect, Some("2015")),
        "unit_clash",
        ["XAD, flow", "fixed rate"],
    );
    refused(
        to("USD", &nominal, &indirect, None),
        "unit_clash",
        ["XAD, flow", "XAD per XBD"],
    );
    let monthly = series(rate("XAD", "XBD"), "2014-01", &[4.0; 36]);
    refused(
        to("XBD", &nominal, &monthly, None),
        "frequency_mismatch",
        ["A", "M"],
    );
    assert!(even(&to("XBD", &deflated, &monthly, Some("2015")).unwrap()));
}

/// Home prices double while the rate stays: the real exchange rate doubles, a real appreciation.
/// Home money halves in worth: it halves, a depreciation.
#[test]
fn up_is_a_real_appreciation_of_the_home_area() {
    let foreign = series(price_index("XBD"), "2014", &[100.0; 3]);
    let steady = series(rate("XAD", "XBD"), "2014", &[3.0; 3]);
    let home = series(price_index("XAD"), "2014", &[100.0, 100.0, 200.0]);
    let rer = real_exchange_rate(&home, &foreign, Some(&steady), at("2015")).unwrap();
    assert_eq!(rer.values, [100.0, 100.0, 200.0]);
    let flat = series(price_index("XAD"), "2014", &[100.0; 3]);
    let falling = series(rate("XAD", "XBD"), "2014", &[3.0, 3.0, 6.0]);
    let rer = real_exchange_rate(&flat, &foreign, Some(&falling), at("2015")).unwrap();
    assert_eq!(rer.values, [100.0, 100.0, 50.0]);
    refused(
        real_exchange_rate(&home, &foreign, None, at("2015")),
        "unit_clash",
        ["prices in XAD", "prices in XBD"],
    );
    let wrong = series(rate("XAD", "XCD"), "2014", &[3.0; 3]);
    refused(
        real_exchange_rate(&home, &foreign, Some(&wrong), at("2015")),
        "unit_clash",
        ["prices in XBD", "XAD per XCD"],
    );

    let weights = series(Unit::ratio(), "2010", &[0.5; 6]);
    let partner = TradePartner {
        name: "XBB",
        price: &foreign,
        rate: Some(&falling),
        weights: &weights,
    };
    let alike = TradePartner {
        name: "XCC",
        price: &flat,
        rate: None,
        weights: &weights,
    };
    let effective = |home: &Series, partners: &[TradePartner<'_>]| {
        real_effective_exchange_rate(home, partners, WeightYears::One, at("2015")).unwrap()
    };
    let reer = effective(&flat, &[partner, alike]);
    // Half of Δln = −ln 2.
    assert!((reer.series.values[2] - 100.0 / 2.0_f64.sqrt()).abs() < 1e-12);
    assert_eq!(reer.coverage.len(), 2);

    // Adjusted where any price is.
    let adjusted = Unit {
        adjustment: Adjustment::SeasonallyAdjusted("OFFICE".to_owned()),
        ..price_index("XBD")
    };
    let price = &series(adjusted.clone(), "2014", &[100.0; 3]);
    let rer = real_exchange_rate(&flat, price, Some(&falling), at("2015")).unwrap();
    let reer = effective(&flat, &[alike, TradePartner { price, ..partner }]).series;
    assert_eq!(rer.unit.adjustment, adjusted.adjustment);
    assert_eq!(reer.unit.adjustment, adjusted.adjustment);
}

#[test]
fn foreign_income_weighs_by_the_year_before_and_names_the_partner() {
    let income = |values: &[f64]| series(real_money("XBD", "2015"), "2014", values);
    let (one, two) = (
        income(&[100.0, 110.0, 121.0]),
        income(&[50.0, 50.0, f64::NAN]),
    );
    let weights = |values: &[f64]| series(Unit::ratio(), "2012", values);
    let (first, second) = (
        weights(&[0.3, 0.3, 0.6, 0.5]),
        weights(&[0.1, 0.3, 0.4, 0.5]),
    );
    let both = |level, other| {
        [
            Partner {
                name: "XBB",
                level,
                weights: &first,
            },
            Partner {
                name: "XCC",
                level: other,
                weights: &second,
            },
        ]
    };
    let result = foreign_income(&both(&one, &two), WeightYears::One, at("2014")).unwrap();
    // 2015 by the weights of 2014 (0.6, 0.4), 2016 by the one partner left.
    let expected = 100.0 * 1.1_f64.powf(0.6);
    assert!((result.series.values[1] - expected).abs() < 1e-10);
    assert!((result.series.values[2] - expected * 1.1).abs() < 1e-10);
    assert_eq!(result.coverage[1].partners, 1);
    assert!((result.coverage[1].share - 0.5).abs() < 1e-15);
    assert_eq!(
        (result.coverage[1].unweighted, &result.left_off[..]),
        (0, &[][..])
    );
    let three = foreign_income(&both(&one, &two), WeightYears::Three, at("2014")).unwrap();
    // Means of 2012 to 2014: 0.4 and 0.8/3.
    let share = 0.4 / (0.4 + 0.8 / 3.0);
    assert!((three.series.values[1] - 100.0 * 1.1_f64.powf(share)).abs() < 1e-10);

    let nominal = series(money("XBD"), "2014", &[1.0; 3]);
    let bad = foreign_income(&both(&one, &nominal), WeightYears::One, at("2014"));
    refused(
        bad.map(|e| e.series),
        "unsuitable_unit",
        ["XCC", "current prices"],
    );
    let early = foreign_income(&both(&one, &two), WeightYears::One, at("2010"));
    refused(
        early.map(|e| e.series),
        "reference_not_covered",
        ["2010", "no value"],
    );
    let none = foreign_income(&[], WeightYears::One, at("2014"));
    refused(
        none.map(|e| e.series),
        "invalid_option",
        ["partners", "none"],
    );
}

/// A weight that is a forecast is none, and what lies beyond periods without any weight is named.
#[test]
fn partners_without_a_weight_are_counted() {
    let level = series(
        real_money("XBD", "2015"),
        "2012",
        &[100.0, 110.0, 121.0, 130.0, 140.0],
    );
    let first = series(Unit::ratio(), "2013", &[0.5, 0.5, f64::NAN]);
    let mut second = series(Unit::ratio(), "2013", &[0.5, 0.5, f64::NAN]);
    second.status[1] = Status::Forecast;
    let partner = |name, weights| Partner {
        name,
        level: &level,
        weights,
    };
    let partners = [partner("XBB", &first), partner("XCC", &second)];
    let result = foreign_income(&partners, WeightYears::One, at("2014")).unwrap();
    // Growth of 2014 by the weights of 2013 and of 2015 by those of 2014; none for 2013 and 2016.
    let ends = (result.series.start.to_string(), result.series.len());
    assert_eq!(ends, ("2013".to_owned(), 3));
    let unweighted: Vec<usize> = result.coverage.iter().map(|c| c.unweighted).collect();
    assert_eq!(unweighted, [0, 1]);
    assert_eq!(result.coverage[1].partners, 1);
    let left_off: Vec<String> = result.left_off.iter().map(ToString::to_string).collect();
    assert_eq!(left_off, ["2012", "2016"]);
}
