//! The document that says what a study estimates, named before it runs.

use std::collections::BTreeSet;

use serde::{Deserialize, Serialize};
use utoipa::ToSchema;

use super::options::{
    ArdlOptions, AutoregressiveOptions, DolsOptions, JohansenOptions, SimulationOptions,
    SystemOptions, check as check_options,
};
use super::reader;
use super::terms::{Term, check as check_terms};
use crate::constraint::{Form, IntervalMethod};
use crate::document;
use crate::finding::Finding;
use crate::series::SeriesKey;
use crate::time::{Frequency, Period};

/// What to estimate, from which series, and which result is the headline.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
#[serde(deny_unknown_fields)]
pub struct Document {
    /// Title of the report.
    pub title: String,
    /// The area whose growth is studied.
    pub area: String,
    /// Frequency of every series: A, S, Q or M.
    #[schema(value_type = String)]
    pub frequency: Frequency,
    /// The result to be judged by, named before the run.
    pub headline: Headline,
    /// Laws of constrained growth to solve.
    pub forms: Vec<Form>,
    /// Estimators of the demand equations.
    pub estimators: Vec<Estimator>,
    /// Outer bounds of the sample; the series may allow less.
    #[serde(default)]
    pub sample: SampleBounds,
    /// Home income (real GDP by default); its growth is the actual growth unless `actual` is given.
    #[schema(value_type = String)]
    pub activity: SeriesKey,
    /// Series whose growth is the actual growth.
    #[schema(value_type = Option<String>)]
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub actual: Option<SeriesKey>,
    /// Demand for imports: a rise of its relative price Rm (home over import price) makes imports
    /// cheaper.
    pub import_demand: Demand,
    /// Demand for exports: a rise of its relative price Rx (own over competitors' price) makes
    /// exports dearer.
    pub export_demand: Demand,
    /// Export over import price.
    #[schema(value_type = Option<String>)]
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub terms_of_trade: Option<SeriesKey>,
    /// Covariance of coefficients behind tests and intervals of least squares, two-stage least squares and
    /// autoregressive errors; absent: classical in differences, Newey–West in levels.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub covariance: Option<Covariance>,
    /// Lags of the Bartlett kernel, in Newey–West covariances (told beside classical ones too) and in the long-run variances of `dols` and
    /// `fmols`; absent: ⌊4 (n/100)^(2/9)⌋.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub lags: Option<u32>,
    /// Whether Newey–West covariances are multiplied by n/(n − k); absent: yes.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub small_sample: Option<bool>,
    /// Intervals for growth rates.
    #[serde(default)]
    pub interval: Interval,
    /// Settings of `ardl`.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub ardl: Option<ArdlOptions>,
    /// Settings of `dols`.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub dols: Option<DolsOptions>,
    /// Settings of `autoregressive_errors`.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub autoregressive_errors: Option<AutoregressiveOptions>,
    /// Settings of `seemingly_unrelated` and `seemingly_unrelated_differences`.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub seemingly_unrelated: Option<SystemOptions>,
    /// Settings of `johansen`.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub johansen: Option<JohansenOptions>,
    /// Settings of simulated critical values.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub simulation: Option<SimulationOptions>,
}

/// The one result a study is judged by.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
#[serde(deny_unknown_fields)]
pub struct Headline {
    /// One of the document's forms.
    pub form: Form,
    /// One of the document's estimators.
    pub estimator: Estimator,
}

/// How a demand equation is estimated.
#[derive(
    Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize, ToSchema,
)]
#[serde(rename_all = "snake_case")]
pub enum Estimator {
    /// Least squares on log levels, with a constant.
    OlsLevels,
    /// Least squares on log differences; the constant is autonomous growth.
    OlsDifferences,
    /// Log levels with first-order autoregressive errors (Prais & Winsten 1954).
    AutoregressiveErrors,
    /// Two-stage least squares on log levels; each demand names its instruments.
    TwoStageLevels,
    /// Two-stage least squares on log differences.
    TwoStageDifferences,
    /// Both equations in log levels as one system of seemingly unrelated regressions (Zellner 1962).
    SeeminglyUnrelated,
    /// The same on log differences.
    SeeminglyUnrelatedDifferences,
    /// Autoregressive distributed lags in error-correction form with bounds tests (Pesaran, Shin & Smith 2001).
    Ardl,
    /// Dynamic least squares (Saikkonen 1991; Stock & Watson 1993).
    Dols,
    /// Fully modified least squares (Phillips & Hansen 1990).
    Fmols,
    /// One relation in a vector error-correction model of each equation's series (Johansen 1991).
    Johansen,
}

