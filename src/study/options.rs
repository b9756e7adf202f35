//! Settings of single estimators, each under its own field of the document.

use serde::{Deserialize, Serialize};
use utoipa::ToSchema;

use super::document::Estimator;
use crate::estimate::{BoundsCase, FirstObservation, InformationCriterion, JohansenCase};
use crate::finding::Finding;
use crate::time::Frequency;

/// Settings of `ardl`.
#[derive(Clone, Debug, Default, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
#[serde(deny_unknown_fields)]
pub struct ArdlOptions {
    /// Deterministic case; absent: III, or V in an equation with a trend among its terms.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub case: Option<ArdlCase>,
    /// What chooses the lags; absent: `bic`.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub criterion: Option<LagChoice>,
    /// Most lags tried of each series; absent: 2 in annual and half-yearly data, else 4.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub max_lags: Option<u32>,
    /// Lags of imports, income, relative price and further regressors, instead of a choice.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub import_orders: Option<Vec<u32>>,
    /// Lags of exports, foreign income, relative price and further regressors, instead of a choice.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub export_orders: Option<Vec<u32>>,
}

/// The deterministic cases of Pesaran, Shin & Smith (2001).
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
pub enum ArdlCase {
    /// No constant, no trend.
    I,
    /// Constant restricted to the level relation.
    II,
    /// Constant unrestricted.
    III,
    /// Trend restricted to the level relation, constant unrestricted.
    IV,
    /// Constant and trend unrestricted.
    V,
}

impl From<ArdlCase> for BoundsCase {
    fn from(case: ArdlCase) -> Self {
        match case {
            ArdlCase::I => Self::I,
            ArdlCase::II => Self::II,
            ArdlCase::III => Self::III,
            ArdlCase::IV => Self::IV,
            ArdlCase::V => Self::V,
        }
    }
}

/// Criteria that choose lags; k counts coefficients and not the variance.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
#[serde(rename_all = "snake_case")]
pub enum LagChoice {
    /// `n ln(2π ssr/n) + n + 2 k`.
    Aic,
    /// `n ln(2π ssr/n) + n + k ln n`; the better one in small samples (Pesaran & Shin 1999).
    #[default]
    Bic,
}

impl From<LagChoice> for InformationCriterion {
    fn from(choice: LagChoice) -> Self {
        match choice {
            LagChoice::Aic => Self::Aic,
            LagChoice::Bic => Self::Bic,
        }
    }
}

/// Settings of `dols`.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
#[serde(deny_unknown_fields)]
pub struct DolsOptions {
    /// Leads of the regressors' changes; absent: 1.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub leads: Option<u32>,
    /// Lags of the regressors' changes; absent: 1.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub lags: Option<u32>,
}

/// Settings of `autoregressive_errors`.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
#[serde(deny_unknown_fields)]
pub struct AutoregressiveOptions {
    /// What becomes of the first observation; absent: `kept`.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub first_observation: Option<FirstRow>,
}

/// What becomes of the first observation.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
#[serde(rename_all = "snake_case")]
pub enum FirstRow {
    /// Kept, times `√(1 − ρ²)` (Prais & Winsten 1954).
    #[default]
    Kept,
    /// Dropped (Cochrane & Orcutt 1949).
    Dropped,
}

impl From<FirstRow> for FirstObservation {
    fn from(row: FirstRow) -> Self {
        match row {
            FirstRow::Kept => Self::Kept,
            FirstRow::Dropped => Self::Dropped,
        }
    }
}

/// Settings of `seemingly_unrelated` and `seemingly_unrelated_differences`.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
#[serde(deny_unknown_fields)]
pub struct SystemOptions {
    /// Whether to iterate to maximum likelihood instead of stopping after Zellner's two steps; absent: yes.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub iterate: Option<bool>,
}

/// Settings of `johansen`.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
#[serde(deny_unknown_fields)]
pub struct JohansenOptions {
    /// Lags of the levels; absent: 2 in annual and half-yearly data, else 4.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub lags: Option<u32>,
    /// Deterministic case; absent: `constant`, or `restricted_trend` in an equation with a trend among its terms.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub case: Option<JohansenTerms>,
}

/// Johansen's five deterministic cases.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
#[serde(rename_all = "snake_case")]
pub enum JohansenTerms {
    /// No deterministic terms.
    None,
    /// Constant restricted to the relation.
    RestrictedConstant,
    /// Constant unrestricted: the data may drift.
    Constant,
    /// Trend restricted to the relation, constant unrestricted.
    RestrictedTrend,
    /// Constant and trend unrestricted.
    Trend,
}

impl From<JohansenTerms> for JohansenCase {
    fn from(terms: JohansenTerms) -> Self {
        match terms {
            JohansenTerms::None => Self::None,
            JohansenTerms::RestrictedConstant => Self::RestrictedConstant,
            JohansenTerms::Constant => Self::Constant,
            JohansenTerms::RestrictedTrend => Self::RestrictedTrend,
            JohansenTerms::Trend => Self::Trend,
        }
    }
}

