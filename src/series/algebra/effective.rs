//! Real exchange rates, bilateral and effective, and weighted foreign income.

use serde::Deserialize;

use super::arithmetic::adjusted;
use super::index::rebase;
use super::money::quoted;
use super::{AlgebraError, Span, all_positive, map_together, observed, overlap, same_frequency};
use crate::series::{
    Adjustment, CurrencyCode, IndexKind, Prices, Quantity, Series, Status, Timing, Unit,
};
use crate::time::{Frequency, Period};

/// The level of a result: its mean over `span` is `value`.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Reference {
    /// Reference period.
    pub span: Span,
    /// Value in it, 100 or 1.
    pub value: f64,
}

/// Years before the current one whose weights count; 1 or 3 in documents: three for foreign income and one
/// for exchange rates unless asked.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Deserialize)]
#[serde(try_from = "u8")]
pub enum WeightYears {
    /// The year before.
    #[default]
    One,
    /// Mean of the three years before, all of which must be held.
    Three,
}

impl TryFrom<u8> for WeightYears {
    type Error = AlgebraError;

    fn try_from(years: u8) -> Result<Self, Self::Error> {
        match years {
            1 => Ok(Self::One),
            3 => Ok(Self::Three),
            _ => Err(AlgebraError::Argument {
                name: "weight_years",
                found: years.to_string(),
                expected: "1 or 3".to_owned(),
            }),
        }
    }
}

/// A partner in a weighted aggregate.
#[derive(Clone, Copy, Debug)]
pub struct Partner<'a> {
    /// Name for messages.
    pub name: &'a str,
    /// Its real income.
    pub level: &'a Series,
    /// Its annual weights, of any scale.
    pub weights: &'a Series,
}

/// A partner in a real effective exchange rate.
#[derive(Clone, Copy, Debug)]
pub struct TradePartner<'a> {
    /// Name for messages.
    pub name: &'a str,
    /// Its price index.
    pub price: &'a Series,
    /// Exchange rate between home and partner money, either way round; none where both share one.
    pub rate: Option<&'a Series>,
    /// Its annual weights, of any scale.
    pub weights: &'a Series,
}

/// How much of the weights one period's growth rests on.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Coverage {
    /// The period.
    pub period: Period,
    /// Partners with a value in this period and the one before, and a weight.
    pub partners: usize,
    /// Their share in the weight of all named partners that have one.
    pub share: f64,
    /// Partners without a weight for this period, which therefore do not lower the share.
    pub unweighted: usize,
}

/// What a weighted aggregate returns.
#[derive(Clone, Debug, PartialEq)]
pub struct Effective {
    /// The aggregate.
    pub series: Series,
    /// Coverage of each period after the first.
    pub coverage: Vec<Coverage>,
    /// Periods beyond a break, left off though some partner has a value.
    pub left_off: Vec<Period>,
}

/// `P_home / (E · P_foreign)`, E in home money per unit of foreign money: **a rise is a real
/// appreciation of the home area**. An index that averages `reference.value` over the reference.
///
/// # Errors
/// Sides that are not price indices in stated currencies; a rate that is not between the two, or
/// none where they differ; frequencies; reference not covered; numbers that are not positive.
pub fn real_exchange_rate(
    home_price: &Series,
    foreign_price: &Series,
    rate: Option<&Series>,
    reference: Reference,
) -> Result<Series, AlgebraError> {
    rebase(
        &relative_price(home_price, foreign_price, rate)?,
        reference.span,
        reference.value,
    )
}

