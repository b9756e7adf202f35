//! From descriptive cells to the identity and unit of a series.

use std::collections::BTreeSet;

use super::column::Column;
use super::kind::Kind;
use super::measure::Form;
use super::number;
use super::settings::Context;
use crate::finding::{Finding, counted};
use crate::series::algebra::Span;
use crate::series::{
    Adjustment, CurrencyCode, IndexKind, Prices, Quantity, RateTiming, RateType, Timing, Unit,
};
use crate::time::Frequency;

/// Descriptive cells of a row with constants filled in, by column; empty where not given.
pub(super) struct Texts(pub [String; Column::COUNT]);

impl Texts {
    fn get(&self, column: Column) -> &str {
        &self.0[column as usize]
    }

    fn currency(&self, column: Column) -> Option<CurrencyCode> {
        CurrencyCode::parse(self.get(column)).ok()
    }
}

/// What the descriptive cells of a row say.
#[derive(Clone, Debug)]
pub(super) struct Described {
    /// Places 1 to 7 of the series key.
    pub places: [String; 7],
    pub unit: Unit,
    /// Power of ten that values are multiplied by.
    pub multiplier: i32,
    /// The frequency, where stated.
    pub frequency: Option<Frequency>,
    pub bound: Bound,
    /// The area's own money, where stated or known.
    pub own: Option<CurrencyCode>,
    /// The known own money of the area that the row contradicts.
    pub contradicted: Option<CurrencyCode>,
    /// The currency that stands in the key because the area's own money is not known.
    pub unplaced: Option<CurrencyCode>,
}

/// Values that a measure may take.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Bound {
    Any,
    NotNegative,
    Positive,
}

