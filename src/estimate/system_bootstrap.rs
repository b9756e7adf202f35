//! Bootstrap of demand equations together with the series that drive them.

use super::blocks::Blocks;
use super::ols::as_f64;
use super::series_error::{check, differences, regress};
use super::{Ardl, ArdlData, Ols, Regressor, SeriesError};
use crate::random::Draws;

/// Equations estimated on one set of observations, with the series that drive them.
///
/// A replicate draws dates once and takes residuals of all equations and innovations of all drivers from
/// those dates, so that what moved together stays together: `Δd*_t = ĉ + Σ Â_i Δd*_{t−i} + û_{τ(t)}`, cumulated from the
/// first observations of the sample; then every `y*` by its own equation in levels with `ê_{τ(t)}` (both
/// centred). Levels that are I(1) are never resampled themselves.
///
/// After Li & Maddala 1997, Journal of Econometrics 80(2), with blocks of dates.
#[derive(Clone, Debug)]
pub struct SystemBootstrap<'a> {
    equations: Vec<Equation<'a>>,
    drivers: &'a [Regressor],
    /// One equation a driver; empty where drivers are held fixed.
    var: Vec<Ols>,
    var_lags: usize,
    /// Innovations and residuals on the common dates, drivers first.
    shocks: Vec<Vec<f64>>,
    /// First observation that is drawn.
    start: usize,
}

