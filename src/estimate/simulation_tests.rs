//! Simulated null distributions against published tables.

use std::cell::RefCell;

use super::test_data::danish;
use super::*;

const HALF_DIGIT: f64 = 0.005;

fn simulation(draws: usize) -> Simulation {
    Simulation {
        draws,
        seed: 1,
        threads: 2,
    }
}

fn case(name: &str) -> BoundsCase {
    match name {
        "I" => BoundsCase::I,
        "II" => BoundsCase::II,
        "III" => BoundsCase::III,
        "IV" => BoundsCase::IV,
        _ => BoundsCase::V,
    }
}

/// Rows `case, k, c10_I0, c10_I1, c05_I0, c05_I1, c01_I0, c01_I1` after `skip` leading cells.
fn table(text: &str, skip: usize) -> Vec<(Vec<&str>, Vec<f64>)> {
    text.lines()
        .skip(1)
        .map(|line| {
            let cells: Vec<&str> = line.split(',').collect();
            let numbers = cells[skip + 2..skip + 8].iter().map(|c| c.parse().unwrap());
            (cells.clone(), numbers.collect())
        })
        .collect()
}

/// Compares a row; the table's own error is that of `table_draws` replications. Returns how many cells
/// lie beyond 3 combined errors (and half a digit); none may lie beyond 4.
fn compare(
    what: &str,
    null: &[NullDistribution; 2],
    lower_tail: bool,
    row: &[f64],
    table_draws: f64,
    half_digit: f64,
) -> usize {
    let beyond = |(i, wanted): (usize, &f64)| {
        let level = [0.10, 0.05, 0.01][i / 2];
        let p = if lower_tail { level } else { 1.0 - level };
        let null = &null[i % 2];
        let error = null.quantile_error(p) * (1.0 + null.draws as f64 / table_draws).sqrt();
        let found = null.quantile(p);
        let off = ((found - wanted).abs() - half_digit) / error;
        assert!(
            off <= 4.0,
            "{what} at {level}, I({}): {found:.3} instead of {wanted}, {off:.1} errors",
            i % 2
        );
        off > 3.0
    };
    row.iter().enumerate().map(beyond).filter(|b| *b).count()
}

/// Pesaran, Shin & Smith 2001, tables CI (F) and CII (t), T = 1000, 40,000 replications.
#[test]
fn published_bounds() {
    let f = table(include_str!("../../fixtures/reference/pss-2001-f.csv"), 0);
    let t = table(include_str!("../../fixtures/reference/pss-2001-t.csv"), 0);
    for (name, k) in [("I", 1), ("II", 3), ("III", 2), ("IV", 1), ("V", 4)] {
        let design = BoundsDesign {
            observations: 1000,
            regressors: k,
            case: case(name),
            orders: None,
        };
        let null = design.simulate(simulation(1500), &NoStore).unwrap();
        let row = |table: &[(Vec<&str>, Vec<f64>)]| {
            let found = table
                .iter()
                .find(|(c, _)| c[0] == name && c[1] == k.to_string());
            found.map(|(_, numbers)| numbers.clone())
        };
        let what = format!("{name}, k = {k}");
        let far = compare(
            &what,
            &null.f,
            false,
            &row(&f).unwrap(),
            40_000.0,
            HALF_DIGIT,
        );
        assert_eq!(far, 0, "{what}");
        match row(&t) {
            Some(numbers) => {
                assert!(case(name).has_published_t());
                let far = compare(&what, &null.t, true, &numbers, 40_000.0, HALF_DIGIT);
                assert_eq!(far, 0, "{what}");
            }
            None => assert!(!case(name).has_published_t()),
        }
    }
}

/// Narayan 2005, T = 30 to 80, 40,000 replications; suspect rows left out, and case IV at 80 whole. Of
/// the 120 cells, 1 in 75 may lie beyond 3 errors: chance alone puts 1 in 370 there, and at 1 %
/// the table itself is not smooth in T (case V, k = 2: 7.317, 7.337, 7.227 at 45, 50, 55; 60,000 draws
/// at 50 give 7.15).
#[test]
fn published_bounds_in_small_samples() {
    let all = table(
        include_str!("../../fixtures/reference/narayan-2005-f.csv"),
        1,
    );
    let (mut compared, mut far) = (0, 0);
    for (cells, numbers) in all {
        let (n, k): (usize, usize) = (cells[0].parse().unwrap(), cells[2].parse().unwrap());
        if !cells[9].is_empty() || !matches!((n, k), (30 | 80, 0 | 2 | 5)) {
            continue;
        }
        let design = BoundsDesign {
            observations: n,
            regressors: k,
            case: case(cells[1]),
            orders: None,
        };
        let null = design.simulate(simulation(2000), &NoStore).unwrap();
        let what = format!("n = {n}, {}, k = {k}", cells[1]);
        let half_digit = HALF_DIGIT / 10.0;
        far += compare(&what, &null.f, false, &numbers, 40_000.0, half_digit);
        compared += numbers.len();
    }
    assert!(
        compared >= 120 && far * 75 <= compared,
        "{far} of {compared}"
    );
}

#[test]
fn orders_without_a_lag_of_the_dependent_variable_are_refused() {
    let design = BoundsDesign {
        observations: 40,
        regressors: 1,
        case: BoundsCase::III,
        orders: Some(ArdlOrders { p: 0, q: vec![1] }),
    };
    let refused = design.simulate(simulation(10), &NoStore);
    assert!(matches!(refused, Err(SeriesError::Option { .. })));
}

