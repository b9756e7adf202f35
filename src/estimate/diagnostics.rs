//! Diagnostics of a fitted equation: each a statistic, its distribution, a p-value and a sentence.
//!
//! Start reading at [`diagnose`]. Durbin and Watson's test stands apart, in [`super::durbin_watson()`].

use super::ols::{as_f64, columns, dot, is_constant};
use super::outcome::{Distribution, TestResult};
use super::{EstimateError, Ols, Regressor};

/// A test by auxiliary regression, in both of its forms.
#[derive(Clone, Debug)]
pub struct AuxiliaryTest {
    /// Lagrange multiplier form, `observations · R²`, χ².
    pub lm: TestResult,
    /// F form, usually nearer to its nominal size in small samples.
    pub f: TestResult,
}

/// The diagnostics that METHODS asks of every fit.
#[derive(Clone, Debug)]
pub struct Diagnostics {
    /// Autocorrelation up to the chosen lag.
    pub breusch_godfrey: AuxiliaryTest,
    /// The same by the correlogram.
    pub ljung_box: TestResult,
    /// Autocorrelation of squared residuals up to the chosen lag.
    pub arch: AuxiliaryTest,
    /// Heteroskedasticity linear in the regressors, valid under any distribution of the errors.
    pub breusch_pagan_studentised: Option<AuxiliaryTest>,
    /// The same in its original form, valid under normality.
    pub breusch_pagan: Option<TestResult>,
    /// Heteroskedasticity of any form that squares and products of the regressors catch; none where
    /// those are too many for the sample.
    pub white: Option<AuxiliaryTest>,
    /// Normality.
    pub jarque_bera: TestResult,
    /// Functional form, second and third power; none where the fitted values have too few distinct values.
    pub reset: Option<TestResult>,
}

/// All diagnostics with autocorrelation up to `lags`; the ones that do not exist for this fit are none.
///
/// # Errors
/// [`EstimateError::TooShort`] where `lags` leave the autocorrelation tests no degrees of freedom.
pub fn diagnose(fit: &Ols, lags: usize) -> Result<Diagnostics, EstimateError> {
    Ok(Diagnostics {
        breusch_godfrey: breusch_godfrey(fit, lags)?,
        ljung_box: ljung_box(fit, lags)?,
        arch: arch(fit, lags)?,
        breusch_pagan_studentised: breusch_pagan_studentised(fit).ok(),
        breusch_pagan: breusch_pagan(fit).ok(),
        white: white(fit).ok(),
        jarque_bera: jarque_bera(fit),
        reset: reset(fit, 3).ok(),
    })
}

/// Breusch (1978) and Godfrey (1978): residuals on the regressors and their own `lags` lags.
///
/// Pre-sample residuals are zero, so all n rows are used. `LM = n R²`, χ²(lags); F form on the lags with
/// `n − k − lags` degrees of freedom. Valid with lagged dependent variables. Reference: statsmodels
/// 0.15.0 and a second program on Danish money demand: 19.98848 (1 lag), 25.33791 (4 lags).
///
/// # Errors
/// [`EstimateError::TooShort`].
pub fn breusch_godfrey(fit: &Ols, lags: usize) -> Result<AuxiliaryTest, EstimateError> {
    need("the Breusch–Godfrey test", fit.k + lags + 1, fit.n, lags)?;
    let mut regressors = fit.regressors.clone();
    regressors.extend((1..=lags).map(|j| {
        let mut lagged = vec![0.0; j];
        lagged.extend_from_slice(&fit.residuals[..fit.n - j]);
        Regressor::new(&format!("residual {j}"), lagged)
    }));
    let auxiliary = Ols::fit(&fit.residuals, regressors)?;
    let null = format!("No autocorrelation of the residuals up to lag {lags}");
    Ok(both(
        "Breusch–Godfrey",
        &null,
        fit.n,
        fit.ssr,
        &auxiliary,
        lags,
    ))
}

/// Ljung & Box (1978): `Q = n (n + 2) Σ_{j≤lags} r_j²/(n − j)`, χ²(lags).
///
/// `r_j` are the autocorrelations of the residuals about their mean. Not valid with lagged dependent variables. Reference: Danish money
/// demand, 20.45895 (1 lag), statsmodels 0.15.0.
///
/// # Errors
/// [`EstimateError::TooShort`].
pub fn ljung_box(fit: &Ols, lags: usize) -> Result<TestResult, EstimateError> {
    need("the Ljung–Box test", lags + 1, fit.n, lags)?;
    let n = as_f64(fit.n);
    let e = centred(&fit.residuals);
    let variance = dot(&e, &e);
    let term = |j| (dot(&e[j..], &e) / variance).powi(2) / (n - as_f64(j));
    let q = n * (n + 2.0) * (1..=lags).map(term).sum::<f64>();
    let null = format!("No autocorrelation of the residuals up to lag {lags}");
    let distribution = Distribution::ChiSquared { df: as_f64(lags) };
    Ok(TestResult::new("Ljung–Box", &null, q, distribution))
}

