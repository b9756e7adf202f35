//! Bootstrap of demand equations together with the series that drive them.

use super::blocks::Blocks;
use super::bootstrap_equation::{BootstrapEquation, centred};
use super::series_error::{check, differences, regress};
use super::{Ardl, ArdlData, Ols, Regressor, SeriesError};
use crate::random::Draws;

/// Equations estimated on one set of observations, with the series that drive them.
///
/// A replicate draws dates once and takes residuals of all equations and innovations of all drivers from
/// those dates, so that what moved together stays together: `Δd*_t = ĉ + Σ Â_i Δd*_{t−i} + û_{τ(t)}`, cumulated from the
/// first observations of the sample; then every `y*` by its own equation in levels with `ê_{τ(t)}` (both
/// centred, both times the factor of the date). Levels that are I(1) are never resampled themselves.
///
/// After Li & Maddala 1997, Journal of Econometrics 80(2), with blocks of dates.
#[derive(Clone, Debug)]
pub struct SystemBootstrap<'a> {
    equations: Vec<BootstrapEquation<'a>>,
    /// Position of each equation's regressors among the drivers.
    places: Vec<Vec<usize>>,
    drivers: &'a [Regressor],
    /// Per driver: constant, then drivers at lag 1, 2, …; empty where drivers are held fixed.
    var: Vec<Vec<f64>>,
    var_lags: usize,
    /// Innovations and residuals on the common dates, drivers first.
    shocks: Vec<Vec<f64>>,
    /// First observation that is drawn.
    start: usize,
}

/// One replicate.
#[derive(Clone, Debug, PartialEq)]
pub struct Replicate {
    /// The dependent variables, in the order of the equations.
    pub dependent: Vec<Regressor>,
    /// The drivers.
    pub drivers: Vec<Regressor>,
}

impl<'a> SystemBootstrap<'a> {
    /// Prepares a bootstrap of ARDL equations: see [`SystemBootstrap::of`].
    ///
    /// # Errors
    /// As there.
    pub fn new(
        equations: &[(&'a Ardl, ArdlData<'a>)],
        drivers: &'a [Regressor],
        var_lags: Option<usize>,
    ) -> Result<Self, SeriesError> {
        let prepared = equations.iter();
        let prepared = prepared.map(|(fit, data)| BootstrapEquation::ardl(fit, data));
        Self::of(prepared.collect(), drivers, var_lags)
    }

    /// Prepares a bootstrap. Regressors of the equations are found among the drivers by name.
    ///
    /// `var_lags` of changes in the drivers' vector autoregression (with constant), or none to hold the
    /// drivers fixed: the bootstrap is then conditional on them.
    ///
    /// # Errors
    /// [`SeriesError`] where a regressor is not among the drivers, lengths differ, or the vector
    /// autoregression cannot be estimated.
    pub fn of(
        equations: Vec<BootstrapEquation<'a>>,
        drivers: &'a [Regressor],
        var_lags: Option<usize>,
    ) -> Result<Self, SeriesError> {
        let dependent = equations.iter().map(|e| e.y);
        let all: Vec<&Regressor> = dependent.chain(drivers).collect();
        check(&all)?;
        let n = all.first().map_or(0, |s| s.values.len());
        let place = |x: &Regressor| {
            let place = drivers.iter().position(|d| d.name == x.name);
            place.ok_or_else(|| SeriesError::Option {
                method: "bootstrap",
                fault: format!("{} is not among the drivers", x.name),
            })
        };
        let places = equations
            .iter()
            .map(|e| e.x.iter().map(place).collect())
            .collect::<Result<_, _>>()?;
        let lags = var_lags.unwrap_or(0);
        let longest = equations.iter().map(BootstrapEquation::longest);
        let start = longest.fold(lags + 1, usize::max);
        if n < start + 2 {
            return Err(SeriesError::TooShort {
                series: all[0].name.clone(),
                observations: n,
                needed: start + 2,
            });
        }
        let var = match var_lags {
            Some(lags) => change_equations(drivers, &[], lags)?,
            None => Vec::new(),
        };
        let innovations = var
            .iter()
            .map(|fit| centred(fit.residuals[start - 1 - lags..].to_vec()));
        let residuals = equations.iter().map(|e| e.shocks(start));
        Ok(Self {
            shocks: innovations.chain(residuals).collect(),
            var: var.into_iter().map(|fit| fit.coefficients).collect(),
            equations,
            places,
            drivers,
            var_lags: lags,
            start,
        })
    }

