//! Labels and phrases of the page.

use crate::constraint::{Form, Region};
use crate::finding::Finding;
use crate::study::Estimator;

pub(super) fn describe_all(findings: &[Finding]) -> Vec<String> {
    findings.iter().map(describe).collect()
}

pub(super) fn describe(finding: &Finding) -> String {
    format!("{} [{}]", finding.message, finding.code)
}

pub(super) fn form_label(form: Form) -> &'static str {
    match form {
        Form::WeakForm => "weak form",
        Form::WeakFormWithPrices => "weak form with prices",
        Form::StrongForm => "strong form",
        Form::WithRelativePrices => "strong form with relative prices",
    }
}

pub(super) fn estimator_label(estimator: Estimator) -> &'static str {
    match estimator {
        Estimator::OlsLevels => "least squares, levels",
        Estimator::OlsDifferences => "least squares, differences",
        Estimator::AutoregressiveErrors => "autoregressive errors, levels",
        Estimator::TwoStageLevels => "two-stage, levels",
        Estimator::TwoStageDifferences => "two-stage, differences",
        Estimator::SeeminglyUnrelated => "system, levels",
        Estimator::SeeminglyUnrelatedDifferences => "system, differences",
        Estimator::Ardl => "ARDL, long run",
        Estimator::Dols => "dynamic least squares",
        Estimator::Fmols => "fully modified least squares",
        Estimator::Johansen => "VECM, one relation",
    }
}

/// A confidence set in brackets.
pub(super) fn interval(region: Region) -> String {
    match region {
        Region::Interval { low, high } => format!("[{}, {}]", end(low), end(high)),
        Region::Complement { low, high } => format!("<{} or >{}", end(low), end(high)),
        Region::WholeLine => "any rate".to_owned(),
    }
}

fn end(value: f64) -> String {
    if value.abs() < 1000.0 {
        format!("{value:.2}")
    } else if value > 0.0 {
        "over 1000".to_owned()
    } else {
        "below -1000".to_owned()
    }
}

/// a to z, then aa, ab, …
pub(super) fn letter(i: usize) -> String {
    let own = char::from(b'a' + u8::try_from(i % 26).unwrap_or(0));
    let before = if i < 26 {
        String::new()
    } else {
        letter(i / 26 - 1)
    };
    format!("{before}{own}")
}

/// What actual growth beside the interval says.
pub(super) fn verdict(actual: f64, region: Region) -> &'static str {
    match region {
        Region::Interval { low, .. } if actual < low => {
            "The economy grew more slowly than its trade would have paid for: the balance of payments was \
             not what held it back."
        }
        Region::Interval { high, .. } if actual > high => {
            "The economy grew faster than its exports paid for: the difference was financed from abroad or \
             by relative prices."
        }
        Region::Interval { .. } | Region::Complement { .. } | Region::WholeLine => {
            "Actual growth lies within the interval: the economy grew about as fast as its trade paid for."
        }
    }
}
