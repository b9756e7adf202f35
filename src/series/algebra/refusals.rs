//! What the algebra refuses.

use super::samples::*;
use super::*;
use crate::series::{Adjustment, GrowthKind, IndexKind, Prices, Quantity, Timing};
use crate::time::Frequency;

fn real(code: &str, prices: Prices) -> Unit {
    Unit {
        prices,
        ..money(code)
    }
}

#[test]
fn deflating_refuses_what_it_cannot_mean() {
    let nominal = annual(money("XAD"));
    let prices = annual(price_index("XAD"));
    let by = |amount: &Series, index: &Series| deflate(amount, index, "A.XAA.price", span("2015"));
    let constant = Prices::Constant {
        price_reference: Some("2010".to_owned()),
    };
    refused(
        by(&annual(real("XAD", constant)), &prices),
        "unit_clash",
        ["constant prices of 2010", "price index"],
    );
    refused(
        by(&nominal, &annual(price_index("XBD"))),
        "unit_clash",
        ["XAD, flow", "of prices in XBD"],
    );
    let unstated = index(IndexKind::Price, None, None);
    refused(
        by(&nominal, &annual(unstated)),
        "unit_clash",
        ["XAD, flow", "price index"],
    );
    for kind in [IndexKind::Volume, IndexKind::Value, IndexKind::ExchangeRate] {
        let unit = index(kind, Some("XAD"), None);
        let shown = unit.to_string();
        refused(
            by(&nominal, &annual(unit)),
            "unit_clash",
            ["XAD, flow", &shown],
        );
    }
    let quarterly = series(price_index("XAD"), "2014-Q1", &[100.0; 12]);
    refused(by(&nominal, &quarterly), "frequency_mismatch", ["A", "Q"]);
    let short = series(price_index("XAD"), "2016", &[100.0, 101.0]);
    refused(
        by(&nominal, &short),
        "reference_not_covered",
        ["2015", "no value"],
    );
    let mut zero = prices.clone();
    zero.values[0] = 0.0;
    refused(by(&nominal, &zero), "not_positive", ["0", "2014"]);
    let cumulated = Unit {
        timing: Timing::FlowYearToDate,
        ..money("XAD")
    };
    refused(
        by(&annual(cumulated), &prices),
        "unsuitable_unit",
        ["year-to-date", "deflate"],
    );
}

#[test]
fn a_forecast_is_no_reference() {
    let mut prices = annual(price_index("XAD"));
    prices.status[1] = Status::Forecast;
    refused(
        rebase(&prices, span("2015"), 100.0),
        "reference_not_covered",
        ["2015", "forecasts"],
    );
    refused(
        rebase(&prices, span("2015-Q1"), 100.0),
        "reference_not_covered",
        ["2015-Q1", "no period"],
    );
    assert_eq!(
        rebase(&prices, span("2014"), 1.0).unwrap().status,
        prices.status
    );
    refused(
        rebase(&prices, span("2014"), 0.0),
        "invalid_option",
        ["reference_value", "0"],
    );
    refused(
        rebase(&annual(money("XAD")), span("2014"), 1.0),
        "unsuitable_unit",
        ["XAD", "rebase"],
    );
}

