//! An invented economy with known elasticities, and the raw files that its offices publish.
//!
//! Home `XAA` trades with `XBB`, `XCC`, `XDD` and `XEE`. Everything is drawn quarterly in logs from
//! one seed: incomes, prices and exchange rates are random walks with drift, the real exchange rate
//! moves part of the way into export and import prices, and trade follows demand with a small
//! stationary disturbance, so that estimation in levels and in differences both recover
//!
//! ```text
//! ln M = c + π ln Y + η ln Rm + u        ln X = c* + ε ln Z − η* ln Rx + u*
//! ```
//!
//! with Rm the home price over the import price, Rx the export price over competitors' prices in
//! home currency, Z partners' real income chained by lagged export weights. There is no autonomous
//! growth: whatever an estimate says of it is noise. The files then round and label the paths as an
//! office would; nothing in them tells the elasticities.

use crate::random::Draws;

use super::files::{self, RawFile};

/// Income elasticity of imports, π.
pub const IMPORT_INCOME_ELASTICITY: f64 = 1.6;
/// Price elasticity of imports with respect to Rm, η.
pub const IMPORT_PRICE_ELASTICITY: f64 = 0.5;
/// Income elasticity of exports, ε.
pub const EXPORT_INCOME_ELASTICITY: f64 = 1.4;
/// Price elasticity of exports with respect to 1/Rx, η*.
pub const EXPORT_PRICE_ELASTICITY: f64 = 0.6;

/// First year of the quarterly files.
pub const FIRST_YEAR: i32 = 1980;
/// Last year of all files.
pub const LAST_YEAR: i32 = 2019;
/// The home area.
pub const HOME: &str = "XAA";
/// The home area's money.
pub const HOME_MONEY: &str = "XAL";
/// The seed of the committed demo.
pub const SEED: u64 = 1888;

const YEARS: usize = 40;
pub(super) const QUARTERS: usize = 4 * YEARS;
const MONTHS: usize = 12 * YEARS;
/// The price reference year 2015, as a place among the years.
const REFERENCE: usize = 35;
/// Weights begin so many years before trade, since the first growth rate needs those of the past.
const EARLIER_WEIGHTS: usize = 3;
pub(super) const FIRST_WEIGHTS_YEAR: i32 = FIRST_YEAR - 3;

/// A trading partner.
pub(super) struct Partner {
    pub(super) area: &'static str,
    pub(super) money: &'static str,
    /// Yearly log growth of income and of prices.
    growth: f64,
    inflation: f64,
    /// Real GDP of 1980 in millions of own money at prices of 2015.
    income: f64,
    /// Home money per unit of partner's money, average of 2015.
    rate: f64,
    /// Share of home's exports in the first and in the last year of the weights, and of imports.
    exports: (f64, f64),
    imports: (f64, f64),
}

#[rustfmt::skip]
pub(super) const PARTNERS: [Partner; 4] = [
    Partner { area: "XBB", money: "XBL", growth: 0.030, inflation: 0.026, income: 912_000.0,
              rate: 2.35, exports: (0.42, 0.31), imports: (0.38, 0.30) },
    Partner { area: "XCC", money: "XCL", growth: 0.027, inflation: 0.018, income: 2_450_000.0,
              rate: 0.84, exports: (0.30, 0.27), imports: (0.33, 0.28) },
    Partner { area: "XDD", money: "XDL", growth: 0.041, inflation: 0.052, income: 31_800.0,
              rate: 14.6, exports: (0.16, 0.23), imports: (0.17, 0.25) },
    Partner { area: "XEE", money: "XEL", growth: 0.035, inflation: 0.031, income: 5_120_000.0,
              rate: 0.061, exports: (0.12, 0.19), imports: (0.12, 0.17) },
];

/// The economy's paths: natural units, quarterly unless said otherwise.
pub(super) struct Paths {
    /// Real GDP, imports and exports in millions at prices of 2015, with their seasons.
    pub(super) income: Vec<f64>,
    pub(super) imports: Vec<f64>,
    pub(super) exports: Vec<f64>,
    /// Price levels, average of 2015 = 1.
    pub(super) home_price: Vec<f64>,
    pub(super) import_price: Vec<f64>,
    pub(super) export_price: Vec<f64>,
    /// Per partner: yearly real GDP in millions of own money at prices of 2015; consumer prices,
    /// average of 2015 = 1; monthly exchange rate, home money per unit of partner's.
    pub(super) partner_income: Vec<Vec<f64>>,
    pub(super) partner_price: Vec<Vec<f64>>,
    pub(super) rate: Vec<Vec<f64>>,
    /// Per partner, yearly, from [`FIRST_WEIGHTS_YEAR`].
    pub(super) export_weight: Vec<Vec<f64>>,
    pub(super) import_weight: Vec<Vec<f64>>,
}

