//! Null distributions of the rank tests at the exact size of a system.

use super::super::ols::as_f64;
use super::super::{NullDistribution, SeriesError, Simulation, SimulationStore, simulate};
use super::{Johansen, JohansenCase};
use crate::linalg::Projector;
use crate::linalg::decompose::{cross, from_columns, singular, thin_qr};
use crate::random::Draws;

/// Null distributions of the rank tests.
#[derive(Clone, Debug, PartialEq)]
pub struct RankNull {
    /// Trace statistic.
    pub trace: NullDistribution,
    /// Maximum eigenvalue statistic.
    pub max_eigenvalue: NullDistribution,
}

/// The system whose rank is tested.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct RankDesign {
    /// Number of series p.
    pub variables: usize,
    /// Number of relations r under the null, below p.
    pub rank: usize,
    /// Lags k of the levels, at least 1.
    pub lags: usize,
    /// Deterministic case.
    pub case: JohansenCase,
    /// Rows n.
    pub observations: usize,
}

impl Johansen {
    /// The design of the test that the rank is at most `rank`. Further short-run terms (dummies) are not in it.
    #[must_use]
    pub fn design(&self, rank: usize) -> RankDesign {
        RankDesign {
            variables: self.series,
            rank,
            lags: self.lags,
            case: self.case,
            observations: self.observations,
        }
    }
}

impl RankDesign {
    /// The same in large samples, where neither lags nor the series that are in relations count: what a
    /// statistic corrected for the sample's size is compared with.
    #[must_use]
    pub fn large(self) -> Self {
        Self {
            variables: self.variables - self.rank,
            rank: 0,
            lags: 1,
            case: self.case,
            observations: 400,
        }
    }
}

/// Simulates the null that p − r common trends are left.
///
/// Canonical correlations of `ε_t` with `F_t` after the unrestricted terms of the case and k − 1 lagged
/// differences of all p series are taken out of both, ε independent standard normal: `F_t` are the random
/// walks `Σ_{s<t} ε_s`, with the constant or trend that the case restricts to the relations; where the
/// constant (trend) is unrestricted the data have a linear (quadratic) trend, which stands in the place of
/// the first walk. Differences of the r series in relations are independent noise.
///
/// Johansen 1995, chapter 15; Osterwald-Lenum 1992 (T = 400). Reference value: one trend, unrestricted
/// constant: χ²(1) in large samples, 3.84 at 5 %.
///
/// # Errors
/// [`SeriesError::TooShort`] where the rows leave nothing to correlate.
pub fn simulate_rank(
    design: RankDesign,
    simulation: Simulation,
    store: &dyn SimulationStore,
) -> Result<RankNull, SeriesError> {
    let RankDesign {
        variables,
        rank,
        lags,
        case,
        observations,
    } = design;
    let dimension = variables.saturating_sub(rank);
    let needed = 2 * dimension + 4 + variables * lags.saturating_sub(1);
    if dimension == 0 || lags == 0 || observations < needed {
        return Err(SeriesError::TooShort {
            series: "the simulated system".to_owned(),
            observations,
            needed,
        });
    }
    let settings =
        format!("rank;T={observations};series={variables};rank={rank};lags={lags};case={case:?}");
    let [trace, max_eigenvalue] = simulate(simulation, &settings, store, |draws| {
        one(design, draws).unwrap_or([f64::NAN; 2])
    });
    Ok(RankNull {
        trace,
        max_eigenvalue,
    })
}

