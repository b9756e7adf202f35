//! The invented economy's paths as the raw files of its offices: long CSV, rounded as printed.

use std::fmt::Write as _;

use super::economy::{
    FIRST_WEIGHTS_YEAR, FIRST_YEAR, HOME, HOME_MONEY, LAST_YEAR, PARTNERS, Paths, QUARTERS,
};

/// One file and what must be said about it when it is sent.
pub struct RawFile {
    /// File name, for progress lines.
    pub name: &'static str,
    /// Kind of upload.
    pub kind: &'static str,
    /// Columns that hold one value throughout, sent as query parameters.
    pub constants: Vec<(&'static str, &'static str)>,
    /// Title of the publication.
    pub title: &'static str,
    /// Its publisher.
    pub publisher: &'static str,
    /// Day of publication.
    pub released: &'static str,
    /// The bytes.
    pub body: String,
}

const STATISTICS: &str = "Statistical Office of XAA";
const BANK: &str = "Central Bank of XAA";
const UNION: &str = "Statistical Union of XBB, XCC, XDD and XEE";

/// The files in the order in which they are sent.
pub(super) fn all(paths: &Paths) -> Vec<RawFile> {
    let home = |name, kind, title, constants: &[(&'static str, &'static str)], body| RawFile {
        name,
        kind,
        constants: [
            ("area", HOME),
            ("frequency", "Q"),
            ("currency", HOME_MONEY),
            ("own_currency", HOME_MONEY),
        ]
        .iter()
        .chain(constants)
        .copied()
        .collect(),
        title,
        publisher: STATISTICS,
        released: "2020-03-31",
        body,
    };
    vec![
        home(
            "trade.csv",
            "trade",
            "Foreign trade in goods and services",
            &[("unit_multiplier", "6"), ("prices", "current")],
            trade(paths),
        ),
        home(
            "trade_prices_2010.csv",
            "price_index",
            "Foreign trade prices, 2010 = 100",
            &[("reference", "2010")],
            trade_prices(paths, 2010, FIRST_YEAR, 2015),
        ),
        home(
            "trade_prices_2015.csv",
            "price_index",
            "Foreign trade prices, 2015 = 100",
            &[("reference", "2015")],
            trade_prices(paths, 2015, 2013, LAST_YEAR),
        ),
        home(
            "accounts.csv",
            "income",
            "Quarterly national accounts: GDP at current prices",
            &[
                ("measure", "gdp"),
                ("unit_multiplier", "6"),
                ("prices", "current"),
            ],
            quarters(&product(&paths.income, &paths.home_price)),
        ),
        home(
            "deflator.csv",
            "price_index",
            "Quarterly national accounts: implicit deflator of GDP",
            &[("measure", "gdp_deflator"), ("reference", "2015")],
            quarters(&scaled(&paths.home_price, 100.0)),
        ),
        RawFile {
            name: "exchange_rates.csv",
            kind: "exchange_rate",
            constants: vec![
                ("area", HOME),
                ("measure", "exchange_rate"),
                ("own_currency", HOME_MONEY),
                ("frequency", "M"),
                ("quotation", "direct"),
            ],
            title: "Exchange rates, monthly averages",
            publisher: BANK,
            released: "2020-01-15",
            body: exchange_rates(paths),
        },
        RawFile {
            name: "partners_gdp.csv",
            kind: "income",
            constants: vec![
                ("measure", "gdp_real"),
                ("frequency", "A"),
                ("unit_multiplier", "6"),
                ("prices", "constant"),
                ("price_reference", "2015"),
            ],
            title: "Annual national accounts: GDP at prices of 2015",
            publisher: UNION,
            released: "2020-03-16",
            body: partners_income(paths),
        },
        RawFile {
            name: "partners_prices.csv",
            kind: "price_index",
            constants: vec![
                ("measure", "consumer_price"),
                ("frequency", "Q"),
                ("reference", "2015"),
            ],
            title: "Consumer prices, 2015 = 100",
            publisher: UNION,
            released: "2020-01-31",
            body: partners_prices(paths),
        },
        RawFile {
            name: "trade_weights.csv",
            kind: "weights",
            constants: vec![("area", HOME), ("frequency", "A")],
            title: "Shares of partners in foreign trade",
            publisher: STATISTICS,
            released: "2020-03-31",
            body: weights(paths),
        },
    ]
}

