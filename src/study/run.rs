//! Running a study.

use std::collections::BTreeMap;

use super::document::{Document, Estimator};
use super::equation::{Both, Equation, Request, estimate, finite, small};
use super::integration::orders_of_integration;
use super::outcome::{
    Estimate, EstimatorResult, FormNumbers, FormResult, GrowthRates, IntervalSettings, MeanGrowth,
    NearIdentity, Outcome, RelativePriceEffect, Sample, Unreliable,
};
use super::reliability::{
    Side, errors, judge_coverage, judge_equation, judge_price_elasticities, judge_rate,
};
use super::sample::{Logs, gather};
use crate::constraint::{Affine, Economy, Form, Ratio};
use crate::dist::{t_two_sided, t_upper};
use crate::estimate::{Machine, NoStore};
use crate::finding::Finding;
use crate::series::{Series, SeriesKey};

/// Version of the method: it changes whenever the same inputs may give other digits.
pub const METHOD_VERSION: &str = "study/2";

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
/// `constant_series`, `collinear`, `too_few_observations`, `too_many_lags`, `explosive_errors`,
/// `underidentified`, `no_convergence`, `invalid_value`.
pub fn run(
    document: &Document,
    inputs: &BTreeMap<SeriesKey, Series>,
) -> Result<Outcome, Vec<Finding>> {
    run_with(document, inputs, Machine::with(&NoStore))
}

/// The same with what the machine lends.
///
/// # Errors
/// As [`run`].
pub fn run_with(
    document: &Document,
    inputs: &BTreeMap<SeriesKey, Series>,
    machine: Machine<'_>,
) -> Result<Outcome, Vec<Finding>> {
    let logs = gather(document, inputs)?;
    let per_year = document.frequency.periods_per_year().map_or(1.0, f64::from);
    let scale = 100.0 * per_year;
    let study = Study {
        document,
        logs: &logs,
        scale,
        actual: logs.mean_growth(document.actual.as_ref().unwrap_or(&document.activity)),
        machine,
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
    let simulates = |e: &Estimator| matches!(e, Estimator::Ardl | Estimator::Johansen);
    let simulated = document.estimators.iter().any(simulates);
    let mean = |key: &SeriesKey| scale * logs.mean_growth(key);
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
            growth_rates: GrowthRates::HeldFixed,
        },
        simulation: simulated.then(|| document.simulation.unwrap_or_default()),
        estimators,
        findings: [logs.notices.clone(), orders_of_integration(document, &logs)].concat(),
        caution: CAUTION.to_owned(),
    })
}

struct Study<'a> {
    document: &'a Document,
    logs: &'a Logs,
    /// From log growth per period to log per cent a year.
    scale: f64,
    /// Actual log growth per period.
    actual: f64,
    machine: Machine<'a>,
}