fn one(design: RankDesign, draws: &mut Draws) -> Option<[f64; 2]> {
    let (n, skip) = (design.observations, design.lags - 1);
    let dimension = design.variables - design.rank;
    let changes: Vec<Vec<f64>> = (0..design.variables)
        .map(|_| (0..skip + n).map(|_| draws.normal()).collect())
        .collect();
    let steps: Vec<Vec<f64>> = changes[..dimension]
        .iter()
        .map(|c| c[skip..].to_vec())
        .collect();
    let mut levels: Vec<Vec<f64>> = changes[..dimension]
        .iter()
        .map(|changes| {
            let mut level = 0.0;
            let before = changes.iter().map(|step| {
                level += step;
                level - step
            });
            before.skip(skip).collect()
        })
        .collect();
    let power = |p: i32| -> Vec<f64> { (1..=n).map(|t| (as_f64(t) / as_f64(n)).powi(p)).collect() };
    let mut terms = Vec::new();
    match design.case {
        JohansenCase::None => {}
        JohansenCase::RestrictedConstant => levels.push(power(0)),
        JohansenCase::Constant => {
            levels[0] = power(1);
            terms.push(power(0));
        }
        JohansenCase::RestrictedTrend => {
            levels.push(power(1));
            terms.push(power(0));
        }
        JohansenCase::Trend => {
            levels[0] = power(2);
            terms.extend([power(0), power(1)]);
        }
    }
    let mut projector = Projector::new(n);
    for term in &terms {
        projector.push(term)?;
    }
    for changes in &changes {
        for lag in 1..=skip {
            projector.push(&changes[skip - lag..skip - lag + n])?;
        }
    }
    let factor = |mut columns: Vec<Vec<f64>>| {
        columns.iter_mut().for_each(|c| projector.residuals(c));
        thin_qr(&from_columns(&columns))
    };
    let (left, right) = (factor(steps)?, factor(levels)?);
    let correlations = singular(&cross(&left.q, &right.q))?.values;
    let log = |s: &f64| -as_f64(n) * (-(s * s)).ln_1p();
    Some([correlations.iter().map(log).sum(), log(&correlations[0])])
}

#[cfg(test)]
mod tests {
    use super::super::super::{NoStore, Regressor};
    use super::super::johansen;
    use super::*;

    /// Osterwald-Lenum 1992, and χ²(1) for one trend beside an unrestricted constant or trend.
    #[test]
    fn published_critical_values_are_met() {
        let simulation = Simulation {
            draws: 1500,
            seed: 2,
            threads: 2,
        };
        for (dimension, case, wanted) in [
            (1, JohansenCase::None, None),
            (1, JohansenCase::RestrictedConstant, Some(9.24)),
            (2, JohansenCase::RestrictedConstant, Some(19.96)),
            (1, JohansenCase::Constant, Some(3.841)),
            (1, JohansenCase::RestrictedTrend, Some(12.25)),
            (1, JohansenCase::Trend, Some(3.841)),
        ] {
            let design = RankDesign {
                variables: dimension,
                rank: 0,
                lags: 1,
                case,
                observations: 400,
            };
            let null = simulate_rank(design, simulation, &NoStore).unwrap();
            let found = null.trace.quantile(0.95);
            // The published table has 6,000 draws.
            let error = null.trace.quantile_error(0.95) * (1.0_f64 + 1500.0 / 6000.0).sqrt();
            if let Some(wanted) = wanted {
                let gap: f64 = found - wanted;
                assert!(
                    gap.abs() < 3.0 * error + 0.005,
                    "{case:?} {dimension}: {found}"
                );
            }
            assert!(null.max_eigenvalue.quantile(0.95) <= found);
        }
        let short = RankDesign {
            variables: 3,
            rank: 0,
            lags: 1,
            case: JohansenCase::None,
            observations: 9,
        };
        assert!(simulate_rank(short, simulation, &NoStore).is_err());
    }

    /// Whole systems of independent random walks have the trace statistics that the null says, lags included.
    #[test]
    fn the_null_is_that_of_the_whole_regression() {
        let n = 55;
        let design = RankDesign {
            variables: 3,
            rank: 0,
            lags: 2,
            case: JohansenCase::RestrictedConstant,
            observations: n - 2,
        };
        let simulation = Simulation {
            draws: 1000,
            seed: 4,
            threads: 2,
        };
        let null = simulate_rank(design, simulation, &NoStore).unwrap();
        let critical = null.trace.quantile(0.95);
        assert!(
            critical
                > simulate_rank(design.large(), simulation, &NoStore)
                    .unwrap()
                    .trace
                    .quantile(0.95)
        );
        let rejected = (0..400)
            .filter(|i| {
                let mut draws = Draws::new(90, *i);
                let series: Vec<Regressor> = ["a", "b", "c"]
                    .iter()
                    .map(|name| {
                        let mut level = 0.0;
                        let walk = (0..n).map(|_| {
                            level += draws.normal();
                            level
                        });
                        Regressor::new(name, walk.collect())
                    })
                    .collect();
                let found = johansen(&series, 2, JohansenCase::RestrictedConstant, &[]).unwrap();
                assert_eq!(found.design(0), design);
                found.tests[0].trace > critical
            })
            .count();
        // 5 per cent of 400, give or take 3.3 standard errors of both simulations.
        assert!((6..=40).contains(&rejected), "{rejected}");
    }
}