/// The real exchange rate on an arbitrary level.
fn relative_price(
    home_price: &Series,
    foreign_price: &Series,
    rate: Option<&Series>,
) -> Result<Series, AlgebraError> {
    const RER: &str = "real_exchange_rate";
    let home = price_currency(RER, &home_price.unit)?;
    let foreign = price_currency(RER, &foreign_price.unit)?;
    same_frequency(RER, home_price, foreign_price)?;
    all_positive(RER, "the home price index", home_price)?;
    all_positive(RER, "the foreign price index", foreign_price)?;
    let unit = relative_price_unit(IndexKind::ExchangeRate, 100.0);
    let unit = adjusted(unit, &home_price.unit, &foreign_price.unit);
    let Some(rate) = rate else {
        if home != foreign {
            return Err(AlgebraError::clash(
                RER,
                (&home_price.unit, &foreign_price.unit),
                "the prices stand in two currencies",
                "Name the exchange rate between them.",
            ));
        }
        let sides = [home_price, foreign_price];
        let extent = overlap(RER, &sides)?;
        return Ok(map_together(unit, extent, &sides, |v| v[0] / v[1]));
    };
    let Some(home_per_foreign) = quoted(&rate.unit, foreign, home) else {
        return Err(AlgebraError::clash(
            RER,
            (&foreign_price.unit, &rate.unit),
            "the rate is not between the currencies of the two price indices",
            "Take the rate between home and foreign money.",
        ));
    };
    same_frequency(RER, home_price, rate)?;
    all_positive(RER, "the exchange rate", rate)?;
    let sides = [home_price, foreign_price, rate];
    let extent = overlap(RER, &sides)?;
    let unit = adjusted(unit.clone(), &unit, &rate.unit);
    Ok(map_together(unit, extent, &sides, |v| {
        if home_per_foreign {
            v[0] / (v[2] * v[1])
        } else {
            v[0] * v[2] / v[1]
        }
    }))
}

