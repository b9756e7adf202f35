//! Confidence sets for a ratio from bootstrap replicates.

use super::long_run::floor_count;
use super::ols::as_f64;
use super::simulation::{Simulation, replicate};
use super::{EstimatedRatio, Region};
use crate::dist::{normal_sf, normal_upper};
use crate::random::Draws;

/// A ratio N/D with its bootstrap replicates N*, D*, each with its own covariance.
///
/// A replicate with D* ≤ 0 has passed the pole of the ratio: it is kept, counted, and ranks beyond all
/// others on the side of N*. If more than α/2 of the replicates are such, no bounded set at
/// confidence 1 − α is given, since the tail itself is unknown.
#[derive(Clone, Debug, PartialEq)]
pub struct RatioBootstrap {
    /// The ratio in the sample.
    pub estimate: EstimatedRatio,
    /// The replicates that could be estimated.
    pub replicates: Vec<EstimatedRatio>,
    /// Replicates that could not be estimated.
    pub failed: usize,
}

/// The bias correction and acceleration of Efron (1987).
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct BcaCorrection {
    /// `z₀ = Φ⁻¹(share of replicates below the estimate)`, ties counted half.
    pub bias: f64,
    /// `a = Σ d³ / (6 (Σ d²)^(3/2))`, d the mean of the jackknife values less each of them.
    pub acceleration: f64,
}

impl BcaCorrection {
    /// From the estimate, its replicates, and its values without each block of observations.
    #[must_use]
    pub fn new(estimate: f64, replicates: &[f64], jackknife: &[f64]) -> Self {
        let count = |keep: &dyn Fn(f64) -> bool| replicates.iter().filter(|r| keep(**r)).count();
        let halves = count(&|r| r < estimate) + count(&|r| r <= estimate);
        let share = as_f64(halves) / as_f64(2 * replicates.len());
        let mean = jackknife.iter().sum::<f64>() / as_f64(jackknife.len());
        let power = |p: i32| jackknife.iter().map(|v| (mean - v).powi(p)).sum::<f64>();
        Self {
            bias: -normal_upper(share),
            acceleration: power(3) / (6.0 * power(2).powf(1.5)),
        }
    }

    /// The percentile to read instead of percentile p: `Φ(z₀ + (z₀ + z_p)/(1 − a (z₀ + z_p)))`.
    #[must_use]
    pub fn percentile(self, p: f64) -> f64 {
        let shifted = self.bias - normal_upper(p);
        let z = self.bias + shifted / (1.0 - self.acceleration * shifted);
        normal_sf(-z)
    }
}

impl RatioBootstrap {
    /// Draws replicates; `one` estimates the ratio on one replicate from its own draws, or fails.
    pub fn draw(
        estimate: EstimatedRatio,
        simulation: Simulation,
        one: impl Fn(&mut Draws) -> Option<EstimatedRatio> + Sync,
    ) -> Self {
        let drawn = replicate(simulation, one);
        let replicates: Vec<EstimatedRatio> = drawn.into_iter().flatten().collect();
        Self {
            estimate,
            failed: simulation.draws - replicates.len(),
            replicates,
        }
    }

    /// Replicates with D* ≤ 0.
    #[must_use]
    pub fn non_positive(&self) -> usize {
        let non_positive = |r: &&EstimatedRatio| !is_positive(r.denominator);
        self.replicates.iter().filter(non_positive).count()
    }

    /// The percentile interval: the α/2 and 1 − α/2 quantiles of the replicates.
    ///
    /// Efron 1979, Annals of Statistics 7(1).
    #[must_use]
    pub fn percentile(&self, confidence: f64) -> Region {
        let values = sorted(self.replicates.iter().map(placed));
        let tail = (1.0 - confidence) / 2.0;
        self.bounded(
            confidence,
            quantile(&values, tail),
            quantile(&values, 1.0 - tail),
        )
    }

    /// The studentised interval `[y − t*_{1−α/2} se, y − t*_{α/2} se]` with `t* = (y* − y)/se*`, standard errors by
    /// the gradient.
    ///
    /// Hall 1988, Annals of Statistics 16(3).
    #[must_use]
    pub fn studentised(&self, confidence: f64) -> Region {
        let y = self.estimate.value();
        let statistics = self.replicates.iter().map(|r| {
            let value = placed(r);
            if value.is_finite() {
                (value - y) / r.delta_variance().sqrt()
            } else {
                value
            }
        });
        let statistics = sorted(statistics);
        let (tail, error) = (
            (1.0 - confidence) / 2.0,
            self.estimate.delta_variance().sqrt(),
        );
        let end = |p: f64| y - quantile(&statistics, p) * error;
        self.bounded(confidence, end(1.0 - tail), end(tail))
    }