#[derive(Clone, Debug)]
struct Equation<'a> {
    fit: &'a Ardl,
    data: ArdlData<'a>,
    /// Position of each regressor among the drivers.
    places: Vec<usize>,
    /// Deterministic and fixed terms times their coefficients, over all observations.
    exogenous: Vec<f64>,
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
    /// Prepares a bootstrap. Regressors of the equations are found among the drivers by name.
    ///
    /// `var_lags` of changes in the drivers' vector autoregression (with constant), or none to hold the
    /// drivers fixed: the bootstrap is then conditional on them.
    ///
    /// # Errors
    /// [`SeriesError`] where a regressor is not among the drivers, lengths differ, or the vector
    /// autoregression cannot be estimated.
    pub fn new(
        equations: &[(&'a Ardl, ArdlData<'a>)],
        drivers: &'a [Regressor],
        var_lags: Option<usize>,
    ) -> Result<Self, SeriesError> {
        let dependent = equations.iter().map(|(_, data)| data.y);
        let all: Vec<&Regressor> = dependent.chain(drivers).collect();
        check(&all)?;
        let n = all.first().map_or(0, |s| s.values.len());
        let prepared = equations
            .iter()
            .map(|(fit, data)| Equation::new(fit, data, drivers, n))
            .collect::<Result<Vec<_>, _>>()?;
        let mut var = Vec::new();
        if let Some(lags) = var_lags {
            let changes: Vec<Vec<f64>> = drivers.iter().map(|d| differences(&d.values)).collect();
            let rows = (n - 1).saturating_sub(lags);
            for (driver, change) in drivers.iter().zip(&changes) {
                if rows < drivers.len() * lags + 2 {
                    return Err(SeriesError::TooShort {
                        series: driver.name.clone(),
                        observations: n,
                        needed: drivers.len() * lags + 3 + lags,
                    });
                }
                let mut regressors = vec![Regressor::constant(rows)];
                for lag in 1..=lags {
                    for (other, change) in drivers.iter().zip(&changes) {
                        let values = change[lags - lag..lags - lag + rows].to_vec();
                        regressors
                            .push(Regressor::new(&format!("d.{}.L{lag}", other.name), values));
                    }
                }
                var.push(regress(&driver.name, &change[lags..], regressors)?);
            }
        }
        let lags = var_lags.unwrap_or(0);
        let longest = equations.iter().map(|(fit, _)| fit.orders.longest());
        let start = longest.fold(lags + 1, usize::max);
        let fits = var.iter().chain(equations.iter().map(|(fit, _)| &fit.ecm));
        let shocks = fits
            .map(|fit| {
                let last = &fit.residuals[fit.residuals.len() - (n - start)..];
                let mean = last.iter().sum::<f64>() / as_f64(last.len());
                last.iter().map(|e| e - mean).collect()
            })
            .collect();
        Ok(Self {
            equations: prepared,
            drivers,
            var,
            var_lags: lags,
            shocks,
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
        let dates = blocks.dates(n - self.start, draws);
        let mut drivers: Vec<Vec<f64>> = self.drivers.iter().map(|d| d.values.clone()).collect();
        if !self.var.is_empty() {
            for t in self.start..n {
                let changes: Vec<f64> = self
                    .var
                    .iter()
                    .zip(&self.shocks)
                    .map(|(fit, shocks)| {
                        let lagged = (1..=self.var_lags).flat_map(|lag| {
                            drivers.iter().map(move |d| d[t - lag] - d[t - lag - 1])
                        });
                        let explained = fit.coefficients[1..].iter().zip(lagged);
                        fit.coefficients[0]
                            + explained.map(|(c, v)| c * v).sum::<f64>()
                            + shocks[dates[t - self.start]]
                    })
                    .collect();
                for (driver, change) in drivers.iter_mut().zip(changes) {
                    driver[t] = driver[t - 1] + change;
                }
            }
        }
        let residuals = &self.shocks[self.var.len()..];
        let dependent = self
            .equations
            .iter()
            .zip(residuals)
            .map(|(equation, shocks)| {
                let mut y = equation.data.y.values.clone();
                for t in self.start..n {
                    y[t] = equation.next(t, &y, &drivers) + shocks[dates[t - self.start]];
                }
                Regressor::new(&equation.data.y.name, y)
            })
            .collect();
        Replicate {
            dependent,
            drivers: self
                .drivers
                .iter()
                .zip(drivers)
                .map(|(d, values)| Regressor::new(&d.name, values))
                .collect(),
        }
    }
}

impl<'a> Equation<'a> {
    fn new(
        fit: &'a Ardl,
        data: &ArdlData<'a>,
        drivers: &[Regressor],
        n: usize,
    ) -> Result<Self, SeriesError> {
        let places = data
            .x
            .iter()
            .map(|x| {
                let place = drivers.iter().position(|d| d.name == x.name);
                place.ok_or_else(|| SeriesError::Option {
                    method: "bootstrap",
                    fault: format!("{} is not among the drivers", x.name),
                })
            })
            .collect::<Result<_, _>>()?;
        let terms = fit.case.deterministic().columns(n);
        let terms = terms.iter().chain(data.fixed);
        let mut exogenous = vec![0.0; n];
        for (term, c) in terms.zip(&fit.ecm.coefficients) {
            for (sum, value) in exogenous.iter_mut().zip(&term.values) {
                *sum += c * value;
            }
        }
        Ok(Self {
            fit,
            data: data.clone(),
            places,
            exogenous,
        })
    }

    /// What the equation in levels gives for observation t without its residual.
    fn next(&self, t: usize, y: &[f64], drivers: &[Vec<f64>]) -> f64 {
        let (own, mut rest) = self.fit.levels.split_at(self.fit.orders.p);
        let mut value = self.exogenous[t];
        value += (1..).zip(own).map(|(lag, c)| c * y[t - lag]).sum::<f64>();
        for (&place, &q) in self.places.iter().zip(&self.fit.orders.q) {
            let (mine, others) = rest.split_at(q + 1);
            let x = &drivers[place];
            value += (0..).zip(mine).map(|(lag, c)| c * x[t - lag]).sum::<f64>();
            rest = others;
        }
        value
    }
}

#[cfg(test)]
mod tests {
    use super::super::test_data::{close, penn};
    use super::super::{ArdlOrders, BoundsCase, Simulation, replicate};
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
        let run = |threads: usize| {
            let simulation = Simulation {
                draws: 200,
                seed: 5,
                threads,
            };
            replicate(simulation, |draws| {
                let r = system.replicate(Blocks::Stationary(3.0), draws);
                let data = ArdlData {
                    y: &r.dependent[0],
                    x: &r.drivers[..2],
                    fixed: &[],
                };
                Ardl::fit(&data, m.orders.clone(), m.case)
                    .unwrap()
                    .adjustment
            })
        };
        let found = run(2);
        assert_eq!(found, run(1));
        let mean = found.iter().sum::<f64>() / 200.0;
        let spread = (found.iter().map(|f| (f - mean).powi(2)).sum::<f64>() / 199.0).sqrt();
        // Adjustment is biased away from zero in small samples, by less than two standard errors.
        assert!(
            (mean - m.adjustment).abs() < 2.0 * m.adjustment_error,
            "{mean} {}",
            m.adjustment
        );
        assert!(
            spread > 0.5 * m.adjustment_error && spread < 3.0 * m.adjustment_error,
            "{spread}"
        );
        assert_eq!(system.shocks().len(), 6);
        let missing = SystemBootstrap::new(&equations, &demand.drivers[1..], Some(1)).unwrap_err();
        assert!(
            missing
                .to_string()
                .contains("ln_y is not among the drivers")
        );
    }
}
