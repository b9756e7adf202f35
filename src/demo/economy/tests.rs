//! The published files hold the elasticities from which they were drawn.

use std::collections::BTreeMap;

use super::*;
use crate::intake::{Context, Limits, Reader, Settings};
use crate::preparation::{self, Document, InputRef};
use crate::series::{CurrencyCode, Fragment, Series, SeriesKey};

/// Observations of a file by the cells before the period, read back as a user would read them.
fn read(file: &RawFile) -> BTreeMap<String, Vec<f64>> {
    let head = file.body.lines().next().unwrap();
    let value = head.split(',').position(|c| c == "value").unwrap();
    let mut series: BTreeMap<String, Vec<f64>> = BTreeMap::new();
    for line in file.body.lines().skip(1) {
        let cells: Vec<&str> = line.split(',').collect();
        let key = cells[..value - 1].join(".");
        series
            .entry(key)
            .or_default()
            .push(cells[value].parse().unwrap());
    }
    series
}

fn named<'a>(economy: &'a Economy, name: &str) -> &'a RawFile {
    economy.files.iter().find(|f| f.name == name).unwrap()
}

fn years(values: &[f64], per_year: usize, by_sum: bool) -> Vec<f64> {
    let n = if by_sum { 1.0 } else { per_year as f64 };
    values
        .chunks(per_year)
        .map(|y| y.iter().sum::<f64>() / n)
        .collect()
}

fn logs(values: &[f64]) -> Vec<f64> {
    values.iter().map(|v| v.ln()).collect()
}

fn differences(values: &[f64]) -> Vec<f64> {
    values.windows(2).map(|w| w[1] - w[0]).collect()
}

type Estimate = ([f64; 2], [f64; 2], f64);

/// Coefficients and standard errors of `y` on a constant and two regressors by Cramer's rule on
/// deviations from means, and the Durbin–Watson ratio.
fn regress(y: &[f64], a: &[f64], b: &[f64]) -> Estimate {
    let centred = |v: &[f64]| -> Vec<f64> { v.iter().map(|x| x - mean(v)).collect() };
    let dot = |a: &[f64], b: &[f64]| -> f64 { a.iter().zip(b).map(|(a, b)| a * b).sum() };
    let (y, a, b) = (centred(y), centred(a), centred(b));
    let (aa, ab, bb) = (dot(&a, &a), dot(&a, &b), dot(&b, &b));
    let (ay, by) = (dot(&a, &y), dot(&b, &y));
    let det = aa * bb - ab * ab;
    let beta = [(ay * bb - by * ab) / det, (by * aa - ay * ab) / det];
    let e: Vec<f64> = (0..y.len())
        .map(|i| y[i] - beta[0] * a[i] - beta[1] * b[i])
        .collect();
    let s2 = dot(&e, &e) / (y.len() - 3) as f64;
    let steps = differences(&e);
    (
        beta,
        [(s2 * bb / det).sqrt(), (s2 * aa / det).sqrt()],
        dot(&steps, &steps) / dot(&e, &e),
    )
}

struct Annual {
    exports: Vec<f64>,
    imports: Vec<f64>,
    income: Vec<f64>,
    foreign: Vec<f64>,
    rm: Vec<f64>,
    rx: Vec<f64>,
    balance: Vec<f64>,
}

/// Logs of the annual series that an economist makes from the files, by plain code.
fn annual(economy: &Economy) -> Annual {
    let trade = read(named(economy, "trade.csv"));
    let old = read(named(economy, "trade_prices_2010.csv"));
    let new = read(named(economy, "trade_prices_2015.csv"));
    let linked = |measure: &str| -> Vec<f64> {
        let (old, new) = (&old[measure], &new[measure]);
        let from = QUARTERS - new.len();
        let overlap = old.len() - from;
        let factor = mean(&new[..overlap]) / mean(&old[from..]);
        old[..from]
            .iter()
            .map(|v| v * factor)
            .chain(new.iter().copied())
            .collect()
    };
    let (px, pm) = (linked("export_price"), linked("import_price"));
    let ph = &read(named(economy, "deflator.csv"))[""];
    let gdp = &read(named(economy, "accounts.csv"))[""];
    let real = |value: &[f64], price: &[f64]| -> Vec<f64> {
        let volume: Vec<f64> = value
            .iter()
            .zip(price)
            .map(|(v, p)| 100.0 * v / p)
            .collect();
        logs(&years(&volume, 4, true))
    };
    let rates = read(named(economy, "exchange_rates.csv"));
    let prices = read(named(economy, "partners_prices.csv"));
    let incomes = read(named(economy, "partners_gdp.csv"));
    let weights = read(named(economy, "trade_weights.csv"));
    let chain = |logs: &[Vec<f64>]| -> Vec<f64> {
        let mut path = vec![0.0];
        for t in 1..YEARS {
            let shares = PARTNERS.each_ref().map(|p| {
                let weights = &weights[&format!("export_weight.{}", p.area)];
                mean(&weights[t..t + EARLIER_WEIGHTS])
            });
            let growth: f64 = (0..PARTNERS.len())
                .map(|k| shares[k] * (logs[k][t] - logs[k][t - 1]))
                .sum();
            // Printed shares add up to 1 only roughly.
            let growth = growth / shares.iter().sum::<f64>();
            path.push(path[t - 1] + growth);
        }
        path
    };
    let place = |p: &Partner| format!("{0}.{1}.{1}", p.area, p.money);
    let foreign = chain(&PARTNERS.each_ref().map(|p| logs(&incomes[&place(p)])));
    let competitors = chain(&PARTNERS.each_ref().map(|p| {
        let rate = logs(&years(&rates[p.money], 12, false));
        add(&rate, &logs(&years(&prices[&place(p)], 4, false)))
    }));
    let ratio =
        |a: &[f64], b: &[f64]| -> Vec<f64> { a.iter().zip(b).map(|(a, b)| a - b).collect() };
    let [lx, lm, lh] = [&px, &pm, ph].map(|p| logs(&years(p, 4, false)));
    let (x, m) = (&trade["exports"], &trade["imports"]);
    Annual {
        exports: real(x, &px),
        imports: real(m, &pm),
        income: real(gdp, ph),
        foreign,
        rm: ratio(&lh, &lm),
        rx: ratio(&lx, &competitors),
        balance: ratio(&logs(&years(x, 4, true)), &logs(&years(m, 4, true))),
    }
}

