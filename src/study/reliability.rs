//! Which estimates and rates may be relied on, and why not. Limits are common practice.
//!
//! A finding of severity error makes every form unreliable that uses its equation; notices do not.

use super::document::Estimator;
use super::equation::Equation;
use super::sample::Logs;
use crate::constraint::{IntervalMethod, Region};
use crate::dist::t_upper;
use crate::estimate::{Shortage, shortage};
use crate::finding::{Finding, Severity};

/// Two-sided significance of the tests here, whatever the level of the intervals.
const SIGNIFICANCE: f64 = 0.05;
/// Income elasticities beyond these are worth a notice, and beyond the last not believable.
const USUAL_INCOME_ELASTICITY: (f64, f64) = (0.5, 3.5);
const LARGEST_INCOME_ELASTICITY: f64 = 5.0;
/// A sum of price elasticities beyond this is worth a notice.
const USUAL_PRICE_ELASTICITIES: f64 = 3.0;
/// Above this no error is left to judge by: what is estimated is an identity.
const PERFECT_FIT: f64 = 1.0 - 1e-9;
/// Shares of estimated and imputed observations: notice above, unreliable above.
const GUESSED: (f64, f64) = (0.1, 0.3);
/// Constrained growth, compound per cent a year: notice this far from actual, unreliable beyond.
const FAR_FROM_ACTUAL: f64 = 3.0;
const BELIEVABLE_RATE: (f64, f64) = (-2.0, 12.0);
const WIDEST_INTERVAL: f64 = 6.0;

/// Which of the two demands an equation is, with its words.
#[derive(Clone, Copy, PartialEq, Eq)]
pub(super) enum Side {
    Imports,
    Exports,
}

impl Side {
    pub(super) fn pointer(self) -> &'static str {
        match self {
            Self::Imports => "/import_demand",
            Self::Exports => "/export_demand",
        }
    }

    pub(super) fn noun(self) -> &'static str {
        match self {
            Self::Imports => "imports",
            Self::Exports => "exports",
        }
    }

    /// The sign that turns the equation's coefficient into the elasticity expected positive.
    pub(super) fn price_sign(self) -> f64 {
        match self {
            Self::Imports => 1.0,
            Self::Exports => -1.0,
        }
    }
}

/// Whether any finding is an error.
pub(super) fn errors(findings: &[Finding]) -> Vec<Finding> {
    let error = |f: &&Finding| f.severity == Severity::Error;
    findings.iter().filter(error).cloned().collect()
}

