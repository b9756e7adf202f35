//! Published laws as choices of items.

use serde::{Deserialize, Serialize};
use utoipa::ToSchema;

use super::{Affine, ConstraintError, Item, Ratio, balance};

/// Growth of exports by demand, `x = αx + ε z − η* rx`, and their price.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct ExportDemand {
    /// `px`, growth of export prices.
    pub price: f64,
    /// `αx`, growth that neither income nor prices explain.
    pub autonomous: Affine,
    /// `ε`, income elasticity.
    pub income_elasticity: Affine,
    /// `z`, growth of foreign income.
    pub foreign_income: f64,
    /// `η*`, price elasticity with respect to `1/Rx`, expected positive.
    pub price_elasticity: Affine,
    /// `rx`, growth of export prices over competitors'.
    pub relative_price: f64,
}

impl ExportDemand {
    fn item(&self, share: f64) -> Item {
        let volume = self.autonomous.clone() + self.income_elasticity.clone() * self.foreign_income
            - self.price_elasticity.clone() * self.relative_price;
        Item::given(share, volume + self.price.into())
    }

    /// The same at constant prices.
    fn at_constant_prices(&self) -> Self {
        Self {
            price: 0.0,
            relative_price: 0.0,
            ..self.clone()
        }
    }
}

/// Growth of imports by demand, `m = αm + π y + η rm`, and their price.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct ImportDemand {
    /// `pm`, growth of import prices.
    pub price: f64,
    /// `αm`, growth that neither income nor prices explain.
    pub autonomous: Affine,
    /// `π`, income elasticity.
    pub income_elasticity: Affine,
    /// `η`, price elasticity with respect to `Rm`, expected positive.
    pub price_elasticity: Affine,
    /// `rm`, growth of home prices over import prices.
    pub relative_price: f64,
}

impl ImportDemand {
    fn item(&self, share: f64) -> Item {
        let volume = self.autonomous.clone() + self.price_elasticity.clone() * self.relative_price;
        Item {
            share,
            a: volume + self.price.into(),
            kappa: self.income_elasticity.clone(),
        }
    }

    /// The same at constant prices.
    fn at_constant_prices(&self) -> Self {
        Self {
            price: 0.0,
            relative_price: 0.0,
            ..self.clone()
        }
    }
}

/// The laws that a study can ask for.
#[derive(
    Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize, ToSchema,
)]
#[serde(rename_all = "snake_case")]
pub enum Form {
    /// `x/π`: observed export growth over the income elasticity of imports (Thirlwall 1979; named by
    /// Perraton 2003).
    WeakForm,
    /// `(x + tt − η rm)/π`: the same with the terms of trade and the price response of imports.
    WeakFormWithPrices,
    /// `ε z/π`: exports by their demand at constant prices (Thirlwall 1979).
    StrongForm,
    /// `(tt − η rm − η* rx + ε z)/π` (Thirlwall 1979, with three relative prices).
    WithRelativePrices,
}

/// What the forms take from the data: averages over the sample, and the coefficients.
///
/// Growth of prices is relative to import prices (`px = tt`, `pm = 0`), which changes nothing since
/// one inflation rate in every price cancels.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Economy {
    /// `x`, observed growth of real exports.
    pub exports: f64,
    /// `z`, growth of foreign income.
    pub foreign_income: f64,
    /// `tt = px − pm`; absent where not given.
    pub terms_of_trade: Option<f64>,
    /// `rm`; absent where import demand has no relative price.
    pub import_relative_price: Option<f64>,
    /// `rx`; absent where export demand has no relative price.
    pub export_relative_price: Option<f64>,
    /// `π`.
    pub import_income_elasticity: Affine,
    /// `ε`.
    pub export_income_elasticity: Affine,
    /// `η`, expected positive; 0 without relative price.
    pub import_price_elasticity: Affine,
    /// `η*`, expected positive; 0 without relative price.
    pub export_price_elasticity: Affine,
    /// `αm`; 0 where the equation has none.
    pub import_autonomous: Affine,
    /// `αx`; 0 where the equation has none.
    pub export_autonomous: Affine,
}

impl Form {
    /// All of them, in the order of tables.
    pub const ALL: [Self; 4] = [
        Self::WeakForm,
        Self::WeakFormWithPrices,
        Self::StrongForm,
        Self::WithRelativePrices,
    ];