    /// Centred innovations and residuals on the dates that are drawn from, drivers first: what
    /// [`super::automatic_block_length`] is asked about.
    #[must_use]
    pub fn shocks(&self) -> &[Vec<f64>] {
        &self.shocks
    }

    /// One replicate from its own draws.
    #[must_use]
    pub fn replicate(&self, blocks: Blocks, draws: &mut Draws) -> Replicate {
        let n = self.drivers.first().map_or(0, |d| d.values.len());
        let drawn = blocks.draw(n - self.start, draws);
        let mut drivers: Vec<Vec<f64>> = self.drivers.iter().map(|d| d.values.clone()).collect();
        if !self.var.is_empty() {
            let mut changes = vec![0.0; drivers.len()];
            for (t, drawn) in (self.start..n).zip(&drawn) {
                let equations = self.var.iter().zip(&self.shocks);
                for (change, (equation, shocks)) in changes.iter_mut().zip(equations) {
                    *change = shocks[drawn.date] * drawn.factor
                        + next_change(equation, t, self.var_lags, &drivers);
                }
                for (driver, change) in drivers.iter_mut().zip(&changes) {
                    driver[t] = driver[t - 1] + change;
                }
            }
        }
        let residuals = &self.shocks[self.var.len()..];
        let equations = self.equations.iter().zip(&self.places).zip(residuals);
        let dependent = equations.map(|((equation, places), shocks)| {
            let mut y = equation.y.values.clone();
            for (t, drawn) in (self.start..n).zip(&drawn) {
                y[t] = equation.next(t, &y, |j| &drivers[places[j]])
                    + shocks[drawn.date] * drawn.factor;
            }
            Regressor::new(&equation.y.name, y)
        });
        Replicate {
            dependent: dependent.collect(),
            drivers: self
                .drivers
                .iter()
                .zip(drivers)
                .map(|(d, values)| Regressor {
                    name: d.name.clone(),
                    values,
                })
                .collect(),
        }
    }
}

/// Least squares of the change of every series on a constant and on the changes at lags 1 to `lags` of all of
/// them and of `others`, lag by lag.
pub(super) fn change_equations(
    series: &[Regressor],
    others: &[&Regressor],
    lags: usize,
) -> Result<Vec<Ols>, SeriesError> {
    let n = series.first().map_or(0, |s| s.values.len());
    let all: Vec<&Regressor> = series.iter().chain(others.iter().copied()).collect();
    let changes: Vec<Vec<f64>> = all.iter().map(|s| differences(&s.values)).collect();
    let rows = n.saturating_sub(lags + 1);
    let equation = |(series, change): (&Regressor, &Vec<f64>)| {
        if rows < all.len() * lags + 2 {
            return Err(SeriesError::TooShort {
                series: series.name.clone(),
                observations: n,
                needed: all.len() * lags + 3 + lags,
            });
        }
        let mut regressors = vec![Regressor::constant(rows)];
        for lag in 1..=lags {
            for (other, change) in all.iter().zip(&changes) {
                let values = change[lags - lag..lags - lag + rows].to_vec();
                regressors.push(Regressor::new(&format!("d.{}.L{lag}", other.name), values));
            }
        }
        regress(&series.name, &change[lags..], regressors)
    };
    series.iter().zip(&changes).map(equation).collect()
}

/// What an equation of [`change_equations`] gives for observation t of the levels, without its innovation.
pub(super) fn next_change(equation: &[f64], t: usize, lags: usize, levels: &[Vec<f64>]) -> f64 {
    let mut value = equation[0];
    for lag in 1..=lags {
        let coefficients = &equation[1 + (lag - 1) * levels.len()..];
        for (coefficient, level) in coefficients.iter().zip(levels) {
            value += coefficient * (level[t - lag] - level[t - lag - 1]);
        }
    }
    value
}

#[cfg(test)]
mod tests {
    use super::super::test_data::{close, penn};
    use super::super::{ArdlOrders, BoundsCase, QuickArdl, Simulation, replicate};
    use super::*;

