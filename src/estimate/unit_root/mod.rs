//! Tests for a unit root and for stationarity.
//!
//! Start reading at [`adf`]. Series are named, so that faults can name them; a missing value is an
//! error. Where no response surface exists (DF-GLS, Zivot–Andrews, Phillips–Perron's `Z_α`), p-values
//! come from simulation at the exact size: [`super::simulate_unit_root`].

mod adf;
mod df_gls;
mod kpss;
mod mackinnon;
mod phillips_perron;
mod zivot_andrews;

#[cfg(test)]
mod tests;

pub use adf::{Adf, LagCriterion, Lags, adf, dickey_fuller_regression, schwert_lags};
pub use df_gls::{DfGls, df_gls};
pub use kpss::{Kpss, KpssLags, PBound, kpss};
pub use mackinnon::{CriticalValues, mackinnon_critical, mackinnon_p};
pub use phillips_perron::{PhillipsPerron, phillips_perron};
pub use zivot_andrews::{Break, ZivotAndrews, zivot_andrews};
