//! Limits on equations that estimates and studies share (common practice, no source).

/// Observations: better from here on (annual, more frequent), needed at least, and for each coefficient.
const FEW: (usize, usize) = (30, 60);
const TOO_FEW: usize = 20;
const TOO_FEW_A_COEFFICIENT: usize = 5;

/// Half-lives of a deviation in years: notice above, unreliable above.
pub const HALF_LIFE: (f64, f64) = (5.0, 10.0);

/// How an equation is short of observations.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Shortage {
    /// Below what is needed: unreliable.
    Needed(usize),
    /// Below what is better.
    Better(usize),
}

/// Whether an equation has enough observations for its coefficients.
#[must_use]
pub fn shortage(observations: usize, coefficients: usize, annual: bool) -> Option<Shortage> {
    let needed = TOO_FEW.max(TOO_FEW_A_COEFFICIENT * coefficients);
    let better = if annual { FEW.0 } else { FEW.1 };
    if observations < needed {
        Some(Shortage::Needed(needed))
    } else {
        (observations < better).then_some(Shortage::Better(better))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn observations_are_judged_by_frequency_and_coefficients() {
        assert_eq!(shortage(19, 2, true), Some(Shortage::Needed(20)));
        assert_eq!(shortage(34, 7, true), Some(Shortage::Needed(35)));
        assert_eq!(shortage(29, 2, true), Some(Shortage::Better(30)));
        assert_eq!(shortage(30, 2, true), None);
        assert_eq!(shortage(59, 2, false), Some(Shortage::Better(60)));
    }
}