    /// The name used in documents and results.
    #[must_use]
    pub fn code(self) -> &'static str {
        match self {
            Self::WeakForm => "weak_form",
            Self::WeakFormWithPrices => "weak_form_with_prices",
            Self::StrongForm => "strong_form",
            Self::WithRelativePrices => "with_relative_prices",
        }
    }

    /// Whether the form uses the equation of export demand.
    #[must_use]
    pub fn uses_export_demand(self) -> bool {
        matches!(self, Self::StrongForm | Self::WithRelativePrices)
    }

    fn uses_prices(self) -> bool {
        matches!(self, Self::WeakFormWithPrices | Self::WithRelativePrices)
    }

    /// The rate that balances trade. With `autonomous`, growth that the equations leave to their
    /// constants enters too: `αx − αm`, or `−αm` where exports are taken as observed.
    ///
    /// # Errors
    /// [`ConstraintError`], among them [`ConstraintError::NotGiven`] where the form needs a relative
    /// price that the economy does not give.
    pub fn solve(self, economy: &Economy, autonomous: bool) -> Result<Ratio, ConstraintError> {
        let (mut exports, mut imports) = economy.demands();
        if self.uses_prices() {
            self.require_prices(economy)?;
        } else {
            exports = exports.at_constant_prices();
            imports = imports.at_constant_prices();
        }
        if !autonomous {
            exports.autonomous = Affine::default();
            imports.autonomous = Affine::default();
        }
        let receipts = if self.uses_export_demand() {
            exports.item(1.0)
        } else {
            Item::given(1.0, economy.exports + exports.price)
        };
        balance(&[receipts], &[imports.item(1.0)])
    }

    /// What relative prices add to the rate at constant prices: `(tt − η rm − η* rx)/π` where
    /// exports follow demand, `(tt − η rm)/π` where they are taken as observed.
    ///
    /// # Errors
    /// As [`Form::solve`] of the form with prices.
    pub fn relative_price_effect(self, economy: &Economy) -> Result<Ratio, ConstraintError> {
        self.require_prices(economy)?;
        let (mut exports, mut imports) = economy.demands();
        exports.autonomous = Affine::default();
        imports.autonomous = Affine::default();
        exports.foreign_income = 0.0;
        let receipts = if self.uses_export_demand() {
            exports.item(1.0)
        } else {
            Item::given(1.0, exports.price)
        };
        balance(&[receipts], &[imports.item(1.0)])
    }

    fn require_prices(self, economy: &Economy) -> Result<(), ConstraintError> {
        let mut needed = Vec::new();
        if economy.terms_of_trade.is_none() {
            needed.push("the terms of trade");
        }
        if economy.import_relative_price.is_none() {
            needed.push("a relative price of imports");
        }
        if self.uses_export_demand() && economy.export_relative_price.is_none() {
            needed.push("a relative price of exports");
        }
        if needed.is_empty() {
            Ok(())
        } else {
            Err(ConstraintError::NotGiven { needed })
        }
    }
}

impl Economy {
    fn demands(&self) -> (ExportDemand, ImportDemand) {
        let exports = ExportDemand {
            price: self.terms_of_trade.unwrap_or(0.0),
            autonomous: self.export_autonomous.clone(),
            income_elasticity: self.export_income_elasticity.clone(),
            foreign_income: self.foreign_income,
            price_elasticity: self.export_price_elasticity.clone(),
            relative_price: self.export_relative_price.unwrap_or(0.0),
        };
        let imports = ImportDemand {
            price: 0.0,
            autonomous: self.import_autonomous.clone(),
            income_elasticity: self.import_income_elasticity.clone(),
            price_elasticity: self.import_price_elasticity.clone(),
            relative_price: self.import_relative_price.unwrap_or(0.0),
        };
        (exports, imports)
    }
}

/// Exports pay a share `theta` of imports, a net financial inflow of given nominal growth the rest
/// (Thirlwall & Hussain 1982).
///
/// # Errors
/// [`ConstraintError`].
pub fn capital_flows(
    exports: &ExportDemand,
    imports: &ImportDemand,
    theta: f64,
    inflow_growth: f64,
) -> Result<Ratio, ConstraintError> {
    let receipts = [exports.item(theta), Item::given(1.0 - theta, inflow_growth)];
    balance(&receipts, &[imports.item(1.0)])
}

/// Exports pay a share `theta` of imports, an inflow tied to nominal income the rest (Moreno-Brid 1998).
///
/// The inflow stays a constant share of income, whose price grows by `income_price`. The law does not
/// test whether the debt that builds up can be carried.
///
/// # Errors
/// [`ConstraintError`].
pub fn constant_deficit_ratio(
    exports: &ExportDemand,
    imports: &ImportDemand,
    theta: f64,
    income_price: f64,
) -> Result<Ratio, ConstraintError> {
    let inflow = Item::tied_to_income(1.0 - theta, income_price);
    balance(&[exports.item(theta), inflow], &[imports.item(1.0)])
}

/// The constant deficit ratio with net interest paid abroad (Moreno-Brid 2003): `exports_share` and
/// `interest_share` are values over the value of imports, `interest_growth` is nominal.
///
/// Receipts are exports `θ₁` and the inflow `1 − θ₁ + θ₂`, payments imports 1 and interest `θ₂`, all
/// over `1 + θ₂`.
///
/// # Errors
/// [`ConstraintError`].
pub fn debt_service(
    exports: &ExportDemand,
    imports: &ImportDemand,
    exports_share: f64,
    interest_share: f64,
    interest_growth: f64,
    income_price: f64,
) -> Result<Ratio, ConstraintError> {
    let total = 1.0 + interest_share;
    let inflow = (1.0 - exports_share + interest_share) / total;
    let receipts = [
        exports.item(exports_share / total),
        Item::tied_to_income(inflow, income_price),
    ];
    let payments = [
        imports.item(1.0 / total),
        Item::given(interest_share / total, interest_growth),
    ];
    balance(&receipts, &payments)
}

/// Several exports and imports, each with its share in value and a demand of its own: by sector
/// (Araujo & Lima 2007) or by partner (Nell 2003).
///
/// # Errors
/// [`ConstraintError`].
pub fn by_sector(
    exports: &[(f64, ExportDemand)],
    imports: &[(f64, ImportDemand)],
) -> Result<Ratio, ConstraintError> {
    let receipts: Vec<Item> = exports.iter().map(|(share, d)| d.item(*share)).collect();
    let payments: Vec<Item> = imports.iter().map(|(share, d)| d.item(*share)).collect();
    balance(&receipts, &payments)
}
