//! Null distributions by simulation: seeded, parallel, the same digits whatever the thread count.

use serde::{Deserialize, Serialize};

use super::ols::as_f64;
use crate::random::Draws;

/// How a null distribution is simulated.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub struct Simulation {
    /// Replications.
    pub draws: usize,
    /// Seed; replication r draws from stream r.
    pub seed: u64,
    /// Threads; they change the time and no digit.
    pub threads: usize,
}

/// Quantiles kept of a distribution; with fewer draws every draw is kept.
const KEPT: usize = 4000;

/// A simulated distribution: its quantiles at the probabilities `(i + ½)/m`.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct NullDistribution {
    /// Replications that it was made from.
    pub draws: usize,
    /// m quantiles, ascending.
    pub quantiles: Vec<f64>,
}

impl NullDistribution {
    /// From draws in any order. NaN sorts last.
    #[must_use]
    pub fn from_draws(mut draws: Vec<f64>) -> Self {
        draws.sort_by(f64::total_cmp);
        let count = draws.len();
        let all = Self {
            draws: count,
            quantiles: draws,
        };
        if count <= KEPT {
            return all;
        }
        let quantiles = (0..KEPT)
            .map(|i| all.quantile((as_f64(i) + 0.5) / as_f64(KEPT)))
            .collect();
        Self {
            draws: count,
            quantiles,
        }
    }

    /// The x with `P(X ≤ x) = p`, interpolated; the outermost quantile beyond the ends.
    #[must_use]
    pub fn quantile(&self, p: f64) -> f64 {
        let m = self.quantiles.len();
        let place = (p * as_f64(m) - 0.5).clamp(0.0, as_f64(m.saturating_sub(1)));
        let below = super::long_run::floor_count(place, m.saturating_sub(1));
        let above = (below + 1).min(m - 1);
        let share = place - as_f64(below);
        self.quantiles[below] + share * (self.quantiles[above] - self.quantiles[below])
    }

    /// Standard error of a simulated quantile, from the quantiles one binomial standard error to
    /// either side.
    #[must_use]
    pub fn quantile_error(&self, p: f64) -> f64 {
        let step = (p * (1.0 - p) / as_f64(self.draws)).sqrt();
        (self.quantile(p + step) - self.quantile(p - step)) / 2.0
    }

    /// `P(X ≥ x)`: p-value of a test that rejects for large values; never below `½/m`.
    #[must_use]
    pub fn upper_tail(&self, x: f64) -> f64 {
        1.0 - self.rank(x)
    }

    /// `P(X ≤ x)`: p-value of a test that rejects for small values; never below `½/m`.
    #[must_use]
    pub fn lower_tail(&self, x: f64) -> f64 {
        self.rank(x)
    }

    fn rank(&self, x: f64) -> f64 {
        let m = as_f64(self.quantiles.len());
        let above = self.quantiles.partition_point(|q| *q < x);
        let place = if above == 0 || above == self.quantiles.len() {
            as_f64(above)
        } else {
            let (low, high) = (self.quantiles[above - 1], self.quantiles[above]);
            as_f64(above) - 0.5
                + if high > low {
                    (x - low) / (high - low)
                } else {
                    0.5
                }
        };
        place.clamp(0.5, m - 0.5) / m
    }
}

/// Part of every key: to be raised when a change of this program changes simulated digits.
const METHOD: u32 = 1;

/// Where simulated distributions are kept between calls. The settings are the whole key.
pub trait SimulationStore {
    /// What was kept under these settings.
    fn load(&self, settings: &str) -> Option<Vec<NullDistribution>>;
    /// Keeps distributions under settings.
    fn keep(&self, settings: &str, distributions: &[NullDistribution]);
}

/// Keeps nothing: every call simulates.
#[derive(Clone, Copy, Debug)]
pub struct NoStore;

impl SimulationStore for NoStore {
    fn load(&self, _: &str) -> Option<Vec<NullDistribution>> {
        None
    }

    fn keep(&self, _: &str, _: &[NullDistribution]) {}
}

/// N statistics per replication, each as a distribution: from the store, or simulated and kept.
///
/// `statistics` returns what one replication gives from its own draws; replications are dealt to
/// threads in blocks and collected in order.
pub fn simulate<const N: usize>(
    simulation: Simulation,
    settings: &str,
    store: &dyn SimulationStore,
    statistics: impl Fn(&mut Draws) -> [f64; N] + Sync,
) -> [NullDistribution; N] {
    let key = format!(
        "{settings};draws={};seed={};method={METHOD}",
        simulation.draws, simulation.seed
    );
    if let Some(kept) = store.load(&key)
        && let Ok(kept) = kept.try_into()
    {
        return kept;
    }
    let rows = replicate(simulation, statistics);
    let distributions =
        std::array::from_fn(|i| NullDistribution::from_draws(rows.iter().map(|r| r[i]).collect()));
    store.keep(&key, &distributions);
    distributions
}

/// One result a replication, in the order of replications.
pub fn replicate<T: Send>(simulation: Simulation, one: impl Fn(&mut Draws) -> T + Sync) -> Vec<T> {
    let Simulation {
        draws,
        seed,
        threads,
    } = simulation;
    in_parallel(draws, threads, |r| one(&mut Draws::new(seed, r as u64)))
}

/// `one(0)`, `one(1)`, … in this order, computed by so many threads.
///
/// For a batch of tests or of equations of many areas, and for the replications of one. Each thread takes
/// one stretch; the threads change no digit.
pub fn in_parallel<T: Send>(
    count: usize,
    threads: usize,
    one: impl Fn(usize) -> T + Sync,
) -> Vec<T> {
    let threads = threads.clamp(1, count.max(1));
    let stretch = count.div_ceil(threads);
    let work = |thread: usize| -> Vec<T> {
        let from = (thread * stretch).min(count);
        (from..(from + stretch).min(count)).map(&one).collect()
    };
    std::thread::scope(|scope| {
        let others: Vec<_> = (1..threads)
            .map(|thread| {
                let work = &work;
                scope.spawn(move || work(thread))
            })
            .collect();
        let mut all = work(0);
        for other in others {
            all.extend(
                other
                    .join()
                    .unwrap_or_else(|panic| std::panic::resume_unwind(panic)),
            );
        }
        all
    })
}
