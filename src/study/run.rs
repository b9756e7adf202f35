//! Running a study.

use std::collections::BTreeMap;

use super::document::{CrossCovariance, Document, Estimator};
use super::equation::{CONST, Equation, INCOME, PRICE, differences, finite, small};
use super::outcome::{
    Estimate, EstimatorResult, FormNumbers, FormResult, IntervalSettings, MeanGrowth, NearIdentity,
    Outcome, RelativePriceEffect, Sample, Unreliable,
};
use super::reliability::{Side, errors, judge_equation, judge_price_elasticities, judge_rate};
use super::sample::{Logs, gather};
use crate::constraint::{Affine, Economy, Form, Ratio};
use crate::dist::{t_two_sided, t_upper};
use crate::estimate::covariance;
use crate::finding::Finding;
use crate::linalg::Matrix;
use crate::series::{Series, SeriesKey};

/// Version of the method: it changes whenever the same inputs may give other digits.
pub const METHOD_VERSION: &str = "study/1";

const CAUTION: &str = "These figures are conditional on a model and on the data it was given. They \
    are not a forecast and not advice; official statistics and licensed advice prevail. The rate \
    is the growth at which exports pay for imports. It says nothing about supply: labour, capital, \
    energy.";

/// Runs a study on its input series: logs on the common sample, both demand equations by each
/// estimator, every form with its interval, and what speaks against relying on them.
///
/// # Errors
/// Findings that forbid a run, each with series, period or JSON pointer: `missing_input`,
/// `wrong_frequency`, `wrong_unit`, `no_common_sample`, `gap_in_sample`, `not_positive`,
/// `constant_series`, `collinear`, `too_few_observations`, `too_many_lags`.
pub fn run(
    document: &Document,
    inputs: &BTreeMap<SeriesKey, Series>,
) -> Result<Outcome, Vec<Finding>> {
    let logs = gather(document, inputs)?;
    let per_year = document.frequency.periods_per_year().map_or(1.0, f64::from);
    let scale = 100.0 * per_year;
    let study = Study {
        document,
        logs: &logs,
        scale,
        actual: mean_growth(
            &logs,
            document.actual.as_ref().unwrap_or(&document.activity),
        ),
    };
    let (mut estimators, mut faults) = (Vec::new(), Vec::new());
    for estimator in &document.estimators {
        match study.estimate(*estimator) {
            Ok(result) => estimators.push(result),
            Err(mut findings) => faults.append(&mut findings),
        }
    }
    if !faults.is_empty() {
        return Err(faults);
    }
    let mean = |key: &SeriesKey| scale * mean_growth(&logs, key);
    let (imports, exports) = (&document.import_demand, &document.export_demand);
    Ok(Outcome {
        method_version: METHOD_VERSION.to_owned(),
        title: document.title.clone(),
        area: document.area.clone(),
        headline: document.headline,
        growth_unit: "log_percent".to_owned(),
        growth_per: "year".to_owned(),
        sample: Sample {
            frequency: document.frequency.to_string(),
            from: logs.periods[0].to_string(),
            to: logs.periods[logs.periods.len() - 1].to_string(),
            observations: small(logs.periods.len()),
        },
        actual_growth: scale * study.actual,
        growth: MeanGrowth {
            exports: mean(&exports.volume),
            imports: mean(&imports.volume),
            home_activity: mean(&imports.activity),
            foreign_income: mean(&exports.activity),
            terms_of_trade: document.terms_of_trade.as_ref().map(mean),
            import_relative_price: imports.relative_price.as_ref().map(mean),
            export_relative_price: exports.relative_price.as_ref().map(mean),
        },
        interval: IntervalSettings {
            method: document.interval.method,
            level: document.interval.level,
            cross_covariance: document.interval.cross_covariance,
        },
        estimators,
        findings: logs.notices,
        caution: CAUTION.to_owned(),
    })
}

/// Mean log growth per period over the sample.
fn mean_growth(logs: &Logs, key: &SeriesKey) -> f64 {
    let changes = differences(logs.of(key));
    changes.iter().sum::<f64>() / f64::from(small(changes.len()))
}

struct Study<'a> {
    document: &'a Document,
    logs: &'a Logs,
    /// From log growth per period to log per cent a year.
    scale: f64,
    /// Actual log growth per period.
    actual: f64,
}

