//! Choice of the orders of an ARDL equation over the full grid.

use super::super::SeriesError;
use super::super::ols::as_f64;
use super::super::series_error::differences;
use super::{ArdlData, ArdlOrders};
use crate::estimate::Deterministic;
use crate::linalg::{Projector, decompose, product};

/// Criterion by which orders are compared; k counts the regressors and not the variance.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum InformationCriterion {
    /// `n ln(2π ssr/n) + n + 2 k`.
    Aic,
    /// `n ln(2π ssr/n) + n + k ln n`.
    Bic,
}

/// One equation of the grid.
#[derive(Clone, Debug, PartialEq)]
pub struct Candidate {
    /// Orders.
    pub orders: ArdlOrders,
    /// The criterion on the common sample.
    pub criterion: f64,
}

/// The result of a search.
#[derive(Clone, Debug, PartialEq)]
pub struct Selection {
    /// The best equations, best first, at most five.
    pub best: Vec<Candidate>,
    /// Equations compared.
    pub compared: usize,
    /// Equations of the grid that leave fewer than `max(10, n/3)` degrees of freedom: no candidates.
    pub too_large: usize,
    /// Equations of the grid with linearly dependent terms: no candidates.
    pub collinear: usize,
    /// Rows n of the common sample, all that the longest lags leave.
    pub observations: usize,
}

const KEPT: usize = 5;

/// Compares all orders `1 ≤ p ≤ max_p`, `0 ≤ q_j ≤ max_q[j]` on one common sample.
///
/// Equations with `n − k < max(10, n/3)` are not candidates. Refit the chosen orders on all their rows
/// with [`super::Ardl::fit`]. All columns are first reduced by one QR to a square problem; equations
/// then differ by a column in a walk over the grid.
///
/// Reference value: Danish money demand, at most 5 lags each, constant, n = 50: AIC chooses
/// (5, 0, 3, 5) at −254.0345357782 (statsmodels 0.15.0, every equation fitted by itself).
///
/// # Errors
/// [`SeriesError`]; an option error where no equation of the grid is a candidate.
pub fn select_orders(
    data: &ArdlData<'_>,
    max_p: usize,
    max_q: &[usize],
    deterministic: Deterministic,
    criterion: InformationCriterion,
) -> Result<Selection, SeriesError> {
    data.check()?;
    if max_p == 0 || max_q.len() != data.x.len() {
        return Err(SeriesError::Option {
            method: "ARDL",
            fault: format!(
                "the most lags are at least 1 for y and one number for each of {} regressors",
                data.x.len()
            ),
        });
    }
    let most = ArdlOrders {
        p: max_p,
        q: max_q.to_vec(),
    };
    let skip = most.longest();
    let total = data.y.values.len();
    let n = total.saturating_sub(skip);
    if n < 12 {
        return Err(SeriesError::TooShort {
            series: data.y.name.clone(),
            observations: total,
            needed: skip + 12,
        });
    }
    let base = deterministic.terms() + data.fixed.len();
    let reduced = Reduced::new(data, deterministic, skip, &most, base);
    let mut walk = Walk {
        reduced: &reduced,
        most: &most,
        criterion,
        n,
        // Degrees of freedom left are at least max(10, n/3).
        largest: n - 10.max(n.div_ceil(3)),
        order: vec![0; max_q.len()],
        p: 0,
        selection: Selection {
            best: Vec::new(),
            compared: 0,
            too_large: 0,
            collinear: 0,
            observations: n,
        },
    };
    walk.run(base, &data.y.name)?;
    if walk.selection.best.is_empty() {
        return Err(SeriesError::TooShort {
            series: data.y.name.clone(),
            observations: total,
            needed: skip + 10 + base + 1 + max_q.len(),
        });
    }
    Ok(walk.selection)
}

/// All columns of the grid, rotated so that their common length is their number.
struct Reduced {
    base: Vec<Vec<f64>>,
    y_lags: Vec<Vec<f64>>,
    x_lags: Vec<Vec<Vec<f64>>>,
    y: Vec<f64>,
}

