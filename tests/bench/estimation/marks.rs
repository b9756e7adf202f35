//! How often what marks an estimate in levels as unreliable appears, with and without cointegration.

use realterms::estimate::{
    Ardl, ArdlData, BoundsCase, BoundsDesign, BoundsNull, Deterministic, LagCriterion, Lags,
    LevelRelation, NoStore, Ols, Regressor, Simulation, engle_granger, replicate,
};

use super::economy::{ECONOMIES, Sample};
use super::estimators::orders;

const LEVEL: f64 = 0.05;
const MARKS: [&str; 4] = [
    "Durbin–Watson below R²",
    "Engle–Granger does not reject",
    "bounds tests do not all reject",
    "any",
];

/// Prints the table for so many runs a cell; a mark on either equation counts.
pub(crate) fn print(runs: usize, threads: usize) {
    println!(
        "\nMarks on estimates in levels, per cent of {runs} runs, on the import or the export equation, at 5 %.\n"
    );
    println!("| economy | n | {} |", MARKS.join(" | "));
    println!("|---|---|{}", "---|".repeat(MARKS.len()));
    for (number, economy) in (0..).zip(ECONOMIES) {
        for n in [40, 80] {
            let simulation = Simulation {
                draws: runs,
                seed: 1000 + 100 * number + n as u64,
                threads,
            };
            let design = BoundsDesign {
                observations: n - 1,
                regressors: 2,
                case: BoundsCase::III,
                orders: Some(orders()),
            };
            let null = Simulation {
                draws: 4000,
                ..simulation
            };
            let null = design.simulate(null, &NoStore);
            let null = null.expect("the orders suit the design");
            let found = replicate(simulation, |draws| marks(&economy.draw(n, draws), &null));
            let cells = (0..MARKS.len()).map(|i| {
                let marked = found.iter().filter(|m| m[i]).count();
                format!("{:.1}", 100.0 * marked as f64 / runs as f64)
            });
            let cells: Vec<String> = cells.collect();
            println!("| {} | {n} | {} |", economy.name, cells.join(" | "));
        }
    }
}

fn marks(sample: &Sample, null: &BoundsNull) -> [bool; MARKS.len()] {
    let (home, abroad) = sample.drivers.split_at(2);
    let mut marks = [false; MARKS.len()];
    for (y, x) in [(&sample.imports, home), (&sample.exports, abroad)] {
        let [spurious, apart, unbound] = equation(y, x, null);
        for (mark, found) in marks.iter_mut().zip([spurious, apart, unbound, false]) {
            *mark |= found;
        }
    }
    marks[3] = marks[..3].contains(&true);
    marks
}

fn equation(y: &Regressor, x: &[Regressor], null: &BoundsNull) -> [bool; 3] {
    let regressors = [&[Regressor::constant(y.values.len())], x].concat();
    let lags = Lags::Chosen {
        by: LagCriterion::Aic,
        max: None,
    };
    let fit = Ols::fit(&y.values, regressors);
    let engle_granger = engle_granger(y, x, Deterministic::Constant, lags);
    let data = ArdlData { y, x, fixed: &[] };
    let bounds = Ardl::fit(&data, orders(), BoundsCase::III).and_then(|fit| fit.bounds());
    // What cannot be computed marks too.
    [
        fit.is_ok_and(|fit| fit.durbin_watson < fit.r2),
        engle_granger.map_or(true, |t| t.p_value.is_none_or(|p| p >= LEVEL)),
        bounds.map_or(true, |b| {
            b.judge(null, LEVEL) != LevelRelation::Cointegrated
        }),
    ]
}
