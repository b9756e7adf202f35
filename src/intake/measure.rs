//! What can be measured, by kind of upload.

use super::kind::MeasureSpec;
use crate::series::IndexKind;

/// A measure and the form of its numbers.
#[derive(Debug)]
pub(super) struct Measure {
    pub name: &'static str,
    title: &'static str,
    concept: &'static str,
    pub form: Form,
}

/// The form of a measure's numbers, from which unit, timing, price basis and bounds follow.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Form {
    /// Money at current prices, not negative.
    Nominal,
    /// Money at constant, chained or previous-year prices, not negative.
    Real,
    /// A positive index.
    Index(IndexKind),
    /// A positive exchange rate.
    Rate,
    /// A pure number, not negative.
    Weight,
    /// Any pure number.
    Ratio,
}

const fn m(name: &'static str, title: &'static str, concept: &'static str, form: Form) -> Measure {
    Measure {
        name,
        title,
        concept,
        form,
    }
}

const BOTH: &str = "goods and services; balance of payments";
const GOODS: &str = "goods; balance of payments, f.o.b.";
const SERVICES: &str = "services; balance of payments";
const NATIONAL: &str = "national accounts";
const PRICE: Form = Form::Index(IndexKind::Price);
const UNIT_VALUE: Form = Form::Index(IndexKind::UnitValue);
const VOLUME: Form = Form::Index(IndexKind::Volume);
const LEVEL: &str = "price level against a base country, as in the Penn World Table";

pub(super) const TRADE: &[Measure] = &[
    m("exports", "Exports", BOTH, Form::Nominal),
    m("imports", "Imports", BOTH, Form::Nominal),
    m("exports_goods", "Exports of goods", GOODS, Form::Nominal),
    m("imports_goods", "Imports of goods", GOODS, Form::Nominal),
    m(
        "exports_services",
        "Exports of services",
        SERVICES,
        Form::Nominal,
    ),
    m(
        "imports_services",
        "Imports of services",
        SERVICES,
        Form::Nominal,
    ),
    m(
        "exports_goods_customs",
        "Exports of goods",
        "goods; customs, f.o.b.",
        Form::Nominal,
    ),
    m(
        "imports_goods_customs",
        "Imports of goods",
        "goods; customs, c.i.f.",
        Form::Nominal,
    ),
    m("exports_real", "Real exports", BOTH, Form::Real),
    m("imports_real", "Real imports", BOTH, Form::Real),
    m(
        "exports_goods_real",
        "Real exports of goods",
        GOODS,
        Form::Real,
    ),
    m(
        "imports_goods_real",
        "Real imports of goods",
        GOODS,
        Form::Real,
    ),
    m(
        "exports_services_real",
        "Real exports of services",
        SERVICES,
        Form::Real,
    ),
    m(
        "imports_services_real",
        "Real imports of services",
        SERVICES,
        Form::Real,
    ),
];

pub(super) const INCOME: &[Measure] = &[
    m("gdp", "Gross domestic product", NATIONAL, Form::Nominal),
    m(
        "gdp_real",
        "Real gross domestic product",
        NATIONAL,
        Form::Real,
    ),
    m(
        "gross_domestic_income",
        "Gross domestic income",
        NATIONAL,
        Form::Nominal,
    ),
    m(
        "gross_domestic_income_real",
        "Real gross domestic income",
        NATIONAL,
        Form::Real,
    ),
    m(
        "gross_national_income",
        "Gross national income",
        NATIONAL,
        Form::Nominal,
    ),
    m(
        "gross_national_income_real",
        "Real gross national income",
        NATIONAL,
        Form::Real,
    ),
    m(
        "domestic_demand",
        "Domestic demand",
        NATIONAL,
        Form::Nominal,
    ),
    m(
        "domestic_demand_real",
        "Real domestic demand",
        NATIONAL,
        Form::Real,
    ),
    m(
        "private_consumption",
        "Private consumption",
        NATIONAL,
        Form::Nominal,
    ),
    m(
        "private_consumption_real",
        "Real private consumption",
        NATIONAL,
        Form::Real,
    ),
    m(
        "disposable_income",
        "Disposable income",
        "households; national accounts",
        Form::Nominal,
    ),
    m(
        "disposable_income_real",
        "Real disposable income",
        "households; national accounts",
        Form::Real,
    ),
    m(
        "world_income_real",
        "Real income of the world or of a group",
        "sum over countries of real gross domestic product",
        Form::Real,
    ),
    m(
        "gdp_output_side",
        "Output-side gross domestic product",
        "at current purchasing-power parities: comparable between countries, not over time",
        Form::Nominal,
    ),
];

