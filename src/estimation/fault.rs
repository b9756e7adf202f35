//! From the estimators' errors to findings that name code, place and what would help.

use super::task::Task;
use crate::estimate::{EstimateError, SeriesError};
use crate::finding::Finding;

/// An error of an estimator.
pub(super) trait Refusal {
    fn finding(self, task: &Task<'_>) -> Finding;
}

/// A finding at the variable that a name belongs to, else at the equation.
fn at(task: &Task<'_>, name: &str, finding: Finding) -> Finding {
    match task.variable(name) {
        Some(variable) => variable.place(finding),
        None => finding.at_series(name),
    }
}

const LENGTHEN: &str = "Lengthen the sample, or ask for fewer lags, leads, terms or regressors";
const LEAVE_OUT: &str = "Leave one of them out, or take fewer lags";

impl Refusal for EstimateError {
    fn finding(self, task: &Task<'_>) -> Finding {
        let message = self.to_string();
        let error = |code: &str| Finding::error(code, message.clone());
        match self {
            Self::TooFewObservations { .. } => error("too_few_observations")
                .at_pointer("/sample")
                .remedy(LENGTHEN),
            Self::TooShort { needed, found, .. } => error("too_few_observations")
                .at_pointer("/sample")
                .found(found.to_string())
                .expected(format!("at least {needed} observations"))
                .remedy(LENGTHEN),
            Self::TooManyLags { .. } => error("too_many_lags")
                .at_pointer("/options/lags")
                .remedy("Ask for fewer lags, or lengthen the sample"),
            Self::NotFinite => error("not_finite")
                .at_pointer("/sample")
                .remedy("Rescale the series: numbers overflow"),
            Self::Collinear { names } => {
                let first = names.iter().find(|n| task.variable(n).is_some());
                let finding = error("collinear").found(names.join(", ")).remedy(LEAVE_OUT);
                match first.and_then(|n| task.variable(n)) {
                    Some(variable) => variable.place(finding),
                    None => finding.at_pointer("/terms"),
                }
            }
            Self::SampleDiffers { .. } => error("sample_differs").at_pointer("/equations"),
            Self::Missing { name, observation } => {
                let period = task.period(observation.saturating_sub(1));
                at(task, &name, error("gap_in_sample").at_period(period))
            }
            Self::Constant { name } => {
                let finding = error("constant_series");
                at(
                    task,
                    &name,
                    finding.remedy("Leave it out or lengthen the sample"),
                )
            }
            Self::Explosive { .. } => error("explosive")
                .at_pointer("/method")
                .remedy("Estimate in differences, or test for cointegration"),
            Self::Underidentified { .. } => error("underidentified")
                .at_pointer("/options/instruments")
                .remedy("Name at least one instrument for each endogenous regressor"),
            Self::UnknownRegressor { name, known } => error("unknown_regressor")
                .at_pointer("/options")
                .found(name)
                .expected(format!("one of {}", known.join(", "))),
            Self::RedundantRestriction { position } => error("redundant_restriction")
                .at_pointer(format!("/options/restrictions/{}", position - 1)),
            Self::Setting { allowed, .. } => error("invalid_option")
                .at_pointer("/options")
                .expected(allowed),
            Self::SingularCovariance { .. } => error("singular_covariance")
                .at_pointer("/options")
                .remedy("Use fewer of them, or another covariance"),
            Self::NoConvergence { .. } => error("no_convergence")
                .at_pointer("/method")
                .remedy("Rescale the series, or ask for fewer regressors"),
        }
    }
}

impl Refusal for SeriesError {
    fn finding(self, task: &Task<'_>) -> Finding {
        let message = self.to_string();
        let error = |code: &str| Finding::error(code, message.clone());
        match self {
            Self::Missing {
                series,
                observation,
            } => {
                let period = task.period(observation.saturating_sub(1));
                at(task, &series, error("gap_in_sample").at_period(period))
            }
            Self::Constant { series } => {
                let finding = error("constant_series");
                at(
                    task,
                    &series,
                    finding.remedy("Leave it out or lengthen the sample"),
                )
            }
            Self::TooShort {
                series,
                observations,
                needed,
            } => {
                let finding = error("too_few_observations")
                    .found(observations.to_string())
                    .expected(format!("at least {needed} observations"));
                at(task, &series, finding.remedy(LENGTHEN))
            }
            Self::LengthDiffers { series, .. } => at(task, &series, error("sample_differs")),
            Self::Collinear { series, terms } => {
                let finding = error("collinear").found(terms.join(", ")).remedy(LEAVE_OUT);
                let first = terms.iter().find(|t| task.variable(t).is_some());
                at(task, first.unwrap_or(&series), finding)
            }
            Self::Equation { fault, .. } => {
                let finding = fault.finding(task);
                Finding { message, ..finding }
            }
            Self::Option { fault, .. } => error("invalid_option")
                .at_pointer("/options")
                .expected(fault),
        }
    }
}

/// A fault of an option that only the data show.
pub(super) fn option(name: &str, message: String, expected: &str) -> Box<Finding> {
    Box::new(
        Finding::error("invalid_option", message)
            .at_pointer(format!("/options/{name}"))
            .expected(expected),
    )
}