/// Reads the cells of one kind; each is checked by itself first, then against the others.
pub(super) fn describe(
    kind: &Kind,
    measures: &[&'static str],
    texts: &Texts,
    context: &Context,
) -> Result<Described, Box<Finding>> {
    for (column, required) in kind.columns {
        let text = texts.get(*column);
        if !text.is_empty() {
            column.check(text, measures, Some(context))?;
        } else if *required && column.may_be_constant() {
            let name = column.name();
            return Err(Box::new(
                Finding::error("empty_cell", format!("{name} is required and empty"))
                    .at_column(name)
                    .expected(column.spec().description)
                    .remedy(format!(
                        "fill the cell, or state it for the whole file: {name}=…"
                    )),
            ));
        }
    }
    let wanted = texts.get(Column::Measure);
    // Only a kind of one measure lets the column be absent.
    let measure = kind.measures.iter().find(|m| m.name == wanted);
    let measure = measure.unwrap_or(&kind.measures[0]);

    let known = context.own_money.get(texts.get(Column::Area)).copied();
    let stated = texts.currency(Column::OwnCurrency);
    let own = stated.or(known);
    let currency = texts.currency(Column::Currency);
    let prices = prices(measure.form, measure.name, texts)?;
    let quantity = match measure.form {
        Form::Nominal | Form::Real => match currency {
            Some(currency) => Quantity::Money { currency },
            None => return Err(not_applicable(Column::Currency, "money needs a currency")),
        },
        Form::Index(implied) => index(implied, texts, currency, own)?,
        Form::Rate => rate(texts, currency, own)?,
        Form::Weight | Form::Ratio => Quantity::Ratio,
    };
    let place = match (measure.form, currency) {
        (Form::Rate, Some(foreign)) => foreign.to_string(),
        (_, Some(c)) if Some(c) != own => c.to_string(),
        _ => String::new(),
    };
    let code = match texts.get(Column::Adjustment) {
        "N" => "",
        code => code,
    };
    let timing = match (measure.form, texts.get(Column::Flow)) {
        (Form::Nominal | Form::Real, "annual_rate") => Timing::FlowAnnualRate,
        (Form::Nominal | Form::Real, "year_to_date") => Timing::FlowYearToDate,
        (Form::Nominal | Form::Real, _) => Timing::Flow,
        (Form::Index(_) | Form::Rate | Form::Weight | Form::Ratio, _) => Timing::Average,
    };
    Ok(Described {
        places: [
            texts.get(Column::Area).to_owned(),
            measure.name.to_owned(),
            texts.get(Column::Partner).to_owned(),
            texts.get(Column::Product).to_owned(),
            place,
            texts.get(Column::Source).to_owned(),
            code.to_owned(),
        ],
        unit: Unit {
            quantity,
            timing,
            prices,
            adjustment: match code {
                "S" | "Y" => Adjustment::SeasonallyAdjusted("source".to_owned()),
                // W removes working-day effects and leaves the seasons in.
                _ => Adjustment::Raw,
            },
        },
        multiplier: texts.get(Column::UnitMultiplier).parse().unwrap_or(0),
        frequency: Frequency::from_code(texts.get(Column::Frequency)),
        bound: match measure.form {
            Form::Nominal | Form::Real | Form::Weight => Bound::NotNegative,
            Form::Index(_) | Form::Rate => Bound::Positive,
            Form::Ratio => Bound::Any,
        },
        own,
        contradicted: known.filter(|_| own != known),
        unplaced: currency.filter(|_| own.is_none()),
    })
}

/// An area's own money is known as another than the file says.
pub(super) fn currency_contradicted(area: &str, stated: &str, known: CurrencyCode) -> Finding {
    Finding::error(
        "currency_contradicted",
        format!("the file says that the own money of {area} is {stated}; it is known as {known}"),
    )
    .at_column(Column::OwnCurrency.name())
    .found(stated)
    .expected(known.to_string())
    .remedy(format!(
        "correct own_currency, or accept the upload if {area} has changed its money"
    ))
}

/// A currency stands in the keys of areas whose own money is not known: it may be theirs.
pub(super) fn own_money_unknown(currency: CurrencyCode, areas: &BTreeSet<String>) -> Finding {
    let mut named: Vec<&str> = areas.iter().take(10).map(String::as_str).collect();
    if named.len() < areas.len() {
        named.push("others");
    }
    Finding::notice(
        "own_money_unknown",
        format!(
            "{currency} stands in the series keys of {}, whose own money is not known",
            named.join(", ")
        ),
    )
    .at_column(Column::OwnCurrency.name())
    .found(counted(areas.len(), "area"))
    .remedy(format!(
        "where {currency} is an area's own money, send its rows with own_currency={currency}"
    ))
}

fn not_applicable(column: Column, why: &str) -> Box<Finding> {
    Box::new(
        Finding::error(
            "not_applicable",
            format!("{} does not fit: {why}", column.name()),
        )
        .at_column(column.name())
        .remedy("empty the cell or drop the parameter, or correct what it does not fit"),
    )
}

/// A period or span in the one notation that units keep.
fn reference(text: &str) -> Option<String> {
    text.parse::<Span>().ok().map(|s| s.to_string())
}

fn prices(form: Form, measure: &str, texts: &Texts) -> Result<Prices, Box<Finding>> {
    let basis = texts.get(Column::Prices);
    let price_reference = reference(texts.get(Column::PriceReference));
    let wrong = |expected: &str, remedy: String| {
        Box::new(
            Finding::error(
                "wrong_prices",
                format!("{measure} cannot stand at prices '{basis}'"),
            )
            .at_column(Column::Prices.name())
            .found(basis)
            .expected(expected)
            .remedy(remedy),
        )
    };
    let prices = match (form, basis) {
        (Form::Nominal, "" | "current") => Prices::Current,
        (Form::Nominal, _) => {
            let remedy = format!("name the real measure, such as {measure}_real");
            return Err(wrong("current", remedy));
        }
        (Form::Real, "constant") => return Ok(Prices::Constant { price_reference }),
        (Form::Real, "chained") => return Ok(Prices::Chained { price_reference }),
        (Form::Real, "previous_year") => Prices::PreviousYear,
        (Form::Real, _) => {
            let remedy = "state the price basis in the column or parameter prices".to_owned();
            return Err(wrong("constant, chained or previous_year", remedy));
        }
        (Form::Index(_) | Form::Rate | Form::Weight | Form::Ratio, _) => Prices::None,
    };
    if price_reference.is_some() {
        let why = "only constant and chained prices have a price reference";
        return Err(not_applicable(Column::PriceReference, why));
    }
    Ok(prices)
}

fn index(
    implied: IndexKind,
    texts: &Texts,
    currency: Option<CurrencyCode>,
    own: Option<CurrencyCode>,
) -> Result<Quantity, Box<Finding>> {
    let prices = implied != IndexKind::Volume;
    let kind = match texts.get(Column::IndexKind) {
        "" => implied,
        "price" if prices => IndexKind::Price,
        "unit_value" if prices => IndexKind::UnitValue,
        "volume" if !prices => IndexKind::Volume,
        _ => {
            let why = if prices {
                "the measure is one of prices: price or unit_value"
            } else {
                "the measure is one of volumes: volume"
            };
            return Err(not_applicable(Column::IndexKind, why));
        }
    };
    let currency = match (kind, currency) {
        (IndexKind::Volume, Some(_)) => {
            return Err(not_applicable(Column::Currency, "volumes have no currency"));
        }
        (IndexKind::Volume, None) => None,
        (_, stated) => stated.or(own),
    };
    let reference_value = texts.get(Column::ReferenceValue);
    Ok(Quantity::Index {
        currency,
        kind,
        weights_year: texts.get(Column::WeightsYear).parse().ok(),
        reference: reference(texts.get(Column::Reference)),
        reference_value: number::parse(reference_value, 0, &mut String::new()).unwrap_or(100.0),
    })
}

fn rate(
    texts: &Texts,
    currency: Option<CurrencyCode>,
    own: Option<CurrencyCode>,
) -> Result<Quantity, Box<Finding>> {
    let area = texts.get(Column::Area);
    let (Some(foreign), Some(own)) = (currency, own) else {
        return Err(Box::new(
            Finding::error(
                "own_money_needed",
                format!("the own money of {area} is not known"),
            )
            .at_column(Column::OwnCurrency.name())
            .expected("the currency of the area")
            .remedy("state it in the column or parameter own_currency"),
        ));
    };
    if foreign == own {
        return Err(Box::new(
            Finding::error("same_currency", format!("{own} is the own money of {area}"))
                .at_column(Column::Currency.name())
                .found(foreign.to_string())
                .expected("another currency than the area's own")
                .remedy(
                    "name the currency that is priced; own_currency is the one it is priced in",
                ),
        ));
    }
    let (numerator, denominator) = match texts.get(Column::Quotation) {
        "indirect" => (foreign, own),
        _ => (own, foreign),
    };
    Ok(Quantity::Rate {
        numerator,
        denominator,
        rate_type: match texts.get(Column::RateType) {
            "commercial" => RateType::Commercial,
            "parallel" => RateType::Parallel,
            "transaction_weighted" => RateType::TransactionWeighted,
            _ => RateType::Official,
        },
        rate_timing: match texts.get(Column::RateTiming) {
            "end" => RateTiming::End,
            _ => RateTiming::Average,
        },
    })
}
