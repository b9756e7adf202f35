//! The result of a study.
//!
//! Growth rates are 100 × log growth per year, elasticities plain numbers. A number that does not
//! exist or may not be shown is null.

use serde::{Deserialize, Serialize};
use utoipa::ToSchema;

use super::document::{CrossCovariance, Estimator, Headline};
use super::options::{ArdlCase, SimulationOptions};
use crate::constraint::{Form, IntervalMethod, Region};
use crate::finding::Finding;

/// Everything a study found.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct Outcome {
    /// Version of the method; results of one version are comparable.
    pub method_version: String,
    /// Title of the study.
    pub title: String,
    /// The area studied.
    pub area: String,
    /// The result named in advance.
    pub headline: Headline,
    /// Always `log_percent`: 100 × log growth.
    pub growth_unit: String,
    /// Always `year`: growth rates are per year whatever the frequency.
    pub growth_per: String,
    /// The sample of the levels; differences begin a period later.
    pub sample: Sample,
    /// Average growth of home activity, or of the series named as actual.
    pub actual_growth: f64,
    /// Average growth rates that the forms use.
    pub growth: MeanGrowth,
    /// How the intervals were made.
    pub interval: IntervalSettings,
    /// Draws and seed behind simulated critical values; null where none was needed.
    #[serde(default)]
    pub simulation: Option<SimulationOptions>,
    /// One a requested estimator, in the order of the document.
    pub estimators: Vec<EstimatorResult>,
    /// What concerns the whole study.
    pub findings: Vec<Finding>,
    /// What a reader must keep in mind.
    pub caution: String,
}

impl Outcome {
    /// The result named in advance.
    #[must_use]
    pub fn headline_form(&self) -> Option<&FormResult> {
        let estimator = self.headline.estimator;
        let result = self.estimators.iter().find(|e| e.estimator == estimator)?;
        result.forms.iter().find(|f| f.form == self.headline.form)
    }
}

/// Periods used.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
pub struct Sample {
    /// Frequency code.
    pub frequency: String,
    /// First period.
    pub from: String,
    /// Last period.
    pub to: String,
    /// Number of periods.
    pub observations: u32,
}

/// Average growth over the sample, log per cent a year.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct MeanGrowth {
    /// Real exports.
    pub exports: f64,
    /// Real imports.
    pub imports: f64,
    /// Activity in import demand.
    pub home_activity: f64,
    /// Activity in export demand.
    pub foreign_income: f64,
    /// Export over import price.
    pub terms_of_trade: Option<f64>,
    /// Home over import price.
    pub import_relative_price: Option<f64>,
    /// Own export over competitors' price.
    pub export_relative_price: Option<f64>,
}

/// How intervals were made.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct IntervalSettings {
    /// Method.
    pub method: IntervalMethod,
    /// Coverage aimed at.
    pub level: f64,
    /// Covariance across equations.
    pub cross_covariance: CrossCovariance,
    /// What is taken of the mean growth rates.
    #[serde(default)]
    pub growth_rates: GrowthRates,
}

/// How intervals take mean growth rates.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
#[serde(rename_all = "snake_case")]
pub enum GrowthRates {
    /// As known: the intervals speak of the coefficients' uncertainty alone.
    #[default]
    HeldFixed,
}

/// What one estimator gave.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct EstimatorResult {
    /// Which.
    pub estimator: Estimator,
    /// Demand for imports.
    pub import_demand: EquationResult,
    /// Demand for exports.
    pub export_demand: EquationResult,
    /// Response of imports to home income.
    pub import_income_elasticity: Estimate,
    /// Response of exports to foreign income.
    pub export_income_elasticity: Estimate,
    /// Response of imports to home over import prices; expected positive.
    pub import_price_elasticity: Option<Estimate>,
    /// Response of exports to competitors' over own prices; expected positive.
    pub export_price_elasticity: Option<Estimate>,
    /// Growth of imports that neither income nor prices explain, log per cent a year: the constant in differences,
    /// the trend in levels, and what further regressors add at their mean growth; null where the equation has none
    /// of these.
    pub import_autonomous_growth: Option<Estimate>,
    /// Growth of exports that neither income nor prices explain, log per cent a year.
    pub export_autonomous_growth: Option<Estimate>,
    /// One a requested form, in the order of the document.
    pub forms: Vec<FormResult>,
    /// How far agreement with actual growth is arithmetic.
    pub near_identity: NearIdentity,
    /// What concerns the equations.
    pub findings: Vec<Finding>,
}