/// A currency that exists only here and must be declared before files may name it.
pub struct Money {
    /// Three capital letters that no list of ISO 4217 holds.
    pub code: &'static str,
    /// Its name.
    pub name: String,
    /// The area whose own money it is.
    pub area: &'static str,
}

/// What the demo sends.
pub struct Economy {
    /// The five currencies.
    pub moneys: Vec<Money>,
    /// The files in the order in which they are sent.
    pub files: Vec<RawFile>,
    /// A later revision of exports whose numbers come in thousands under the old label "millions".
    pub mislabelled: RawFile,
}

/// Draws the economy of a seed and writes its files.
#[must_use]
pub fn economy(seed: u64) -> Economy {
    let paths = paths(seed);
    let partners = PARTNERS.iter().map(|p| (p.money, p.area));
    let moneys = std::iter::once((HOME_MONEY, HOME))
        .chain(partners)
        .map(|(code, area)| Money {
            code,
            name: format!("{area} lira"),
            area,
        })
        .collect();
    Economy {
        moneys,
        files: files::all(&paths),
        mislabelled: files::mislabelled(&paths),
    }
}

/// One numbered stream of draws for each disturbance, so that adding one leaves the others alone.
#[derive(Clone, Copy)]
enum Stream {
    HomeIncome = 1,
    HomePrice,
    ImportPrice,
    ExportPrice,
    Imports,
    Exports,
    WorldIncome,
    HomeMoney,
    PartnerIncome = 20,
    PartnerPrice = 30,
    PartnerMoney = 40,
}

/// Draws the paths of a seed.
pub(super) fn paths(seed: u64) -> Paths {
    let draws = |stream: Stream, k: u64| Draws::new(seed, stream as u64 + k);
    let walk = |stream, k, n, drift, sd| random_walk(&mut draws(stream, k), n, drift, sd);
    let quarter = |yearly: f64| yearly / 4.0;

    let income = walk(Stream::HomeIncome, 0, QUARTERS, quarter(0.027), 0.012);
    let home = walk(Stream::HomePrice, 0, QUARTERS, quarter(0.035), 0.004);
    let world = walk(Stream::WorldIncome, 0, QUARTERS, 0.0, 0.008);
    let home_money = walk(Stream::HomeMoney, 0, MONTHS, 0.0, 0.010);

    let mut partner_income = Vec::new();
    let mut partner_price = Vec::new();
    let mut rate = Vec::new();
    let mut foreign_price = Vec::new();
    let mut export_weight = Vec::new();
    let mut import_weight = Vec::new();
    for (k, partner) in (0..).zip(&PARTNERS) {
        let own = walk(
            Stream::PartnerIncome,
            k,
            QUARTERS,
            quarter(partner.growth),
            0.006,
        );
        partner_income.push(add(&own, &world));
        let price = walk(
            Stream::PartnerPrice,
            k,
            QUARTERS,
            quarter(partner.inflation),
            0.003,
        );
        let drift = (0.035 - partner.inflation) / 12.0;
        let own = walk(Stream::PartnerMoney, k, MONTHS, drift, 0.007);
        let levels = level(&add(&own, &home_money), 12, partner.rate);
        let quarterly: Vec<f64> = levels.chunks(3).map(|q| libm::log(mean(q))).collect();
        foreign_price.push(add(&price, &quarterly));
        partner_price.push(level(&price, 4, 1.0));
        rate.push(levels);
        export_weight.push(moving_share(partner.exports));
        import_weight.push(moving_share(partner.imports));
    }
    let world_income = chained(&partner_income, &export_weight);
    let competitors = chained(&foreign_price, &export_weight);

    // Half of the real exchange rate's movement passes into export prices, six tenths into import
    // prices; the rest is the traders' own.
    let pass = |share: f64, own: &[f64]| -> Vec<f64> {
        (0..QUARTERS)
            .map(|t| share * competitors[t] + (1.0 - share) * home[t] + own[t])
            .collect()
    };
    let own = walk(Stream::ImportPrice, 0, QUARTERS, 0.0, 0.010);
    let import_price = pass(0.6, &own);
    let own = walk(Stream::ExportPrice, 0, QUARTERS, 0.0, 0.010);
    let export_price = pass(0.5, &own);

    let disturbance = |stream| autoregression(&mut draws(stream, 0), 0.3, 0.008);
    let u = disturbance(Stream::Imports);
    let imports: Vec<f64> = (0..QUARTERS)
        .map(|t| {
            IMPORT_INCOME_ELASTICITY * income[t]
                + IMPORT_PRICE_ELASTICITY * (home[t] - import_price[t])
                + u[t]
        })
        .collect();
    let u = disturbance(Stream::Exports);
    let exports: Vec<f64> = (0..QUARTERS)
        .map(|t| {
            EXPORT_INCOME_ELASTICITY * world_income[t]
                - EXPORT_PRICE_ELASTICITY * (export_price[t] - competitors[t])
                + u[t]
        })
        .collect();

    let volume = |log: &[f64], start: f64, seasons: [f64; 4]| -> Vec<f64> {
        log.iter()
            .zip(seasons.iter().cycle())
            .map(|(v, season)| start * season * libm::exp(v - log[0]) / 4.0)
            .collect()
    };
    Paths {
        income: volume(&income, 61_500.0, [0.972, 0.998, 1.003, 1.027]),
        imports: volume(&imports, 10_900.0, [0.981, 0.994, 1.001, 1.024]),
        exports: volume(&exports, 10_600.0, [0.966, 1.012, 0.989, 1.033]),
        home_price: level(&home, 4, 1.0),
        import_price: level(&import_price, 4, 1.0),
        export_price: level(&export_price, 4, 1.0),
        partner_income: PARTNERS
            .iter()
            .zip(&partner_income)
            .map(|(partner, log)| {
                let quarters = volume(log, partner.income, [1.0; 4]);
                quarters.chunks(4).map(|q| q.iter().sum()).collect()
            })
            .collect(),
        partner_price,
        rate,
        export_weight,
        import_weight,
    }
}