impl Reduced {
    fn new(
        data: &ArdlData<'_>,
        deterministic: Deterministic,
        skip: usize,
        most: &ArdlOrders,
        base: usize,
    ) -> Self {
        let rows = data.y.values.len() - skip;
        // Changes instead of lagged levels span the same spaces in the order of the walk and are far
        // better conditioned: level first, then its changes.
        let walk_columns = |values: &[f64], from: usize, count: usize| -> Vec<Vec<f64>> {
            let level = |lag: usize| &values[skip - lag..skip - lag + rows];
            let mut columns = vec![level(from).to_vec()];
            columns
                .extend((from..from + count).map(|lag| differences_of(level(lag), level(lag + 1))));
            columns
        };
        let mut all: Vec<Vec<f64>> = deterministic
            .columns(rows)
            .into_iter()
            .map(|c| c.values)
            .chain(data.fixed.iter().map(|f| f.values[skip..].to_vec()))
            .collect();
        all.extend(walk_columns(&data.y.values, 1, most.p - 1));
        for (x, &q) in data.x.iter().zip(&most.q) {
            all.extend(walk_columns(&x.values, 0, q));
        }
        all.push(differences(&data.y.values[skip - 1..]));
        let matrix = decompose::from_columns(&all);
        let r = decompose::triangular(&matrix);
        let mut columns = (0..all.len()).map(|j| decompose::column(&r, j));
        let mut take = |count: usize| columns.by_ref().take(count).collect::<Vec<_>>();
        Self {
            base: take(base),
            y_lags: take(most.p),
            x_lags: most.q.iter().map(|q| take(q + 1)).collect(),
            y: take(1).swap_remove(0),
        }
    }
}

fn differences_of(later: &[f64], earlier: &[f64]) -> Vec<f64> {
    later.iter().zip(earlier).map(|(a, b)| a - b).collect()
}

struct Walk<'a> {
    reduced: &'a Reduced,
    most: &'a ArdlOrders,
    criterion: InformationCriterion,
    n: usize,
    largest: usize,
    order: Vec<usize>,
    p: usize,
    selection: Selection,
}

impl Walk<'_> {
    fn run(&mut self, base: usize, series: &str) -> Result<(), SeriesError> {
        let reduced = self.reduced;
        let mut projector = Projector::new(reduced.y.len());
        for column in &reduced.base {
            if projector.push(column).is_none() {
                return Err(SeriesError::Collinear {
                    series: series.to_owned(),
                    terms: vec!["deterministic and fixed terms".to_owned()],
                });
            }
        }
        let mut y = reduced.y.clone();
        projector.residuals(&mut y);
        let grid: usize = self.most.q.iter().map(|q| q + 1).product();
        for p in 1..=self.most.p {
            let left = (self.most.p - p + 1) * grid;
            // One level a regressor is still to come.
            if projector.len() + 1 + reduced.x_lags.len() > self.largest {
                self.selection.too_large += left;
                break;
            }
            if projector.push(&reduced.y_lags[p - 1]).is_none() {
                self.selection.collinear += left;
                break;
            }
            projector.remove_last(&mut y);
            self.p = p;
            self.descend(&mut projector, &y, 0);
            projector.truncate(base + p);
        }
        Ok(())
    }

    /// Adds the lags of regressor j one by one; below the last regressor an equation is complete.
    fn descend(&mut self, projector: &mut Projector, y: &[f64], j: usize) {
        let reduced = self.reduced;
        let Some(lags) = reduced.x_lags.get(j) else {
            self.judge(projector.len(), product(y, y));
            return;
        };
        let start = projector.len();
        let below: usize = self.most.q[j + 1..].iter().map(|q| q + 1).product();
        let mut y = y.to_vec();
        for (q, column) in lags.iter().enumerate() {
            let left = (lags.len() - q) * below;
            // Columns still to come can only make the equation larger.
            if projector.len() + reduced.x_lags.len() - j > self.largest {
                self.selection.too_large += left;
                break;
            }
            if projector.push(column).is_none() {
                self.selection.collinear += left;
                break;
            }
            projector.remove_last(&mut y);
            self.order[j] = q;
            self.descend(projector, &y, j + 1);
            projector.truncate(start + q + 1);
        }
        projector.truncate(start);
    }

    fn judge(&mut self, k: usize, ssr: f64) {
        self.selection.compared += 1;
        let (n, size) = (as_f64(self.n), as_f64(k));
        let penalty = match self.criterion {
            InformationCriterion::Aic => 2.0,
            InformationCriterion::Bic => n.ln(),
        };
        let criterion = n * (2.0 * std::f64::consts::PI * ssr / n).ln() + n + penalty * size;
        let best = &mut self.selection.best;
        // Earlier equations, which have fewer lags, win ties.
        let place = best.partition_point(|c| c.criterion <= criterion);
        if place < KEPT {
            best.insert(
                place,
                Candidate {
                    orders: ArdlOrders {
                        p: self.p,
                        q: self.order.clone(),
                    },
                    criterion,
                },
            );
            best.truncate(KEPT);
        }
    }
}