impl Estimator {
    /// The name used in documents and results.
    #[must_use]
    pub fn code(self) -> &'static str {
        match self {
            Self::OlsLevels => "ols_levels",
            Self::OlsDifferences => "ols_differences",
            Self::AutoregressiveErrors => "autoregressive_errors",
            Self::TwoStageLevels => "two_stage_levels",
            Self::TwoStageDifferences => "two_stage_differences",
            Self::SeeminglyUnrelated => "seemingly_unrelated",
            Self::SeeminglyUnrelatedDifferences => "seemingly_unrelated_differences",
            Self::Ardl => "ardl",
            Self::Dols => "dols",
            Self::Fmols => "fmols",
            Self::Johansen => "johansen",
        }
    }

    /// Whether it works on log differences, so that a constant is growth.
    #[must_use]
    pub fn in_differences(self) -> bool {
        matches!(
            self,
            Self::OlsDifferences | Self::TwoStageDifferences | Self::SeeminglyUnrelatedDifferences
        )
    }

    pub(super) fn uses_instruments(self) -> bool {
        matches!(self, Self::TwoStageLevels | Self::TwoStageDifferences)
    }
}

/// Outer bounds of a sample, both included.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
#[serde(deny_unknown_fields)]
pub struct SampleBounds {
    /// First period.
    #[schema(value_type = Option<String>)]
    #[serde(default)]
    pub from: Option<Period>,
    /// Last period.
    #[schema(value_type = Option<String>)]
    #[serde(default)]
    pub to: Option<Period>,
}

/// The series of one demand equation.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
#[serde(deny_unknown_fields)]
pub struct Demand {
    /// Volume demanded: real imports or exports.
    #[schema(value_type = String)]
    pub volume: SeriesKey,
    /// Activity of those who demand: home or foreign income.
    #[schema(value_type = String)]
    pub activity: SeriesKey,
    /// Relative price; absent: none.
    #[schema(value_type = Option<String>)]
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub relative_price: Option<SeriesKey>,
    /// Further regressors, in logs; what their mean growth adds counts as autonomous growth.
    #[schema(value_type = Vec<String>)]
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub further: Vec<SeriesKey>,
    /// Trend, seasonal and other dummies.
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub terms: Vec<Term>,
    /// Instruments of two-stage least squares outside the equation, in logs or log differences as the equation.
    #[schema(value_type = Vec<String>)]
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub instruments: Vec<SeriesKey>,
    /// Regressors that the instruments are for; none named: `activity`.
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub endogenous: Vec<Endogenous>,
}

impl Demand {
    /// Regressors in order, each with the field that names it: activity, relative price, further ones.
    pub(super) fn regressors(&self) -> Vec<(String, &SeriesKey)> {
        let mut all = vec![("activity".to_owned(), &self.activity)];
        all.extend(
            self.relative_price
                .iter()
                .map(|k| ("relative_price".to_owned(), k)),
        );
        let further = self.further.iter().enumerate();
        all.extend(further.map(|(i, k)| (format!("further/{i}"), k)));
        all
    }

    /// The series that instruments are for.
    pub(super) fn instrumented(&self) -> Vec<&SeriesKey> {
        let chosen = if self.endogenous.is_empty() {
            &[Endogenous::Activity][..]
        } else {
            &self.endogenous[..]
        };
        chosen
            .iter()
            .filter_map(|e| match e {
                Endogenous::Activity => Some(&self.activity),
                Endogenous::RelativePrice => self.relative_price.as_ref(),
            })
            .collect()
    }
}

/// A regressor that may be correlated with the error.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
#[serde(rename_all = "snake_case")]
pub enum Endogenous {
    /// The activity.
    Activity,
    /// The relative price.
    RelativePrice,
}

/// Kinds of covariance of coefficients.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
#[serde(rename_all = "snake_case")]
pub enum Covariance {
    /// Independent errors of one variance.
    Classical,
    /// Newey & West 1987, Bartlett weights.
    NeweyWest,
}

