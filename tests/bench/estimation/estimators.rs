//! Every estimator of the elasticities as a ratio that bounds growth, in the weak and the strong form.

use realterms::estimate::{
    ArdlData, ArdlOrders, BootstrapEquation, BoundsCase, Deterministic, DolsCovariance,
    EstimatedRatio, FirstObservation, ProductForm, ProductGrowth, ProductRatio, QuickArdl,
    Regressor, autoregressive, dols, fmols, long_run_variance, rule_of_thumb_lags,
};
use realterms::linalg::{ThinFit, product};

use super::economy::{Sample, mean_growth};

/// What is estimated, and how its variance.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum Estimator {
    /// Levels or differences by least squares, Newey–West at the rule of thumb or classical.
    LeastSquares { levels: bool, newey_west: bool },
    /// Prais–Winsten.
    Autoregressive,
    /// ARDL(1, 1, 1) in product form.
    Ardl,
    /// One lead and one lag, long-run variance.
    Dols,
    /// Bartlett at the rule of thumb.
    Fmols,
}

use Estimator::{Ardl, Autoregressive, Dols, Fmols, LeastSquares};

const fn least_squares(levels: bool, newey_west: bool) -> Estimator {
    LeastSquares { levels, newey_west }
}

/// All, with their names.
pub(crate) const ESTIMATORS: [(&str, Estimator); 8] = [
    ("levels, classical", least_squares(true, false)),
    ("levels, Newey–West", least_squares(true, true)),
    ("differences, classical", least_squares(false, false)),
    ("differences, Newey–West", least_squares(false, true)),
    ("AR(1) errors", Autoregressive),
    ("ARDL", Ardl),
    ("DOLS", Dols),
    ("FMOLS", Fmols),
];

/// Mean growth that the forms hold fixed: exports as observed and foreign income.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Means {
    pub(crate) x: f64,
    pub(crate) z: f64,
}

impl Means {
    pub(crate) fn of(sample: &Sample) -> Self {
        Self {
            x: mean_growth(&sample.exports),
            z: mean_growth(&sample.drivers[2]),
        }
    }
}

/// A ratio for the weak form and one for the strong form, residual degrees of freedom, and the rest that a
/// bootstrap and a jackknife need.
#[derive(Clone, Debug)]
pub(crate) struct Estimate {
    pub(crate) weak: EstimatedRatio,
    pub(crate) strong: EstimatedRatio,
    pub(crate) df: usize,
}

/// One elasticity.
struct Slope {
    value: f64,
    variance: f64,
    /// Influence of each observation on the slope times its residual; covariances across equations come
    /// from it. Empty where they are taken as zero.
    scores: Vec<f64>,
    df: usize,
}

const CONSTANT: Deterministic = Deterministic::Constant;

/// The orders of both ARDL equations, those of the simulated economies.
pub(crate) fn orders() -> ArdlOrders {
    ArdlOrders {
        p: 1,
        q: vec![1, 1],
    }
}

/// Estimates both equations; `kept` leaves out rows of the final regression.
pub(crate) fn estimate(
    estimator: Estimator,
    sample: &Sample,
    means: Means,
    kept: Option<&[usize]>,
) -> Option<Estimate> {
    let (home, abroad) = sample.drivers.split_at(2);
    if estimator == Ardl {
        return ardl(sample, means, kept);
    }
    let slope = |y: &Regressor, x: &[Regressor]| slope(estimator, y, x, kept);
    let pi = slope(&sample.imports, home)?;
    let epsilon = slope(&sample.exports, abroad)?;
    // Scores of one sample, where both equations have them.
    let across = if !pi.scores.is_empty() && pi.scores.len() == epsilon.scores.len() {
        covariance(&pi.scores, &epsilon.scores, estimator)
    } else {
        0.0
    };
    let weak = EstimatedRatio {
        numerator: means.x,
        denominator: pi.value,
        v_nn: 0.0,
        v_nd: 0.0,
        v_dd: pi.variance,
    };
    Some(Estimate {
        weak,
        strong: EstimatedRatio {
            numerator: epsilon.value * means.z,
            v_nn: means.z.powi(2) * epsilon.variance,
            v_nd: means.z * across,
            ..weak
        },
        df: pi.df.min(epsilon.df),
    })
}

