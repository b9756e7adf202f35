//! Deterministic terms of a demand equation, by name.

use serde::{Deserialize, Serialize};
use utoipa::ToSchema;

use super::document::{Document, Estimator};
use super::options::{ArdlCase, JohansenTerms};
use crate::estimate::Regressor;
use crate::finding::Finding;
use crate::time::Period;

/// A deterministic term of an equation in log levels; in differences it enters differenced, where a trend is the
/// constant that stands there anyway.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
#[serde(rename_all = "snake_case")]
pub enum Term {
    /// A linear trend: autonomous growth.
    Trend,
    /// Centred seasonal dummies, the first season of the year as base.
    Seasonal,
    /// One in a period, else zero.
    Impulse(#[schema(inline)] At),
    /// Zero before a period, one from it on.
    Step(#[schema(inline)] At),
}

/// A period of the study's frequency.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
#[serde(transparent)]
#[schema(value_type = String)]
pub struct At(pub Period);

impl Term {
    /// Its columns over the periods of a sample.
    pub(super) fn columns(self, periods: &[Period]) -> Vec<Regressor> {
        let n = periods.len();
        let Some(first) = periods.first() else {
            return Vec::new();
        };
        // Beyond the sample where it lies outside: the column is then constant and refused by name.
        let place = |period: Period| {
            let places = period.ordinal() - first.ordinal();
            usize::try_from(places).unwrap_or(n)
        };
        match self {
            Self::Trend => vec![Regressor::trend(n)],
            Self::Seasonal => {
                let seasons = first.frequency().periods_per_year().unwrap_or(1);
                let season = first.ordinal().rem_euclid(seasons);
                let count = |v: i32| usize::try_from(v).unwrap_or_default();
                Regressor::seasonal(n, count(seasons), count(season), true)
            }
            Self::Impulse(At(period)) => {
                vec![Regressor::impulse(
                    &format!("impulse {period}"),
                    n,
                    place(period),
                )]
            }
            Self::Step(At(period)) => {
                vec![Regressor::step(&format!("step {period}"), n, place(period))]
            }
        }
    }
}

/// Faults of the terms: of another frequency, twice, or unknown to an estimator.
pub(super) fn check(document: &Document) -> Vec<Finding> {
    let mut findings = Vec::new();
    for (pointer, demand) in [
        ("/import_demand", &document.import_demand),
        ("/export_demand", &document.export_demand),
    ] {
        for (i, term) in demand.terms.iter().enumerate() {
            let mut fault = |message: String| {
                let finding = Finding::error("invalid_value", message);
                findings.push(finding.at_pointer(format!("{pointer}/terms/{i}")));
            };
            if demand.terms[..i].contains(term) {
                fault("The term stands twice".to_owned());
            }
            let yearly = document.frequency.periods_per_year() == Some(1);
            match term {
                Term::Seasonal if yearly => fault("Annual data have no seasons".to_owned()),
                Term::Impulse(At(period)) | Term::Step(At(period))
                    if period.frequency() != document.frequency =>
                {
                    fault(format!(
                        "{period} is not of frequency {}",
                        document.frequency
                    ));
                }
                Term::Trend | Term::Seasonal | Term::Impulse(_) | Term::Step(_) => {}
            }
            for estimator in &document.estimators {
                if let Some(why) = refused(*term, *estimator) {
                    fault(format!("{} takes no such term: {why}", estimator.code()));
                }
            }
        }
        if demand.terms.contains(&Term::Trend) {
            let case = document.ardl.as_ref().and_then(|o| o.case);
            if let Some(ArdlCase::I | ArdlCase::II | ArdlCase::III) = case {
                let message = "An equation with a trend needs case IV or V";
                findings.push(Finding::error("invalid_value", message).at_pointer("/ardl/case"));
            }
            let case = document.johansen.and_then(|o| o.case);
            if let Some(
                JohansenTerms::None | JohansenTerms::RestrictedConstant | JohansenTerms::Constant,
            ) = case
            {
                let message = "An equation with a trend needs restricted_trend or trend";
                let finding = Finding::error("invalid_value", message);
                findings.push(finding.at_pointer("/johansen/case"));
            }
        }
    }
    findings
}

/// Why an estimator cannot take a term.
fn refused(term: Term, estimator: Estimator) -> Option<&'static str> {
    match (estimator, term) {
        (Estimator::Dols | Estimator::Fmols, Term::Seasonal | Term::Impulse(_) | Term::Step(_)) => {
            Some("its deterministic part is a constant with or without a trend")
        }
        (Estimator::Johansen, Term::Step(_)) => {
            Some("a step changes the distribution of the rank tests")
        }
        _ => None,
    }
}