/// Cumulated normal steps of mean `drift`, starting at 0.
fn random_walk(draws: &mut Draws, n: usize, drift: f64, sd: f64) -> Vec<f64> {
    (0..n)
        .scan(0.0, |sum, t| {
            if t > 0 {
                *sum += drift + sd * draws.normal();
            }
            Some(*sum)
        })
        .collect()
}

/// A stationary autoregression of order one over the quarters, from its stationary distribution.
fn autoregression(draws: &mut Draws, rho: f64, sd: f64) -> Vec<f64> {
    let mut last = sd / (1.0 - rho * rho).sqrt() * draws.normal();
    (0..QUARTERS)
        .map(|_| {
            let now = last;
            last = rho * last + sd * draws.normal();
            now
        })
        .collect()
}

fn add(a: &[f64], b: &[f64]) -> Vec<f64> {
    a.iter().zip(b).map(|(a, b)| a + b).collect()
}

fn mean(values: &[f64]) -> f64 {
    values.iter().sum::<f64>() / values.len() as f64
}

/// Levels of a path of logs, scaled so that the mean over 2015 is `reference`.
fn level(log: &[f64], per_year: usize, reference: f64) -> Vec<f64> {
    let levels: Vec<f64> = log.iter().map(|v| libm::exp(*v)).collect();
    let base = mean(&levels[per_year * REFERENCE..per_year * (REFERENCE + 1)]);
    levels.iter().map(|v| reference * v / base).collect()
}

/// A share that moves along a straight line over the years of the weights.
fn moving_share((first, last): (f64, f64)) -> Vec<f64> {
    let n = YEARS + EARLIER_WEIGHTS;
    (0..n)
        .map(|t| first + (last - first) * t as f64 / (n - 1) as f64)
        .collect()
}

/// The log aggregate whose growth is the partners' growth by the shares of the year before.
fn chained(logs: &[Vec<f64>], shares: &[Vec<f64>]) -> Vec<f64> {
    (0..QUARTERS)
        .scan(0.0, |sum, t| {
            if t > 0 {
                let year_before = t / 4 + EARLIER_WEIGHTS - 1;
                *sum += logs
                    .iter()
                    .zip(shares)
                    .map(|(log, share)| share[year_before] * (log[t] - log[t - 1]))
                    .sum::<f64>();
            }
            Some(*sum)
        })
        .collect()
}

#[cfg(test)]
mod tests;