    /// The bias-corrected and accelerated interval (`BCa`); `jackknife` holds the estimates without each
    /// block of dates, see [`delete_one_block`].
    ///
    /// Efron 1987, Journal of the American Statistical Association 82(397). Reference value: `BCa` of
    /// `scipy.stats.bootstrap` (1.17.1), from the same replicates, to the last digits.
    #[must_use]
    pub fn bca(&self, confidence: f64, jackknife: &[f64]) -> Region {
        let values = sorted(self.replicates.iter().map(placed));
        let correction = BcaCorrection::new(self.estimate.value(), &values, jackknife);
        let end = |p: f64| quantile(&values, correction.percentile(p));
        let tail = (1.0 - confidence) / 2.0;
        self.bounded(confidence, end(tail), end(1.0 - tail))
    }

    /// The 1 − α quantile of `|N* − y D*|/se*`, y the estimate: what replaces t in Fieller's solution.
    #[must_use]
    pub fn critical_value(&self, confidence: f64) -> f64 {
        let y = self.estimate.value();
        let statistics = self.replicates.iter().map(|r| r.statistic(y).abs());
        quantile(&sorted(statistics), confidence)
    }

    /// The ratios that a test with the bootstrap critical value does not reject. Nothing is divided by D*,
    /// so the set is unbounded exactly where the denominator may be zero.
    #[must_use]
    pub fn fieller(&self, confidence: f64) -> Region {
        let critical = self.critical_value(confidence);
        if critical.is_finite() {
            self.estimate.fieller(critical)
        } else {
            Region::WholeLine
        }
    }

    /// An interval, unless an end is not finite or too many replicates have passed the pole.
    fn bounded(&self, confidence: f64, low: f64, high: f64) -> Region {
        let most = as_f64(self.replicates.len()) * (1.0 - confidence) / 2.0;
        if low.is_finite() && high.is_finite() && as_f64(self.non_positive()) <= most {
            Region::Interval { low, high }
        } else {
            Region::WholeLine
        }
    }
}

/// Estimates without each of the `⌈n/length⌉` consecutive blocks of rows: `estimate` is given the rows that
/// are left. What cannot be estimated comes back as NaN.
///
/// Künsch 1989, Annals of Statistics 17(3) (blocks that do not overlap).
pub fn delete_one_block(
    n: usize,
    length: usize,
    estimate: impl Fn(&[usize]) -> Option<f64>,
) -> Vec<f64> {
    let without = |from: usize| {
        let kept: Vec<usize> = (0..from).chain(from + length..n).collect();
        estimate(&kept).unwrap_or(f64::NAN)
    };
    (0..n).step_by(length.max(1)).map(without).collect()
}

/// The ratio, or beyond all others on the side of the numerator where the denominator is not positive.
fn placed(ratio: &EstimatedRatio) -> f64 {
    if is_positive(ratio.denominator) {
        ratio.value()
    } else {
        f64::INFINITY.copysign(ratio.numerator)
    }
}

/// False for a NaN.
fn is_positive(value: f64) -> bool {
    value > 0.0
}

fn sorted(values: impl Iterator<Item = f64>) -> Vec<f64> {
    let mut values: Vec<f64> = values.collect();
    values.sort_by(f64::total_cmp);
    values
}

/// The quantile at place `p (m − 1)` of m sorted values, interpolated (type 7 of Hyndman & Fan 1996, American
/// Statistician 50(4)); NaN of none and between a finite and an infinite value.
fn quantile(sorted: &[f64], p: f64) -> f64 {
    let last = sorted.len().saturating_sub(1);
    let place = p * as_f64(last);
    // A place that is whole but for rounding is whole: its neighbour may be infinite.
    let whole = place.round();
    let place = if (place - whole).abs() < 1e-9 {
        whole
    } else {
        place
    };
    let below = floor_count(place, last);
    let Some(&low) = sorted.get(below) else {
        return f64::NAN;
    };
    let share = place - as_f64(below);
    if share == 0.0 {
        low
    } else {
        low + share * (sorted[(below + 1).min(last)] - low)
    }
}

#[cfg(test)]
mod tests {
    use super::super::test_data::{close, json, numbers};
    use super::*;

    fn exact(value: f64) -> EstimatedRatio {
        EstimatedRatio {
            numerator: value,
            denominator: 1.0,
            v_nn: 1.0,
            v_nd: 0.0,
            v_dd: 0.0,
        }
    }

    fn of(estimate: f64, replicates: &[f64]) -> RatioBootstrap {
        RatioBootstrap {
            estimate: exact(estimate),
            replicates: replicates.iter().map(|v| exact(*v)).collect(),
            failed: 0,
        }
    }

    #[track_caller]
    fn compare(region: Region, wanted: [f64; 2]) {
        for (found, wanted) in ends(region).iter().zip(wanted) {
            close("an end", *found, wanted, 1e-12);
        }
    }

    fn ends(region: Region) -> [f64; 2] {
        let Region::Interval { low, high } = region else {
            panic!("{region:?} is no interval");
        };
        [low, high]
    }

