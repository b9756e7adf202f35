//! What the algebra refuses, as data.

use super::Span;
use crate::finding::Finding;
use crate::series::Unit;
use crate::time::{Frequency, Period};

/// Why an operation has no result. Each variant names both sides; the caller knows their keys.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum AlgebraError {
    /// Two sides of different frequency.
    #[error("{operation} needs one frequency on both sides, not {left} and {right}")]
    Frequencies {
        /// Name of the operation.
        operation: &'static str,
        /// Frequency of the first side.
        left: Frequency,
        /// Frequency of the other side.
        right: Frequency,
    },
    /// Two units that do not go together.
    #[error("{operation}: ({left}) and ({right}) do not go together: {reason}")]
    Clash {
        /// Name of the operation.
        operation: &'static str,
        /// Unit of the first side.
        left: Box<Unit>,
        /// Unit of the other side.
        right: Box<Unit>,
        /// Why not.
        reason: &'static str,
        /// What to do.
        remedy: &'static str,
    },
    /// A unit for which the operation, or one of its options, means nothing.
    #[error("{operation} does not apply to ({unit}): {reason}")]
    Unsuitable {
        /// Name of the operation.
        operation: &'static str,
        /// The unit.
        unit: Box<Unit>,
        /// Why not.
        reason: &'static str,
        /// What to do.
        remedy: &'static str,
    },
    /// A reference period without all its values.
    #[error("reference {reference} is not fully covered at frequency {frequency}{}", shown_missing(.missing.as_ref()))]
    NotCovered {
        /// The reference.
        reference: Span,
        /// Frequency of the series.
        frequency: Frequency,
        /// First period without a value that is no forecast; `None` where the frequency is too low.
        missing: Option<Period>,
    },
    /// Two sides without a common period.
    #[error("{operation}: no common period with values; one side has {left}, the other {right}")]
    NoOverlap {
        /// Name of the operation.
        operation: &'static str,
        /// Periods of the first side.
        left: String,
        /// Periods of the other side.
        right: String,
    },
    /// A price, rate, weight or factor that is not a positive number.
    #[error("{operation}: {what} must be positive; it is {value} in {place}")]
    NotPositive {
        /// Name of the operation.
        operation: &'static str,
        /// Which side.
        what: String,
        /// Period, or what the number is.
        place: String,
        /// The number.
        value: f64,
    },
    /// An option out of range.
    #[error("{name} cannot be {found}; expected {expected}")]
    Argument {
        /// Name of the option.
        name: &'static str,
        /// What was given.
        found: String,
        /// What would be accepted.
        expected: String,
    },
    /// Aggregation without a single complete period.
    #[error("no {to} period is complete in the {from} series of {held}")]
    NoCompletePeriod {
        /// Frequency asked for.
        to: Frequency,
        /// Frequency held.
        from: Frequency,
        /// Periods held.
        held: String,
    },
    /// A fault of one partner among several.
    #[error("partner {partner}: {error}")]
    Partner {
        /// Name of the partner.
        partner: String,
        /// The fault.
        error: Box<AlgebraError>,
    },
}

fn shown_missing(missing: Option<&Period>) -> String {
    missing.map_or_else(
        || ": no period of that frequency lies inside it".to_owned(),
        |p| format!(": {p} has no value (forecasts do not count)"),
    )
}

impl AlgebraError {
    pub(super) fn clash(
        operation: &'static str,
        (left, right): (&Unit, &Unit),
        reason: &'static str,
        remedy: &'static str,
    ) -> Self {
        Self::Clash {
            operation,
            left: Box::new(left.clone()),
            right: Box::new(right.clone()),
            reason,
            remedy,
        }
    }

    pub(super) fn unsuitable(
        operation: &'static str,
        unit: &Unit,
        reason: &'static str,
        remedy: &'static str,
    ) -> Self {
        Self::Unsuitable {
            operation,
            unit: Box::new(unit.clone()),
            reason,
            remedy,
        }
    }

    pub(super) fn with_partner(self, name: &str) -> Self {
        Self::Partner {
            partner: name.to_owned(),
            error: Box::new(self),
        }
    }

    /// Stable code of the finding.
    #[must_use]
    pub fn code(&self) -> &'static str {
        match self {
            Self::Frequencies { .. } => "frequency_mismatch",
            Self::Clash { .. } => "unit_clash",
            Self::Unsuitable { .. } => "unsuitable_unit",
            Self::NotCovered { .. } => "reference_not_covered",
            Self::NoOverlap { .. } => "no_overlap",
            Self::NotPositive { .. } => "not_positive",
            Self::Argument { .. } => "invalid_option",
            Self::NoCompletePeriod { .. } => "no_complete_period",
            Self::Partner { error, .. } => error.code(),
        }
    }
}

impl From<AlgebraError> for Finding {
    fn from(error: AlgebraError) -> Self {
        let finding = Self::error(error.code(), error.to_string());
        match error {
            AlgebraError::Partner { error, .. } => Self {
                message: finding.message,
                ..Self::from(*error)
            },
            AlgebraError::Frequencies { left, right, .. } => finding
                .found(right.to_string())
                .expected(left.to_string())
                .remedy(format!(
                    "Aggregate the {} side to {} first; convert and deflate at the finest frequency held.",
                    left.max(right),
                    left.min(right)
                )),
            AlgebraError::Clash {
                left,
                right,
                reason,
                remedy,
                ..
            } => finding
                .found(format!("{left}; {right}"))
                .expected(reason)
                .remedy(remedy),
            AlgebraError::Unsuitable {
                unit,
                reason,
                remedy,
                ..
            } => finding.found(unit.to_string()).expected(reason).remedy(remedy),
            AlgebraError::NotCovered {
                reference, missing, ..
            } => finding
                .found(missing.map_or_else(|| "no period".to_owned(), |p| format!("no value in {p}")))
                .expected(format!("a value in every period of {reference}"))
                .remedy("Choose a reference that the series covers, or send the missing values."),
            AlgebraError::NoOverlap { left, right, .. } => finding
                .found(format!("{left}; {right}"))
                .expected("periods that both sides hold")
                .remedy("Send the missing periods, or choose other series."),
            AlgebraError::NotPositive { place, value, .. } => finding
                .found(format!("{value} in {place}"))
                .expected("a number above zero")
                .remedy("Correct the value at its source, or mark it missing."),
            AlgebraError::Argument {
                name,
                found,
                expected,
            } => finding
                .found(found)
                .remedy(format!("Set '{name}' to {expected}."))
                .expected(expected),
            AlgebraError::NoCompletePeriod { to, held, .. } => finding
                .found(held)
                .expected(format!("every sub-period of at least one {to} period"))
                .remedy("Send the missing periods, or set min_coverage for a mean."),
        }
    }
}
