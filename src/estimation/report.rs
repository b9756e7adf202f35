//! What an estimation found: one shape for all methods, from which JSON, text and LaTeX come.

use serde::{Deserialize, Serialize};
use utoipa::openapi::schema::{ObjectBuilder, SchemaType, Type};
use utoipa::openapi::{RefOr, Schema};
use utoipa::{PartialSchema, ToSchema};

use crate::estimate::{Distribution, TestResult};
use crate::finding::Finding;

/// What an estimation found.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct Report {
    /// Version of the methods.
    pub method_version: String,
    /// Name of the method, as in the request.
    pub method: String,
    /// The method in words.
    pub title: String,
    /// The call in words, complete enough for any statistics program to repeat it.
    pub description: Vec<String>,
    /// The common sample of the variables; lags are taken inside it.
    pub sample: EstimateSample,
    /// Confidence level of `low` and `high`.
    pub level: f64,
    /// Estimated equations.
    pub equations: Vec<EstimatedEquation>,
    /// Numbers about the whole.
    pub statistics: Vec<EstimateStatistic>,
    /// Tests, each with its sentence.
    pub tests: Vec<EstimateTest>,
    /// Anything with rows: lag choices, rank tests, paths.
    pub tables: Vec<EstimateTable>,
    /// What speaks against relying on it (severity error), and what is worth knowing.
    pub findings: Vec<Finding>,
    /// What no such figure can say.
    pub caution: String,
}

/// A sample.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
pub struct EstimateSample {
    /// Frequency: A, S, Q, M, W or D.
    pub frequency: String,
    /// First period.
    pub from: String,
    /// Last period.
    pub to: String,
    /// Periods.
    pub observations: u32,
}

/// One estimated equation.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct EstimatedEquation {
    /// Name of the equation where there are several of one kind; else what it is.
    pub name: String,
    /// Name of the variable explained.
    pub dependent: String,
    /// Key of its series; null for inline numbers.
    pub series: Option<String>,
    /// First period of its rows; null where it has none of its own (long-run relations).
    pub from: Option<String>,
    /// Last period of its rows.
    pub to: Option<String>,
    /// Rows.
    pub observations: Option<u32>,
    /// Residual degrees of freedom; null where p-values are asymptotic.
    pub degrees_of_freedom: Option<u32>,
    /// What the standard errors are.
    pub std_errors: String,
    /// Coefficients in the order of the regressors.
    pub coefficients: Vec<EstimatedCoefficient>,
}

/// One coefficient. Null is what does not exist or cannot be computed.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct EstimatedCoefficient {
    /// Name of the regressor.
    pub name: String,
    /// Key of its series; null for terms and inline numbers.
    pub series: Option<String>,
    /// Estimate.
    pub estimate: Option<f64>,
    /// Standard error.
    pub std_error: Option<f64>,
    /// Estimate over standard error.
    pub t: Option<f64>,
    /// Two-sided p-value, by Student's t or, where degrees of freedom are null, the normal.
    pub p: Option<f64>,
    /// Lower end of the interval at the report's level.
    pub low: Option<f64>,
    /// Upper end.
    pub high: Option<f64>,
}

/// A number with its name.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct EstimateStatistic {
    /// Stable name.
    pub name: String,
    /// The number.
    pub value: Option<f64>,
    /// Formula or convention.
    pub note: String,
}

/// A test.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct EstimateTest {
    /// Name in the literature.
    pub name: String,
    /// The statistic.
    pub statistic: Option<f64>,
    /// Its distribution where the null hypothesis holds.
    pub distribution: String,
    /// p-value.
    pub p_value: Option<f64>,
    /// Critical values, where there are any.
    pub critical_values: Vec<CriticalValue>,
    /// The null hypothesis, and whether it is rejected at 5 %.
    pub sentence: String,
}

/// A critical value.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct CriticalValue {
    /// Level of the test, for example 0.05.
    pub level: f64,
    /// `lower` (regressors I(0)) or `upper` (I(1)) in bounds tests; null else.
    pub bound: Option<String>,
    /// The value.
    pub value: Option<f64>,
    /// Its standard error where it was simulated.
    pub std_error: Option<f64>,
}

/// A table.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct EstimateTable {
    /// Stable name.
    pub name: String,
    /// Title.
    pub title: String,
    /// Names of the columns.
    pub columns: Vec<String>,
    /// Rows, one cell a column.
    pub rows: Vec<Vec<Cell>>,
}

/// A cell of a table.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(untagged)]
pub enum Cell {
    /// A number.
    Number(f64),
    /// A text.
    Text(String),
    /// Nothing: it does not exist or cannot be computed.
    Missing(Option<()>),
}