/// Real effective exchange rate: **a rise is a real appreciation of the home area.**
///
/// `Δln = Σ w_{k,t−1} Δln RER_k` over the partners present in both periods, weights renormalised,
/// cumulated and brought to the reference; weights, run and coverage as in [`foreign_income`].
///
/// # Errors
/// As [`real_exchange_rate`] and [`foreign_income`].
pub fn real_effective_exchange_rate(
    home_price: &Series,
    partners: &[TradePartner<'_>],
    years: WeightYears,
    reference: Reference,
) -> Result<Effective, AlgebraError> {
    let bilateral = partners
        .iter()
        .map(|p| relative_price(home_price, p.price, p.rate).map_err(|e| e.with_partner(p.name)))
        .collect::<Result<Vec<_>, _>>()?;
    let weighted: Vec<Partner<'_>> = partners
        .iter()
        .zip(&bilateral)
        .map(|(p, level)| Partner {
            name: p.name,
            level,
            weights: p.weights,
        })
        .collect();
    cumulate(
        "real_effective_exchange_rate",
        &weighted,
        years,
        reference,
        IndexKind::ExchangeRate,
    )
}

/// Weighted foreign income: `Δln Z = Σ w_{k,t−1} Δln Y_k`, Y in the partners' own constant prices.
///
/// The sum runs over the partners present in both periods, weights renormalised; it is cumulated and
/// brought to the reference.
///
/// Weights are annual (lagged export weights: ratios, or money in one currency) and those of the
/// year before the period, or the mean of the three years before. Growth is cumulated only through
/// an unbroken run of periods around the reference; periods beyond a break are left off and named.
///
/// # Errors
/// No partner; incomes at current prices or of other quantities; incomes partly adjusted for season
/// at a frequency within the year; frequencies that differ; weights not annual, of different units,
/// or negative; incomes that are not positive; reference outside the run.
pub fn foreign_income(
    partners: &[Partner<'_>],
    years: WeightYears,
    reference: Reference,
) -> Result<Effective, AlgebraError> {
    const INCOME: &str = "foreign_income";
    for partner in partners {
        let named = |e: AlgebraError| Err(e.with_partner(partner.name));
        let unit = &partner.level.unit;
        let real = matches!(
            (&unit.quantity, &unit.prices),
            (
                Quantity::Money { .. },
                Prices::Constant { .. } | Prices::Chained { .. } | Prices::Deflated { .. }
            ) | (
                Quantity::Index {
                    kind: IndexKind::Volume,
                    ..
                },
                _
            )
        );
        if !real || unit.timing == Timing::FlowYearToDate {
            return named(AlgebraError::unsuitable(
                INCOME,
                unit,
                "foreign income is growth of real income in each partner's own constant prices",
                "Take the partner's income in constant prices, or deflate it first.",
            ));
        }
        if partner.level.frequency() != Frequency::Annual
            && unit.adjustment.is_raw() != partners[0].level.unit.adjustment.is_raw()
        {
            return named(AlgebraError::clash(
                INCOME,
                (&partners[0].level.unit, unit),
                "one is adjusted for season, the other is not",
                "Take all incomes adjusted or all unadjusted.",
            ));
        }
    }
    cumulate(INCOME, partners, years, reference, IndexKind::Volume)
}

/// The chained weighted growth behind both aggregates.
fn cumulate(
    operation: &'static str,
    partners: &[Partner<'_>],
    years: WeightYears,
    reference: Reference,
    kind: IndexKind,
) -> Result<Effective, AlgebraError> {
    let (start, end) = check_partners(operation, partners)?;
    let unit = relative_price_unit(kind, reference.value);
    let unit = partners.iter().fold(unit, |unit, partner| {
        adjusted(unit.clone(), &unit, &partner.level.unit)
    });
    let n = usize::try_from(end.ordinal() - start.ordinal()).unwrap_or(0);
    let nth = |n: usize| i32::try_from(n).ok().and_then(|n| start.plus(n));
    let steps: Vec<Option<Step>> = (1..=n)
        .map(|n| growth_step(partners, years, nth(n)?))
        .collect();
    // The run of unbroken steps around the first period of the reference; a step leads from the
    // period of its own number to the next.
    let wanted = reference.span.at(start.frequency()).map(|(first, _)| first);
    let at = wanted
        .and_then(|p| usize::try_from(p.ordinal() - start.ordinal()).ok())
        .unwrap_or(0)
        .min(n);
    let before = steps[..at].iter().rev().take_while(|s| s.is_some()).count();
    let after = steps[at..].iter().take_while(|s| s.is_some()).count();
    let first = at - before;
    let run: Vec<&Step> = steps[first..at + after].iter().flatten().collect();
    if run.is_empty() {
        return Err(AlgebraError::NotCovered {
            reference: reference.span,
            frequency: start.frequency(),
            missing: wanted,
        });
    }
    let mut log_level = 0.0;
    let mut values = vec![1.0];
    let mut status = vec![Status::Normal];
    for step in &run {
        log_level += step.growth;
        values.push(log_level.exp());
        status.push(step.status);
    }
    let series = Series::with_status(unit, nth(first).unwrap_or(start), values, status);
    let held = |period: &Period| partners.iter().any(|p| p.level.at(*period).is_some());
    Ok(Effective {
        series: rebase(&series, reference.span, reference.value)?,
        coverage: run.iter().map(|step| step.coverage).collect(),
        left_off: (0..first)
            .chain(at + after + 1..=n)
            .filter_map(nth)
            .filter(held)
            .collect(),
    })
}

/// Growth of one period.
struct Step {
    growth: f64,
    status: Status,
    coverage: Coverage,
}

fn growth_step(partners: &[Partner<'_>], years: WeightYears, period: Period) -> Option<Step> {
    let before = period.plus(-1)?;
    let (mut total, mut held, mut sum) = (0.0, 0.0, 0.0);
    let (mut count, mut unweighted, mut status) = (0, 0, Status::Normal);
    for partner in partners {
        let Some(weight) = weight_at(partner.weights, period, years) else {
            unweighted += 1;
            continue;
        };
        total += weight;
        let (Some(now), Some(then)) = (partner.level.at(period), partner.level.at(before)) else {
            continue;
        };
        held += weight;
        sum += weight * (now / then).ln();
        count += 1;
        if let Some(i) = partner.level.position(period) {
            status = status.combine(partner.level.status[i]);
        }
    }
    (held > 0.0).then(|| Step {
        growth: sum / held,
        status,
        coverage: Coverage {
            period,
            partners: count,
            share: held / total,
            unweighted,
        },
    })
}

/// The weight for a period: that of the year before, or the mean of the three years before. Forecasts
/// do not count.
fn weight_at(weights: &Series, period: Period, years: WeightYears) -> Option<f64> {
    let year = period.convert(Frequency::Annual);
    match years {
        WeightYears::One => observed(weights, year.plus(-1)?),
        WeightYears::Three => (1..=3)
            .map(|n| observed(weights, year.plus(-n)?))
            .sum::<Option<f64>>()
            .map(|sum| sum / 3.0),
    }
}

/// Checks frequencies, weights and levels; returns the periods that any partner reaches.
fn check_partners(
    operation: &'static str,
    partners: &[Partner<'_>],
) -> Result<(Period, Period), AlgebraError> {
    let Some(first) = partners.first() else {
        return Err(AlgebraError::Argument {
            name: "partners",
            found: "none".to_owned(),
            expected: "at least one partner".to_owned(),
        });
    };
    let mut extent: Option<(Period, Period)> = None;
    for partner in partners {
        check_partner(operation, first, partner).map_err(|e| e.with_partner(partner.name))?;
        if let Some(end) = partner.level.end() {
            let start = partner.level.start;
            extent = Some(extent.map_or((start, end), |(a, b)| (a.min(start), b.max(end))));
        }
    }
    extent.ok_or_else(|| AlgebraError::NoOverlap {
        operation,
        left: "no period".to_owned(),
        right: "no period".to_owned(),
    })
}

fn check_partner(
    operation: &'static str,
    first: &Partner<'_>,
    partner: &Partner<'_>,
) -> Result<(), AlgebraError> {
    same_frequency(operation, first.level, partner.level)?;
    all_positive(operation, "the level", partner.level)?;
    if partner.weights.frequency() != Frequency::Annual {
        return Err(AlgebraError::Argument {
            name: "weights",
            found: format!("a series of frequency {}", partner.weights.frequency()),
            expected: "an annual series".to_owned(),
        });
    }
    let unit = &partner.weights.unit;
    let usable = unit.quantity == Quantity::Ratio
        || matches!(unit.quantity, Quantity::Money { .. })
            && unit.prices == Prices::Current
            && unit.timing != Timing::FlowYearToDate;
    if !usable {
        return Err(AlgebraError::unsuitable(
            operation,
            unit,
            "weights are ratios or money at current prices",
            "Take trade shares or trade values as weights.",
        ));
    }
    if unit.quantity != first.weights.unit.quantity || unit.timing != first.weights.unit.timing {
        return Err(AlgebraError::clash(
            operation,
            (&first.weights.unit, unit),
            "the weights are of two kinds",
            "Take all weights as ratios, or all as money in one currency.",
        ));
    }
    match partner.weights.values.iter().position(|w| *w < 0.0) {
        None => Ok(()),
        Some(i) => Err(AlgebraError::NotPositive {
            operation,
            what: "a weight".to_owned(),
            place: partner
                .weights
                .period(i)
                .map_or_else(String::new, |p| p.to_string()),
            value: partner.weights.values[i],
        }),
    }
}

/// The currency of a price index.
fn price_currency(operation: &'static str, unit: &Unit) -> Result<CurrencyCode, AlgebraError> {
    if let Quantity::Index {
        kind: IndexKind::Price | IndexKind::UnitValue,
        currency: Some(currency),
        ..
    } = unit.quantity
    {
        Ok(currency)
    } else {
        Err(AlgebraError::unsuitable(
            operation,
            unit,
            "it is not an index of prices in a stated currency",
            "Take a price index with its currency.",
        ))
    }
}

fn relative_price_unit(kind: IndexKind, reference_value: f64) -> Unit {
    Unit {
        quantity: Quantity::Index {
            currency: None,
            kind,
            weights_year: None,
            reference: None,
            reference_value,
        },
        timing: Timing::Average,
        prices: Prices::None,
        adjustment: Adjustment::Raw,
    }
}
