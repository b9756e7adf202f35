//! Resampling of dates in blocks.

use super::long_run::floor_count;
use super::ols::as_f64;
use crate::linalg::product;
use crate::random::Draws;

/// How dates are resampled.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Blocks {
    /// Overlapping blocks of one length (Künsch 1989, Annals of Statistics 17(3)).
    Moving(usize),
    /// Blocks of geometric length with this mean, on the circle (Politis & Romano 1994, Journal of the
    /// American Statistical Association 89).
    Stationary(f64),
    /// Every date once in its place, times a normal factor of mean 0 and variance 1 whose correlation at k
    /// dates is `1 − k/length` (the dependent wild bootstrap with the Bartlett kernel; Shao 2010, Journal of the
    /// American Statistical Association 105(489)). It keeps heteroskedasticity and gaps where they are.
    DependentWild(usize),
}

/// What a resampled date takes from the sample.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Drawn {
    /// The date, from 0.
    pub date: usize,
    /// What its shock is multiplied by.
    pub factor: f64,
}

impl Blocks {
    /// What n dates take from the n of the sample.
    #[must_use]
    pub fn draw(self, n: usize, draws: &mut Draws) -> Vec<Drawn> {
        if let Self::DependentWild(length) = self {
            // A moving sum of independent normals has the Bartlett weights as its autocorrelations.
            let length = length.clamp(1, n.max(1));
            let normals: Vec<f64> = (0..n + length - 1).map(|_| draws.normal()).collect();
            let scale = as_f64(length).sqrt();
            let factor = |date: usize| normals[date..date + length].iter().sum::<f64>() / scale;
            let drawn = |date| Drawn {
                date,
                factor: factor(date),
            };
            return (0..n).map(drawn).collect();
        }
        let dates = self.dates(n, draws).into_iter();
        dates.map(|date| Drawn { date, factor: 1.0 }).collect()
    }

    /// n dates among 0 to n − 1.
    fn dates(self, n: usize, draws: &mut Draws) -> Vec<usize> {
        let mut dates = Vec::with_capacity(n);
        match self {
            Self::DependentWild(_) => dates.extend(0..n),
            Self::Moving(length) => {
                let length = length.clamp(1, n.max(1));
                while dates.len() < n {
                    let start = pick(n - length + 1, draws);
                    dates.extend((start..start + length).take(n - dates.len()));
                }
            }
            Self::Stationary(mean) => {
                let end = 1.0 / mean.max(1.0);
                let mut date = 0;
                for i in 0..n {
                    date = if i == 0 || draws.uniform() < end {
                        pick(n, draws)
                    } else {
                        (date + 1) % n
                    };
                    dates.push(date);
                }
            }
        }
        dates
    }
}

/// A whole number from 0 to `count − 1`, each as likely.
fn pick(count: usize, draws: &mut Draws) -> usize {
    floor_index(draws.uniform() * as_f64(count)).min(count - 1)
}

#[expect(
    clippy::cast_possible_truncation,
    clippy::cast_sign_loss,
    reason = "positive and below the number of dates"
)]
fn floor_index(value: f64) -> usize {
    value as usize
}

/// Block lengths that minimise the mean squared error of the bootstrapped variance of a mean.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct BlockLength {
    /// Mean length for the stationary bootstrap.
    pub stationary: f64,
    /// Length for the moving (or circular) block bootstrap.
    pub moving: f64,
}