/// One estimated equation in logs.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct EquationResult {
    /// Key of the series explained.
    pub dependent: String,
    /// First period of the sample.
    pub from: String,
    /// Last period of the sample.
    pub to: String,
    /// Observations.
    pub observations: u32,
    /// Residual degrees of freedom.
    pub degrees_of_freedom: u32,
    /// Coefficients as estimated: growth rates among them (the constant in differences) are
    /// fractions per period, and that of the export relative price has the sign of the equation.
    pub coefficients: Vec<CoefficientResult>,
    /// Covariance behind t, p and intervals.
    pub covariance: CovarianceUsed,
    /// Lags of the Bartlett kernel behind `std_error_newey_west` or a long-run variance.
    pub lags: u32,
    /// Whether Newey–West covariances were multiplied by n/(n − k).
    pub small_sample: bool,
    /// R²; null where the method has none.
    pub r_squared: Option<f64>,
    /// Adjusted R².
    pub adjusted_r_squared: Option<f64>,
    /// Standard deviation of the residuals, `√(ssr/(n − k))`.
    pub residual_std_dev: f64,
    /// Durbin–Watson statistic; null for a perfect fit and with lagged dependent variables.
    pub durbin_watson: Option<f64>,
    /// First-order autocorrelation ρ of the errors, where the method estimates it.
    #[serde(default)]
    pub error_autocorrelation: Option<f64>,
    /// Responses in the level relation where they are not among the coefficients as they stand: long-run
    /// coefficients of a dynamic equation, the relation of a system.
    #[serde(default)]
    pub long_run: Vec<LongRunResult>,
    /// Return to the level relation.
    #[serde(default)]
    pub adjustment: Option<AdjustmentResult>,
    /// Lags of a dynamic equation.
    #[serde(default)]
    pub dynamics: Option<DynamicsResult>,
    /// Tests of cointegration, of instruments, of exogeneity, and diagnostics.
    #[serde(default)]
    pub tests: Vec<EquationTest>,
}

/// The covariance behind an equation's t and p.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
#[serde(rename_all = "snake_case")]
pub enum CovarianceUsed {
    /// Independent errors of one variance.
    Classical,
    /// Newey & West 1987, Bartlett weights.
    NeweyWest,
    /// The errors' long-run variance times the inverse cross products of the regressors.
    LongRun,
}

/// One coefficient.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct CoefficientResult {
    /// `constant`, `income`, `relative_price`, `further 1` …, `trend` or a dummy. In dynamic equations `volume` and the
    /// others carry their lag (`income.L1`), changes stand as `d.income.L0`, leads as `d.income.F1`.
    pub name: String,
    /// Key of the regressor; null for deterministic terms.
    pub series: Option<String>,
    /// Estimate.
    pub estimate: f64,
    /// Standard error of the equation's covariance, behind t and p; null in results of study/1.
    #[serde(default)]
    pub std_error: Option<f64>,
    /// Classical standard error; null where the method has none.
    pub std_error_classical: Option<f64>,
    /// Newey–West standard error; null where the method has none.
    pub std_error_newey_west: Option<f64>,
    /// Estimate over the standard error of the equation's covariance.
    pub t: Option<f64>,
    /// Two-sided p-value by Student's t.
    pub p: Option<f64>,
}

/// A response in a level relation.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct LongRunResult {
    /// As in the coefficients, without lags.
    pub name: String,
    /// Key of the regressor; null for deterministic terms.
    pub series: Option<String>,
    /// Estimate.
    pub estimate: f64,
    /// Standard error (delta method where it is a ratio).
    pub std_error: f64,
}

/// Return to a level relation.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct AdjustmentResult {
    /// Part of a deviation that a period adds; −1 to 0 in a healthy equation.
    pub speed: f64,
    /// Its standard error.
    pub std_error: f64,
    /// Years until half of a deviation is gone; null outside −1 to 0.
    pub half_life_years: Option<f64>,
}