/// `Σ_j w_j Σ_t (a_t b_{t−j} + …)` from the long-run variance of the sum.
fn covariance(a: &[f64], b: &[f64], estimator: Estimator) -> f64 {
    let lags = lags_of(estimator, a.len());
    let sum: Vec<f64> = a.iter().zip(b).map(|(a, b)| a + b).collect();
    let n = a.len() as f64;
    let variance = |v: &[f64]| n * long_run_variance(v, lags);
    (variance(&sum) - variance(a) - variance(b)) / 2.0
}

fn lags_of(estimator: Estimator, n: usize) -> usize {
    match estimator {
        LeastSquares {
            newey_west: true, ..
        } => rule_of_thumb_lags(n),
        LeastSquares { .. } | Autoregressive | Ardl | Dols | Fmols => 0,
    }
}

fn rows_of(values: &[f64], kept: Option<&[usize]>) -> Vec<f64> {
    match kept {
        Some(rows) => rows.iter().map(|r| values[*r]).collect(),
        None => values.to_vec(),
    }
}

fn slope(
    estimator: Estimator,
    y: &Regressor,
    x: &[Regressor],
    kept: Option<&[usize]>,
) -> Option<Slope> {
    let steps = |v: &Regressor| -> Vec<f64> { v.values.windows(2).map(|w| w[1] - w[0]).collect() };
    let refit = |columns: &[&[f64]], y: &[f64]| {
        let all = columns.iter().flat_map(|c| rows_of(c, kept)).collect();
        ThinFit::new(all, rows_of(y, kept))
    };
    match estimator {
        LeastSquares { levels, .. } => {
            let values = |v: &Regressor| if levels { v.values.clone() } else { steps(v) };
            let x: Vec<Vec<f64>> = x.iter().map(values).collect();
            let y = values(y);
            let one = vec![1.0; y.len()];
            let fit = refit(&[&one, &x[0], &x[1]], &y)?;
            let s2 = fit.ssr / fit.df() as f64;
            let influence = fit.influence(1);
            let scores: Vec<f64> = influence
                .iter()
                .zip(&fit.residuals)
                .map(|(i, e)| i * e)
                .collect();
            let lags = lags_of(estimator, scores.len());
            Some(Slope {
                value: fit.coefficients[1],
                variance: if lags == 0 {
                    s2 * product(&influence, &influence)
                } else {
                    scores.len() as f64 * long_run_variance(&scores, lags)
                },
                scores,
                df: fit.df(),
            })
        }
        Autoregressive => {
            let regressors = [&[Regressor::constant(y.values.len())], x].concat();
            let fit = autoregressive(&y.values, &regressors, FirstObservation::Kept).ok()?;
            let fit = fit.transformed;
            let mut value = fit.coefficients[1];
            if kept.is_some() {
                let columns: Vec<&[f64]> = fit.regressors.iter().map(|r| &r.values[..]).collect();
                value = refit(&columns, &fit.dependent())?.coefficients[1];
            }
            Some(Slope {
                value,
                variance: fit.s2 * fit.inverse_gram.at(1, 1),
                scores: Vec::new(),
                df: fit.df,
            })
        }
        Dols => {
            let kind = DolsCovariance::LongRun { lags: None };
            let fit = dols(y, x, CONSTANT, 1, 1, kind).ok()?;
            let regression = &fit.regression;
            let mut value = regression.coefficients[1];
            if kept.is_some() {
                let columns: Vec<&[f64]> = regression
                    .regressors
                    .iter()
                    .map(|r| &r.values[..])
                    .collect();
                value = refit(&columns, &regression.dependent())?.coefficients[1];
            }
            Some(Slope {
                value,
                variance: fit.covariance.at(1, 1),
                scores: Vec::new(),
                df: regression.df,
            })
        }
        Fmols => {
            // Its correction needs consecutive dates: the jackknife is that of least squares.
            if kept.is_some() {
                return slope(least_squares(true, false), y, x, kept);
            }
            let fit = fmols(y, x, CONSTANT, None).ok()?;
            Some(Slope {
                value: fit.coefficients[1],
                variance: fit.covariance.at(1, 1),
                scores: Vec::new(),
                df: fit.residuals.len() - fit.coefficients.len(),
            })
        }
        Ardl => None,
    }
}

