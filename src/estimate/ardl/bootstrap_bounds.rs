//! Bounds tests with a bootstrap null distribution in place of two bounds.

use serde::Serialize;
use utoipa::ToSchema;

use super::super::blocks::Blocks;
use super::super::bootstrap_equation::{BootstrapEquation, centred, weigh};
use super::super::series_error::{differences, regress};
use super::super::simulation::{NullDistribution, Simulation, replicate};
use super::super::system_bootstrap::{change_equations, next_change};
use super::super::{BoundsDesign, Regressor, SeriesError};
use super::model::{in_levels, levels_map};
use super::{Ardl, ArdlData, ArdlOrders, BoundsCase, BoundsStatistics, LevelRelation};
use crate::random::Draws;

/// Bounds tests against their own bootstrap distributions. There is one critical value a test, so no
/// region between two bounds.
#[derive(Clone, Debug, PartialEq)]
pub struct BootstrapBounds {
    /// The statistics of the sample.
    pub statistics: BoundsStatistics,
    /// Null distribution of the overall F.
    pub f: NullDistribution,
    /// Of the t of the lagged dependent variable.
    pub t: NullDistribution,
    /// Of the F of the lagged regressors; none without regressors.
    pub f_regressors: Option<NullDistribution>,
    /// Replicates without all statistics, which are left out.
    pub failed: usize,
}

/// p-values of the three tests.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, ToSchema)]
pub struct BootstrapBoundsP {
    /// Overall F, upper tail.
    pub f: f64,
    /// t of the lagged dependent variable, lower tail.
    pub t: f64,
    /// F of the lagged regressors, upper tail; none without regressors.
    pub f_regressors: Option<f64>,
}

impl BootstrapBounds {
    /// The p-values.
    #[must_use]
    pub fn p_values(&self) -> BootstrapBoundsP {
        let f_regressors = self.f_regressors.as_ref().zip(self.statistics.f_regressors);
        BootstrapBoundsP {
            f: self.f.upper_tail(self.statistics.f),
            t: self.t.lower_tail(self.statistics.t),
            f_regressors: f_regressors.map(|(null, x)| null.upper_tail(x)),
        }
    }

    /// What the tests say together at a level (0.05): see [`LevelRelation`] for the degenerate cases.
    /// Inconclusive where the overall F alone rejects.
    #[must_use]
    pub fn judge(&self, level: f64) -> LevelRelation {
        let p = self.p_values();
        let (f, t) = (p.f < level, p.t < level);
        let f_x = p.f_regressors.is_none_or(|p| p < level);
        match (f, t, f_x) {
            (true, true, true) => LevelRelation::Cointegrated,
            (true, true, false) => LevelRelation::DependentStationary,
            (true, false, true) => LevelRelation::NoAdjustment,
            (true, false, false) => LevelRelation::Inconclusive,
            (false, ..) => LevelRelation::None,
        }
    }
}