#[test]
fn aggregation_refuses_the_meaningless_and_reports_coverage() {
    let months = |unit: Unit, n: usize| series(unit, "2014-03", &vec![1.0; n]);
    let timed = |timing| Unit {
        timing,
        ..money("XAD")
    };
    let to_year = |s: &Series, by| {
        aggregate(s, Frequency::Annual, Some(by), None, Ends::Drop).map(|a| a.series)
    };
    refused(
        to_year(&months(price_index("XAD"), 34), Method::Sum),
        "unsuitable_unit",
        ["price index", "aggregate"],
    );
    let annual_rate = months(timed(Timing::FlowAnnualRate), 34);
    refused(
        to_year(&annual_rate, Method::Sum),
        "unsuitable_unit",
        ["annual rate", "aggregate"],
    );
    refused(
        to_year(&months(timed(Timing::Stock), 34), Method::Sum),
        "unsuitable_unit",
        ["stock", "aggregate"],
    );
    for by in [Method::Mean, Method::First, Method::Last] {
        refused(
            to_year(&months(money("XAD"), 34), by),
            "unsuitable_unit",
            ["XAD, flow", "sum"],
        );
    }
    refused(
        to_year(&months(money("XAD"), 8), Method::Sum),
        "no_complete_period",
        ["A", "2014-10"],
    );
    let finer = aggregate(
        &months(money("XAD"), 34),
        Frequency::Monthly,
        None,
        None,
        Ends::Drop,
    );
    refused(
        finer.map(|a| a.series),
        "invalid_option",
        ["to", "lower than M"],
    );

    let mut prices = months(price_index("XAD"), 34);
    prices.values[12] = f64::NAN;
    prices.status[12] = Status::Missing;
    let strict = aggregate(&prices, Frequency::Annual, None, None, Ends::Missing).unwrap();
    assert_eq!(strict.method, Method::Mean);
    assert_eq!(strict.series.at("2016".parse().unwrap()), Some(1.0));
    assert_eq!(
        strict.missing.iter().map(|m| m.held).collect::<Vec<_>>(),
        [10, 11]
    );
    let loose = aggregate(&prices, Frequency::Annual, None, Some(0.9), Ends::Drop).unwrap();
    assert_eq!(loose.series.values, [1.0, 1.0]);
    assert_eq!((loose.partial[0].held, loose.dropped[0].held), (11, 10));
    let sum = aggregate(
        &months(money("XAD"), 34),
        Frequency::Annual,
        None,
        Some(0.9),
        Ends::Drop,
    );
    refused(
        sum.map(|a| a.series),
        "invalid_option",
        ["min_coverage", "0.9"],
    );

    let cumulated = months(timed(Timing::FlowYearToDate), 34);
    let year = aggregate(&cumulated, Frequency::Annual, None, None, Ends::Drop).unwrap();
    assert_eq!(
        (year.method, year.series.unit.timing),
        (Method::Last, Timing::Flow)
    );
}

#[test]
fn sums_refuse_what_does_not_add_up() {
    let chained = Prices::Chained {
        price_reference: Some("2015".to_owned()),
    };
    let volume = annual(real("XAD", chained));
    let nominal = annual(money("XAD"));
    refused(
        add(&volume, &volume),
        "unit_clash",
        ["chained volumes", "do not add up"],
    );
    refused(
        add(&nominal, &annual(money("XBD"))),
        "unit_clash",
        ["XAD", "XBD"],
    );
    refused(
        subtract(&nominal, &volume),
        "unit_clash",
        ["current prices", "chained"],
    );
    let prices = annual(price_index("XAD"));
    refused(
        add(&prices, &prices),
        "unit_clash",
        ["price index", "index"],
    );
    let adjusted = annual(Unit {
        adjustment: Adjustment::SeasonallyAdjusted("OFFICE".to_owned()),
        ..money("XAD")
    });
    refused(
        add(&nominal, &adjusted),
        "unit_clash",
        ["XAD, flow", "OFFICE"],
    );
    let late = series(money("XAD"), "2020", &[1.0]);
    refused(
        add(&nominal, &late),
        "no_overlap",
        ["2014 to 2016", "2020 to 2020"],
    );
    let constant = |reference: Option<&str>| {
        let price_reference = reference.map(str::to_owned);
        annual(real("XAD", Prices::Constant { price_reference }))
    };
    for other in [constant(None), constant(Some("2015"))] {
        for result in [
            add(&constant(None), &other),
            subtract(&other, &constant(None)),
            divide(&other, &constant(None)),
        ] {
            refused(
                result,
                "unit_clash",
                ["an unstated period", "period of the prices is not stated"],
            );
        }
    }
    let deflated = |by: &str| deflate(&nominal, &prices, by, span("2015")).unwrap();
    // Both in prices of one period; the weaker label stays.
    for sum in [
        add(&constant(Some("2015")), &deflated("A.XAA.p")),
        add(&deflated("A.XAA.p"), &constant(Some("2015"))),
    ] {
        assert_eq!(
            sum.unwrap().unit.to_string(),
            "XAD, flow, deflated by A.XAA.p, prices of 2015"
        );
    }
    refused(
        add(&constant(Some("2010")), &deflated("A.XAA.p")),
        "unit_clash",
        ["constant prices of 2010", "prices of 2015"],
    );
    assert_eq!(
        add(&deflated("A.XAA.p"), &deflated("A.XAA.q"))
            .unwrap()
            .unit
            .to_string(),
        "XAD, flow, deflated by A.XAA.p, A.XAA.q, prices of 2015"
    );
}

