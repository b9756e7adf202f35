//! The columns that a long table may have, and what a cell of each may hold.

use super::kind::Kind;
use super::nearest::nearest;
use super::number;
use super::settings::Context;
use crate::finding::Finding;
use crate::series::algebra::Span;
use crate::series::{CurrencyCode, is_iso_4217, iso_4217};
use crate::time::Period;

/// A column of a long table.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub(super) enum Column {
    Area,
    Measure,
    Partner,
    Product,
    Currency,
    OwnCurrency,
    Source,
    Adjustment,
    Frequency,
    Flow,
    Prices,
    PriceReference,
    Reference,
    ReferenceValue,
    IndexKind,
    WeightsYear,
    Quotation,
    RateType,
    RateTiming,
    UnitMultiplier,
    Period,
    Value,
    Status,
}

/// What a cell may hold.
#[derive(Clone, Copy, Debug)]
pub(super) enum Cell {
    /// A code that can stand in a series key.
    Code,
    /// A measure of the kind.
    Measure,
    /// A currency of ISO 4217 or a declared one.
    Currency,
    /// One of these words.
    OneOf(&'static [&'static str]),
    /// A period in any notation, or a span of them.
    Span,
    /// A year.
    Year,
    /// A number above zero.
    Positive,
    /// A whole number from −9 to 15.
    PowerOfTen,
    /// Read row by row: period, value and status.
    Observation,
}

/// A column's name, what it means, what its cells hold, and an example.
pub(super) struct Spec {
    pub name: &'static str,
    pub description: &'static str,
    pub cell: Cell,
    pub example: &'static str,
}

/// Lowest and highest power of ten of a unit multiplier.
const MULTIPLIERS: std::ops::RangeInclusive<i32> = -9..=15;
/// Years that an observation, a reference period or weights may have.
pub(super) const YEARS: std::ops::RangeInclusive<i32> = 1500..=2200;

impl Column {
    pub(super) const COUNT: usize = 23;
    pub(super) const ALL: [Self; Self::COUNT] = [
        Self::Area,
        Self::Measure,
        Self::Partner,
        Self::Product,
        Self::Currency,
        Self::OwnCurrency,
        Self::Source,
        Self::Adjustment,
        Self::Frequency,
        Self::Flow,
        Self::Prices,
        Self::PriceReference,
        Self::Reference,
        Self::ReferenceValue,
        Self::IndexKind,
        Self::WeightsYear,
        Self::Quotation,
        Self::RateType,
        Self::RateTiming,
        Self::UnitMultiplier,
        Self::Period,
        Self::Value,
        Self::Status,
    ];