impl PartialSchema for Cell {
    fn schema() -> RefOr<Schema> {
        ObjectBuilder::new()
            .schema_type(SchemaType::from_iter([
                Type::Number,
                Type::String,
                Type::Null,
            ]))
            .description(Some(
                "A number, a text, or null: it does not exist or cannot be computed.",
            ))
            .into()
    }
}

impl ToSchema for Cell {
    fn name() -> std::borrow::Cow<'static, str> {
        "EstimateCell".into()
    }
}

impl From<f64> for Cell {
    fn from(value: f64) -> Self {
        finite(value).map_or(Self::Missing(None), Self::Number)
    }
}

impl From<usize> for Cell {
    fn from(value: usize) -> Self {
        Self::Number(f64::from(small(value)))
    }
}

impl From<String> for Cell {
    fn from(text: String) -> Self {
        Self::Text(text)
    }
}

impl From<&str> for Cell {
    fn from(text: &str) -> Self {
        Self::Text(text.to_owned())
    }
}

impl From<Option<f64>> for Cell {
    fn from(value: Option<f64>) -> Self {
        value.map_or(Self::Missing(None), Self::from)
    }
}

/// A number that JSON can hold.
pub(super) fn finite(value: f64) -> Option<f64> {
    value.is_finite().then_some(value)
}

/// Counts of observations and coefficients fit u32.
pub(super) fn small(count: usize) -> u32 {
    u32::try_from(count).unwrap_or(u32::MAX)
}

/// A number with its name.
pub(super) fn statistic(name: &str, value: f64, note: &str) -> EstimateStatistic {
    EstimateStatistic {
        name: name.to_owned(),
        value: finite(value),
        note: note.to_owned(),
    }
}

impl EstimateTable {
    /// An empty table.
    pub(super) fn new(name: &str, title: &str, columns: &[&str]) -> Self {
        Self {
            name: name.to_owned(),
            title: title.to_owned(),
            columns: columns.iter().map(|c| (*c).to_owned()).collect(),
            rows: Vec::new(),
        }
    }
}

impl EstimateTest {
    /// A test whose p-value is known beside its distribution.
    pub(super) fn new(name: &str, statistic: f64, distribution: &str) -> Self {
        Self {
            name: name.to_owned(),
            statistic: finite(statistic),
            distribution: distribution.to_owned(),
            p_value: None,
            critical_values: Vec::new(),
            sentence: String::new(),
        }
    }

    /// With its p-value, and the sentence about the null hypothesis (a noun phrase).
    pub(super) fn judged(mut self, null: &str, p_value: f64) -> Self {
        self.p_value = finite(p_value);
        self.sentence = verdict(null, p_value);
        self
    }

    /// With the values that it is compared with.
    pub(super) fn against(mut self, values: impl IntoIterator<Item = (f64, f64)>) -> Self {
        self.critical_values = values
            .into_iter()
            .map(|(level, value)| CriticalValue {
                level,
                bound: None,
                value: finite(value),
                std_error: None,
            })
            .collect();
        self
    }

    /// Named more closely.
    pub(super) fn named(mut self, name: &str) -> Self {
        name.clone_into(&mut self.name);
        self
    }

    /// Whether the null hypothesis is rejected at 5 %.
    pub(super) fn rejects(&self) -> bool {
        self.p_value.is_some_and(|p| p < 0.05)
    }
}

/// Whether a null hypothesis is rejected at 5 %, in a sentence.
pub(super) fn verdict(null: &str, p_value: f64) -> String {
    let p = if p_value < 0.0001 {
        "p below 0.0001".to_owned()
    } else {
        format!("p = {p_value:.4}")
    };
    match p_value {
        p_value if p_value.is_nan() => format!("{null} could not be tested."),
        p_value if p_value < 0.05 => format!("{null} is rejected at the 5 % level ({p})."),
        _ => format!("{null} is not rejected at the 5 % level ({p})."),
    }
}

impl From<TestResult> for EstimateTest {
    fn from(test: TestResult) -> Self {
        Self {
            distribution: distribution(&test.distribution),
            statistic: finite(test.statistic),
            p_value: finite(test.p_value),
            critical_values: Vec::new(),
            name: test.name,
            sentence: test.sentence,
        }
    }
}

fn distribution(distribution: &Distribution) -> String {
    match distribution {
        Distribution::Normal => "normal".to_owned(),
        Distribution::T { df } => format!("t({df})"),
        Distribution::ChiSquared { df } => format!("chi-squared({df})"),
        Distribution::F {
            numerator,
            denominator,
        } => format!("F({numerator}, {denominator})"),
        Distribution::Other { name } => (*name).to_owned(),
    }
}