#[test]
fn products_and_quotients_know_their_units() {
    let nominal = annual(money("XAD"));
    let prices = |reference| annual(index(IndexKind::Price, Some("XAD"), Some(reference)));
    let volume = annual(index(IndexKind::Volume, None, Some("2015")));
    let shown = |result: Result<Series, AlgebraError>| result.unwrap().unit.to_string();
    let share = divide(&nominal, &nominal).unwrap();
    assert_eq!(
        (share.unit.to_string().as_str(), &share.values[..]),
        ("ratio", &[1.0; 3][..])
    );
    assert_eq!(
        shown(multiply(&nominal, &share)),
        "XAD, flow, current prices"
    );
    assert_eq!(
        shown(multiply(&share, &nominal)),
        "XAD, flow, current prices"
    );
    assert_eq!(shown(divide(&nominal, &share)), "XAD, flow, current prices");
    let value = multiply(&prices("2015"), &volume).unwrap();
    assert_eq!(
        value.unit.to_string(),
        "value index, 2015 = 100, of prices in XAD"
    );
    assert_eq!(value.values, [81.0, 100.0, 121.00000000000001]);
    assert_eq!(
        shown(divide(&value, &volume)),
        "price index, 2015 = 100, of prices in XAD"
    );
    assert_eq!(
        shown(divide(&value, &prices("2015"))),
        "volume index, 2015 = 100"
    );
    let foreign_value = annual(index(IndexKind::Value, Some("XBD"), Some("2015")));
    refused(
        divide(&foreign_value, &prices("2015")),
        "unit_clash",
        ["of prices in XBD", "of prices in XAD"],
    );
    let cross = divide(&annual(rate("XAD", "XCD")), &annual(rate("XBD", "XCD")));
    assert_eq!(shown(cross), "XAD per XBD");
    let cross = multiply(&annual(rate("XAD", "XCD")), &annual(rate("XCD", "XBD")));
    assert_eq!(shown(cross), "XAD per XBD");

    refused(
        divide(&prices("2015"), &prices("2010")),
        "unit_clash",
        ["2015 = 100", "2010 = 100"],
    );
    refused(
        divide(&nominal, &prices("2015")),
        "unit_clash",
        ["XAD, flow", "price index"],
    );
    refused(
        multiply(&nominal, &annual(rate("XBD", "XAD"))),
        "unit_clash",
        ["XAD, flow", "XBD per XAD"],
    );
    refused(
        multiply(&nominal, &nominal),
        "unit_clash",
        ["XAD", "no unit"],
    );
    refused(
        divide(&nominal, &annual(money("XBD"))),
        "unit_clash",
        ["XAD", "XBD"],
    );
    let per_year = annual(Unit {
        timing: Timing::FlowAnnualRate,
        ..money("XAD")
    });
    refused(
        divide(&nominal, &per_year),
        "unit_clash",
        ["XAD, flow,", "annual rate"],
    );
    refused(
        negate(&prices("2015")),
        "unsuitable_unit",
        ["price index", "negate"],
    );
    let zero = series(money("XAD"), "2014", &[0.0, 1.0]);
    let ratio = divide(&nominal, &zero).unwrap();
    assert_eq!(ratio.status, [Status::CannotExist, Status::Normal]);
    let minus = negate(&zero).unwrap();
    assert_eq!(minus.values[0].to_bits(), 0.0_f64.to_bits());
}

#[test]
fn growth_refuses_growth_and_weeks_over_the_year() {
    let rates = growth(&annual(money("XAD")), GrowthKind::Log, Over::Period, false).unwrap();
    assert_eq!(rates.start.to_string(), "2015");
    let again = growth(&rates, GrowthKind::Log, Over::Period, false);
    refused(again, "unsuitable_unit", ["log growth", "growth"]);
    let weeks = series(money("XAD"), "2015-W01", &[1.0; 60]);
    refused(
        growth(&weeks, GrowthKind::Log, Over::Year, false),
        "invalid_option",
        ["over", "W"],
    );
    let quarters = series(money("XAD"), "2015-Q1", &[1.0, 1.02]);
    let plain = growth(&quarters, GrowthKind::Log, Over::Period, false).unwrap();
    let yearly = growth(&quarters, GrowthKind::Log, Over::Period, true).unwrap();
    refused(
        subtract(&plain, &yearly),
        "unit_clash",
        ["(log growth)", "(log growth at annual rate)"],
    );
    let year = aggregate(&plain, Frequency::Annual, None, Some(0.25), Ends::Drop);
    refused(
        year.map(|a| a.series),
        "unsuitable_unit",
        ["log growth", "longer period"],
    );
    let annualised = growth(&quarters, GrowthKind::Ratio, Over::Period, true).unwrap();
    assert!((annualised.values[0] - (1.02_f64.powi(4) - 1.0)).abs() < 1e-15);
}

