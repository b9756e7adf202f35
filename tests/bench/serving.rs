//! Reading one series of 500 observations: over HTTP, and by the database's own load generator
//! reading the same row, at equal connections.
//!
//! Client and server share the machine on both sides. The contestants take turns within each
//! round, so that a slow minute of the machine meets both; medians over the rounds are printed.
//! `serving_ratio` is requests a second over transactions a second at 4 connections.
#![expect(clippy::print_stdout, reason = "a benchmark prints its table")]

mod support;

use std::fmt::Write as _;
use std::fs;
use std::time::Duration;

use anyhow::Context;
use support::service::Service;
use support::{load, median, pgbench, print_table, print_target};

const OBSERVATIONS: usize = 500;
const CONNECTIONS: [usize; 3] = [1, 4, 16];
const ROUNDS: usize = 5;
const SECONDS: u64 = 5;
const WARM_UP_SECONDS: u64 = 2;

/// The row that answers a read: the newest vintage of the series' newest segment, found by key.
const STATEMENT: &str = "SELECT g.unit, v.released, v.revision, v.start_period, v.\"values\", v.status \
    FROM realterms.series s JOIN realterms.segment g ON g.series_id = s.id \
    JOIN realterms.vintage v ON v.segment_id = g.id \
    WHERE s.area = 'XAA' AND s.measure = 'exports' AND s.frequency = 'M' AND s.partner = '' \
    AND s.product = '' AND s.currency = '' AND s.source = '' AND s.adjustment = '' \
    ORDER BY v.released DESC, v.revision DESC LIMIT 1;\n";

fn main() -> anyhow::Result<()> {
    let program = pgbench::find()?;
    let service = Service::start()?;
    upload(&service)?;
    let database = service.database()?;
    let path = "/v1/series/M.XAA.exports/observations";
    let script = std::env::temp_dir().join(format!("realterms-bench-{}.sql", std::process::id()));
    fs::write(&script, STATEMENT).context("writing the script of pgbench")?;

    println!(
        "reading one series of {OBSERVATIONS} observations; medians of {ROUNDS} rounds of {SECONDS} s each\n"
    );
    let mut rows = Vec::new();
    let mut ratio_at_4 = f64::NAN;
    for connections in CONNECTIONS {
        let over_http = |seconds| {
            let time = Duration::from_secs(seconds);
            load::get(service.address, path, connections, time)
        };
        let by_pgbench = |seconds| pgbench::run(&program, &database, &script, connections, seconds);
        over_http(WARM_UP_SECONDS)?;
        by_pgbench(WARM_UP_SECONDS)?;
        let (mut http, mut half, mut most, mut yardstick) = (vec![], vec![], vec![], vec![]);
        for _ in 0..ROUNDS {
            let load = over_http(SECONDS)?;
            http.push(load.rate);
            half.push(1e3 * load.half);
            most.push(1e3 * load.most);
            yardstick.push(by_pgbench(SECONDS)?);
        }
        let ratio = median(&http) / median(&yardstick);
        if connections == 4 {
            ratio_at_4 = ratio;
        }
        rows.push(vec![
            connections.to_string(),
            format!("{:.0}", median(&http)),
            format!("{:.0}", median(&yardstick)),
            format!("{ratio:.2}"),
            format!("{:.2}", median(&half)),
            format!("{:.2}", median(&most)),
        ]);
    }
    // Nothing of ours reads the script any more; the temp folder may keep it if this fails.
    let _ = fs::remove_file(&script);
    print_table(
        &[
            "connections",
            "http/s",
            "pgbench/s",
            "ratio",
            "http p50 ms",
            "http p99 ms",
        ],
        &rows,
    );
    println!(
        "\nratio: HTTP requests a second over pgbench transactions a second, prepared, same row"
    );
    print_target("serving_ratio", ratio_at_4, 0.5);
    Ok(())
}

/// Sends a monthly series of 500 observations.
fn upload(service: &Service) -> anyhow::Result<()> {
    let mut csv = "period,value\n".to_owned();
    for month in 0..OBSERVATIONS {
        let (year, month_of_year) = (1980 + month / 12, month % 12 + 1);
        let value = 1000.0 + 10.0 * month as f64 + (month % 7) as f64 / 8.0;
        writeln!(csv, "{year}-{month_of_year:02},{value}")?;
    }
    let path = "/v1/uploads?kind=trade&area=XAA&measure=exports&currency=USD&own_currency=USD\
                &frequency=M&unit_multiplier=6&prices=current";
    service.request("POST", path, "text/csv", &csv)?;
    Ok(())
}
