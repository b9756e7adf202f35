//! Times against the libraries, and the targets.

use std::hint::black_box;
use std::path::Path;
use std::time::Instant;

use anyhow::Context;
use realterms::estimate::{
    Ardl, ArdlData, ArdlOrders, Blocks, BoundsCase, BoundsDesign, Break, Deterministic,
    DolsCovariance, InformationCriterion, JohansenCase, KpssLags, LagCriterion, Lags, NoStore,
    QuickArdl, RatioBootstrap, Regressor, Simulation, SystemBootstrap, adf, df_gls, dols, fmols,
    in_parallel, johansen, kpss, phillips_perron, select_orders, zivot_andrews,
};
use realterms::random::Draws;

use super::library::Library;
use crate::table::{median, print_table, print_target};

const ROUNDS: usize = 5;
const REPLICATIONS: usize = 1999;
const AREAS: usize = 150;
const YEARS: usize = 60;
const CONSTANT: Deterministic = Deterministic::Constant;

/// What is timed on both sides.
struct Contestant {
    /// As the libraries know it.
    name: &'static str,
    /// Speed-up wanted.
    wanted: Option<f64>,
    /// Seconds allowed.
    allowed: Option<f64>,
    /// Times in a row, so that a round takes long enough to be timed.
    repeats: u32,
    work: Box<dyn Fn() -> anyhow::Result<()>>,
}

pub(crate) fn print(threads: usize) -> anyhow::Result<()> {
    let mut library = Library::start()?;
    println!("{}; here: {threads} threads\n", library.describe()?);
    let contestants = contestants(threads)?;
    let mut times = vec![(Vec::new(), Vec::new()); contestants.len()];
    for round in 0..=ROUNDS {
        for (contestant, (ours, theirs)) in contestants.iter().zip(&mut times) {
            let theirs_now = library.time(contestant.name)?;
            let began = Instant::now();
            for _ in 0..contestant.repeats {
                (contestant.work)()?;
            }
            let ours_now = began.elapsed().as_secs_f64() / f64::from(contestant.repeats);
            // The first round warms up.
            if round > 0 {
                ours.push(ours_now);
                theirs.push(theirs_now);
            }
        }
    }
    let bounds = bounds_simulation(threads)?;

    let mut rows = Vec::new();
    let mut targets: Vec<(String, f64, f64, bool)> = Vec::new();
    for (contestant, (ours, theirs)) in contestants.iter().zip(&times) {
        let (ours, theirs) = (median(ours), median(theirs));
        rows.push(vec![
            contestant.name.to_owned(),
            format!("{:.4}", 1e3 * ours),
            format!("{:.2}", 1e3 * theirs),
            format!("{:.0}", theirs / ours),
        ]);
        if let Some(wanted) = contestant.wanted {
            targets.push((
                format!("{}_speedup", contestant.name),
                theirs / ours,
                wanted,
                true,
            ));
        }
        if let Some(allowed) = contestant.allowed {
            targets.push((format!("{}_seconds", contestant.name), ours, allowed, false));
        }
    }
    rows.push(vec![
        "bounds_simulation".to_owned(),
        format!("{:.1}", 1e3 * bounds),
        String::new(),
        String::new(),
    ]);
    targets.push(("bounds_simulation_seconds".to_owned(), bounds, 2.0, false));
    print_table(&["", "here ms", "library ms", "times faster"], &rows);
    println!(
        "\nmedians of {ROUNDS} rounds. ardl_grid: 4 regressors, up to 4 lags each, 203 quarters, AIC, then the bounds tests. \
         johansen: 4 series, 55 quarters, 2 lags. ardl_bootstrap: {REPLICATIONS} replications of a long-run coefficient \
         (library: 40, scaled). panel: ADF, Phillips–Perron, KPSS, DF-GLS with constant and with trend, Zivot–Andrews of \
         {AREAS} × 4 series of {YEARS} years, DOLS and FMOLS of each area (library: 1 area, scaled). \
         bounds_simulation: 40,000 draws, T = 50, k = 3."
    );
    for (name, measured, wanted, at_least) in targets {
        if at_least {
            print_target(&name, measured, wanted);
        } else {
            let verdict = if measured <= wanted { "holds" } else { "short" };
            println!("target {name} {measured:.3} {wanted} {verdict}");
        }
    }
    Ok(())
}

fn contestants(threads: usize) -> anyhow::Result<Vec<Contestant>> {
    let names = ["realcons", "realgdp", "realinv", "realgovt", "realdpi"];
    let mut us = columns("us_macro_quarterly.csv", &names)?;
    us.iter_mut()
        .for_each(|r| r.values.iter_mut().for_each(|v| *v = v.ln()));
    let danish = columns("danish_money_demand.csv", &["lrm", "lry", "ibo", "ide"])?;
    let money = danish.clone();
    let series: Vec<[Regressor; 4]> = (0..AREAS).map(area).collect();
    Ok(vec![
        Contestant {
            name: "ardl_grid",
            wanted: Some(50.0),
            allowed: None,
            repeats: 5,
            work: Box::new(move || ardl_grid(&us)),
        },
        Contestant {
            name: "johansen",
            wanted: Some(20.0),
            allowed: None,
            repeats: 2000,
            work: Box::new(move || {
                let case = JohansenCase::Constant;
                black_box(johansen(black_box(&danish), 2, case, &[])?);
                Ok(())
            }),
        },
        Contestant {
            name: "ardl_bootstrap",
            wanted: Some(300.0),
            allowed: Some(1.0),
            repeats: 10,
            work: Box::new(move || ardl_bootstrap(&money, threads)),
        },
        Contestant {
            name: "panel",
            wanted: None,
            allowed: Some(2.0),
            repeats: 1,
            work: Box::new(move || panel(&series, threads)),
        },
    ])
}