pub(super) const PRICE_INDEX: &[Measure] = &[
    m("export_price", "Export prices", "goods and services", PRICE),
    m("import_price", "Import prices", "goods and services", PRICE),
    m(
        "export_unit_value",
        "Export unit values",
        "goods",
        UNIT_VALUE,
    ),
    m(
        "import_unit_value",
        "Import unit values",
        "goods",
        UNIT_VALUE,
    ),
    m("consumer_price", "Consumer prices", "households", PRICE),
    m("producer_price", "Producer prices", "industry", PRICE),
    m(
        "gdp_deflator",
        "Deflator of gross domestic product",
        NATIONAL,
        PRICE,
    ),
    m(
        "consumption_price",
        "Deflator of private consumption",
        NATIONAL,
        PRICE,
    ),
    m(
        "domestic_price",
        "Prices of home substitutes for imports",
        "as the source defines them",
        PRICE,
    ),
    m("export_price_level", "Price level of exports", LEVEL, PRICE),
    m("import_price_level", "Price level of imports", LEVEL, PRICE),
    m(
        "gdp_price_level",
        "Price level of gross domestic product",
        LEVEL,
        PRICE,
    ),
    m(
        "consumption_price_level",
        "Price level of consumption",
        LEVEL,
        PRICE,
    ),
    m("export_volume", "Export volumes", "goods", VOLUME),
    m("import_volume", "Import volumes", "goods", VOLUME),
    m(
        "industrial_production",
        "Industrial production",
        "industry",
        VOLUME,
    ),
];

pub(super) const EXCHANGE_RATE: &[Measure] = &[m(
    "exchange_rate",
    "Exchange rate",
    "nominal, between two currencies",
    Form::Rate,
)];

pub(super) const WEIGHTS: &[Measure] = &[
    m(
        "export_weight",
        "Export weight",
        "partner's weight in exports",
        Form::Weight,
    ),
    m(
        "import_weight",
        "Import weight",
        "partner's weight in imports",
        Form::Weight,
    ),
    m(
        "trade_weight",
        "Trade weight",
        "partner's weight in trade",
        Form::Weight,
    ),
];

pub(super) const RATIO: &[Measure] = &[
    m(
        "export_share_of_gdp",
        "Exports over gross domestic product",
        "values",
        Form::Ratio,
    ),
    m(
        "import_share_of_gdp",
        "Imports over gross domestic product",
        "values",
        Form::Ratio,
    ),
    m(
        "trade_openness",
        "Exports and imports over gross domestic product",
        "values",
        Form::Ratio,
    ),
    m(
        "trade_balance_ratio",
        "Trade balance over gross domestic product",
        "values",
        Form::Ratio,
    ),
    m(
        "current_account_ratio",
        "Current account balance over gross domestic product",
        "values",
        Form::Ratio,
    ),
    m(
        "financial_inflow_ratio",
        "Net financial inflow over gross domestic product",
        "values",
        Form::Ratio,
    ),
];

impl Measure {
    pub(super) fn spec(&self) -> MeasureSpec {
        let money =
            "money, not negative, in the currency named, in whole units after the unit multiplier";
        let flow =
            "flow: an amount per period, at annual rate, or since the year began (column flow)";
        let level = "average: a level over the period";
        let none = "does not apply";
        let (unit, timing, prices) = match self.form {
            Form::Nominal => (money, flow, "current"),
            Form::Real => (money, flow, "constant, chained or previous_year"),
            Form::Index(IndexKind::Price) => ("price index, above zero", level, none),
            Form::Index(IndexKind::UnitValue) => ("unit value index, above zero", level, none),
            Form::Index(IndexKind::Volume) => ("volume index, above zero", level, none),
            Form::Index(IndexKind::Value | IndexKind::ExchangeRate) => {
                ("index, above zero", level, none)
            }
            Form::Rate => (
                "price of one currency in another, above zero; average or end of period (rate_timing)",
                level,
                none,
            ),
            Form::Weight => ("pure number, not negative", level, none),
            Form::Ratio => ("pure number, any sign", level, none),
        };
        MeasureSpec {
            name: self.name,
            title: self.title,
            concept: self.concept,
            unit,
            timing,
            prices,
        }
    }
}