/// Estimates in levels and in growth of both equations, with the true coefficients.
fn estimates(a: &Annual) -> Vec<(Estimate, [f64; 2])> {
    let imports = [IMPORT_INCOME_ELASTICITY, IMPORT_PRICE_ELASTICITY];
    let exports = [EXPORT_INCOME_ELASTICITY, -EXPORT_PRICE_ELASTICITY];
    [
        (&a.imports, &a.income, &a.rm, imports),
        (&a.exports, &a.foreign, &a.rx, exports),
    ]
    .into_iter()
    .flat_map(|(y, activity, price, truth)| {
        let growth = [y, activity, price].map(|v| differences(v));
        let [dy, da, dp] = &growth;
        [
            (regress(y, activity, price), truth),
            (regress(dy, da, dp), truth),
        ]
    })
    .collect()
}

#[test]
fn both_forms_recover_the_elasticities_from_the_published_files() {
    let a = annual(&economy(SEED));
    for ((beta, se, dw), truth) in estimates(&a) {
        for i in 0..2 {
            // t(36) at 95 %.
            assert!(
                (beta[i] - truth[i]).abs() < 2.03 * se[i],
                "{beta:?} {truth:?}"
            );
            assert!(se[i] < 0.15, "precise enough to be worth showing: {se:?}");
        }
        assert!(dw > 1.3, "the disturbance is stationary: {dw}");
    }
    // Near balance, not at it.
    assert!(a.balance.iter().all(|b| b.abs() < 0.3), "{:?}", a.balance);
    assert!(a.balance.iter().filter(|b| b.abs() > 0.02).count() > YEARS / 2);
}

/// The seed of the demo is no lucky one: intervals of 95 % from growth rates cover in at least
/// 90 % of other seeds' economies.
#[test]
fn other_seeds_recover_them_as_well() {
    let (mut covered, mut all) = (0, 0);
    for seed in 0..60 {
        for ((beta, se, _), truth) in estimates(&annual(&economy(seed))).iter().skip(1).step_by(2) {
            for i in 0..2 {
                all += 1;
                covered += i32::from((beta[i] - truth[i]).abs() < 2.03 * se[i]);
            }
        }
    }
    assert!(covered * 10 >= all * 9, "{covered} of {all}");
}

#[test]
fn the_files_are_the_same_to_the_letter_and_name_no_real_currency() {
    let (one, other) = (economy(SEED), economy(SEED));
    for (a, b) in one.files.iter().zip(&other.files) {
        assert_eq!(a.body, b.body);
    }
    for money in &one.moneys {
        let code = CurrencyCode::parse(money.code).unwrap();
        assert!(!crate::series::is_iso_4217(code), "{code}");
    }
    // A digest by FNV-1a pins the digits across machines.
    let digest = one
        .files
        .iter()
        .chain([&one.mislabelled])
        .flat_map(|f| f.body.bytes())
        .fold(0xcbf2_9ce4_8422_2325_u64, |h, b| {
            (h ^ u64::from(b)).wrapping_mul(0x0100_0000_01b3)
        });
    assert_eq!(format!("{digest:016x}"), "15ed21d806c60b53");
}

#[test]
fn the_mislabelled_revision_is_a_thousand_times_what_was_published() {
    let economy = economy(SEED);
    let before = &read(named(&economy, "trade.csv"))["exports"][QUARTERS - 4..];
    let after = &read(&economy.mislabelled)[""];
    assert_eq!(after.len(), 4);
    for (before, after) in before.iter().zip(after) {
        assert!((after / before - 1000.0).abs() < 5.0);
    }
}