/// Settings of the intervals for growth rates.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
#[serde(deny_unknown_fields)]
pub struct Interval {
    /// Fieller by default.
    #[serde(default)]
    pub method: IntervalMethod,
    /// Coverage aimed at, 0.5 to 0.999; 0.95 by default.
    #[serde(default = "default_level")]
    pub level: f64,
    /// Whether the two equations' coefficients covary.
    #[serde(default)]
    pub cross_covariance: CrossCovariance,
}

impl Default for Interval {
    fn default() -> Self {
        Self {
            method: IntervalMethod::default(),
            level: default_level(),
            cross_covariance: CrossCovariance::default(),
        }
    }
}

pub(super) fn default_level() -> f64 {
    0.95
}

/// Covariance between the coefficients of the two equations.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
#[serde(rename_all = "snake_case")]
pub enum CrossCovariance {
    /// Estimated from both equations' scores on the common sample.
    #[default]
    Joint,
    /// Set to zero.
    Zero,
}

impl Document {
    /// Reads a document. Every fault is a finding with a JSON pointer and what was expected there.
    ///
    /// # Errors
    /// The findings, all of severity error: `invalid_json`, `unknown_field` (lists the known ones),
    /// `missing_field`, `invalid_value`.
    pub fn parse(text: &str) -> Result<Self, Vec<Finding>> {
        let document = reader::read(&document::parse(text)?)?;
        let findings = document.check();
        if findings.is_empty() {
            Ok(document)
        } else {
            Err(findings)
        }
    }

    /// Every series that the study reads, each once, in key order.
    #[must_use]
    pub fn inputs(&self) -> Vec<SeriesKey> {
        let keys: BTreeSet<SeriesKey> = self.roles().into_iter().map(|r| r.key.clone()).collect();
        keys.into_iter().collect()
    }