#[test]
fn threads_change_no_digit_and_seeds_do() {
    let design = BoundsDesign {
        observations: 40,
        regressors: 2,
        case: BoundsCase::III,
        orders: Some(ArdlOrders {
            p: 2,
            q: vec![1, 0],
        }),
    };
    let run = |threads: usize, seed: u64| {
        let simulation = Simulation {
            draws: 301,
            seed,
            threads,
        };
        design.simulate(simulation, &NoStore).unwrap()
    };
    assert_eq!(run(1, 7), run(2, 7));
    assert_eq!(run(1, 7), run(5, 7));
    assert_ne!(run(1, 7).f, run(1, 8).f);
}

struct Memory(RefCell<Vec<(String, Vec<NullDistribution>)>>);

impl SimulationStore for Memory {
    fn load(&self, settings: &str) -> Option<Vec<NullDistribution>> {
        let kept = self.0.borrow();
        kept.iter()
            .find(|(s, _)| s == settings)
            .map(|(_, d)| d.clone())
    }

    fn keep(&self, settings: &str, distributions: &[NullDistribution]) {
        let entry = (settings.to_owned(), distributions.to_vec());
        self.0.borrow_mut().push(entry);
    }
}

#[test]
fn a_kept_distribution_is_not_simulated_again() {
    let store = Memory(RefCell::new(Vec::new()));
    let count = std::sync::atomic::AtomicUsize::new(0);
    let run = |draws: usize| {
        simulate_unit_root("counting", 10, simulation(draws), &store, |y| {
            count.fetch_add(1, std::sync::atomic::Ordering::Relaxed);
            Ok(y.values[9])
        })
    };
    let (first, again) = (run(50), run(50));
    assert_eq!(first, again);
    assert_eq!(count.load(std::sync::atomic::Ordering::Relaxed), 50);
    run(60);
    assert_eq!(count.load(std::sync::atomic::Ordering::Relaxed), 110);
}

/// Dickey–Fuller at n = 50 against the response surfaces, which are far more exact than this simulation;
/// DF-GLS with a constant against the distribution it shares in large samples.
#[test]
fn unit_roots() {
    for terms in [
        Deterministic::None,
        Deterministic::Constant,
        Deterministic::Trend,
        Deterministic::QuadraticTrend,
    ] {
        let name = format!("ADF {terms:?} 0");
        let null = simulate_unit_root(&name, 51, simulation(4000), &NoStore, |y| {
            Ok(adf(y, terms, Lags::Fixed(0))?.statistic)
        });
        let surface = mackinnon_critical(terms, 1, 50).unwrap();
        for (p, wanted) in [
            (0.01, surface.one),
            (0.05, surface.five),
            (0.10, surface.ten),
        ] {
            let (found, allowed) = (null.quantile(p), 3.0 * null.quantile_error(p));
            assert!(
                (found - wanted).abs() < allowed,
                "{name} {p}: {found} {wanted}"
            );
        }
    }
    let null = simulate_unit_root("DF-GLS c 0", 500, simulation(600), &NoStore, |y| {
        Ok(df_gls(y, Deterministic::Constant, Lags::Fixed(0))?.statistic)
    });
    let wanted = mackinnon_critical(Deterministic::None, 1, 500)
        .unwrap()
        .five;
    assert!(
        (null.quantile(0.05) - wanted).abs() < 0.2,
        "{}",
        null.quantile(0.05)
    );
}

#[test]
fn tails_invert_quantiles() {
    let null = NullDistribution::from_draws((0..1000).rev().map(f64::from).collect());
    for p in [0.001, 0.01, 0.3, 0.5, 0.95, 0.999] {
        let x = null.quantile(p);
        assert!((null.lower_tail(x) - p).abs() < 1e-12);
        assert!((null.upper_tail(x) - (1.0 - p)).abs() < 1e-12);
    }
    assert!((null.upper_tail(1e9) - 0.0005).abs() < 1e-15);
    // Thinned, the quantiles stay.
    let many = NullDistribution::from_draws((0..100_000).map(f64::from).collect());
    assert!(many.quantiles.len() == 4000 && (many.quantile(0.95) - 94_999.5).abs() < 1.0);
}

/// Danish money demand is a textbook case of a level relation.
#[test]
fn a_verdict_at_the_exact_size() {
    let (y, x) = (danish("lrm"), ["lry", "ibo", "ide"].map(danish));
    let data = ArdlData {
        y: &y,
        x: &x,
        fixed: &[],
    };
    let orders = ArdlOrders {
        p: 3,
        q: vec![1, 3, 2],
    };
    let fit = Ardl::fit(&data, orders.clone(), BoundsCase::III).unwrap();
    let bounds = fit.bounds().unwrap();
    let design = BoundsDesign {
        observations: bounds.observations,
        regressors: 3,
        case: BoundsCase::III,
        orders: Some(orders),
    };
    let null = design.simulate(simulation(2000), &NoStore).unwrap();
    assert_eq!(bounds.judge(&null, 0.05), LevelRelation::Cointegrated);
    // Judged by distributions in which its own values are common, it finds nothing.
    let common = |x: f64| {
        [0, 1].map(|_| NullDistribution::from_draws((0..100).map(|i| x + f64::from(i)).collect()))
    };
    let weak = BoundsNull {
        f: common(bounds.f),
        ..null.clone()
    };
    assert_eq!(bounds.judge(&weak, 0.05), LevelRelation::None);
    let weak = BoundsNull {
        f_regressors: common(bounds.f_regressors.unwrap()),
        ..null.clone()
    };
    assert_eq!(
        bounds.judge(&weak, 0.05),
        LevelRelation::DependentStationary
    );
    let weak = BoundsNull {
        t: common(bounds.t - 50.0),
        ..null
    };
    assert_eq!(bounds.judge(&weak, 0.05), LevelRelation::NoAdjustment);
}