impl Study<'_> {
    fn estimate(&self, estimator: Estimator) -> Result<EstimatorResult, Vec<Finding>> {
        let fit = |side: Side| {
            let demand = match side {
                Side::Imports => &self.document.import_demand,
                Side::Exports => &self.document.export_demand,
            };
            Equation::fit(self.document, demand, side.pointer(), estimator, self.logs)
        };
        let (imports, exports) = match (fit(Side::Imports), fit(Side::Exports)) {
            (Ok(imports), Ok(exports)) => (imports, exports),
            (imports, exports) => {
                let faults = [imports.err(), exports.err()];
                return Err(faults.into_iter().flatten().flatten().collect());
            }
        };
        let annual = self.document.frequency == crate::time::Frequency::Annual;
        let import_findings = judge_equation(&imports, Side::Imports, self.logs, annual);
        let mut export_findings = judge_equation(&exports, Side::Exports, self.logs, annual);
        let price = |equation: &Equation<'_>, side: Side| {
            equation.has_price().then(|| Estimate {
                value: side.price_sign() * equation.fit.coefficients[PRICE],
                std_error: equation.std_error(PRICE),
            })
        };
        let import_price = price(&imports, Side::Imports);
        let export_price = price(&exports, Side::Exports);
        if let (Some(m), Some(x)) = (import_price, export_price) {
            export_findings.extend(judge_price_elasticities(m.value, x.value));
        }
        let estimates = Estimates {
            joint: self.joint(&imports, &exports)?,
            economy: self.economy(&imports, &exports, estimator),
            import_errors: errors(&import_findings),
            export_errors: errors(&export_findings),
            imports: &imports,
            exports: &exports,
            estimator,
        };
        let plain = |equation: &Equation<'_>, i: usize, scale: f64| Estimate {
            value: scale * equation.fit.coefficients[i],
            std_error: scale * equation.std_error(i),
        };
        let autonomous = |equation: &Equation<'_>| {
            (estimator == Estimator::OlsDifferences).then(|| plain(equation, CONST, self.scale))
        };
        let forms = self.document.forms.iter().enumerate();
        Ok(EstimatorResult {
            estimator,
            import_demand: imports.result(self.logs),
            export_demand: exports.result(self.logs),
            import_income_elasticity: plain(&imports, INCOME, 1.0),
            export_income_elasticity: plain(&exports, INCOME, 1.0),
            import_price_elasticity: import_price,
            export_price_elasticity: export_price,
            import_autonomous_growth: autonomous(&imports),
            export_autonomous_growth: autonomous(&exports),
            forms: forms
                .map(|(i, form)| self.form(i, *form, &estimates))
                .collect(),
            near_identity: self.near_identity(&imports),
            findings: [import_findings, export_findings].concat(),
        })
    }

    /// Joint covariance of the coefficients of imports, then exports.
    fn joint(
        &self,
        imports: &Equation<'_>,
        exports: &Equation<'_>,
    ) -> Result<Matrix, Vec<Finding>> {
        let joint = covariance(&[&imports.fit, &exports.fit], imports.chosen)
            .map_err(|e| vec![Finding::error("no_joint_covariance", e.to_string())])?;
        let k = imports.fit.k;
        Ok(match self.document.interval.cross_covariance {
            CrossCovariance::Joint => joint,
            CrossCovariance::Zero => Matrix::from_fn(joint.rows(), joint.columns(), |i, j| {
                if (i < k) == (j < k) {
                    joint.at(i, j)
                } else {
                    0.0
                }
            }),
        })
    }

    fn economy(
        &self,
        imports: &Equation<'_>,
        exports: &Equation<'_>,
        estimator: Estimator,
    ) -> Economy {
        let (m, x, k) = (
            &imports.fit.coefficients,
            &exports.fit.coefficients,
            imports.fit.k,
        );
        let mean = |key: &SeriesKey| mean_growth(self.logs, key);
        let zero = Affine::default();
        let free = |place: usize, value: f64| match estimator {
            Estimator::OlsDifferences => Affine::coefficient(place, value),
            Estimator::OlsLevels => Affine::default(),
        };
        Economy {
            exports: mean(&exports.demand.volume),
            foreign_income: mean(&exports.demand.activity),
            terms_of_trade: self.document.terms_of_trade.as_ref().map(mean),
            import_relative_price: imports.demand.relative_price.as_ref().map(mean),
            export_relative_price: exports.demand.relative_price.as_ref().map(mean),
            import_income_elasticity: Affine::coefficient(INCOME, m[INCOME]),
            export_income_elasticity: Affine::coefficient(k + INCOME, x[INCOME]),
            import_price_elasticity: m
                .get(PRICE)
                .map_or(zero.clone(), |v| Affine::coefficient(PRICE, *v)),
            export_price_elasticity: x
                .get(PRICE)
                .map_or(zero, |v| -Affine::coefficient(k + PRICE, *v)),
            import_autonomous: free(CONST, m[CONST]),
            export_autonomous: free(k + CONST, x[CONST]),
        }
    }

    fn form(&self, index: usize, form: Form, estimates: &Estimates<'_>) -> FormResult {
        let solved = form.solve(&estimates.economy, false);
        let ratio = match solved {
            Ok(ratio) if ratio.value().is_finite() => ratio,
            Ok(_) => return refused(form, "the rate is not a finite number".to_owned()),
            Err(error) => return refused(form, error.to_string()),
        };
        let uses_exports = form.uses_export_demand();
        let df = if uses_exports {
            estimates.imports.df().min(estimates.exports.df())
        } else {
            estimates.imports.df()
        };
        let level = self.document.interval.level;
        let t = t_upper((1.0 - level) / 2.0, df);
        let region = |ratio: &Ratio| {
            let region = ratio.interval(&estimates.joint, t, self.document.interval.method);
            region.map(|v| self.scale * v)
        };
        let effect = form
            .relative_price_effect(&estimates.economy)
            .ok()
            .map(|ratio| {
                let error = ratio.numerator.variance(&estimates.joint).sqrt();
                RelativePriceEffect {
                    included: matches!(form, Form::WeakFormWithPrices | Form::WithRelativePrices),
                    effect: self.scale * ratio.value(),
                    interval: region(&ratio),
                    p_zero: finite(t_two_sided(ratio.numerator.value / error, df)),
                }
            });
        let rate = self.scale * ratio.value();
        let interval = region(&ratio);
        let with_autonomous = match estimates.estimator {
            Estimator::OlsDifferences => form.solve(&estimates.economy, true).ok(),
            Estimator::OlsLevels => None,
        };
        let numbers = FormNumbers {
            rate: Some(rate),
            std_error: finite(self.scale * ratio.delta_variance(&estimates.joint).sqrt()),
            interval: Some(interval),
            rate_with_autonomous_growth: with_autonomous.map(|r| self.scale * r.value()),
            relative_price_effect: effect,
        };
        let actual = compound(self.scale * self.actual);
        let findings: Vec<Finding> = judge_rate(compound(rate), interval.map(compound), actual)
            .into_iter()
            .map(|f| f.at_pointer(format!("/forms/{index}")))
            .collect();
        let mut reasons = estimates.import_errors.clone();
        if uses_exports {
            reasons.extend_from_slice(&estimates.export_errors);
        }
        reasons.extend(errors(&findings));
        let (numbers, unreliable) = if reasons.is_empty() {
            (numbers, None)
        } else {
            (
                FormNumbers::default(),
                Some(Unreliable { numbers, reasons }),
            )
        };
        FormResult {
            form,
            numbers,
            unreliable,
            refused: None,
            findings,
        }
    }

    fn near_identity(&self, imports: &Equation<'_>) -> NearIdentity {
        let mean = |key: &SeriesKey| mean_growth(self.logs, key);
        let (m, x) = (
            mean(&imports.demand.volume),
            mean(&self.document.export_demand.volume),
        );
        let tt = self.document.terms_of_trade.as_ref().map(mean);
        let pi = imports.fit.coefficients[INCOME];
        let arithmetic = finite(m / mean(&imports.demand.activity));
        let part = (pi > 0.0).then(|| self.scale * (x + tt.unwrap_or(0.0) - m) / pi);
        let measured = if tt.is_some() { "values" } else { "volumes" };
        let elasticity = arithmetic.map_or_else(
            || "Home activity did not grow, so that there is no arithmetic elasticity.".to_owned(),
            |a| {
                format!(
                    "Imports grew {a:.2} times as fast as home activity; the estimated elasticity is \
                     {pi:.2}."
                )
            },
        );
        let gap = part.map_or_else(String::new, |part| {
            format!(
                " Of the gap between constrained and actual growth, {part:+.2} points come from exports \
                 and imports growing apart in {measured}."
            )
        });
        NearIdentity {
            arithmetic_elasticity: arithmetic,
            import_income_elasticity: pi,
            trade_imbalance_part: part,
            measured_in: measured.to_owned(),
            sentence: format!(
                "{elasticity}{gap} Least squares reproduces sample means, so that agreement with actual \
                 growth is weak evidence where trade stayed near balance."
            ),
        }
    }
}

/// What the forms of one estimator share.
struct Estimates<'a> {
    joint: Matrix,
    economy: Economy,
    import_errors: Vec<Finding>,
    export_errors: Vec<Finding>,
    imports: &'a Equation<'a>,
    exports: &'a Equation<'a>,
    estimator: Estimator,
}

fn refused(form: Form, reason: String) -> FormResult {
    FormResult {
        form,
        numbers: FormNumbers::default(),
        unreliable: None,
        refused: Some(reason),
        findings: Vec::new(),
    }
}

/// From 100 × log growth to compound per cent.
pub(super) fn compound(log_percent: f64) -> f64 {
    100.0 * (log_percent / 100.0).exp_m1()
}
