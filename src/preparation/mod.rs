//! Preparations: a document of steps, checked and evaluated on series.
//!
//! ```json
//! { "title": "Real exports of XKA in dollars of 2015",
//!   "outputs": { "A.XKA.exports_real...USD": [
//!     { "take": "Q.XKA.exports" },
//!     { "deflate": { "by": "Q.XKA.export_price", "reference": "2015" } },
//!     { "convert": { "to": "USD", "rates": "M.XKA.exchange_rate...USD", "at": "2015" } },
//!     { "aggregate": { "to": "A", "by": "sum" } } ] } }
//! ```
//!
//! An operand is a series key, of the store or of another output of the document, or
//! `{"take": key, "segment": n}` where a stored series has several segments. A reference is a period
//! (`2015`, `2015-Q1`) or a run (`2010/2012`). The output's key must agree with the result in
//! frequency and currency; no currency in the key is the area's own money.
//!
//! | step | stands | fields | result |
//! |---|---|---|---|
//! | `take` | first | key, beside it `segment` | the series |
//! | `add`, `subtract` | anywhere | list of series | same currency, price basis and timing; chained volumes, indices and rates are refused |
//! | `multiply` | anywhere | list of series | amount × ratio; real amount × its price index = current prices; price × volume index = value index; cross rates |
//! | `divide` | anywhere | list of series | money ÷ money = ratio; current ÷ real = implicit price index (100 in its reference); index ÷ index of one reference = ratio; value ÷ price index = volume index; amount ÷ ratio; cross rates |
//! | `geometric_mean` | first | `of`, `weights` (fixed; default equal) | indices, rates or ratios of one unit; indices keep their reference where it is held |
//! | `link` | first | `target`, `with`, `over` (default: all common periods) | `target` where it reaches, else `with` × mean(target)/mean(with); growth inside each kept |
//! | `foreign_income` | first | `partners` [{`income`, `weights`}], `reference`, `reference_value` (100), `weight_years` (3, or 1) | volume index: Δln = Σ w Δln Y, annual weights of the three years before or of the one, over partners present in both periods |
//! | `real_exchange_rate` | first | `home_price`, `foreign_price`, `rate`, `reference`, `reference_value` | P home / (E · P foreign), E home per foreign: up is a real appreciation |
//! | `real_effective_exchange_rate` | first | `home_price`, `partners` [{`price`, `rate`, `weights`}], `reference`, `reference_value`, `weight_years` (1, or 3) | the same against weighted partners: up is a real appreciation |
//! | `rebase` | later | `reference`, `reference_value` (100) | index ÷ its mean in the reference |
//! | `deflate` | later | `by`, `reference` | current-price money ÷ price index of the same currency, prices of the reference |
//! | `convert` | later | `to`, `rates`, `at` | money or price index in another currency, rate of the same period; real money by the mean rate over `at`, the period of its prices |
//! | `aggregate` | later | `to`, `by` (`sum`, `mean`, `first`, `last`; default by timing), `min_coverage` (means), `ends` (`drop`, `missing`) | lower frequency; sums and means need every sub-period; growth is taken of the aggregate |
//! | `growth` | later | `kind` (`log`, `ratio`), `over` (`period`, `year`), `annualised` | growth as a fraction |
//! | `negate` | later | `{}` | the other sign |

mod agreement;
mod document;
mod evaluation;
mod fault;
mod notes;
mod plan;
mod step;
#[cfg(test)]
mod tests;

use std::collections::BTreeMap;

pub use document::Document;
pub use fault::of_json as json_finding;
pub use plan::{InputInfo, Plan, PlannedOutput, PlannedStep, plan};
pub use step::{IncomePartner, InputRef, PricePartner, Step};

use crate::finding::Finding;
use crate::series::{Series, SeriesKey};

/// Version of the methods behind the steps; a change of any result changes it.
pub const METHOD_VERSION: &str = "2";

/// An evaluated output.
#[derive(Clone, Debug, PartialEq)]
pub struct Output {
    /// Key of the result.
    pub key: SeriesKey,
    /// The result.
    pub series: Series,
    /// Its steps in words.
    pub steps: Vec<String>,
    /// Series that its steps name, from the store or made by the same document, sorted.
    pub inputs: Vec<InputRef>,
    /// Coverage, link factors, periods left off. An error among them makes the result unreliable,
    /// not absent.
    pub notes: Vec<Finding>,
}

/// Evaluates a document, outputs in the order of [`Document::outputs`]. The result does not depend
/// on the order in which the document gives its outputs.
///
/// # Errors
/// Every output that fails, with its JSON pointer; see [`plan()`]. Outputs that depend on a failed
/// one are not reported again.
pub fn evaluate(
    document: &Document,
    inputs: &BTreeMap<InputRef, Series>,
) -> Result<Vec<Output>, Vec<Finding>> {
    let outputs = evaluation::run(document, inputs, std::convert::identity)?;
    Ok(outputs
        .into_iter()
        .filter_map(|output| {
            Some(Output {
                series: output.steps.last()?.series.clone(),
                steps: output.steps.into_iter().map(|s| s.words).collect(),
                key: output.key,
                inputs: output.inputs,
                notes: output.notes,
            })
        })
        .collect())
}