/// Engle (1982): squared residuals on a constant and `lags` own lags, on `n − lags` rows;
/// `LM = (n − lags) R²`, χ²(lags). Reference: Danish money demand, 0.4261615 (1 lag).
///
/// # Errors
/// [`EstimateError::TooShort`].
pub fn arch(fit: &Ols, lags: usize) -> Result<AuxiliaryTest, EstimateError> {
    need("the ARCH test", 2 * lags + 2, fit.n, lags)?;
    let squares: Vec<f64> = fit.residuals.iter().map(|e| e * e).collect();
    let rows = fit.n - lags;
    let mut regressors = vec![Regressor::constant(rows)];
    regressors.extend((1..=lags).map(|j| {
        let lagged = squares[lags - j..fit.n - j].to_vec();
        Regressor::new(&format!("squared residual {j}"), lagged)
    }));
    let y = &squares[lags..];
    let auxiliary = Ols::fit(y, regressors)?;
    let null = format!("No autoregressive conditional heteroskedasticity up to lag {lags}");
    Ok(both("ARCH-LM", &null, rows, total(y), &auxiliary, lags))
}

/// Koenker's (1981) studentised form of Breusch & Pagan's test: squared residuals on the regressors
/// (and a constant); `LM = n R²`, χ²(k − 1). Reference: Danish money demand, 0.8774184.
///
/// # Errors
/// [`EstimateError::Constant`] where the constant is the only regressor.
pub fn breusch_pagan_studentised(fit: &Ols) -> Result<AuxiliaryTest, EstimateError> {
    let squares: Vec<f64> = fit.residuals.iter().map(|e| e * e).collect();
    let auxiliary = Ols::fit(&squares, with_constant(fit)?)?;
    let null = "No heteroskedasticity in the regressors";
    let restrictions = auxiliary.k - 1;
    Ok(both(
        "Breusch–Pagan, studentised",
        null,
        fit.n,
        total(&squares),
        &auxiliary,
        restrictions,
    ))
}

/// Breusch & Pagan (1979): half the explained sum of squares of `e²/(ssr/n)` on the regressors, χ²(k − 1).
/// Reference: Danish money demand, 0.8037862.
///
/// # Errors
/// [`EstimateError::Constant`] where the constant is the only regressor.
pub fn breusch_pagan(fit: &Ols) -> Result<TestResult, EstimateError> {
    let variance = fit.ssr / as_f64(fit.n);
    let scaled: Vec<f64> = fit.residuals.iter().map(|e| e * e / variance).collect();
    let auxiliary = Ols::fit(&scaled, with_constant(fit)?)?;
    let statistic = (total(&scaled) - auxiliary.ssr) / 2.0;
    let null = "No heteroskedasticity in the regressors, errors normal";
    let distribution = Distribution::ChiSquared {
        df: as_f64(auxiliary.k - 1),
    };
    Ok(TestResult::new(
        "Breusch–Pagan",
        null,
        statistic,
        distribution,
    ))
}

/// White (1980): squared residuals on the regressors, their squares and cross products.
///
/// `LM = n R²`, χ²(distinct columns − 1). Columns equal to an earlier one (squares of dummies) are left out.
/// Reference: Danish money demand, 10.78770.
///
/// # Errors
/// [`EstimateError::TooShort`] where the columns use up the sample; collinear columns.
pub fn white(fit: &Ols) -> Result<AuxiliaryTest, EstimateError> {
    let base = with_constant(fit)?;
    let mut regressors: Vec<Regressor> = Vec::new();
    for (i, a) in base.iter().enumerate() {
        for b in &base[i..] {
            let values: Vec<f64> = a.values.iter().zip(&b.values).map(|(a, b)| a * b).collect();
            let zero = values.iter().all(|v| *v == 0.0);
            if !zero && !regressors.iter().any(|r| r.values == values) {
                regressors.push(Regressor::new(&format!("{} × {}", a.name, b.name), values));
            }
        }
    }
    need("White's test", regressors.len() + 1, fit.n, 1)?;
    let squares: Vec<f64> = fit.residuals.iter().map(|e| e * e).collect();
    let auxiliary = Ols::fit(&squares, regressors)?;
    let restrictions = auxiliary.k - 1;
    let null = "No heteroskedasticity in regressors, squares and products";
    Ok(both(
        "White",
        null,
        fit.n,
        total(&squares),
        &auxiliary,
        restrictions,
    ))
}