/// Simulated critical values: of the bounds tests of `ardl` and the rank tests of `johansen`.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
#[serde(deny_unknown_fields)]
pub struct SimulationOptions {
    /// Replications, 100 to 200,000; 10,000 by default.
    #[serde(default = "default_draws")]
    pub draws: u32,
    /// Seed of the draws; 1 by default.
    #[serde(default = "default_seed")]
    pub seed: u32,
}

pub(super) fn default_draws() -> u32 {
    10_000
}

pub(super) fn default_seed() -> u32 {
    1
}

impl Default for SimulationOptions {
    fn default() -> Self {
        Self {
            draws: default_draws(),
            seed: default_seed(),
        }
    }
}

/// Most lags by convention: 2 in annual and half-yearly data, else 4.
pub(super) fn usual_lags(frequency: Frequency) -> u32 {
    match frequency {
        Frequency::Annual | Frequency::HalfYearly => 2,
        Frequency::Quarterly | Frequency::Monthly | Frequency::Weekly | Frequency::Daily => 4,
    }
}

/// Faults of options: given for an estimator that is not asked for, or out of range.
pub(super) fn check(document: &super::Document) -> Vec<Finding> {
    use Estimator::{
        Ardl, AutoregressiveErrors, Dols, Fmols, Johansen, OlsDifferences, OlsLevels,
        SeeminglyUnrelated, SeeminglyUnrelatedDifferences, TwoStageDifferences, TwoStageLevels,
    };
    let mut findings = Vec::new();
    let mut fault = |pointer: &str, message: String| {
        findings.push(Finding::error("invalid_value", message).at_pointer(pointer));
    };
    let by_scores = [
        OlsLevels,
        OlsDifferences,
        AutoregressiveErrors,
        TwoStageLevels,
        TwoStageDifferences,
    ];
    let by_kernel = [&by_scores[..], &[Dols, Fmols]].concat();
    let systems = [SeeminglyUnrelated, SeeminglyUnrelatedDifferences];
    let given: [(&str, bool, &[Estimator]); 9] = [
        ("/ardl", document.ardl.is_some(), &[Ardl]),
        ("/dols", document.dols.is_some(), &[Dols]),
        (
            "/autoregressive_errors",
            document.autoregressive_errors.is_some(),
            &[AutoregressiveErrors],
        ),
        (
            "/seemingly_unrelated",
            document.seemingly_unrelated.is_some(),
            &systems,
        ),
        ("/johansen", document.johansen.is_some(), &[Johansen]),
        (
            "/simulation",
            document.simulation.is_some(),
            &[Ardl, Johansen],
        ),
        ("/covariance", document.covariance.is_some(), &by_scores),
        ("/small_sample", document.small_sample.is_some(), &by_scores),
        ("/lags", document.lags.is_some(), &by_kernel),
    ];
    for (pointer, given, estimators) in given {
        if given && !estimators.iter().any(|e| document.estimators.contains(e)) {
            let names: Vec<&str> = estimators.iter().map(|e| e.code()).collect();
            fault(
                pointer,
                format!(
                    "{} applies to {}, of which none is asked for",
                    &pointer[1..],
                    names.join(", ")
                ),
            );
        }
    }
    let mut within = |pointer: &str, value: Option<u32>, low: u32, high: u32| {
        if let Some(value) = value.filter(|v| !(low..=high).contains(v)) {
            fault(
                pointer,
                format!("A number from {low} to {high} is expected, not {value}"),
            );
        }
    };
    let ardl = document.ardl.as_ref();
    within("/ardl/max_lags", ardl.and_then(|o| o.max_lags), 1, 12);
    within("/dols/leads", document.dols.and_then(|o| o.leads), 0, 12);
    within("/dols/lags", document.dols.and_then(|o| o.lags), 0, 12);
    within(
        "/johansen/lags",
        document.johansen.and_then(|o| o.lags),
        1,
        12,
    );
    let draws = document.simulation.map(|o| o.draws);
    within("/simulation/draws", draws, 100, 200_000);
    if let Some(ardl) = ardl {
        for (field, orders, demand) in [
            (
                "import_orders",
                &ardl.import_orders,
                &document.import_demand,
            ),
            (
                "export_orders",
                &ardl.export_orders,
                &document.export_demand,
            ),
        ] {
            let Some(orders) = orders else { continue };
            let series = 1 + demand.regressors().len();
            if orders.len() != series || orders[0] == 0 || orders.iter().any(|o| *o > 12) {
                fault(
                    &format!("/ardl/{field}"),
                    format!(
                        "{series} numbers from 0 to 12 are expected, the first at least 1: lags of the volume and of \
                         each regressor"
                    ),
                );
            }
        }
        if ardl.max_lags.is_some() && ardl.import_orders.is_some() && ardl.export_orders.is_some() {
            let message = "max_lags has no meaning where both orders are given".to_owned();
            fault("/ardl/max_lags", message);
        }
    }
    findings
}