/// What an equation's estimates show, whatever the estimator.
pub(super) fn judge_equation(equation: &Equation<'_>, logs: &Logs, annual: bool) -> Vec<Finding> {
    let side = equation.side;
    let mut findings = Vec::new();
    let mut add = |severity: Severity, code: &str, message: String| {
        let finding = match severity {
            Severity::Error => Finding::error(code, message),
            Severity::Notice => Finding::notice(code, message),
        };
        findings.push(finding.at_pointer(side.pointer()));
    };
    let noun = side.noun();
    let quantile = t_upper(SIGNIFICANCE / 2.0, equation.degrees_of_freedom());
    let income = equation.income.value;
    let t = equation.t(&equation.income);
    if t < -quantile {
        let message =
            format!("The income elasticity of {noun} is negative at 5 per cent: {income:.2}");
        add(Severity::Error, "wrong_sign", message);
    } else if t.is_nan() || t <= quantile {
        let message = format!(
            "The income elasticity of {noun}, {income:.2}, is not told from zero at 5 per cent: t {t:.2}"
        );
        add(Severity::Error, "insignificant_income_elasticity", message);
    }
    let (usual_low, usual_high) = USUAL_INCOME_ELASTICITY;
    if income <= 0.0 || income > LARGEST_INCOME_ELASTICITY {
        let message = format!(
            "The income elasticity of {noun}, {income:.2}, lies outside 0 to {LARGEST_INCOME_ELASTICITY}"
        );
        add(Severity::Error, "income_elasticity_outside_range", message);
    } else if !(usual_low..=usual_high).contains(&income) {
        let message = format!(
            "The income elasticity of {noun}, {income:.2}, lies outside the usual \
             {usual_low} to {usual_high}"
        );
        add(Severity::Notice, "income_elasticity_outside_range", message);
    }
    if let Some(response) = &equation.price {
        let price = side.price_sign() * response.value;
        let verdict = if side.price_sign() * equation.t(response) < -quantile {
            Some((Severity::Error, "and significantly so at 5 per cent"))
        } else if price < 0.0 {
            Some((Severity::Notice, "though not significantly at 5 per cent"))
        } else {
            None
        };
        if let Some((severity, how)) = verdict {
            let message = format!(
                "The price elasticity of {noun} has the wrong sign, {how}: {price:.2}, expected positive"
            );
            add(severity, "wrong_sign", message);
        }
    }
    if let Some(growth) = &equation.autonomous
        && equation.t(growth).abs() > quantile
    {
        let message = format!(
            "Growth of {noun} of {:.2} per cent a period comes neither from income nor from prices: \
             autonomous growth that the law leaves out",
            100.0 * growth.value
        );
        add(Severity::Notice, "autonomous_growth", message);
    }
    if equation.result.r_squared.is_some_and(|r2| r2 > PERFECT_FIT) {
        let message = format!(
            "Demand for {noun} fits without error: the regressors make up the volume by definition"
        );
        add(Severity::Error, "perfect_fit", message);
    }
    let (rows, size) = (equation.rows, equation.size);
    match shortage(rows, size, annual) {
        Some(Shortage::Needed(least)) => {
            let message = format!(
                "Demand for {noun} has {rows} observations for {size} coefficients; at least {least} are needed"
            );
            add(Severity::Error, "few_observations", message);
        }
        Some(Shortage::Better(enough)) => {
            let message = format!("Demand for {noun} has {rows} observations; {enough} are better");
            add(Severity::Notice, "few_observations", message);
        }
        None => {}
    }
    let demand = equation.demand;
    let mut keys = vec![&demand.volume];
    keys.extend(demand.regressors().into_iter().map(|(_, key)| key));
    for key in keys {
        let share = logs.guessed(key);
        if share > GUESSED.0 {
            let severity = if share > GUESSED.1 {
                Severity::Error
            } else {
                Severity::Notice
            };
            let message = format!(
                "{:.0} per cent of {key} are estimated or imputed",
                100.0 * share
            );
            add(severity, "estimated_observations", message);
        }
    }
    findings
}

/// What both price elasticities show together.
pub(super) fn judge_price_elasticities(imports: f64, exports: f64) -> Option<Finding> {
    let sum = imports + exports;
    (sum > USUAL_PRICE_ELASTICITIES).then(|| {
        let message = format!(
            "The price elasticities of imports and exports sum to {sum:.2}, above the usual \
             {USUAL_PRICE_ELASTICITIES}"
        );
        Finding::notice("price_elasticities_outside_range", message)
    })
}

/// What a rate shows; all in compound per cent a year.
pub(super) fn judge_rate(rate: f64, interval: Region, actual: f64) -> Vec<Finding> {
    let mut findings = Vec::new();
    let (low, high) = BELIEVABLE_RATE;
    if !(low..=high).contains(&rate) {
        let message =
            format!("A rate of {rate:.2} per cent a year lies outside {low} to {high} per cent");
        findings.push(Finding::error("rate_outside_range", message));
    }
    let width = match interval {
        Region::Interval { low, high } => Some(high - low),
        Region::Complement { .. } | Region::WholeLine => None,
    };
    match width {
        None => {
            let message = "The confidence set has no end: the income elasticity of imports is not \
                           told from zero well enough to divide by it";
            findings.push(Finding::error("interval_unbounded", message));
        }
        Some(width) if width > WIDEST_INTERVAL => {
            let message = format!(
                "The interval spans {width:.1} percentage points, more than {WIDEST_INTERVAL}"
            );
            findings.push(Finding::error("interval_too_wide", message));
        }
        Some(_) => {}
    }
    if (rate - actual).abs() > FAR_FROM_ACTUAL {
        let message = format!(
            "The rate lies {:.1} percentage points from actual growth of {actual:.2} per cent",
            (rate - actual).abs()
        );
        findings.push(Finding::notice("far_from_actual", message));
    }
    findings
}

/// Coverage below which an interval of this kind is marked.
const ENOUGH_COVERAGE: f64 = 91.0;

type Span = (f64, f64);