    pub(super) fn name(self) -> &'static str {
        self.spec().name
    }

    /// Whether a query parameter may stand for the column.
    pub(super) fn may_be_constant(self) -> bool {
        !matches!(self.spec().cell, Cell::Observation)
    }

    pub(super) fn spec(self) -> Spec {
        let (name, description, cell, example) = match self {
            Self::Area => (
                "area",
                "Reporting area: ISO 3166-1 code, or a code of your own",
                Cell::Code,
                "XAA",
            ),
            Self::Measure => (
                "measure",
                "What is measured; one of the measures of the kind",
                Cell::Measure,
                "",
            ),
            Self::Partner => (
                "partner",
                "Partner area; empty for all partners together",
                Cell::Code,
                "XAB",
            ),
            Self::Product => (
                "product",
                "Product or industry code; empty for all together",
                Cell::Code,
                "10",
            ),
            Self::Currency => (
                "currency",
                "Currency of the amounts, of the prices measured, or that is priced",
                Cell::Currency,
                "USD",
            ),
            Self::OwnCurrency => (
                "own_currency",
                "The area's own money; amounts in it leave the currency out of the series key",
                Cell::Currency,
                "XAD",
            ),
            Self::Source => (
                "source",
                "Source, where several sources publish the same series",
                Cell::Code,
                "OFFICE_1",
            ),
            Self::Adjustment => (
                "adjustment",
                "Adjustment as in SDMX CL_SEASONAL_ADJUST: N or empty for none, S seasonally adjusted, \
                 W working days only, Y both",
                Cell::OneOf(&["N", "S", "W", "Y"]),
                "S",
            ),
            Self::Frequency => (
                "frequency",
                "Frequency; read from the notation of the period where absent",
                Cell::OneOf(&["A", "S", "Q", "M", "W", "D"]),
                "Q",
            ),
            Self::Flow => (
                "flow",
                "Whether an amount belongs to its period, is stated at annual rate, or is cumulated \
                 since the year began; period where absent",
                Cell::OneOf(&["period", "annual_rate", "year_to_date"]),
                "period",
            ),
            Self::Prices => (
                "prices",
                "Price basis; current where absent, required for real measures",
                Cell::OneOf(&["current", "constant", "chained", "previous_year"]),
                "chained",
            ),
            Self::PriceReference => (
                "price_reference",
                "Period in whose prices constant or chained amounts stand, or first and last of several",
                Cell::Span,
                "2015",
            ),
            Self::Reference => (
                "reference",
                "Reference period of the index, or first and last of several: 1982/1984",
                Cell::Span,
                "2015",
            ),
            Self::ReferenceValue => (
                "reference_value",
                "Value of the index in its reference period; 100 where absent",
                Cell::Positive,
                "100",
            ),
            Self::IndexKind => (
                "index_kind",
                "What the index measures; as the measure implies where absent: price or unit_value for \
                 measures of prices, volume for those of volumes",
                Cell::OneOf(&["price", "unit_value", "volume"]),
                "price",
            ),
            Self::WeightsYear => (
                "weights_year",
                "Year of the index's weights",
                Cell::Year,
                "2015",
            ),
            Self::Quotation => (
                "quotation",
                "direct: own money per unit of the other currency; indirect: the other way round; \
                 direct where absent",
                Cell::OneOf(&["direct", "indirect"]),
                "direct",
            ),
            Self::RateType => (
                "rate_type",
                "Market of the rate; official where absent",
                Cell::OneOf(&["official", "commercial", "parallel", "transaction_weighted"]),
                "official",
            ),
            Self::RateTiming => (
                "rate_timing",
                "Mean over the period or value at its end; average where absent",
                Cell::OneOf(&["average", "end"]),
                "average",
            ),
            Self::UnitMultiplier => (
                "unit_multiplier",
                "Power of ten that the values are to be multiplied by, as SDMX UNIT_MULT: 6 for \
                 millions, -2 for per cent; 0 where absent",
                Cell::PowerOfTen,
                "6",
            ),
            Self::Period => (
                "period",
                "Period: 2020, 2020-S1, 2020-Q1, 2020-01, 2020-W05 or 2020-01-31",
                Cell::Observation,
                "2020-Q1",
            ),
            Self::Value => (
                "value",
                "Number with a decimal point; an empty cell is a missing observation",
                Cell::Observation,
                "123.4",
            ),
            Self::Status => (
                "status",
                "Status as in SDMX CL_OBS_STATUS: A normal, B break, D definition differs, E estimated, \
                 F forecast, I imputed, P provisional, U low reliability; of a missing value O (where \
                 absent), M cannot exist, L not collected, Q suppressed",
                Cell::Observation,
                "A",
            ),
        };
        Spec {
            name,
            description,
            cell,
            example,
        }
    }

    /// Checks a non-empty cell or constant by itself; without a context, not whether a currency
    /// exists. `measures` are those of the kind.
    pub(super) fn check(
        self,
        text: &str,
        measures: &[&'static str],
        context: Option<&Context>,
    ) -> Result<(), Box<Finding>> {
        let spec = self.spec();
        let unfit = |code: &str, expected: &str| {
            Finding::error(code, format!("'{text}' cannot stand for {}", spec.name))
                .at_column(spec.name)
                .found(text)
                .expected(expected)
        };
        let wrong = |code: &str, expected: &str| {
            Box::new(unfit(code, expected).remedy(format!("write {expected}")))
        };
        match spec.cell {
            Cell::Code => {
                let good = text.len() <= 64
                    && text
                        .bytes()
                        .all(|b| b.is_ascii_alphanumeric() || b == b'_' || b == b'-');
                let expected = "at most 64 letters, digits, _ and -";
                good.then_some(())
                    .ok_or_else(|| wrong("not_a_code", expected))
            }
            Cell::Measure => {
                if measures.contains(&text) {
                    return Ok(());
                }
                let unknown = unfit("unknown_measure", &measures.join(", "));
                if let Some(kind) = Kind::of_measure(text) {
                    let remedy = format!("{text} is a measure of kind={kind}; send it as that");
                    return Err(Box::new(unknown.remedy(remedy)));
                }
                Err(suggest(
                    unknown,
                    &nearest(text, measures.iter().copied(), 3),
                ))
            }
            Cell::Currency => known_currency(text, spec.name, context),
            Cell::OneOf(words) => {
                if words.contains(&text) {
                    return Ok(());
                }
                Err(suggest(
                    unfit("unknown_word", &words.join(", ")),
                    &nearest(text, words.iter().copied(), 1),
                ))
            }
            Cell::Span => {
                let span = text.parse::<Span>();
                let good = span.is_ok_and(|s| {
                    YEARS.contains(&year(s.first())) && YEARS.contains(&year(s.last()))
                });
                good.then_some(()).ok_or_else(|| {
                    let expected =
                        "a period such as 2015 or 2015-Q1, or first and last such as 1982/1984";
                    wrong("wrong_period", expected)
                })
            }
            Cell::Year => {
                let good = text.len() == 4 && text.parse().is_ok_and(|y| YEARS.contains(&y));
                good.then_some(())
                    .ok_or_else(|| wrong("wrong_period", "a year such as 2015"))
            }
            Cell::Positive => {
                let value = number::parse(text, 0, &mut String::new());
                let good = value.is_ok_and(|v| v > 0.0);
                good.then_some(())
                    .ok_or_else(|| wrong("not_positive", "a number above zero such as 100"))
            }
            Cell::PowerOfTen => {
                let good = text.parse().is_ok_and(|p| MULTIPLIERS.contains(&p));
                good.then_some(()).ok_or_else(|| {
                    let expected =
                        "a power of ten as a whole number from -9 to 15, such as 6 for millions";
                    wrong("wrong_multiplier", expected)
                })
            }
            Cell::Observation => Ok(()),
        }
    }
}

