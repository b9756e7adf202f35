//! Properties that hold for any series.

use proptest::prelude::*;

use super::samples::*;
use super::*;
use crate::series::{GrowthKind, IndexKind, Timing};
use crate::time::Frequency;

const QUARTERLY: Frequency = Frequency::Quarterly;

/// A whole span of quarters around 2010, which every series of `whole` with 50 quarters reaches.
fn reference() -> Reference {
    Reference {
        span: span("2010"),
        value: 100.0,
    }
}

fn prices(code: &str) -> impl Strategy<Value = Series> + use<> {
    whole(price_index(code), QUARTERLY, 50..60)
}

fn ratios(series: &Series) -> Vec<f64> {
    series.values.windows(2).map(|w| w[1] / w[0]).collect()
}

fn same_growth(a: &Series, b: &Series) -> bool {
    let (a, b) = (ratios(a), ratios(b));
    a.len() == b.len() && a.iter().zip(&b).all(|(a, b)| near(*a, *b, 4.0))
}

/// The obvious aggregation: for each period, look through the whole series for its parts.
fn slow_aggregate(series: &Series, to: Frequency, method: Method, period: Period) -> (f64, Status) {
    let parts: Vec<(Period, f64, Status)> = (0..series.len())
        .map(|i| {
            (
                series.period(i).unwrap(),
                series.values[i],
                series.status[i],
            )
        })
        .filter(|p| p.0.convert(to) == period)
        .collect();
    let all = parts.len() == usize::try_from(period.count_of(series.frequency())).unwrap()
        && parts.iter().all(|p| !p.2.is_missing());
    let status = parts.iter().fold(Status::Normal, |s, p| s.combine(p.2));
    let total: f64 = parts.iter().map(|p| p.1).sum();
    let one = |day: fn(Period) -> crate::time::Date| {
        let found = parts.iter().find(|p| day(p.0) == day(period));
        found.map_or((f64::NAN, Status::Missing), |p| (p.1, p.2))
    };
    match method {
        Method::Sum if all => (total, status),
        Method::Mean if all => (total / parts.len() as f64, status),
        Method::Sum | Method::Mean => (f64::NAN, Status::Missing),
        Method::First => one(Period::first_day),
        Method::Last => one(Period::last_day),
    }
}