    struct Demand {
        m: Regressor,
        x: Regressor,
        imports: [Regressor; 2],
        exports: [Regressor; 2],
        drivers: Vec<Regressor>,
    }

    impl Demand {
        fn new() -> Self {
            let imports = ["ln_y", "ln_rpm"].map(|s| penn("BRA", s));
            let exports = ["ln_z", "ln_rpx"].map(|s| penn("BRA", s));
            Self {
                m: penn("BRA", "ln_m"),
                x: penn("BRA", "ln_x"),
                drivers: imports.iter().chain(&exports).cloned().collect(),
                imports,
                exports,
            }
        }

        fn data(&self) -> [ArdlData<'_>; 2] {
            [(&self.m, &self.imports), (&self.x, &self.exports)].map(|(y, x)| ArdlData {
                y,
                x,
                fixed: &[],
            })
        }
    }

    fn fits(data: &[ArdlData<'_>; 2]) -> [Ardl; 2] {
        [(0, vec![1, 0]), (1, vec![1, 1])]
            .map(|(i, q)| Ardl::fit(&data[i], ArdlOrders { p: 1, q }, BoundsCase::III).unwrap())
    }

    /// Dates drawn in their own order give the sample back: the equations and the vector autoregression
    /// reproduce what they were estimated from.
    #[test]
    fn the_sample_itself_comes_back_at_its_own_dates() {
        let demand = Demand::new();
        let data = demand.data();
        let [m, x] = fits(&data);
        let equations = [(&m, data[0].clone()), (&x, data[1].clone())];
        for lags in [None, Some(1)] {
            let system = SystemBootstrap::new(&equations, &demand.drivers, lags).unwrap();
            let n = demand.m.values.len();
            // One block as long as the sample leaves no choice.
            let whole = Blocks::Moving(n - system.start);
            let back = system.replicate(whole, &mut Draws::new(1, 0));
            for t in 0..n {
                // Centring moves the path by the mean of the residuals dropped at the start.
                close("m", back.dependent[0].values[t], demand.m.values[t], 0.01);
                close("x", back.dependent[1].values[t], demand.x.values[t], 0.01);
                close(
                    "y",
                    back.drivers[0].values[t],
                    demand.drivers[0].values[t],
                    0.01,
                );
            }
        }
    }

    /// Replicates scatter around the estimates they were drawn from, move together across equations, and
    /// depend on the seed alone.
    #[test]
    fn replicates_scatter_around_the_estimates() {
        let demand = Demand::new();
        let data = demand.data();
        let [m, x] = fits(&data);
        let equations = [(&m, data[0].clone()), (&x, data[1].clone())];
        let system = SystemBootstrap::new(&equations, &demand.drivers, Some(1)).unwrap();
        let run = |blocks: Blocks, threads: usize| {
            let simulation = Simulation {
                draws: 200,
                seed: 5,
                threads,
            };
            replicate(simulation, |draws| {
                let r = system.replicate(blocks, draws);
                let data = ArdlData {
                    y: &r.dependent[0],
                    x: &r.drivers[..2],
                    fixed: &[],
                };
                let fit = QuickArdl::fit(&data, &m.orders, m.case, m.orders.longest());
                fit.unwrap().adjustment()
            })
        };
        for blocks in [Blocks::Stationary(3.0), Blocks::DependentWild(3)] {
            let found = run(blocks, 2);
            assert_eq!(found, run(blocks, 1));
            let mean = found.iter().sum::<f64>() / 200.0;
            let spread = (found.iter().map(|f| (f - mean).powi(2)).sum::<f64>() / 199.0).sqrt();
            // Adjustment is biased away from zero in small samples, by less than two standard errors.
            assert!(
                (mean - m.adjustment).abs() < 2.0 * m.adjustment_error,
                "{blocks:?}: {mean} {}",
                m.adjustment
            );
            assert!(
                spread > 0.5 * m.adjustment_error && spread < 3.0 * m.adjustment_error,
                "{blocks:?}: {spread}"
            );
        }
        assert_eq!(system.shocks().len(), 6);
        let missing = SystemBootstrap::new(&equations, &demand.drivers[1..], Some(1)).unwrap_err();
        assert!(
            missing
                .to_string()
                .contains("ln_y is not among the drivers")
        );
    }
}
