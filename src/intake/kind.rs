//! The kinds of upload: which columns and measures each may hold.

use serde::Serialize;
use utoipa::ToSchema;

use super::column::{Cell, Column};
use super::measure::{self, Measure};

/// What a kind of upload may hold.
#[derive(Clone, Debug, PartialEq, Serialize, ToSchema)]
pub struct KindSpec {
    /// Name, as the parameter `kind` takes it.
    pub name: &'static str,
    /// Short title.
    pub title: &'static str,
    /// What it is for.
    pub description: &'static str,
    /// Columns, in the order of the template.
    pub columns: Vec<ColumnSpec>,
    /// Measures that the column `measure` may name.
    pub measures: Vec<MeasureSpec>,
}

/// One column of a kind.
#[derive(Clone, Debug, PartialEq, Serialize, ToSchema)]
pub struct ColumnSpec {
    /// Name in the header and of the query parameter.
    pub name: &'static str,
    /// Whether the file must have it, unless a query parameter stands for it.
    pub required: bool,
    /// Whether a query parameter may stand for it.
    pub constant_allowed: bool,
    /// What it means, with its default.
    pub description: &'static str,
    /// The words it may hold; empty where it is not a list.
    pub values: Vec<&'static str>,
    /// An example cell.
    pub example: &'static str,
}

/// One measure of a kind.
#[derive(Clone, Debug, PartialEq, Serialize, ToSchema)]
pub struct MeasureSpec {
    /// Name in the column `measure` and in series keys.
    pub name: &'static str,
    /// Title for people.
    pub title: &'static str,
    /// Coverage and concept, where it matters: goods or services, customs or balance of payments,
    /// f.o.b. or c.i.f.
    pub concept: &'static str,
    /// What its numbers are.
    pub unit: &'static str,
    /// How they relate to the length of the period.
    pub timing: &'static str,
    /// Which price bases are accepted.
    pub prices: &'static str,
}

/// A kind as the reader uses it. A column is followed by whether it is required.
#[derive(Debug)]
pub(super) struct Kind {
    pub name: &'static str,
    title: &'static str,
    description: &'static str,
    pub columns: &'static [(Column, bool)],
    pub measures: &'static [Measure],
}

use Column as C;

const AMOUNTS: &[(Column, bool)] = &[
    (C::Area, true),
    (C::Measure, true),
    (C::Partner, false),
    (C::Product, false),
    (C::Currency, true),
    (C::OwnCurrency, false),
    (C::Source, false),
    (C::Adjustment, false),
    (C::Frequency, false),
    (C::Flow, false),
    (C::Prices, false),
    (C::PriceReference, false),
    (C::UnitMultiplier, false),
    (C::Period, true),
    (C::Value, true),
    (C::Status, false),
];

const INDICES: &[(Column, bool)] = &[
    (C::Area, true),
    (C::Measure, true),
    (C::Partner, false),
    (C::Product, false),
    (C::Currency, false),
    (C::OwnCurrency, false),
    (C::Source, false),
    (C::Adjustment, false),
    (C::Frequency, false),
    (C::Reference, false),
    (C::ReferenceValue, false),
    (C::IndexKind, false),
    (C::WeightsYear, false),
    (C::UnitMultiplier, false),
    (C::Period, true),
    (C::Value, true),
    (C::Status, false),
];

const RATES: &[(Column, bool)] = &[
    (C::Area, true),
    (C::Measure, false),
    (C::Currency, true),
    (C::OwnCurrency, false),
    (C::Source, false),
    (C::Frequency, false),
    (C::Quotation, false),
    (C::RateType, false),
    (C::RateTiming, false),
    (C::UnitMultiplier, false),
    (C::Period, true),
    (C::Value, true),
    (C::Status, false),
];

const WEIGHTS: &[(Column, bool)] = &[
    (C::Area, true),
    (C::Measure, true),
    (C::Partner, true),
    (C::Product, false),
    (C::Source, false),
    (C::Frequency, false),
    (C::UnitMultiplier, false),
    (C::Period, true),
    (C::Value, true),
    (C::Status, false),
];