/// The stored series that the files give, by operand: the newest segment without a number, every
/// segment with its own.
fn stored(economy: &Economy) -> BTreeMap<InputRef, Series> {
    let mut segments: BTreeMap<SeriesKey, Vec<Series>> = BTreeMap::new();
    let mut context = Context::default();
    for money in &economy.moneys {
        let code = CurrencyCode::parse(money.code).unwrap();
        context.declared.insert(code);
        context.own_money.insert(money.area.to_owned(), code);
    }
    for file in &economy.files {
        let owned = |(name, value): &(&str, &str)| ((*name).to_owned(), (*value).to_owned());
        let constants: Vec<_> = file.constants.iter().map(owned).collect();
        let settings = Settings::parse(file.kind, &constants).unwrap();
        let mut reader = Reader::new(settings, context.clone(), Limits::default(), false).unwrap();
        reader.push(file.body.as_bytes()).unwrap();
        let intake = reader.finish().unwrap();
        assert!(
            intake.rejects.is_empty(),
            "{}: {:?}",
            file.name,
            intake.rejects
        );
        assert!(
            intake.findings.is_empty(),
            "{}: {:?}",
            file.name,
            intake.findings
        );
        for piece in intake.pieces {
            let (fragment, duplicates) = Fragment::settle(&[piece]);
            assert!(duplicates.is_empty());
            let fragment = fragment.unwrap();
            let series = Series::new(fragment.unit, fragment.start, fragment.values);
            segments.entry(fragment.key).or_default().push(series);
        }
    }
    let mut stored = BTreeMap::new();
    for (key, segments) in segments {
        for (number, series) in (1..).zip(segments) {
            for segment in [None, Some(number)] {
                let key = key.clone();
                stored.insert(InputRef { key, segment }, series.clone());
            }
        }
    }
    stored
}

/// The demo's preparation, on the files as intake reads them, gives what plain code gives.
#[test]
fn the_preparation_makes_what_plain_code_makes() {
    let economy = economy(SEED);
    let expected = annual(&economy);
    let document = Document::parse(crate::demo::PREPARATION).unwrap();
    let inputs = stored(&economy);
    let held: BTreeMap<InputRef, Series> = document
        .inputs()
        .into_iter()
        .map(|input| (input.clone(), inputs[&input].clone()))
        .collect();
    let outputs = preparation::evaluate(&document, &held).unwrap();
    for (measure, expected) in [
        ("exports_real", expected.exports),
        ("imports_real", expected.imports),
        ("gdp_real", expected.income),
        ("foreign_income", expected.foreign),
        ("import_relative_price", expected.rm),
        ("export_relative_price", expected.rx),
    ] {
        let key: SeriesKey = format!("A.{HOME}.{measure}").parse().unwrap();
        let output = outputs.iter().find(|o| o.key == key).unwrap();
        assert_eq!(output.series.len(), YEARS, "{measure}");
        // Levels differ by scale alone: millions against units, an arbitrary reference.
        let found = differences(&logs(&output.series.values));
        for (found, expected) in found.iter().zip(differences(&expected)) {
            assert!(
                (found - expected).abs() < 1e-12,
                "{measure}: {found} {expected}"
            );
        }
    }
}

/// The files of the README's session are the demo's files with every constant as a column.
#[test]
fn the_session_s_files_are_the_demo_s_in_full() {
    let economy = economy(SEED);
    let mut written: BTreeMap<String, String> = BTreeMap::new();
    for file in &economy.files {
        let name = match file.name {
            "trade_prices_2010.csv" => "price_index_2010",
            _ => file.kind,
        };
        let columns: &[&str] = match file.kind {
            "price_index" => &["area", "measure", "currency", "own_currency", "reference"],
            "exchange_rate" => &["area", "currency", "own_currency", "quotation"],
            "weights" => &["area", "measure", "partner"],
            "trade" => &[
                "area",
                "measure",
                "currency",
                "own_currency",
                "unit_multiplier",
                "prices",
            ],
            _ => &[
                "area",
                "measure",
                "currency",
                "own_currency",
                "unit_multiplier",
                "prices",
                "price_reference",
            ],
        };
        let columns = [columns, &["frequency", "period", "value"]].concat();
        let text = written
            .entry(name.to_owned())
            .or_insert_with(|| columns.join(",") + "\n");
        let head: Vec<&str> = file.body.lines().next().unwrap().split(',').collect();
        for line in file.body.lines().skip(1) {
            let cells: Vec<&str> = line.split(',').collect();
            let cell = |column: &&str| {
                let constant = file.constants.iter().find(|c| c.0 == *column);
                let place = head.iter().position(|h| h == column);
                place.map_or_else(|| constant.map_or("", |c| c.1), |i| cells[i])
            };
            *text += &(columns.iter().map(cell).collect::<Vec<_>>().join(",") + "\n");
        }
    }
    let folder = concat!(env!("CARGO_MANIFEST_DIR"), "/fixtures/demo");
    for (name, text) in written {
        let path = format!("{folder}/{name}.csv");
        let committed = std::fs::read_to_string(&path).unwrap_or_default();
        if committed != text {
            let fresh = std::env::temp_dir().join(format!("{name}.csv"));
            std::fs::write(&fresh, text).unwrap();
            panic!(
                "{path} is not what the generator gives; that is in {}",
                fresh.display()
            );
        }
    }
}
