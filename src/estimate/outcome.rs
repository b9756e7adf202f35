//! What a test says: statistic, distribution under the null, p-value, one sentence.

use crate::dist::{chi2_sf, f_sf, normal_sf, t_two_sided};

/// Distribution of a statistic where the null hypothesis holds.
#[derive(Clone, Debug, PartialEq)]
pub enum Distribution {
    /// Standard normal, two-sided.
    Normal,
    /// Student's t, two-sided.
    T {
        /// Degrees of freedom.
        df: f64,
    },
    /// Chi-squared, upper tail.
    ChiSquared {
        /// Degrees of freedom.
        df: f64,
    },
    /// F, upper tail.
    F {
        /// Degrees of freedom of the numerator.
        numerator: f64,
        /// Degrees of freedom of the denominator.
        denominator: f64,
    },
    /// Another one, named; the p-value says what it gives.
    Other {
        /// Its name and source.
        name: &'static str,
    },
}

/// Outcome of one test.
#[derive(Clone, Debug, PartialEq)]
pub struct TestResult {
    /// Name of the test.
    pub name: String,
    /// The statistic.
    pub statistic: f64,
    /// Its distribution under the null hypothesis.
    pub distribution: Distribution,
    /// Probability of a statistic at least as extreme under the null; NaN where it cannot be computed.
    pub p_value: f64,
    /// One plain sentence: the null hypothesis, and whether it is rejected at 5 %.
    pub sentence: String,
}

impl TestResult {
    /// A test whose p-value follows from its distribution. `null` is the null hypothesis as a noun
    /// phrase: "No autocorrelation up to lag 4".
    pub(super) fn new(name: &str, null: &str, statistic: f64, distribution: Distribution) -> Self {
        let p = match distribution {
            Distribution::Normal => 2.0 * normal_sf(statistic.abs()),
            Distribution::T { df } => t_two_sided(statistic, df),
            Distribution::ChiSquared { df } => chi2_sf(statistic, df),
            Distribution::F {
                numerator,
                denominator,
            } => f_sf(statistic, numerator, denominator),
            Distribution::Other { .. } => f64::NAN,
        };
        Self::with_p(name, null, statistic, distribution, p)
    }

    /// A test whose p-value was computed elsewhere.
    pub(super) fn with_p(
        name: &str,
        null: &str,
        statistic: f64,
        distribution: Distribution,
        p_value: f64,
    ) -> Self {
        let sentence = if p_value.is_nan() {
            format!("{null} could not be tested.")
        } else {
            let verdict = if p_value < 0.05 {
                "is rejected"
            } else {
                "is not rejected"
            };
            let p = if p_value < 0.0001 {
                "p below 0.0001".to_owned()
            } else {
                format!("p = {p_value:.4}")
            };
            format!("{null} {verdict} at the 5 % level ({p}).")
        };
        Self {
            name: name.to_owned(),
            statistic,
            distribution,
            p_value,
            sentence,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn sentences_say_the_verdict() {
        let test = |x| TestResult::new("Wald", "b = 0", x, Distribution::ChiSquared { df: 1.0 });
        assert_eq!(
            test(2.0).sentence,
            "b = 0 is not rejected at the 5 % level (p = 0.1573)."
        );
        assert_eq!(
            test(90.0).sentence,
            "b = 0 is rejected at the 5 % level (p below 0.0001)."
        );
        assert_eq!(test(f64::NAN).sentence, "b = 0 could not be tested.");
    }
}