const RATIOS: &[(Column, bool)] = &[
    (C::Area, true),
    (C::Measure, true),
    (C::Partner, false),
    (C::Product, false),
    (C::Source, false),
    (C::Adjustment, false),
    (C::Frequency, false),
    (C::UnitMultiplier, false),
    (C::Period, true),
    (C::Value, true),
    (C::Status, false),
];

static KINDS: [Kind; 6] = [
    Kind {
        name: "trade",
        title: "Trade",
        description: "Exports and imports, nominal or real, by partner and product where wanted",
        columns: AMOUNTS,
        measures: measure::TRADE,
    },
    Kind {
        name: "price_index",
        title: "Price and other indices",
        description: "Prices, unit values and volumes against a reference period",
        columns: INDICES,
        measures: measure::PRICE_INDEX,
    },
    Kind {
        name: "income",
        title: "Income and expenditure",
        description: "Gross domestic product and other aggregates of the national accounts, nominal \
                      or real",
        columns: AMOUNTS,
        measures: measure::INCOME,
    },
    Kind {
        name: "exchange_rate",
        title: "Exchange rates",
        description: "Prices of other currencies in the area's own money; currency names the other \
                      one",
        columns: RATES,
        measures: measure::EXCHANGE_RATE,
    },
    Kind {
        name: "weights",
        title: "Trade weights",
        description: "How much each partner counts in averages over partners",
        columns: WEIGHTS,
        measures: measure::WEIGHTS,
    },
    Kind {
        name: "ratio",
        title: "Ratios",
        description: "Shares and ratios as pure numbers; unit_multiplier -2 for per cent",
        columns: RATIOS,
        measures: measure::RATIO,
    },
];

impl Kind {
    pub(super) fn find(name: &str) -> Option<&'static Self> {
        KINDS.iter().find(|k| k.name == name)
    }

    pub(super) fn names() -> impl Iterator<Item = &'static str> {
        KINDS.iter().map(|k| k.name)
    }

    pub(super) fn column(&self, name: &str) -> Option<Column> {
        self.columns
            .iter()
            .map(|(c, _)| *c)
            .find(|c| c.name().eq_ignore_ascii_case(name))
    }

    pub(super) fn column_names(&self) -> Vec<&'static str> {
        self.columns.iter().map(|(c, _)| c.name()).collect()
    }

    /// Name of the kind that has this measure.
    pub(super) fn of_measure(name: &str) -> Option<&'static str> {
        let has = |k: &&Self| k.measures.iter().any(|m| m.name == name);
        KINDS.iter().find(has).map(|k| k.name)
    }

    pub(super) fn measure_names(&self) -> Vec<&'static str> {
        self.measures.iter().map(|m| m.name).collect()
    }

    fn spec(&self) -> KindSpec {
        let columns = self.columns.iter().map(|(column, required)| {
            let spec = column.spec();
            ColumnSpec {
                name: spec.name,
                required: *required,
                constant_allowed: column.may_be_constant(),
                description: spec.description,
                values: match spec.cell {
                    Cell::OneOf(words) => words.to_vec(),
                    Cell::Measure => self.measure_names(),
                    Cell::Code
                    | Cell::Currency
                    | Cell::Span
                    | Cell::Year
                    | Cell::Positive
                    | Cell::PowerOfTen
                    | Cell::Observation => Vec::new(),
                },
                example: if *column == Column::Measure {
                    self.measures[0].name
                } else {
                    spec.example
                },
            }
        });
        KindSpec {
            name: self.name,
            title: self.title,
            description: self.description,
            columns: columns.collect(),
            measures: self.measures.iter().map(Measure::spec).collect(),
        }
    }
}

/// Every kind of upload.
#[must_use]
pub fn kinds() -> Vec<KindSpec> {
    KINDS.iter().map(Kind::spec).collect()
}

/// A CSV file of the kind with a header and no row; `None` for an unknown kind.
#[must_use]
pub fn template_csv(kind: &str) -> Option<String> {
    Kind::find(kind).map(|k| k.column_names().join(",") + "\n")
}
