//! The accounting identity of the balance of payments, its published forms, and intervals for them.
//!
//! Receipts equal payments; every published law of constrained growth is a choice of items. Start
//! reading at [`balance`], then [`Form`] (the laws a study can ask for) and [`Ratio::interval`].
//! Growth rates here are log growth per period as a fraction; prices are in home currency.

mod affine;
mod forms;
mod identity;
mod interval;

#[cfg(test)]
mod tests;

pub use affine::Affine;
pub use forms::{
    Economy, ExportDemand, Form, ImportDemand, by_sector, capital_flows, constant_deficit_ratio,
    debt_service,
};
pub use identity::{ConstraintError, Item, Ratio, balance};
pub use interval::IntervalMethod;

pub use crate::estimate::Region;
