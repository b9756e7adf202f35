//! Coverage of every 95 % interval of every estimator on simulated economies.

use realterms::dist::t_upper;
use realterms::estimate::{
    Blocks, EstimatedRatio, RatioBootstrap, Region, Simulation, SystemBootstrap,
    automatic_block_length, delete_one_block, replicate,
};
use realterms::random::Draws;

use super::economy::{ECONOMIES, EPSILON, Economy, Sample};
use super::estimators::{ESTIMATORS, Estimate, Estimator, Means, equations, estimate, rows};

const CONFIDENCE: f64 = 0.95;
/// Replications of each bootstrap.
const REPLICATES: usize = 199;
/// Lags of the drivers' vector autoregression.
const VAR_LAGS: usize = 1;
const INTERVALS: [&str; 6] = [
    "Fieller",
    "delta",
    "percentile",
    "studentised",
    "BCa",
    "critical value",
];
const FORMS: [&str; 2] = ["weak", "strong"];

/// Whether an interval covered, and whether it was unbounded; none where there was no estimate.
type Outcome = Option<[(bool, bool); INTERVALS.len()]>;

/// Prints the table for so many runs a cell.
pub(crate) fn print(runs: usize, threads: usize) {
    println!(
        "\nCoverage of 95 % intervals of the growth rate, per cent of {runs} runs (standard error at 95 %: {:.1}), in brackets \
         the share of unbounded sets where it is 1 % or more. Bootstraps: {REPLICATES} replicates, stationary \
         blocks of automatic length, vector autoregression of {VAR_LAGS} lag for the drivers. `x̄` and `z̄` \
         held fixed. No estimate: income elasticity of imports not positive.\n",
        100.0 * (0.95 * 0.05 / runs as f64).sqrt(),
    );
    println!(
        "| economy | n | form | estimator | {} | no estimate |",
        INTERVALS.join(" | ")
    );
    println!("|---|---|---|---|{}---|", "---|".repeat(INTERVALS.len()));
    for (number, economy) in (0..).zip(ECONOMIES) {
        for n in [40, 80] {
            let simulation = Simulation {
                draws: runs,
                seed: 100 * number + n as u64,
                threads,
            };
            let found = replicate(simulation, |draws| run(&economy, n, draws));
            for (f, form) in FORMS.iter().enumerate() {
                for (e, (name, _)) in ESTIMATORS.iter().enumerate() {
                    let outcomes: Vec<&Outcome> = found.iter().map(|r| &r[e][f]).collect();
                    let cells = cells(&outcomes).join(" | ");
                    println!("| {} | {n} | {form} | {name} | {cells} |", economy.name);
                }
            }
        }
    }
}

fn cells(outcomes: &[&Outcome]) -> Vec<String> {
    let there: Vec<_> = outcomes.iter().filter_map(|o| o.as_ref()).collect();
    let share = |count: usize, of: usize| 100.0 * count as f64 / of as f64;
    let mut cells: Vec<String> = (0..INTERVALS.len())
        .map(|i| {
            let covered = there.iter().filter(|o| o[i].0).count();
            let unbounded = share(there.iter().filter(|o| o[i].1).count(), there.len());
            let covered = share(covered, there.len());
            if unbounded >= 1.0 {
                format!("{covered:.1} ({unbounded:.0})")
            } else {
                format!("{covered:.1}")
            }
        })
        .collect();
    let none = share(outcomes.len() - there.len(), outcomes.len());
    cells.push(format!("{none:.1}"));
    cells
}

/// One draw of an economy: a row an estimator, an outcome a form.
fn run(economy: &Economy, n: usize, draws: &mut Draws) -> Vec<[Outcome; 2]> {
    let sample = economy.draw(n, draws);
    let means = Means::of(&sample);
    let truth = [means.x / economy.pi, EPSILON * means.z / economy.pi];
    let seed = draws.uniform().to_bits();
    ESTIMATORS
        .iter()
        .map(|(_, estimator)| {
            judge(*estimator, &sample, means, truth, seed).unwrap_or([None, None])
        })
        .collect()
}

fn judge(
    estimator: Estimator,
    sample: &Sample,
    means: Means,
    truth: [f64; 2],
    seed: u64,
) -> Option<[Outcome; 2]> {
    let whole = estimate(estimator, sample, means, None)?;
    let system = SystemBootstrap::of(
        equations(estimator, sample)?,
        &sample.drivers,
        Some(VAR_LAGS),
    )
    .ok()?;
    let lengths = system.shocks().iter();
    let lengths = lengths.map(|s| automatic_block_length(s).stationary);
    let length = lengths.fold(1.0, f64::max);
    let simulation = Simulation {
        draws: REPLICATES,
        seed,
        threads: 1,
    };
    let estimates: Vec<Estimate> = replicate(simulation, |draws| {
        let mut drawn = system.replicate(Blocks::Stationary(length), draws);
        let exports = drawn.dependent.pop()?;
        let sample = Sample {
            imports: drawn.dependent.pop()?,
            exports,
            drivers: drawn.drivers,
        };
        estimate(estimator, &sample, means, None)
    })
    .into_iter()
    .flatten()
    .collect();
    // Rows of the final regression stay in their order, so that whole blocks of dates are left out.
    let block = length.round().max(1.0);
    #[expect(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "at most the number of dates"
    )]
    let block = block as usize;
    let count = rows(estimator, sample.imports.values.len());
    let without = |form: fn(&Estimate) -> &EstimatedRatio| {
        delete_one_block(count, block, |kept| {
            let left = estimate(estimator, sample, means, Some(kept))?;
            Some(form(&left).value())
        })
    };
    let t = t_upper((1.0 - CONFIDENCE) / 2.0, whole.df as f64);
    let outcome = |form: fn(&Estimate) -> &EstimatedRatio, truth: f64| -> Outcome {
        let ratio = *form(&whole);
        // A rate with a denominator that is not positive has no meaning and no interval.
        if ratio.denominator <= 0.0 {
            return None;
        }
        let bootstrap = RatioBootstrap {
            estimate: ratio,
            replicates: estimates.iter().map(|e| *form(e)).collect(),
            failed: REPLICATES - estimates.len(),
        };
        let regions = [
            ratio.fieller(t),
            ratio.delta(t),
            bootstrap.percentile(CONFIDENCE),
            bootstrap.studentised(CONFIDENCE),
            bootstrap.bca(CONFIDENCE, &without(form)),
            bootstrap.fieller(CONFIDENCE),
        ];
        Some(regions.map(|r| (r.contains(truth), !matches!(r, Region::Interval { .. }))))
    };
    Some([
        outcome(|e| &e.weak, truth[0]),
        outcome(|e| &e.strong, truth[1]),
    ])
}
