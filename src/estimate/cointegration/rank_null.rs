//! Null distribution of the trace statistic at the exact size.

use super::JohansenCase;
use super::johansen::reduced_rank;
use crate::estimate::ols::as_f64;
use crate::estimate::{NullDistribution, Regressor, Simulation, SimulationStore, simulate};

/// Drift of one series a period, in standard deviations of its step: large, so that its path is the trend that the
/// published distributions have.
const DRIFT: f64 = 10.0;

/// Simulates the trace statistic where `trends` = p − r common trends are left: independent random walks over
/// `observations` + `lags` periods, with the lags and the deterministic case of the system.
///
/// Where the constant (or trend) is unrestricted the data have a linear (quadratic) trend, carried by one series, as
/// in the published distributions. Johansen 1995, chapter 15; Osterwald-Lenum 1992. Reference value: constant
/// unrestricted, one trend, many observations: χ²(1), 3.84 at 5 %.
#[must_use]
pub fn rank_null(
    observations: usize,
    trends: usize,
    lags: usize,
    case: JohansenCase,
    simulation: Simulation,
    store: &dyn SimulationStore,
) -> NullDistribution {
    let settings = format!("trace;T={observations};trends={trends};lags={lags};case={case:?}");
    let [mut distribution] = simulate(simulation, &settings, store, |draws| {
        let n = observations + lags;
        let walks: Vec<Regressor> = (0..trends)
            .map(|series| {
                let mut level = 0.0;
                let values = (0..n).map(|t| {
                    let drift = match case {
                        JohansenCase::Constant if series == 0 => DRIFT,
                        JohansenCase::Trend if series == 0 => DRIFT * as_f64(t),
                        JohansenCase::None
                        | JohansenCase::RestrictedConstant
                        | JohansenCase::Constant
                        | JohansenCase::RestrictedTrend
                        | JohansenCase::Trend => 0.0,
                    };
                    level += drift + draws.normal();
                    level
                });
                Regressor::new("random walk", values.collect())
            })
            .collect();
        let system = reduced_rank(&walks, lags, case, &[]);
        [system.map_or(f64::NAN, |s| s.tests[0].trace)]
    });
    distribution.quantiles.retain(|q| !q.is_nan());
    distribution
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::estimate::NoStore;

    /// Osterwald-Lenum 1992 (Oxford Bulletin of Economics and Statistics 54(3)) where the table has the case, and
    /// χ²(1) for one trend under an unrestricted constant; at many observations.
    #[test]
    fn quantiles_are_the_published_ones() {
        let table = include_str!("../../../fixtures/reference/johansen-osterwald-lenum-1992.csv");
        let published = |case: &str, trends: usize| -> f64 {
            let start = format!("{case},trace,{trends},");
            let row = table.lines().find(|l| l.starts_with(&start)).unwrap();
            row.split(',').nth(4).unwrap().parse().unwrap()
        };
        let simulation = Simulation {
            draws: 1500,
            seed: 5,
            threads: 2,
        };
        for (case, trends, wanted) in [
            (
                JohansenCase::Constant,
                1,
                crate::dist::chi2_upper(0.05, 1.0),
            ),
            (JohansenCase::RestrictedConstant, 2, published("const", 2)),
            (JohansenCase::RestrictedTrend, 1, published("trend", 1)),
        ] {
            let null = rank_null(250, trends, 1, case, simulation, &NoStore);
            let (found, error) = (null.quantile(0.95), null.quantile_error(0.95));
            assert!(
                (found - wanted).abs() < 3.0 * error + 0.1,
                "{case:?} {trends}: {found} ({error}), published {wanted}"
            );
        }
    }
}