/// Lags of a dynamic equation.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct DynamicsResult {
    /// Lags of the levels: the volume, then each regressor in the order of the document (ARDL); of all series (VECM).
    pub lags: Vec<u32>,
    /// Leads of changes (dynamic least squares).
    pub leads: Option<u32>,
    /// Case of Pesaran, Shin & Smith (2001).
    pub case: Option<ArdlCase>,
    /// How the lags were chosen, in words; null where they were given.
    pub choice: Option<String>,
}

/// What a test is about.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
#[serde(rename_all = "snake_case")]
pub enum TestGroup {
    /// Is there a level relation?
    Cointegration,
    /// Are the instruments strong and valid?
    Instruments,
    /// Are the regressors exogenous?
    Exogeneity,
    /// Are the equations of a system related?
    System,
    /// Do the errors behave as assumed?
    Diagnostic,
}

/// One test of an equation.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct EquationTest {
    /// What it is about.
    pub group: TestGroup,
    /// Name.
    pub name: String,
    /// Statistic; null where there is none, as for a confidence set.
    pub statistic: Option<f64>,
    /// Distribution under the null hypothesis, in words.
    pub distribution: String,
    /// p-value; of the bounds tests with all regressors I(1).
    pub p: Option<f64>,
    /// Critical value at 5 %, where the distribution is not a standard one.
    pub critical: Option<f64>,
    /// Critical value at 5 % with all regressors I(0), of the bounds tests.
    pub lower_critical: Option<f64>,
    /// One plain sentence.
    pub sentence: String,
}

/// A number with its standard error.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct Estimate {
    /// Estimate.
    pub value: f64,
    /// Standard error by the equation's covariance.
    pub std_error: f64,
}

/// What one form gave. Exactly one of three holds: numbers; `unreliable`, which then carries the
/// numbers with reasons; or `refused`, where there is no number.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct FormResult {
    /// Which.
    pub form: Form,
    /// The numbers, null where unreliable or refused.
    #[serde(flatten)]
    pub numbers: FormNumbers,
    /// Numbers that should not be relied on, with the reasons.
    #[serde(default)]
    pub unreliable: Option<Unreliable>,
    /// Why there is no number at all.
    #[serde(default)]
    pub refused: Option<String>,
    /// What concerns this form alone.
    pub findings: Vec<Finding>,
}

/// Numbers of a form, log per cent a year.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct FormNumbers {
    /// Growth that keeps trade in balance, autonomous growth left out.
    pub rate: Option<f64>,
    /// Its standard error by the delta method.
    pub std_error: Option<f64>,
    /// Its confidence set.
    pub interval: Option<Region>,
    /// The rate with the equations' autonomous growth; null where they have none.
    pub rate_with_autonomous_growth: Option<f64>,
    /// What relative prices add; null where a price is not given.
    pub relative_price_effect: Option<RelativePriceEffect>,
}

/// What relative prices add to the rate at constant prices.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct RelativePriceEffect {
    /// Whether the form's rate includes it.
    pub included: bool,
    /// The effect, log per cent a year.
    pub effect: f64,
    /// Its confidence set.
    pub interval: Region,
    /// p-value of the test that its numerator is zero, mean price growth taken as given.
    pub p_zero: Option<f64>,
}

/// Numbers with the reasons not to rely on them.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct Unreliable {
    /// The numbers.
    #[serde(flatten)]
    pub numbers: FormNumbers,
    /// Findings of severity error, from the equations that the form uses and from the form.
    pub reasons: Vec<Finding>,
}

/// How far agreement of constrained with actual growth is arithmetic: least squares fits sample means.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct NearIdentity {
    /// Growth of imports over growth of home activity; null without growth.
    pub arithmetic_elasticity: Option<f64>,
    /// The estimated income elasticity of imports.
    pub import_income_elasticity: f64,
    /// The part of constrained less actual growth that comes from exports and imports growing apart,
    /// log per cent a year; null where the elasticity is not positive.
    pub trade_imbalance_part: Option<f64>,
    /// `values` where the terms of trade are given, else `volumes`.
    pub measured_in: String,
    /// The same in words.
    pub sentence: String,
}