/// Jarque & Bera (1987): `n/6 (S² + (K − 3)²/4)`, χ²(2), skewness S and kurtosis K from moments about the
/// mean with divisor n. Reference: Danish money demand, 0.1785978.
#[must_use]
pub fn jarque_bera(fit: &Ols) -> TestResult {
    let e = centred(&fit.residuals);
    let n = as_f64(fit.n);
    let moment = |p: i32| e.iter().map(|v| v.powi(p)).sum::<f64>() / n;
    let skewness = moment(3) / moment(2).powf(1.5);
    let kurtosis = moment(4) / moment(2).powi(2);
    let statistic = n / 6.0 * (skewness * skewness + (kurtosis - 3.0).powi(2) / 4.0);
    let distribution = Distribution::ChiSquared { df: 2.0 };
    TestResult::new(
        "Jarque–Bera",
        "Normality of the residuals",
        statistic,
        distribution,
    )
}

/// Ramsey (1969): adds powers 2 to `power` of the fitted values; F(power − 1, n − k − power + 1).
///
/// With a constant, fitted values are centred first and always scaled to at most 1, which spans the
/// same space and keeps its digits. Reference: Danish money demand, 2.489818 (2), 3.451049 (3).
///
/// # Errors
/// [`EstimateError::Setting`] below power 2, [`EstimateError::TooShort`], collinear powers.
pub fn reset(fit: &Ols, power: i32) -> Result<TestResult, EstimateError> {
    if !(2..=9).contains(&power) {
        return Err(EstimateError::Setting {
            setting: "the highest power of RESET",
            allowed: "2 to 9",
        });
    }
    let added = (2..=power).count();
    need("RESET", fit.k + added + 1, fit.n, 1)?;
    let has_constant = fit.regressors.iter().any(|r| is_constant(&r.values));
    let base = if has_constant {
        centred(&fit.fitted)
    } else {
        fit.fitted.clone()
    };
    let largest = base.iter().fold(0.0_f64, |m, v| m.max(v.abs()));
    let mut regressors = fit.regressors.clone();
    regressors.extend((2..=power).map(|p| {
        let values = base.iter().map(|v| (v / largest).powi(p)).collect();
        Regressor::new(&format!("fitted^{p}"), values)
    }));
    // Residuals have the same projection as y on what is added.
    let larger = Ols::fit(&fit.residuals, regressors)?;
    let null = format!("Linear form, against powers of the fitted values up to {power}");
    Ok(both("RESET", &null, fit.n, fit.ssr, &larger, added).f)
}

/// The two forms from the total sum of squares and the auxiliary regression.
fn both(
    name: &str,
    null: &str,
    rows: usize,
    tss: f64,
    auxiliary: &Ols,
    restrictions: usize,
) -> AuxiliaryTest {
    let (df, explained) = (as_f64(restrictions), tss - auxiliary.ssr);
    let distribution = Distribution::F {
        numerator: df,
        denominator: as_f64(auxiliary.df),
    };
    let lm = as_f64(rows) * explained / tss;
    AuxiliaryTest {
        lm: TestResult::new(name, null, lm, Distribution::ChiSquared { df }),
        f: TestResult::new(name, null, explained / df / auxiliary.s2, distribution),
    }
}

/// The regressors of a fit, with a constant added where none is among them.
fn with_constant(fit: &Ols) -> Result<Vec<Regressor>, EstimateError> {
    let mut regressors = fit.regressors.clone();
    if !columns(&regressors).iter().any(|c| is_constant(c)) {
        regressors.insert(0, Regressor::constant(fit.n));
    }
    if regressors.len() == 1 {
        let name = regressors[0].name.clone();
        return Err(EstimateError::Constant { name });
    }
    Ok(regressors)
}

fn need(what: &str, needed: usize, found: usize, lags: usize) -> Result<(), EstimateError> {
    if lags == 0 {
        return Err(EstimateError::Setting {
            setting: "lags of a test",
            allowed: "at least 1",
        });
    }
    if found < needed {
        let what = what.to_owned();
        return Err(EstimateError::TooShort {
            what,
            needed,
            found,
        });
    }
    Ok(())
}

fn centred(values: &[f64]) -> Vec<f64> {
    let mean = values.iter().sum::<f64>() / as_f64(values.len());
    values.iter().map(|v| v - mean).collect()
}

/// Sum of squares about the mean.
fn total(values: &[f64]) -> f64 {
    let v = centred(values);
    dot(&v, &v)
}