/// Least and greatest coverage, in per cent, of 95 per cent intervals on simulated economies of 40 and 80
/// observations whose equations are cointegrated with a half-life below 3 years, as
/// `tests/bench/estimation/coverage.md` has it: estimator, strong form (or weak), Fieller, delta.
const COVERAGE: [(&str, bool, Span, Span); 12] = [
    ("levels, Newey–West", false, (77.5, 83.5), (78.5, 85.0)),
    ("levels, Newey–West", true, (78.5, 85.0), (78.5, 86.0)),
    ("differences, classical", false, (2.5, 98.1), (1.5, 95.0)),
    ("differences, classical", true, (73.0, 98.8), (78.7, 97.0)),
    ("AR(1) errors", false, (89.0, 93.5), (88.5, 94.0)),
    ("AR(1) errors", true, (89.5, 93.0), (90.5, 93.0)),
    ("ARDL", false, (90.0, 91.5), (87.5, 93.0)),
    ("ARDL", true, (94.0, 97.5), (91.0, 95.0)),
    ("DOLS", false, (72.9, 86.5), (75.9, 86.5)),
    ("DOLS", true, (76.5, 88.0), (77.0, 87.5)),
    ("FMOLS", false, (74.5, 86.5), (75.5, 87.5)),
    ("FMOLS", true, (78.5, 87.0), (79.5, 87.5)),
];

/// Says where intervals of this kind are known to cover too rarely. Systems, instruments and vector models
/// were not measured.
pub(super) fn judge_coverage(
    estimator: Estimator,
    strong: bool,
    method: IntervalMethod,
) -> Option<Finding> {
    let name = match estimator {
        Estimator::OlsLevels => "levels, Newey–West",
        Estimator::OlsDifferences => "differences, classical",
        Estimator::AutoregressiveErrors => "AR(1) errors",
        Estimator::Ardl => "ARDL",
        Estimator::Dols => "DOLS",
        Estimator::Fmols => "FMOLS",
        Estimator::TwoStageLevels
        | Estimator::TwoStageDifferences
        | Estimator::SeeminglyUnrelated
        | Estimator::SeeminglyUnrelatedDifferences
        | Estimator::Johansen => return None,
    };
    let (.., fieller, delta) = COVERAGE.iter().find(|c| (c.0, c.1) == (name, strong))?;
    let (least, greatest) = match method {
        IntervalMethod::Fieller => fieller,
        IntervalMethod::Delta => delta,
    };
    (*least < ENOUGH_COVERAGE).then(|| {
        let message = format!(
            "95 per cent intervals of this kind held the truth in {least:.0} to {greatest:.0} per cent of \
             simulated economies of 40 and 80 observations"
        );
        Finding::notice("undercovers", message)
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    /// The table is what the benchmark printed.
    #[test]
    fn coverage_is_as_measured() {
        let measured = include_str!("../../tests/bench/estimation/coverage.md");
        let number = |cell: &str| cell.split(' ').next()?.parse::<f64>().ok();
        for (estimator, strong, fieller, delta) in COVERAGE {
            let form = if strong { "strong" } else { "weak" };
            let mut all: [Vec<f64>; 2] = Default::default();
            for line in measured.lines() {
                let cells: Vec<&str> = line.split('|').map(str::trim).collect();
                if cells.len() == 13
                    && cells[3] == form
                    && cells[4] == estimator
                    && !["no cointegration", "ρ = 0.8"].contains(&cells[1])
                {
                    all[0].extend(number(cells[5]));
                    all[1].extend(number(cells[6]));
                }
            }
            for (values, (least, greatest)) in all.iter().zip([fieller, delta]) {
                assert_eq!(values.len(), 6, "{estimator} {form}");
                let low = values.iter().copied().fold(f64::INFINITY, f64::min);
                let high = values.iter().copied().fold(0.0, f64::max);
                assert_eq!((low, high), (least, greatest), "{estimator} {form}");
            }
        }
    }

    #[test]
    fn kinds_of_intervals_that_cover_too_rarely_are_marked() {
        let marked = |estimator, strong| {
            judge_coverage(estimator, strong, IntervalMethod::Fieller).is_some()
        };
        assert!(!marked(Estimator::Ardl, true) && marked(Estimator::Ardl, false));
        assert!(marked(Estimator::OlsLevels, true) && !marked(Estimator::Johansen, true));
    }
}