/// Exports of the last year as revised a quarter later, in thousands although labelled millions.
pub(super) fn mislabelled(paths: &Paths) -> RawFile {
    let exports = product(&paths.exports, &paths.export_price);
    let mut body = "period,value\n".to_owned();
    // Real revisions of a few tenths of a per cent, so that the file has a reason to exist.
    for (t, revision) in (QUARTERS - 4..QUARTERS).zip([1.001, 1.002, 0.998, 1.004]) {
        line(
            &mut body,
            &[],
            &quarter(t),
            1000.0 * revision * exports[t],
            0,
            "",
        );
    }
    RawFile {
        name: "exports_revised.csv",
        kind: "trade",
        constants: vec![
            ("area", HOME),
            ("measure", "exports"),
            ("frequency", "Q"),
            ("currency", HOME_MONEY),
            ("own_currency", HOME_MONEY),
            ("unit_multiplier", "6"),
            ("prices", "current"),
        ],
        title: "Exports of the last four quarters, revised",
        publisher: STATISTICS,
        released: "2020-06-30",
        body,
    }
}

fn trade(paths: &Paths) -> String {
    let mut body = "measure,period,value,status\n".to_owned();
    let measures = [
        ("exports", product(&paths.exports, &paths.export_price)),
        ("imports", product(&paths.imports, &paths.import_price)),
    ];
    for (measure, values) in &measures {
        for (t, value) in values.iter().enumerate() {
            let status = if t + 1 == QUARTERS { ",P" } else { ",A" };
            line(&mut body, &[measure], &quarter(t), *value, 2, status);
        }
    }
    body
}

/// Export and import prices on one reference year, for the years in which they were published.
fn trade_prices(paths: &Paths, reference: i32, first: i32, last: i32) -> String {
    let at = |year: i32| usize::try_from(4 * (year - FIRST_YEAR)).unwrap_or(0);
    let mut body = "measure,period,value\n".to_owned();
    for (measure, prices) in [
        ("export_price", &paths.export_price),
        ("import_price", &paths.import_price),
    ] {
        let base = prices[at(reference)..at(reference + 1)].iter().sum::<f64>() / 4.0;
        for (t, price) in prices.iter().enumerate().take(at(last + 1)).skip(at(first)) {
            line(
                &mut body,
                &[measure],
                &quarter(t),
                100.0 * price / base,
                2,
                "",
            );
        }
    }
    body
}

fn exchange_rates(paths: &Paths) -> String {
    let mut body = "currency,period,value\n".to_owned();
    for (partner, rates) in PARTNERS.iter().zip(&paths.rate) {
        for (t, rate) in rates.iter().enumerate() {
            let period = format!("{}-{:02}", year(t / 12), t % 12 + 1);
            line(&mut body, &[partner.money], &period, *rate, 5, "");
        }
    }
    body
}

fn partners_income(paths: &Paths) -> String {
    let mut body = "area,currency,own_currency,period,value\n".to_owned();
    for (partner, incomes) in PARTNERS.iter().zip(&paths.partner_income) {
        for (year, income) in (FIRST_YEAR..).zip(incomes) {
            let place = [partner.area, partner.money, partner.money];
            line(&mut body, &place, &year.to_string(), *income, 1, "");
        }
    }
    body
}

fn partners_prices(paths: &Paths) -> String {
    let mut body = "area,currency,own_currency,period,value\n".to_owned();
    for (partner, prices) in PARTNERS.iter().zip(&paths.partner_price) {
        for (t, price) in prices.iter().enumerate() {
            let place = [partner.area, partner.money, partner.money];
            line(&mut body, &place, &quarter(t), 100.0 * price, 2, "");
        }
    }
    body
}

fn weights(paths: &Paths) -> String {
    let mut body = "measure,partner,period,value\n".to_owned();
    for (measure, weights) in [
        ("export_weight", &paths.export_weight),
        ("import_weight", &paths.import_weight),
    ] {
        for (partner, shares) in PARTNERS.iter().zip(weights) {
            for (year, share) in (FIRST_WEIGHTS_YEAR..).zip(shares) {
                let place = [measure, partner.area];
                line(&mut body, &place, &year.to_string(), *share, 4, "");
            }
        }
    }
    body
}

/// A file of one series.
fn quarters(values: &[f64]) -> String {
    let mut body = "period,value\n".to_owned();
    for (t, value) in values.iter().enumerate() {
        line(&mut body, &[], &quarter(t), *value, 2, "");
    }
    body
}

fn line(body: &mut String, first: &[&str], period: &str, value: f64, decimals: usize, rest: &str) {
    for cell in first {
        body.push_str(cell);
        body.push(',');
    }
    // Writing to a String cannot fail.
    let _ = writeln!(body, "{period},{value:.decimals$}{rest}");
}

fn year(t: usize) -> i32 {
    FIRST_YEAR + i32::try_from(t).unwrap_or(0)
}

fn quarter(t: usize) -> String {
    format!("{}-Q{}", year(t / 4), t % 4 + 1)
}

fn product(a: &[f64], b: &[f64]) -> Vec<f64> {
    a.iter().zip(b).map(|(a, b)| a * b).collect()
}

fn scaled(values: &[f64], by: f64) -> Vec<f64> {
    values.iter().map(|v| v * by).collect()
}