/// Automatic block length of a stationary series:
///
/// `b = (2 Ĝ²/D̂)^(1/3) n^(1/3)` with `Ĝ = Σ λ(k/M) |k| R̂(k)`, `D̂ = 2 ĝ²` (stationary) or `4/3 ĝ²` (moving),
/// `ĝ = Σ λ(k/M) R̂(k)`, sums over |k| ≤ M, λ the flat-top kernel (1 up to ½, then falling to 0 at 1); `M = 2 m̂`, m̂ ≥ 1 the
/// smallest lag after which `K = max(5, ⌊log₁₀ n⌋)` autocorrelations lie within `2 √(log₁₀ n / n)`, at most
/// `⌈√n⌉ + K`. Between 1 and `⌈min(3 √n, n/3)⌉`.
///
/// Politis & White 2004, Econometric Reviews 23(1); corrected by Patton, Politis & White 2009, 28(4).
/// Reference value: AR(1) at ρ: `(2 g²)`-limit `(2ρ/(1 − ρ²))^(2/3) n^(1/3)` (stationary).
#[must_use]
pub fn automatic_block_length(series: &[f64]) -> BlockLength {
    let n = series.len();
    let count = as_f64(n);
    let mean = series.iter().sum::<f64>() / count;
    let centred: Vec<f64> = series.iter().map(|v| v - mean).collect();
    let window = floor_count(count.log10(), n).max(5);
    let most = (floor_count(count.sqrt(), n) + 1 + window).min(n.saturating_sub(1));
    let covariance: Vec<f64> = (0..=most)
        .map(|k| product(&centred[k..], &centred[..n - k]) / count)
        .collect();
    let bound = 2.0 * (count.log10() / count).sqrt() * covariance[0];
    let quiet =
        |m: usize| (m + 1..=m + window).all(|k| covariance.get(k).is_none_or(|c| c.abs() < bound));
    let lag = (0..most).find(|m| quiet(*m)).unwrap_or(most).max(1);
    let width = (2 * lag).min(most);
    let (mut weighted, mut spectrum) = (0.0, covariance[0]);
    for (k, c) in covariance.iter().enumerate().take(width + 1).skip(1) {
        let share = as_f64(k) / as_f64(width);
        let weight = if share <= 0.5 {
            1.0
        } else {
            2.0 * (1.0 - share)
        };
        weighted += 2.0 * weight * as_f64(k) * c;
        spectrum += 2.0 * weight * c;
    }
    let longest = (3.0 * count.sqrt()).min(count / 3.0).ceil().max(1.0);
    let length = |factor: f64| {
        let length = (2.0 * weighted.powi(2) / (factor * spectrum.powi(2))).cbrt() * count.cbrt();
        length.clamp(1.0, longest)
    };
    BlockLength {
        stationary: length(2.0),
        moving: length(4.0 / 3.0),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn blocks_are_runs_of_dates() {
        let mut draws = Draws::new(3, 0);
        let dates = Blocks::Moving(7).dates(50, &mut draws);
        assert!(dates.len() == 50 && dates.iter().all(|d| *d < 50));
        for block in dates.chunks(7) {
            assert!(block.windows(2).all(|w| w[1] == w[0] + 1));
        }
        let dates = Blocks::Stationary(8.0).dates(20_000, &mut draws);
        let breaks = dates
            .windows(2)
            .filter(|w| w[1] != (w[0] + 1) % 20_000)
            .count();
        // 20,000/8 breaks, standard deviation 47.
        assert!(breaks.abs_diff(2500) < 190, "{breaks}");
        let mut seen = vec![0_u32; 10];
        for _ in 0..2000 {
            Blocks::Stationary(1.0)
                .dates(10, &mut draws)
                .iter()
                .for_each(|d| seen[*d] += 1);
        }
        assert!(seen.iter().all(|c| c.abs_diff(2000) < 180), "{seen:?}");
    }

    /// Variance 1, correlation 1 − k/5 at k dates, within four standard errors over 40,000 independent draws.
    #[test]
    fn wild_factors_have_the_bartlett_correlations() {
        let rows: Vec<Vec<Drawn>> = (0..40_000)
            .map(|r| Blocks::DependentWild(5).draw(9, &mut Draws::new(2, r)))
            .collect();
        for lag in 0..9 {
            let product = |row: &Vec<Drawn>| row[8].factor * row[8 - lag].factor;
            let found = rows.iter().map(product).sum::<f64>() / 40_000.0;
            let wanted = (1.0 - as_f64(lag) / 5.0).max(0.0);
            let error = ((1.0 + wanted * wanted) / 40_000.0).sqrt();
            assert!((found - wanted).abs() < 4.0 * error, "{lag}: {found}");
        }
        assert!(rows[0].iter().enumerate().all(|(t, d)| d.date == t));
        let moving = Blocks::Moving(3).draw(9, &mut Draws::new(2, 0));
        assert!(
            moving
                .iter()
                .all(|d| d.factor.to_bits() == 1.0_f64.to_bits())
        );
    }

    /// AR(1): Σ|k|ρ^|k| / Σρ^|k| = 2ρ/((1−ρ)²) · (1−ρ)/(1+ρ) = 2ρ/(1−ρ²).
    #[test]
    fn automatic_length_of_a_long_autoregression() {
        let mut draws = Draws::new(11, 0);
        for rho in [0.3_f64, 0.6] {
            let mut state = 0.0;
            let series: Vec<f64> = (0..40_000)
                .map(|_| {
                    state = rho * state + draws.normal();
                    state
                })
                .collect();
            let found = automatic_block_length(&series);
            let limit = (2.0 * rho / (1.0 - rho * rho)).powf(2.0 / 3.0) * 40_000_f64.cbrt();
            assert!(
                (found.stationary / limit - 1.0).abs() < 0.15,
                "{found:?} {limit}"
            );
            let ratio = found.moving / found.stationary;
            assert!((ratio - 1.5_f64.cbrt()).abs() < 1e-12, "{ratio}");
        }
        let white: Vec<f64> = (0..4000).map(|_| draws.normal()).collect();
        assert!(automatic_block_length(&white).stationary < 5.0);
    }
}