    /// `recompute_bootstrap.py` (scipy 1.17.1): the mean of 54 values, the library's own replicates.
    #[test]
    fn a_general_purpose_library_agrees() {
        let expected = json(include_str!("../../fixtures/reference/bootstrap.json"));
        let sample = numbers(&expected["sample"]);
        let mean =
            |rows: &[usize]| rows.iter().map(|r| sample[*r]).sum::<f64>() / as_f64(rows.len());
        let all: Vec<usize> = (0..sample.len()).collect();
        let bootstrap = of(mean(&all), &numbers(&expected["replicates"]));
        let jackknife = delete_one_block(sample.len(), 1, |rows| Some(mean(rows)));
        assert_eq!(jackknife.len(), sample.len());
        for (confidence, name) in [(0.90, "90"), (0.95, "95")] {
            let pairs = [
                ("percentile", bootstrap.percentile(confidence)),
                ("bca", bootstrap.bca(confidence, &jackknife)),
            ];
            for (method, region) in pairs {
                let wanted = numbers(&expected[format!("{method}_{name}")]);
                for (found, wanted) in ends(region).iter().zip(wanted) {
                    close(method, *found, wanted, 1e-10);
                }
            }
        }
    }

    /// Replicates 1 to 101 around 41: quantiles are numbers one can read off.
    #[test]
    fn intervals_by_hand() {
        let values: Vec<f64> = (1..=101).map(f64::from).collect();
        let bootstrap = of(41.0, &values);
        compare(bootstrap.percentile(0.9), [6.0, 96.0]);
        // t* = value − 41: from −35 to 55.
        compare(bootstrap.studentised(0.9), [41.0 - 55.0, 41.0 + 35.0]);
        // |t*|: 0, twice 1 to 40, once 41 to 60; the 91st of 101.
        let critical = bootstrap.critical_value(0.9);
        close("critical value", critical, 50.0, 1e-12);
        compare(bootstrap.fieller(0.9), [-9.0, 91.0]);
        // Without bias and acceleration, percentiles stay what they are.
        let plain = BcaCorrection {
            bias: 0.0,
            acceleration: 0.0,
        };
        close("p", plain.percentile(0.025), 0.025, 1e-9);
    }

    /// A few replicates beyond the pole rank as the largest; with more, nothing bounded is said.
    #[test]
    fn replicates_beyond_the_pole_are_kept_and_counted() {
        let values: Vec<f64> = (1..=101).map(f64::from).collect();
        let mut bootstrap = of(41.0, &values);
        let mut turn = |i: usize| bootstrap.replicates[i].denominator = -1e-6;
        (0..5).for_each(&mut turn);
        assert_eq!(bootstrap.non_positive(), 5);
        // 6 to 101, then five beyond: the sixth and the 96th.
        compare(bootstrap.percentile(0.9), [11.0, 101.0]);
        bootstrap.replicates[5].denominator = 0.0;
        let jackknife = [40.0, 41.0, 42.5];
        for region in [
            bootstrap.percentile(0.9),
            bootstrap.studentised(0.9),
            bootstrap.bca(0.9, &jackknife),
        ] {
            assert_eq!(region, Region::WholeLine);
        }
        assert!(bootstrap.critical_value(0.9).is_finite());
    }

    #[test]
    fn blocks_are_left_out_one_at_a_time() {
        let left = std::cell::RefCell::new(Vec::new());
        let found = delete_one_block(5, 2, |rows| {
            left.borrow_mut().push(rows.to_vec());
            (rows.len() > 3).then_some(1.0)
        });
        let wanted = [vec![2, 3, 4], vec![0, 1, 4], vec![0, 1, 2, 3]];
        assert_eq!(left.into_inner(), wanted);
        assert!(found[0].is_nan() && found[1].is_nan() && found[2].is_finite());
    }

    /// The mean of ten normal values: replicates of the mean, 400 samples; coverage of a 90 % studentised
    /// interval within four standard errors.
    #[test]
    fn the_studentised_interval_covers() {
        let covered = (0..400_u64).filter(|sample| {
            let mut draws = Draws::new(17, *sample);
            let values: Vec<f64> = (0..10).map(|_| 3.0 + draws.normal()).collect();
            let of = |values: &[f64]| {
                let mean = values.iter().sum::<f64>() / 10.0;
                let squares: f64 = values.iter().map(|v| (v - mean).powi(2)).sum();
                EstimatedRatio {
                    numerator: mean,
                    denominator: 1.0,
                    v_nn: squares / 90.0,
                    v_nd: 0.0,
                    v_dd: 0.0,
                }
            };
            let simulation = Simulation {
                draws: 199,
                seed: 1000 + sample,
                threads: 1,
            };
            let bootstrap = RatioBootstrap::draw(of(&values), simulation, |draws| {
                let drawn = super::super::Blocks::Moving(1).draw(10, draws);
                Some(of(&drawn
                    .iter()
                    .map(|d| values[d.date])
                    .collect::<Vec<_>>()))
            });
            bootstrap.studentised(0.9).contains(3.0)
        });
        let share = as_f64(covered.count()) / 400.0;
        assert!((share - 0.9).abs() < 4.0 * 0.015, "{share}");
    }
}