/// The bounds tests of an ARDL equation with null distributions by resampling.
///
/// For each test the equation is estimated with its null imposed (overall F: without lagged levels and the
/// restricted term; t: without `y_{t−1}`; F of the regressors: without all `x_{t−1}`), the regressors by
/// `Δx_jt = c_j + Σ_{i≤lags} (A_ji Δx_{t−i} + a_ji Δy_{t−i}) + u_jt`, so that they may respond to y. A replicate draws dates jointly
/// for the centred residuals of all equations, runs them forward from the first observations, and gives
/// the statistic of the unrestricted equation. [`Blocks::Moving`] of length 1 draws single dates, as the source
/// does; orders stay those of the sample. Constants are kept, so a sample with drift has a null with drift.
///
/// t and the F of the regressors tell the degenerate cases apart once the overall F rejects. Their nulls keep
/// the other coefficients as estimated, so that alone, without any relation, they reject too often.
///
/// `McNown`, Sam & Goh 2018, Applied Economics 50(13). Degenerate cases: [`LevelRelation`]. Reference: no published
/// digits; under the null the p-values are uniform, which a test checks by simulation.
///
/// # Errors
/// [`SeriesError`], as [`Ardl::fit`] and for regressors whose own equations cannot be estimated.
pub fn bootstrap_bounds(
    data: &ArdlData<'_>,
    orders: &ArdlOrders,
    case: BoundsCase,
    lags: usize,
    blocks: Blocks,
    simulation: Simulation,
) -> Result<BootstrapBounds, SeriesError> {
    let whole = Ardl::fit(data, orders.clone(), case)?;
    let statistics = whole.bounds()?;
    let n = data.y.values.len();
    let skip = orders.longest();
    let start = skip.max(lags + 1);
    let levels = whole.at..=whole.at + whole.regressors;
    let overall: Vec<usize> = levels.clone().chain(case.restricted()).collect();
    let mut nulls = vec![overall, vec![whole.at]];
    if whole.regressors > 0 {
        nulls.push(levels.skip(1).collect());
    }
    let restricted = nulls
        .iter()
        .map(|dropped| impose(&whole, data, dropped))
        .collect::<Result<Vec<_>, _>>()?;
    let residuals: Vec<Vec<f64>> = restricted.iter().map(|e| e.shocks(start)).collect();
    let marginal = change_equations(data.x, &[data.y], lags)?;
    let innovations: Vec<Vec<f64>> = marginal
        .iter()
        .map(|fit| centred(fit.residuals[start - 1 - lags..].to_vec()))
        .collect();
    let design = BoundsDesign {
        observations: n - skip,
        regressors: whole.regressors,
        case,
        orders: Some(orders.clone()),
    };
    let terms = case.deterministic().columns(n);
    let terms: Vec<Vec<f64>> = terms
        .iter()
        .chain(data.fixed)
        .map(|t| t.values[skip..].to_vec())
        .collect();
    let k = data.x.len();
    let one = |draws: &mut Draws| -> [f64; 3] {
        let drawn = blocks.draw(n - start, draws);
        let mut found = [f64::NAN; 3];
        for (null, (equation, shocks)) in restricted.iter().zip(&residuals).enumerate() {
            // The regressors, then y: the order of the marginal equations.
            let series = data.x.iter().chain([data.y]);
            let mut all: Vec<Vec<f64>> = series.map(|s| s.values.clone()).collect();
            for (t, drawn) in (start..n).zip(&drawn) {
                for j in 0..k {
                    let change = next_change(&marginal[j].coefficients, t, lags, &all)
                        + innovations[j][drawn.date] * drawn.factor;
                    all[j][t] = all[j][t - 1] + change;
                }
                let (x, y) = all.split_at_mut(k);
                y[0][t] = equation.next(t, &y[0], |j| &x[j]) + shocks[drawn.date] * drawn.factor;
            }
            found[null] = design.statistics(&all[k], &all[..k], skip, &terms)[null];
        }
        found
    };
    let rows = replicate(simulation, one);
    let whole_row = |row: &&[f64; 3]| row[..nulls.len()].iter().all(|s| s.is_finite());
    let kept: Vec<&[f64; 3]> = rows.iter().filter(whole_row).collect();
    let null = |i: usize| NullDistribution::from_draws(kept.iter().map(|r| r[i]).collect());
    Ok(BootstrapBounds {
        statistics,
        f: null(0),
        t: null(1),
        f_regressors: (k > 0).then(|| null(2)),
        failed: rows.len() - kept.len(),
    })
}

/// The equation without these columns, as a recursion.
fn impose<'a>(
    whole: &Ardl,
    data: &ArdlData<'a>,
    dropped: &[usize],
) -> Result<BootstrapEquation<'a>, SeriesError> {
    let skip = whole.orders.longest();
    let change = differences(&data.y.values[skip - 1..]);
    let left: Vec<usize> = (0..whole.ecm.k).filter(|j| !dropped.contains(j)).collect();
    let mut coefficients = vec![0.0; whole.ecm.k];
    if !left.is_empty() {
        let columns: Vec<Regressor> = left
            .iter()
            .map(|j| whole.ecm.regressors[*j].clone())
            .collect();
        let fit = regress(&data.y.name, &change, columns)?;
        for (j, c) in left.iter().zip(&fit.coefficients) {
            coefficients[*j] = *c;
        }
    }
    let n = data.y.values.len();
    let terms = whole.case.deterministic().columns(n);
    let exogenous = weigh(n, terms.iter().chain(data.fixed).zip(&coefficients));
    let map = levels_map(&whole.orders, whole.at, whole.ecm.k);
    let levels = in_levels(&map, &coefficients);
    Ok(BootstrapEquation::of_levels(
        data,
        &whole.orders,
        &levels,
        exogenous,
    ))
}

#[cfg(test)]
mod tests {
    use super::super::super::test_data::danish;
    use super::super::super::{BoundsNull, NoStore};
    use super::*;

    fn simulation(draws: usize, threads: usize) -> Simulation {
        Simulation {
            draws,
            seed: 3,
            threads,
        }
    }

    fn series(name: &str, n: usize, persistence: f64, stream: u64) -> Regressor {
        let mut draws = Draws::new(21, stream);
        let mut level = 0.0;
        let values: Vec<f64> = (0..n)
            .map(|_| {
                level = persistence * level + draws.normal();
                level
            })
            .collect();
        // Without drift, which the bootstrap would take over where simulation has none.
        let drift = (values[n - 1] - values[0]) / (n - 1) as f64;
        let steady = (0..n).map(|t| values[t] - drift * t as f64);
        Regressor::new(name, steady.collect())
    }

