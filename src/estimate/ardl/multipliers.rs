//! Dynamic multipliers of an ARDL equation.

use super::super::ols::as_f64;
use super::Ardl;
use crate::dist::t_upper;

/// Cumulative response of y to a permanent rise of one regressor by one.
#[derive(Clone, Debug, PartialEq)]
pub struct Multipliers {
    /// Response after 0, 1, 2, … periods.
    pub response: Vec<f64>,
    /// Standard errors by the delta method.
    pub standard_error: Vec<f64>,
    /// Half-width of the band in standard errors: the t quantile at the residual degrees of freedom.
    pub quantile: f64,
}

impl Ardl {
    /// Cumulative dynamic multipliers of regressor `j` (from 0) over `horizon` periods, with bands at a
    /// confidence of `1 − level`.
    ///
    /// `m_h = Σ_{i=1}^{min(p,h)} φ_i m_{h−i} + Σ_{i=0}^{min(q,h)} β_i`, from the coefficients in levels; standard errors by the
    /// delta method with the exact gradient, which follows the same recursion. Converges to the long-run
    /// coefficient where the equation is stable. `None` for a regressor that does not exist.
    ///
    /// Shin, Yu & Greenwood-Nimmo 2014 (linear case).
    #[must_use]
    pub fn multipliers(&self, j: usize, horizon: usize, level: f64) -> Option<Multipliers> {
        let (p, q) = (self.orders.p, *self.orders.q.get(j)?);
        let first = p + self.orders.q[..j].iter().map(|q| q + 1).sum::<usize>();
        let phi = &self.levels[..p];
        let beta = &self.levels[first..=first + q];
        let k = self.levels.len();
        let mut response: Vec<f64> = Vec::new();
        let mut gradients: Vec<Vec<f64>> = Vec::new();
        for h in 0..=horizon {
            let mut m: f64 = beta[..=q.min(h)].iter().sum();
            let mut gradient = vec![0.0; k];
            gradient[first..=first + q.min(h)].fill(1.0);
            for i in 1..=p.min(h) {
                m += phi[i - 1] * response[h - i];
                gradient[i - 1] += response[h - i];
                for (g, past) in gradient.iter_mut().zip(&gradients[h - i]) {
                    *g += phi[i - 1] * past;
                }
            }
            response.push(m);
            gradients.push(gradient);
        }
        let v = &self.levels_covariance;
        let variance = |g: &Vec<f64>| -> f64 {
            let row = |a: usize| (0..k).map(|b| v.at(a, b) * g[b]).sum::<f64>();
            (0..k).map(|a| g[a] * row(a)).sum()
        };
        Some(Multipliers {
            standard_error: gradients
                .iter()
                .map(|g| variance(g).max(0.0).sqrt())
                .collect(),
            response,
            quantile: t_upper(level / 2.0, as_f64(self.ecm.df)),
        })
    }
}