#[test]
fn links_report_factor_and_refuse_other_things() {
    let new = series(
        index(IndexKind::Price, Some("XAD"), Some("2015")),
        "2015",
        &[100.0, 104.0],
    );
    let old = series(price_index("XAD"), "2013", &[46.0, 48.0, 50.0, 51.0]);
    let linked = link(&new, &old, Some(span("2015"))).unwrap();
    assert_eq!((linked.factor, linked.periods), (2.0, 1));
    assert_eq!(linked.series.values, [92.0, 96.0, 100.0, 104.0]);
    assert!((linked.spread - (104.0 / 51.0 / 2.0 - 1.0)).abs() < 1e-15);
    let linked =
        |a: &Series, b: &Series, over: Option<&str>| link(a, b, over.map(span)).map(|l| l.series);
    refused(
        linked(&new, &old, Some("2014")),
        "reference_not_covered",
        ["2014", "no value"],
    );
    let apart = series(price_index("XAD"), "2010", &[1.0]);
    refused(
        linked(&new, &apart, None),
        "no_overlap",
        ["2015 to 2016", "2010 to 2010"],
    );
    let other = annual(price_index("XBD"));
    refused(linked(&new, &other, None), "unit_clash", ["XAD", "XBD"]);
    let money_series = annual(money("XAD"));
    refused(
        linked(&new, &money_series, None),
        "unit_clash",
        ["price index", "XAD, flow"],
    );
}

#[test]
fn geometric_means_need_one_unit() {
    let a = annual(price_index("XAD"));
    let mean = geometric_mean(
        &[&a, &series(price_index("XAD"), "2015", &[400.0, -1.0])],
        None,
    )
    .unwrap();
    assert!(near(mean.values[0], 200.0, 4.0));
    assert_eq!(mean.status[1], Status::CannotExist);
    refused(
        geometric_mean(&[&a, &annual(price_index("XBD"))], None),
        "unit_clash",
        ["XAD", "XBD"],
    );
    let nominal = annual(money("XAD"));
    refused(
        geometric_mean(&[&nominal], None),
        "unsuitable_unit",
        ["XAD, flow", "geometric_mean"],
    );
    refused(
        geometric_mean(&[], None),
        "invalid_option",
        ["of", "no series"],
    );
    refused(
        geometric_mean(&[&a], Some(&[0.0])),
        "invalid_option",
        ["weights", "0.0"],
    );
    let reference = |mean: &Series| {
        let Quantity::Index { reference, .. } = &mean.unit.quantity else {
            panic!("{}", mean.unit);
        };
        reference.clone()
    };
    assert_eq!(reference(&mean), None);

    // In a reference of one period every index is 100, and so is the mean.
    let based = index(IndexKind::Price, Some("XAD"), Some("2015"));
    let (a, b) = (
        annual(based.clone()),
        series(based.clone(), "2014", &[40.0, 100.0, 40.0]),
    );
    let mean = geometric_mean(&[&a, &b], None).unwrap();
    assert!(near(mean.values[0], 60.0, 4.0));
    assert_eq!(reference(&mean).as_deref(), Some("2015"));
    assert_eq!(divide(&a, &mean).unwrap().unit, Unit::ratio());
    // In a longer one the mean of means is no mean: it is brought to 100 there, if it reaches so far.
    let quarters = |start, values: &[f64]| series(based.clone(), start, values);
    let (a, b) = (
        quarters("2015-Q1", &[50.0, 150.0, 50.0, 150.0, 200.0]),
        quarters("2015-Q1", &[150.0, 50.0, 150.0, 50.0, 200.0]),
    );
    let mean = geometric_mean(&[&a, &b], None).unwrap();
    assert_eq!(reference(&mean).as_deref(), Some("2015"));
    assert!(near(
        span("2015").average_of("test", &mean).unwrap(),
        100.0,
        8.0
    ));
    assert!(near(
        mean.values[4] / mean.values[0],
        200.0 / 7500.0_f64.sqrt(),
        8.0
    ));
    let late = quarters("2016-Q1", &[200.0, 210.0]);
    assert_eq!(reference(&geometric_mean(&[&late], None).unwrap()), None);
}