proptest! {
    #[test]
    fn rebasing_twice_is_rebasing_once(index in prices("XAD"), value in 1.0..1000.0_f64) {
        let once = rebase(&index, span("2010"), 100.0).unwrap();
        let detour = rebase(&rebase(&index, span("2009/2011"), value).unwrap(), span("2010"), 100.0).unwrap();
        prop_assert_eq!(&once.unit, &detour.unit);
        for (a, b) in once.values.iter().zip(&detour.values) {
            // Two more roundings of each value, and those of a mean over rounded values.
            prop_assert!(near(*a, *b, 8.0), "{} {}", a, b);
        }
        prop_assert_eq!(rebase(&once, span("2010"), 100.0).unwrap(), once);
    }

    #[test]
    fn rebasing_keeps_growth_and_averages_100(index in prices("XAD")) {
        let rebased = rebase(&index, span("2010"), 100.0).unwrap();
        prop_assert!(same_growth(&index, &rebased));
        let mean = span("2010").average_of("test", &rebased).unwrap();
        prop_assert!(near(mean, 100.0, 8.0));
    }

    #[test]
    fn linking_keeps_growth_of_both_parts(
        old in whole(price_index("XAD"), QUARTERLY, 35..40),
        mut new in whole(index(IndexKind::Price, Some("XAD"), Some("2008")), QUARTERLY, 10..30),
        over in any::<bool>(),
    ) {
        new.start = "2008-Q1".parse().unwrap();
        let over = over.then(|| span("2008-Q1"));
        let linked = link(&new, &old, over).unwrap();
        prop_assert!(well_formed(&linked.series));
        prop_assert_eq!(&linked.series.unit, &new.unit);
        let at = linked.series.position(new.start).unwrap();
        prop_assert_eq!(&linked.series.values[at..at + new.len()], &new.values[..]);
        let before = ratios(&linked.series);
        for (i, growth) in ratios(&old).iter().enumerate().take(at - 1) {
            prop_assert!(near(before[i], *growth, 4.0));
        }
        if over.is_some() {
            // Linked on the first new period: the join grows as the old series does.
            prop_assert!(near(before[at - 1], ratios(&old)[at - 1], 8.0));
        }
    }

    #[test]
    fn deflating_and_multiplying_back_is_identity(
        nominal in whole(money("XAD"), QUARTERLY, 50..60),
        index in prices("XAD"),
    ) {
        let real = deflate(&nominal, &index, "Q.XAA.price", span("2010")).unwrap();
        let back = multiply(&real, &rebase(&index, span("2010"), 100.0).unwrap()).unwrap();
        prop_assert_eq!(&back.unit, &nominal.unit);
        for (i, value) in back.values.iter().enumerate() {
            prop_assert!(near(*value, nominal.at(back.period(i).unwrap()).unwrap(), 8.0));
        }
        let implicit = divide(&nominal, &real).unwrap();
        let rebased = rebase(&index, span("2010"), 100.0).unwrap();
        for (i, value) in implicit.values.iter().enumerate().filter(|v| v.1.is_finite()) {
            prop_assert!(near(*value, rebased.at(implicit.period(i).unwrap()).unwrap(), 8.0));
        }
    }

    #[test]
    fn aggregation_agrees_with_the_obvious_one(
        series in ragged(money("XAD"), Frequency::Monthly, 1..60),
        to in prop::sample::select(vec![Frequency::Annual, Frequency::HalfYearly, QUARTERLY]),
        case in 0..4_usize,
        ends in prop::sample::select(vec![Ends::Drop, Ends::Missing]),
    ) {
        let (method, timing) = [
            (Method::Sum, Timing::Flow),
            (Method::Mean, Timing::FlowAnnualRate),
            (Method::First, Timing::Stock),
            (Method::Last, Timing::Stock),
        ][case];
        let mut series = series;
        series.unit.timing = timing;
        let expected: Vec<(f64, Status)> = {
            let first = series.start.convert(to);
            let last = series.end().unwrap().convert(to);
            (0..=last.ordinal() - first.ordinal())
                .map(|n| slow_aggregate(&series, to, method, first.plus(n).unwrap()))
                .collect()
        };
        match aggregate(&series, to, Some(method), None, ends) {
            Err(error) => {
                prop_assert_eq!(error.code(), "no_complete_period");
                prop_assert!(expected.iter().all(|e| e.1.is_missing()));
            }
            Ok(Aggregated { series: result, dropped, .. }) => {
                prop_assert!(well_formed(&result));
                let skipped = result.start.ordinal() - series.start.convert(to).ordinal();
                let skipped = usize::try_from(skipped).unwrap();
                for (i, expected) in expected.iter().enumerate() {
                    match i.checked_sub(skipped).filter(|i| *i < result.len()) {
                        None => prop_assert!(expected.1.is_missing()),
                        Some(i) => {
                            prop_assert!(near(result.values[i], expected.0, 16.0));
                            prop_assert_eq!(result.status[i].is_missing(), expected.1.is_missing());
                            if !expected.1.is_missing() {
                                prop_assert_eq!(result.status[i], expected.1);
                            }
                        }
                    }
                }
                if ends == Ends::Missing {
                    prop_assert!(skipped == 0 && result.len() == expected.len() && dropped.is_empty());
                }
            }
        }
    }

    #[test]
    fn sums_are_kept_at_every_level(series in whole(money("XAD"), Frequency::Monthly, 24..60)) {
        let sum = |s: &Series, to| aggregate(s, to, None, None, Ends::Drop).unwrap().series;
        let direct = sum(&series, Frequency::Annual);
        let stepwise = sum(&sum(&series, QUARTERLY), Frequency::Annual);
        prop_assert_eq!(direct.start, stepwise.start);
        for (a, b) in direct.values.iter().zip(&stepwise.values) {
            prop_assert!(near(*a, *b, 12.0));
        }
    }

    #[test]
    fn results_are_well_formed_and_missing_stays_missing(
        a in ragged(money("XAD"), QUARTERLY, 20..40),
        b in ragged(money("XAD"), QUARTERLY, 20..40),
    ) {
        for result in [add(&a, &b), subtract(&a, &b), divide(&a, &b)] {
            let Ok(result) = result else { continue };
            prop_assert!(well_formed(&result));
            for i in 0..result.len() {
                let period = result.period(i).unwrap();
                let status = |s: &Series| s.position(period).map(|i| s.status[i]).unwrap();
                let expected = status(&a).combine(status(&b));
                prop_assert_eq!(result.status[i], expected);
            }
        }
        for kind in [GrowthKind::Log, GrowthKind::Ratio] {
            let result = growth(&a, kind, Over::Year, false).unwrap();
            prop_assert!(well_formed(&result));
            prop_assert_eq!(result.len(), a.len() - 4);
            for i in 0..result.len() {
                let defined = a.values[i] > 0.0 && a.values[i + 4] > 0.0;
                prop_assert_eq!(defined, !result.status[i].is_missing());
            }
        }
        prop_assert!(well_formed(&negate(&a).unwrap()));
    }

    #[test]
    fn adding_and_subtracting_undo_each_other(
        a in whole(money("XAD"), QUARTERLY, 40..50),
        b in whole(money("XAD"), QUARTERLY, 40..50),
    ) {
        prop_assert_eq!(&add(&a, &b).unwrap().values, &add(&b, &a).unwrap().values);
        let back = subtract(&add(&a, &b).unwrap(), &b).unwrap();
        for (i, value) in back.values.iter().enumerate() {
            let own = a.at(back.period(i).unwrap()).unwrap();
            prop_assert!((value - own).abs() <= 400.0 * f64::EPSILON);
        }
    }

    #[test]
    fn a_geometric_mean_forgets_the_order(
        a in prices("XAD"), b in prices("XAD"), c in prices("XAD"), w in 0.1..3.0_f64,
    ) {
        let one = geometric_mean(&[&a, &b, &c], Some(&[w, 1.0, 2.0])).unwrap();
        let other = geometric_mean(&[&c, &a, &b], Some(&[4.0, 2.0 * w, 2.0])).unwrap();
        prop_assert_eq!(one.start, other.start);
        for (x, y) in one.values.iter().zip(&other.values) {
            prop_assert!(near(*x, *y, 64.0));
        }
    }

    #[test]
    fn the_way_a_rate_is_quoted_does_not_matter(
        home in prices("XAD"), foreign in prices("XBD"), rates in whole(rate("XAD", "XBD"), QUARTERLY, 50..60),
    ) {
        let mut inverse = rates.clone();
        inverse.unit = rate("XBD", "XAD");
        inverse.values.iter_mut().for_each(|v| *v = 1.0 / *v);
        let one = real_exchange_rate(&home, &foreign, Some(&rates), reference()).unwrap();
        let other = real_exchange_rate(&home, &foreign, Some(&inverse), reference()).unwrap();
        for (x, y) in one.values.iter().zip(&other.values) {
            prop_assert!(near(*x, *y, 32.0));
        }
        let amount = Series { unit: money("XBD"), ..foreign.clone() };
        let (a, b) = (
            convert(&amount, currency("XAD"), &rates, None).unwrap(),
            convert(&amount, currency("XAD"), &inverse, None).unwrap(),
        );
        for (x, y) in a.values.iter().zip(&b.values) {
            prop_assert!(near(*x, *y, 4.0));
        }
    }

    #[test]
    fn weighted_growth_agrees_with_its_definition(
        levels in prop::collection::vec(whole(real_money("XBD", "2015"), QUARTERLY, 50..60), 1..4),
        weights in prop::collection::vec(prop::collection::vec(0.1..5.0_f64, 25), 4),
        scale in 0.1..10.0_f64,
    ) {
        let shares: Vec<Series> = weights
            .iter()
            .map(|w| series(crate::series::Unit::ratio(), "1995", w))
            .collect();
        let partners: Vec<Partner<'_>> = levels
            .iter()
            .zip(&shares)
            .map(|(level, weights)| Partner { name: "XBB", level, weights })
            .collect();
        let result = foreign_income(&partners, WeightYears::One, reference()).unwrap();
        prop_assert!(well_formed(&result.series));
        for i in 1..result.series.len() {
            let now = result.series.period(i).unwrap();
            let before = now.plus(-1).unwrap();
            let year = now.convert(Frequency::Annual).plus(-1).unwrap();
            let mut parts = Vec::new();
            for partner in &partners {
                if let (Some(a), Some(b)) = (partner.level.at(before), partner.level.at(now)) {
                    parts.push((partner.weights.at(year).unwrap(), b.ln() - a.ln()));
                }
            }
            let total: f64 = parts.iter().map(|p| p.0).sum();
            let expected: f64 = parts.iter().map(|p| p.0 / total * p.1).sum();
            let growth = (result.series.values[i] / result.series.values[i - 1]).ln();
            prop_assert!((growth - expected).abs() < 1e-12, "{} {}", growth, expected);
            prop_assert_eq!(result.coverage[i - 1].period, now);
            prop_assert_eq!(result.coverage[i - 1].partners, parts.len());
        }
        // Neither the order of partners nor the scale of weights matters.
        let scaled_weights: Vec<Series> =
            shares.iter().map(|s| scaled(s, scale, s.unit.clone())).collect();
        let other: Vec<Partner<'_>> = levels
            .iter()
            .zip(&scaled_weights)
            .rev()
            .map(|(level, weights)| Partner { name: "XBB", level, weights })
            .collect();
        let other = foreign_income(&other, WeightYears::One, reference()).unwrap();
        for (a, b) in result.series.values.iter().zip(&other.series.values) {
            prop_assert!((a / b - 1.0).abs() < 1e-12);
        }
    }
}