/// The calendar year in which a period begins.
fn year(period: Period) -> i32 {
    period.first_day().year_month_day().0
}

/// Adds the words that were probably meant.
pub(super) fn suggest(finding: Finding, nearest: &[&str]) -> Box<Finding> {
    Box::new(match nearest {
        [] if finding.remedy.is_none() => finding.remedy("take one of those expected"),
        [] => finding,
        words => finding.remedy(format!("did you mean {}?", words.join(" or "))),
    })
}

fn known_currency(text: &str, column: &str, context: Option<&Context>) -> Result<(), Box<Finding>> {
    let finding = || {
        Finding::error(
            "unknown_currency",
            format!("'{text}' is not a known currency"),
        )
        .at_column(column)
        .found(text)
    };
    let known = || {
        let mut codes: Vec<&str> = iso_4217().collect();
        codes.extend(
            context
                .into_iter()
                .flat_map(|c| &c.declared)
                .map(CurrencyCode::as_str),
        );
        codes
    };
    let near = || match nearest(text, known(), 3).as_slice() {
        [] => "an ISO 4217 code such as USD, or a declared currency".to_owned(),
        words => format!(
            "an ISO 4217 or declared code; nearest: {}",
            words.join(", ")
        ),
    };
    let Ok(code) = CurrencyCode::parse(text) else {
        return Err(Box::new(
            finding()
                .expected(near())
                .remedy("write three capital letters"),
        ));
    };
    if context.is_none_or(|c| is_iso_4217(code) || c.declared.contains(&code)) {
        return Ok(());
    }
    Err(Box::new(finding().expected(near()).remedy(format!(
        "correct the code, or declare the currency with PUT /v1/currencies/{code}"
    ))))
}