fn ardl(sample: &Sample, means: Means, kept: Option<&[usize]>) -> Option<Estimate> {
    let fit = |y: &Regressor, x: &[Regressor]| {
        let data = ArdlData { y, x, fixed: &[] };
        match kept {
            None => QuickArdl::fit(&data, &orders(), BoundsCase::III, 1),
            Some(rows) => QuickArdl::fit_rows(&data, &orders(), BoundsCase::III, 1, rows),
        }
    };
    let (home, abroad) = sample.drivers.split_at(2);
    let imports = fit(&sample.imports, home)?;
    let exports = fit(&sample.exports, abroad)?;
    let growth = ProductGrowth {
        terms_of_trade: 0.0,
        rm: 0.0,
        rx: 0.0,
        z: means.z,
        x: means.x,
    };
    let ratio = |form| ProductRatio::of_equations(&imports, &exports, form, &growth).estimated();
    Some(Estimate {
        weak: ratio(ProductForm::Weak),
        strong: ratio(ProductForm::Strong),
        df: imports.fit.df().min(exports.fit.df()),
    })
}

/// The equations that the bootstrap of an estimator runs forward.
pub(crate) fn equations(
    estimator: Estimator,
    sample: &Sample,
) -> Option<Vec<BootstrapEquation<'_>>> {
    let (home, abroad) = sample.drivers.split_at(2);
    [(&sample.imports, home), (&sample.exports, abroad)]
        .into_iter()
        .map(|(y, x)| equation(estimator, y, x))
        .collect()
}

fn equation<'a>(
    estimator: Estimator,
    y: &'a Regressor,
    x: &'a [Regressor],
) -> Option<BootstrapEquation<'a>> {
    let with_constant = [&[Regressor::constant(y.values.len())], x].concat();
    let levels = |b: &[f64], rho: f64| BootstrapEquation::levels(y, x, CONSTANT, b, rho);
    Some(match estimator {
        LeastSquares { levels: true, .. } => {
            let columns = with_constant.iter().flat_map(|r| r.values.clone());
            let fit = ThinFit::new(columns.collect(), y.values.clone())?;
            levels(&fit.coefficients, 0.0)
        }
        LeastSquares { levels: false, .. } => {
            let steps =
                |v: &Regressor| -> Vec<f64> { v.values.windows(2).map(|w| w[1] - w[0]).collect() };
            let mut columns = vec![1.0; y.values.len() - 1];
            x.iter().for_each(|x| columns.extend(steps(x)));
            let b = ThinFit::new(columns, steps(y))?.coefficients;
            BootstrapEquation::differences(y, x, b[0], &b[1..])
        }
        Autoregressive => {
            let fit = autoregressive(&y.values, &with_constant, FirstObservation::Kept).ok()?;
            levels(&fit.transformed.coefficients, fit.rho)
        }
        Ardl => {
            let data = ArdlData { y, x, fixed: &[] };
            let fit = realterms::estimate::Ardl::fit(&data, orders(), BoundsCase::III).ok()?;
            BootstrapEquation::ardl(&fit, &data)
        }
        Dols => {
            let kind = DolsCovariance::LongRun { lags: None };
            let fit = dols(y, x, CONSTANT, 1, 1, kind).ok()?;
            levels(&fit.regression.coefficients[..3], 0.0)
        }
        Fmols => levels(&fmols(y, x, CONSTANT, None).ok()?.coefficients, 0.0),
    })
}

/// Rows of the final regression, which the jackknife leaves out block by block.
pub(crate) fn rows(estimator: Estimator, n: usize) -> usize {
    match estimator {
        LeastSquares { levels: true, .. } | Autoregressive | Fmols => n,
        LeastSquares { levels: false, .. } | Ardl => n - 1,
        Dols => n - 3,
    }
}