    /// The series with their places in the document and what they must be.
    pub(super) fn roles(&self) -> Vec<Role<'_>> {
        let mut roles = Vec::new();
        let mut add = |pointer: &str, key, kind| {
            roles.push(Role {
                pointer: pointer.to_owned(),
                key,
                kind,
            });
        };
        add("/activity", &self.activity, Kind::Volume);
        if let Some(key) = &self.actual {
            add("/actual", key, Kind::Volume);
        }
        for (pointer, demand) in [
            ("/import_demand", &self.import_demand),
            ("/export_demand", &self.export_demand),
        ] {
            add(&format!("{pointer}/volume"), &demand.volume, Kind::Volume);
            for (field, key) in demand.regressors() {
                let kind = match field.as_str() {
                    "activity" => Kind::Volume,
                    "relative_price" => Kind::RelativePrice,
                    _ => Kind::Any,
                };
                add(&format!("{pointer}/{field}"), key, kind);
            }
            for (i, key) in demand.instruments.iter().enumerate() {
                add(&format!("{pointer}/instruments/{i}"), key, Kind::Any);
            }
        }
        if let Some(key) = &self.terms_of_trade {
            add("/terms_of_trade", key, Kind::RelativePrice);
        }
        roles
    }

    /// What single fields cannot show.
    fn check(&self) -> Vec<Finding> {
        let mut findings = Vec::new();
        let mut fault = |pointer: &str, message: String| {
            findings.push(Finding::error("invalid_value", message).at_pointer(pointer));
        };
        if self.frequency.periods_per_year().is_none() {
            let message = format!(
                "A study needs frequency A, S, Q or M, not {}",
                self.frequency
            );
            fault("/frequency", message);
        }
        for role in self.roles() {
            if role.key.frequency() != self.frequency {
                let message = format!("{} is not of frequency {}", role.key, self.frequency);
                fault(&role.pointer, message);
            }
        }
        let bounds = [
            ("/sample/from", self.sample.from),
            ("/sample/to", self.sample.to),
        ];
        for (pointer, period) in bounds {
            if let Some(p) = period.filter(|p| p.frequency() != self.frequency) {
                fault(
                    pointer,
                    format!("{p} is not of frequency {}", self.frequency),
                );
            }
        }
        if let (Some(from), Some(to)) = (self.sample.from, self.sample.to)
            && from >= to
        {
            fault(
                "/sample/to",
                format!("The sample ends at {to}, not after {from}"),
            );
        }
        if !self.forms.contains(&self.headline.form) {
            let form = self.headline.form.code();
            fault("/headline/form", format!("{form} is not among the forms"));
        }
        if !self.estimators.contains(&self.headline.estimator) {
            let estimator = self.headline.estimator.code();
            fault(
                "/headline/estimator",
                format!("{estimator} is not among the estimators"),
            );
        }
        let twice = |positions: Vec<bool>| positions.iter().position(|first| !first);
        let forms = self.forms.iter().enumerate();
        if let Some(i) = twice(forms.map(|(i, f)| !self.forms[..i].contains(f)).collect()) {
            fault(
                &format!("/forms/{i}"),
                format!("{} stands twice", self.forms[i].code()),
            );
        }
        let list = &self.estimators;
        let first = |(i, e): (usize, &Estimator)| !list[..i].contains(e);
        if let Some(i) = twice(list.iter().enumerate().map(first).collect()) {
            fault(
                &format!("/estimators/{i}"),
                format!("{} stands twice", list[i].code()),
            );
        }
        if !(0.5..=0.999).contains(&self.interval.level) {
            let message = format!(
                "The level must be 0.5 to 0.999, not {}",
                self.interval.level
            );
            fault("/interval/level", message);
        }
        findings.extend(self.check_areas());
        findings.extend(self.check_sides());
        findings.extend(check_options(self));
        findings.extend(check_terms(self));
        findings.extend(self.check_instruments());
        findings
    }

    /// What is at home must be of the area that is studied.
    fn check_areas(&self) -> Vec<Finding> {
        let home = [
            ("/activity", Some(&self.activity)),
            ("/actual", self.actual.as_ref()),
            ("/import_demand/volume", Some(&self.import_demand.volume)),
            (
                "/import_demand/activity",
                Some(&self.import_demand.activity),
            ),
            ("/export_demand/volume", Some(&self.export_demand.volume)),
        ];
        let foreign = |key: &&SeriesKey| key.places()[0] != self.area;
        home.into_iter()
            .filter_map(|(pointer, key)| Some((pointer, key.filter(foreign)?)))
            .map(|(pointer, key)| {
                let message = format!("{key} is of another area than the one studied");
                Finding::error("invalid_value", message)
                    .at_pointer(pointer)
                    .found(key.places()[0].clone())
                    .expected(self.area.clone())
            })
            .collect()
    }

    /// A series explains no other that is itself.
    fn check_sides(&self) -> Vec<Finding> {
        let mut findings = Vec::new();
        for (pointer, demand) in [
            ("/import_demand", &self.import_demand),
            ("/export_demand", &self.export_demand),
        ] {
            for (field, key) in demand.regressors() {
                if *key == demand.volume {
                    let message = format!("{key} stands on both sides of the equation");
                    findings.push(
                        Finding::error("invalid_value", message)
                            .at_pointer(format!("{pointer}/{field}"))
                            .remedy("Name the series that explains the volume"),
                    );
                }
            }
        }
        findings
    }

    fn check_instruments(&self) -> Vec<Finding> {
        let asked = self.estimators.iter().any(|e| e.uses_instruments());
        let mut findings = Vec::new();
        for (pointer, demand) in [
            ("/import_demand", &self.import_demand),
            ("/export_demand", &self.export_demand),
        ] {
            let mut fault = |field: &str, message: &str| {
                let finding = Finding::error("invalid_value", message);
                findings.push(finding.at_pointer(format!("{pointer}/{field}")));
            };
            if asked && demand.instruments.len() < demand.instrumented().len().max(1) {
                fault(
                    "instruments",
                    "Two-stage least squares needs at least one instrument for each endogenous regressor",
                );
            } else if !asked && !demand.instruments.is_empty() {
                fault(
                    "instruments",
                    "Instruments apply to two_stage_levels and two_stage_differences, of which none is asked for",
                );
            }
            if demand.endogenous.contains(&Endogenous::RelativePrice)
                && demand.relative_price.is_none()
            {
                fault("endogenous", "The demand has no relative price");
            } else if !asked && !demand.endogenous.is_empty() {
                fault(
                    "endogenous",
                    "Endogenous regressors apply to two_stage_levels and two_stage_differences, of which none is asked for",
                );
            }
        }
        findings
    }
}

/// A series of a document, where it stands and what it must be.
pub(super) struct Role<'a> {
    pub(super) pointer: String,
    pub(super) key: &'a SeriesKey,
    pub(super) kind: Kind,
}

/// What a role asks of a series' unit.
#[derive(Clone, Copy, PartialEq, Eq)]
pub(super) enum Kind {
    Volume,
    RelativePrice,
    /// Anything that has a logarithm.
    Any,
}