/// Columns of a file of `fixtures/reference`.
fn columns(file: &str, names: &[&str]) -> anyhow::Result<Vec<Regressor>> {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("fixtures/reference");
    let mut reader = csv::Reader::from_path(folder.join(file))?;
    let head = reader.headers()?.clone();
    let place = |name: &&str| head.iter().position(|c| c == *name).context("a column");
    let places = names.iter().map(place).collect::<Result<Vec<_>, _>>()?;
    let mut all: Vec<Regressor> = names
        .iter()
        .map(|n| Regressor::new(n, Vec::new()))
        .collect();
    for record in reader.records() {
        let record = record?;
        for (series, &place) in all.iter_mut().zip(&places) {
            series.values.push(record[place].parse()?);
        }
    }
    Ok(all)
}

/// Four random walks.
fn area(number: usize) -> [Regressor; 4] {
    let mut draws = Draws::new(2, number as u64);
    ["y", "a", "b", "c"].map(|name| {
        let mut level = 0.0;
        let values = (0..YEARS).map(|_| {
            level += draws.normal();
            level
        });
        Regressor::new(name, values.collect())
    })
}

fn ardl_grid(us: &[Regressor]) -> anyhow::Result<()> {
    let data = ArdlData {
        y: &us[0],
        x: &us[1..],
        fixed: &[],
    };
    let most = [4; 4];
    let found = select_orders(&data, 4, &most, CONSTANT, InformationCriterion::Aic)?;
    let best = found.best.first().context("a best equation")?;
    let fit = Ardl::fit(&data, best.orders.clone(), BoundsCase::III)?;
    black_box(fit.bounds()?);
    Ok(())
}

fn ardl_bootstrap(money: &[Regressor], threads: usize) -> anyhow::Result<()> {
    let x = &money[1..3];
    let data = ArdlData {
        y: &money[0],
        x,
        fixed: &[],
    };
    let orders = ArdlOrders {
        p: 1,
        q: vec![1, 1],
    };
    let case = BoundsCase::III;
    let fit = Ardl::fit(&data, orders.clone(), case)?;
    let system = SystemBootstrap::new(&[(&fit, data.clone())], x, None)?;
    let whole = QuickArdl::fit(&data, &orders, case, 1).context("an equation")?;
    let simulation = Simulation {
        draws: REPLICATIONS,
        seed: 1,
        threads,
    };
    let bootstrap = RatioBootstrap::draw(whole.long_run(0), simulation, |draws| {
        let drawn = system.replicate(Blocks::Moving(1), draws);
        let data = ArdlData {
            y: &drawn.dependent[0],
            x: &drawn.drivers,
            fixed: &[],
        };
        Some(QuickArdl::fit(&data, &orders, case, 1)?.long_run(0))
    });
    black_box(bootstrap.percentile(0.95));
    Ok(())
}

fn panel(series: &[[Regressor; 4]], threads: usize) -> anyhow::Result<()> {
    let lags = Lags::Chosen {
        by: LagCriterion::Aic,
        max: None,
    };
    let one = |area: usize| -> anyhow::Result<()> {
        let [y, x @ ..] = &series[area];
        for series in &series[area] {
            for terms in [CONSTANT, Deterministic::Trend] {
                black_box(adf(series, terms, lags)?);
                black_box(phillips_perron(series, terms, None)?);
                black_box(kpss(series, terms, KpssLags::Automatic)?);
                black_box(df_gls(series, terms, lags)?);
            }
            black_box(zivot_andrews(series, Break::Mean, lags, 0.15)?);
        }
        let kind = DolsCovariance::LongRun { lags: None };
        black_box(dols(y, x, CONSTANT, 1, 1, kind)?);
        black_box(fmols(y, x, CONSTANT, None)?);
        Ok(())
    };
    in_parallel(series.len(), threads, one)
        .into_iter()
        .collect()
}

/// Seconds for 40,000 draws.
fn bounds_simulation(threads: usize) -> anyhow::Result<f64> {
    let design = BoundsDesign {
        observations: 50,
        regressors: 3,
        case: BoundsCase::III,
        orders: None,
    };
    let simulation = Simulation {
        draws: 40_000,
        seed: 1,
        threads,
    };
    let mut times = Vec::new();
    for _ in 0..3 {
        let began = Instant::now();
        black_box(design.simulate(simulation, &NoStore)?);
        times.push(began.elapsed().as_secs_f64());
    }
    Ok(median(&times))
}
