//! Trend and dummies as named regressors.

use super::Regressor;
use super::ols::as_f64;

impl Regressor {
    /// `1, 2, …, n`, named `trend`.
    #[must_use]
    pub fn trend(n: usize) -> Self {
        Self::new("trend", (1..=n).map(as_f64).collect())
    }

    /// One at observation `at` (from 0), else zero; named by the caller, for example `impulse 1982Q3`.
    /// All zero, hence refused as collinear by every fit, where `at` lies outside the sample.
    #[must_use]
    pub fn impulse(name: &str, n: usize, at: usize) -> Self {
        Self::new(name, (0..n).map(|t| f64::from(u8::from(t == at))).collect())
    }

    /// Zero before observation `from` (from 0), one at it and after.
    #[must_use]
    pub fn step(name: &str, n: usize, from: usize) -> Self {
        Self::new(
            name,
            (0..n).map(|t| f64::from(u8::from(t >= from))).collect(),
        )
    }

    /// Seasonal dummies `season 2` to `season s`; the first season of the year is the base, which a
    /// constant absorbs. `first` is the season (from 0) of the first observation. Centred ones have 1/s
    /// taken off, so that they leave the constant its meaning and a trend its slope (Johansen 1995,
    /// section 5.8).
    #[must_use]
    pub fn seasonal(n: usize, seasons: usize, first: usize, centred: bool) -> Vec<Self> {
        let mean = if centred { 1.0 / as_f64(seasons) } else { 0.0 };
        let one = |t: usize, s: usize| f64::from(u8::from((first + t) % seasons == s)) - mean;
        (1..seasons)
            .map(|s| {
                Self::new(
                    &format!("season {}", s + 1),
                    (0..n).map(|t| one(t, s)).collect(),
                )
            })
            .collect()
    }
}

#[cfg(test)]
mod tests {
    use crate::estimate::{EstimateError, Ols, Regressor};

    #[test]
    fn dummies_stand_where_they_are_asked() {
        assert_eq!(Regressor::impulse("i", 4, 2).values, [0.0, 0.0, 1.0, 0.0]);
        assert_eq!(Regressor::step("s", 4, 2).values, [0.0, 0.0, 1.0, 1.0]);
        assert_eq!(Regressor::trend(3).values, [1.0, 2.0, 3.0]);
        let seasons = Regressor::seasonal(5, 4, 3, false);
        assert_eq!(seasons.len(), 3);
        assert_eq!(seasons[0].name, "season 2");
        assert_eq!(seasons[0].values, [0.0, 0.0, 1.0, 0.0, 0.0]);
        assert_eq!(seasons[2].values, [1.0, 0.0, 0.0, 0.0, 1.0]);
        let centred = Regressor::seasonal(8, 4, 0, true);
        assert!(centred[1].values.iter().sum::<f64>().abs() < 1e-15);
    }

    /// An impulse takes its observation out; one outside the sample is named.
    #[test]
    fn an_impulse_removes_its_observation() {
        let y = [1.0, 2.5, 9.0, 4.2, 5.1, 5.9];
        let trend = Regressor::trend(6);
        let dummied = vec![
            Regressor::constant(6),
            trend.clone(),
            Regressor::impulse("odd", 6, 2),
        ];
        let fit = Ols::fit(&y, dummied).unwrap();
        let keep: Vec<usize> = vec![0, 1, 3, 4, 5];
        let pick = |v: &[f64]| keep.iter().map(|&t| v[t]).collect::<Vec<_>>();
        let short = vec![
            Regressor::constant(5),
            Regressor::new("trend", pick(&trend.values)),
        ];
        let without = Ols::fit(&pick(&y), short).unwrap();
        approx::assert_relative_eq!(
            fit.coefficients[1],
            without.coefficients[1],
            max_relative = 1e-12
        );
        let outside = vec![Regressor::constant(6), Regressor::impulse("never", 6, 9)];
        let error = Ols::fit(&y, outside).unwrap_err();
        assert_eq!(
            error,
            EstimateError::Collinear {
                names: vec!["never".to_owned()]
            }
        );
    }
}