impl Study<'_> {
    fn estimate(&self, estimator: Estimator) -> Result<EstimatorResult, Vec<Finding>> {
        let request = |side: Side| Request {
            document: self.document,
            demand: match side {
                Side::Imports => &self.document.import_demand,
                Side::Exports => &self.document.export_demand,
            },
            side,
            estimator,
            logs: self.logs,
            machine: self.machine,
        };
        let across = self.document.interval.cross_covariance;
        let both = estimate(&request(Side::Imports), &request(Side::Exports), across)?;
        let (imports, exports) = (&both.imports, &both.exports);
        let annual = self.document.frequency == crate::time::Frequency::Annual;
        let judged = |equation: &Equation<'_>| {
            let own = equation.findings.clone();
            [judge_equation(equation, self.logs, annual), own].concat()
        };
        let import_findings = judged(imports);
        let mut export_findings = judged(exports);
        let plain = |equation: &Equation<'_>, of: &Affine, scale: f64| Estimate {
            value: scale * of.value,
            std_error: scale.abs() * equation.std_error(of),
        };
        let price = |equation: &Equation<'_>| {
            let sign = equation.side.price_sign();
            equation.price.as_ref().map(|p| plain(equation, p, sign))
        };
        let (import_price, export_price) = (price(imports), price(exports));
        if let (Some(m), Some(x)) = (import_price, export_price) {
            export_findings.extend(judge_price_elasticities(m.value, x.value));
        }
        let autonomous = |equation: &Equation<'_>| {
            let growth = equation.autonomous.as_ref();
            growth.map(|a| plain(equation, a, self.scale))
        };
        let estimates = Estimates {
            economy: self.economy(imports, exports),
            import_errors: errors(&import_findings),
            export_errors: errors(&export_findings),
            both: &both,
            estimator,
        };
        let forms = self.document.forms.iter().enumerate();
        Ok(EstimatorResult {
            estimator,
            import_demand: imports.result.clone(),
            export_demand: exports.result.clone(),
            import_income_elasticity: plain(imports, &imports.income, 1.0),
            export_income_elasticity: plain(exports, &exports.income, 1.0),
            import_price_elasticity: import_price,
            export_price_elasticity: export_price,
            import_autonomous_growth: autonomous(imports),
            export_autonomous_growth: autonomous(exports),
            forms: forms
                .map(|(i, form)| self.form(i, *form, &estimates))
                .collect(),
            near_identity: self.near_identity(imports),
            findings: [import_findings, export_findings].concat(),
        })
    }

    fn economy(&self, imports: &Equation<'_>, exports: &Equation<'_>) -> Economy {
        let k = imports.covariance.rows();
        let mean = |key: &SeriesKey| self.logs.mean_growth(key);
        let moved =
            |of: &Option<Affine>| of.as_ref().map_or_else(Affine::default, |a| a.shifted(k));
        Economy {
            exports: mean(&exports.demand.volume),
            foreign_income: mean(&exports.demand.activity),
            terms_of_trade: self.document.terms_of_trade.as_ref().map(mean),
            import_relative_price: imports.demand.relative_price.as_ref().map(mean),
            export_relative_price: exports.demand.relative_price.as_ref().map(mean),
            import_income_elasticity: imports.income.clone(),
            export_income_elasticity: exports.income.shifted(k),
            import_price_elasticity: imports.price.clone().unwrap_or_default(),
            export_price_elasticity: -moved(&exports.price),
            import_autonomous: imports.autonomous.clone().unwrap_or_default(),
            export_autonomous: moved(&exports.autonomous),
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
        let Both {
            imports,
            exports,
            joint,
        } = estimates.both;
        let df = if uses_exports {
            imports
                .degrees_of_freedom()
                .min(exports.degrees_of_freedom())
        } else {
            imports.degrees_of_freedom()
        };
        let level = self.document.interval.level;
        let t = t_upper((1.0 - level) / 2.0, df);
        // Multiplied by what the elasticities were divided by, for intervals free of that division.
        let undivided = |ratio: &Ratio| {
            let mut ratio = ratio.clone();
            if let Some(divisor) = &imports.divisor {
                ratio = ratio.times(divisor);
            }
            if let Some(divisor) = exports.divisor.as_ref().filter(|_| uses_exports) {
                ratio = ratio.times(&divisor.shifted(imports.covariance.rows()));
            }
            ratio
        };
        let region = |ratio: &Ratio| {
            let region = undivided(ratio).interval(joint, t, self.document.interval.method);
            region.map(|v| self.scale * v)
        };
        let effect = form
            .relative_price_effect(&estimates.economy)
            .ok()
            .map(|ratio| {
                let numerator = undivided(&ratio).numerator;
                let error = numerator.variance(joint).sqrt();
                RelativePriceEffect {
                    included: matches!(form, Form::WeakFormWithPrices | Form::WithRelativePrices),
                    effect: self.scale * ratio.value(),
                    interval: region(&ratio),
                    p_zero: finite(t_two_sided(numerator.value / error, df)),
                }
            });
        let rate = self.scale * ratio.value();
        let interval = region(&ratio);
        let free = imports.autonomous.is_some() || exports.autonomous.is_some();
        let with_autonomous = form.solve(&estimates.economy, true).ok().filter(|_| free);
        let numbers = FormNumbers {
            rate: Some(rate),
            std_error: finite(self.scale * ratio.delta_variance(joint).sqrt()),
            interval: Some(interval),
            rate_with_autonomous_growth: with_autonomous.map(|r| self.scale * r.value()),
            relative_price_effect: effect,
        };
        let actual = compound(self.scale * self.actual);
        let method = self.document.interval.method;
        let findings: Vec<Finding> = judge_rate(compound(rate), interval.map(compound), actual)
            .into_iter()
            .chain(judge_coverage(estimates.estimator, uses_exports, method))
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
        let mean = |key: &SeriesKey| self.logs.mean_growth(key);
        let (m, x) = (
            mean(&imports.demand.volume),
            mean(&self.document.export_demand.volume),
        );
        let tt = self.document.terms_of_trade.as_ref().map(mean);
        let pi = imports.income.value;
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
    economy: Economy,
    import_errors: Vec<Finding>,
    export_errors: Vec<Finding>,
    both: &'a Both<'a>,
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
