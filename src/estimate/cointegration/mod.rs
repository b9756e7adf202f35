//! Cointegration: Engle–Granger, Johansen, and the vector error-correction model.

mod engle_granger;
mod hypotheses;
mod johansen;
mod rank_null;
mod vecm;

#[cfg(test)]
mod tests;

pub use engle_granger::{EngleGranger, engle_granger};
pub use hypotheses::LikelihoodRatio;
pub use johansen::{Johansen, JohansenCase, JohansenRows, RankTest, johansen};
pub use rank_null::{RankDesign, RankNull, simulate_rank};
pub use vecm::{RelationErrors, Vecm};