    fn run(y: &Regressor, x: &[Regressor], orders: &ArdlOrders, s: Simulation) -> BootstrapBounds {
        let data = ArdlData { y, x, fixed: &[] };
        bootstrap_bounds(&data, orders, BoundsCase::III, 1, Blocks::Moving(1), s).unwrap()
    }

    /// Independent random walks: the bootstrap recovers what simulation of I(1) regressors gives at this
    /// size. 3 standard errors of both quantiles and of the estimated differences.
    #[test]
    fn the_bootstrap_null_is_the_simulated_one_for_random_walks() {
        let (y, x) = (series("y", 90, 1.0, 1), [series("x", 90, 1.0, 2)]);
        let orders = ArdlOrders { p: 1, q: vec![1] };
        let found = run(&y, &x, &orders, simulation(500, 2));
        assert_eq!(found.failed, 0);
        let design = BoundsDesign {
            observations: 89,
            regressors: 1,
            case: BoundsCase::III,
            orders: Some(orders.clone()),
        };
        let null: BoundsNull = design.simulate(simulation(1500, 2), &NoStore).unwrap();
        let compare = |what: &str, a: &NullDistribution, b: &NullDistribution, p: f64| {
            let error = a.quantile_error(p).hypot(b.quantile_error(p));
            let off = (a.quantile(p) - b.quantile(p)).abs();
            assert!(
                off < 3.5 * error,
                "{what} {p}: {} {}",
                a.quantile(p),
                b.quantile(p)
            );
        };
        for p in [0.5, 0.8, 0.9] {
            compare("F", &found.f, &null.f[1], p);
        }
        assert_eq!(found.judge(0.05), LevelRelation::None);
        assert_eq!(
            found,
            run(&y, &x, &orders, simulation(500, 1)),
            "threads change nothing"
        );
    }

    /// What each imposed equation leaves of the sample are the residuals of least squares without the columns of
    /// its null.
    #[test]
    fn every_null_is_imposed() {
        let (y, x) = (danish("lrm"), ["lry", "ibo"].map(danish));
        let (y, x) = (&y, &x[..]);
        let data = ArdlData { y, x, fixed: &[] };
        let orders = ArdlOrders {
            p: 2,
            q: vec![0, 2],
        };
        let whole = Ardl::fit(&data, orders, BoundsCase::II).unwrap();
        let change = differences(&y.values[1..]);
        // const, y.L1, lry.L0, ibo.L1, d.y.L1, d.ibo.L0, d.ibo.L1.
        for dropped in [vec![0, 1, 2, 3], vec![1], vec![2, 3]] {
            let kept = (0..7).filter(|j| !dropped.contains(j));
            let columns: Vec<Regressor> = kept.map(|j| whole.ecm.regressors[j].clone()).collect();
            let wanted = regress("y", &change, columns).unwrap().residuals;
            let found = impose(&whole, &data, &dropped).unwrap().shocks(2);
            for (found, wanted) in found.iter().zip(centred(wanted)) {
                assert!(
                    (found - wanted).abs() < 1e-12,
                    "{dropped:?}: {found} {wanted}"
                );
            }
        }
    }

    /// Danish money demand is cointegrated by the published bounds; a stationary series beside a random walk is
    /// the degenerate case of a dependent variable that is stationary by itself.
    #[test]
    fn relations_and_degenerate_cases_are_told_apart() {
        let (y, x) = (danish("lrm"), ["lry", "ibo"].map(danish));
        let orders = ArdlOrders {
            p: 1,
            q: vec![0, 1],
        };
        let found = run(&y, &x, &orders, simulation(199, 2));
        assert!(found.p_values().f < 0.05, "{:?}", found.p_values());
        assert_eq!(found.judge(0.05), LevelRelation::Cointegrated);

        let (y, x) = (series("y", 100, 0.2, 5), [series("x", 100, 1.0, 6)]);
        let found = run(&y, &x, &ArdlOrders { p: 1, q: vec![1] }, simulation(199, 2));
        assert_eq!(found.judge(0.05), LevelRelation::DependentStationary);

        let null = NullDistribution::from_draws((0..100).map(f64::from).collect());
        let judge = |f: f64, t: f64, f_x: f64| {
            let mut told = found.clone();
            told.statistics.f = f;
            told.statistics.t = t;
            told.statistics.f_regressors = Some(f_x);
            (told.f, told.t) = (null.clone(), null.clone());
            told.f_regressors = Some(null.clone());
            told.judge(0.05)
        };
        assert_eq!(judge(98.0, 1.0, 98.0), LevelRelation::Cointegrated);
        assert_eq!(judge(98.0, 1.0, 50.0), LevelRelation::DependentStationary);
        assert_eq!(judge(98.0, 50.0, 98.0), LevelRelation::NoAdjustment);
        assert_eq!(judge(98.0, 50.0, 50.0), LevelRelation::Inconclusive);
        assert_eq!(judge(50.0, 1.0, 98.0), LevelRelation::None);
    }
}
