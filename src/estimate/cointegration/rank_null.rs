//! Null distributions of the rank tests at the exact number of rows.

use super::super::ols::as_f64;
use super::super::{NullDistribution, SeriesError, Simulation, SimulationStore, simulate};
use super::JohansenCase;
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

/// Simulates the null that `dimension` = p − r common trends are left, on `observations` rows.
///
/// Canonical correlations of `ε_t` with `F_t` after the unrestricted terms of the case are taken out of
/// both, ε independent standard normal: `F_t` are the random walks `Σ_{s<t} ε_s`, with the constant or
/// trend that the case restricts to the relations; where the constant (trend) is unrestricted the data
/// have a linear (quadratic) trend, which stands in the place of the first walk.
///
/// Johansen 1995, chapter 15; Osterwald-Lenum 1992 (T = 400). Reference value: one trend, unrestricted
/// constant: χ²(1) in large samples, 3.84 at 5 %.
///
/// # Errors
/// [`SeriesError::TooShort`] where the rows leave nothing to correlate.
pub fn simulate_rank(
    dimension: usize,
    case: JohansenCase,
    observations: usize,
    simulation: Simulation,
    store: &dyn SimulationStore,
) -> Result<RankNull, SeriesError> {
    let needed = 2 * dimension + 4;
    if dimension == 0 || observations < needed {
        return Err(SeriesError::TooShort {
            series: "the simulated system".to_owned(),
            observations,
            needed,
        });
    }
    let settings = format!("rank;T={observations};trends={dimension};case={case:?}");
    let [trace, max_eigenvalue] = simulate(simulation, &settings, store, |draws| {
        one(dimension, case, observations, draws).unwrap_or([f64::NAN; 2])
    });
    Ok(RankNull {
        trace,
        max_eigenvalue,
    })
}

fn one(dimension: usize, case: JohansenCase, n: usize, draws: &mut Draws) -> Option<[f64; 2]> {
    let steps: Vec<Vec<f64>> = (0..dimension)
        .map(|_| (0..n).map(|_| draws.normal()).collect())
        .collect();
    let mut levels: Vec<Vec<f64>> = steps
        .iter()
        .map(|steps| {
            let mut level = 0.0;
            let before = steps.iter().map(|step| {
                level += step;
                level - step
            });
            before.collect()
        })
        .collect();
    let power = |p: i32| -> Vec<f64> { (1..=n).map(|t| (as_f64(t) / as_f64(n)).powi(p)).collect() };
    let mut terms = Vec::new();
    match case {
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
    use super::super::super::NoStore;
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
            let null = simulate_rank(dimension, case, 400, simulation, &NoStore).unwrap();
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
        assert!(simulate_rank(3, JohansenCase::None, 9, simulation, &NoStore).is_err());
    }
}
