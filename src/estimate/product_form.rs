//! Constrained growth as a ratio of products of error-correction coefficients, without division by the
//! speeds of adjustment.

use super::ols::as_f64;
use super::{Ardl, EstimatedRatio, QuickArdl};
use crate::linalg::{Matrix, product};

/// Coefficients of the error-correction forms of import and export demand.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ProductCoefficients {
    /// Adjustment of imports `φ_m`, negative in a healthy equation.
    pub phi_m: f64,
    /// Lagged home income `b_y`.
    pub b_y: f64,
    /// Lagged `ln Rm`, `b_rm`.
    pub b_rm: f64,
    /// Adjustment of exports `φ_x`.
    pub phi_x: f64,
    /// Lagged foreign income `c_z`.
    pub c_z: f64,
    /// Lagged `ln Rx`, `c_rx`.
    pub c_rx: f64,
}

/// Mean growth rates that a form takes as given, log growth per period as a fraction.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ProductGrowth {
    /// Terms of trade `px − pm`; for `InflowTiedToIncome` `θ px + (1 − θ) p_Y − pm`.
    pub terms_of_trade: f64,
    /// `rm = ph − pm`.
    pub rm: f64,
    /// `rx = px − pc`.
    pub rx: f64,
    /// Foreign income.
    pub z: f64,
    /// Exports as observed.
    pub x: f64,
}

/// Forms of the law of constrained growth.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum ProductForm {
    /// `x/π`.
    Weak,
    /// `(x + tt − η rm)/π`.
    WeakWithPrices,
    /// `ε z/π`.
    Strong,
    /// `(tt − η rm − η* rx + ε z)/π`.
    WithRelativePrices,
    /// `(tt − η rm + θ (ε z − η* rx))/(π − (1 − θ))`: an inflow that grows with nominal income.
    InflowTiedToIncome {
        /// Share of exports in receipts.
        theta: f64,
    },
}

/// A ratio N/D of products with the covariance of N and D by gradient.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ProductRatio {
    /// N.
    pub numerator: f64,
    /// D, positive in a healthy economy.
    pub denominator: f64,
    /// Variance of N.
    pub v_nn: f64,
    /// Covariance of N and D.
    pub v_nd: f64,
    /// Variance of D.
    pub v_dd: f64,
    /// The denominator of the undivided form (π, or `π − (1 − θ)`): where it is not positive the rate has
    /// no economic meaning.
    pub undivided_denominator: f64,
}

impl ProductRatio {
    /// The ratio of two refitted equations whose first two regressors are income and relative price, on one sample.
    ///
    /// Joint covariance `σ_ij (X_i'X_i)⁻¹ X_i'X_j (X_j'X_j)⁻¹`, `σ_ij = e_i'e_j/√((n − k_i)(n − k_j))`, as
    /// [`super::covariance()`] gives it for independent errors.
    #[must_use]
    pub fn of_equations(
        imports: &QuickArdl,
        exports: &QuickArdl,
        form: ProductForm,
        growth: &ProductGrowth,
    ) -> Self {
        let coefficients = ProductCoefficients {
            phi_m: imports.adjustment(),
            b_y: imports.level(0),
            b_rm: imports.level(1),
            phi_x: exports.adjustment(),
            c_z: exports.level(0),
            c_rx: exports.level(1),
        };
        let influences = [imports.influences(2), exports.influences(2)].concat();
        let fits = [&imports.fit, &exports.fit];
        let sigma = |i: usize, j: usize| {
            let df = as_f64(fits[i].df()) * as_f64(fits[j].df());
            product(&fits[i].residuals, &fits[j].residuals) / df.sqrt()
        };
        let v = Matrix::from_fn(6, 6, |i, j| {
            sigma(i / 3, j / 3) * product(&influences[i], &influences[j])
        });
        coefficients.ratio(form, growth, &v)
    }

    /// The ratio for which [`EstimatedRatio`] has intervals.
    #[must_use]
    pub fn estimated(&self) -> EstimatedRatio {
        EstimatedRatio {
            numerator: self.numerator,
            denominator: self.denominator,
            v_nn: self.v_nn,
            v_nd: self.v_nd,
            v_dd: self.v_dd,
        }
    }
}

impl ProductCoefficients {
    /// From two equations, by the names of the regressors; `None` where a name or an equation lacks one.
    ///
    /// Lagged levels are found as `name.L1`, or `name.L0` where the order is 0.
    #[must_use]
    pub fn from_equations(
        imports: &Ardl,
        income: &str,
        rm: &str,
        exports: &Ardl,
        foreign_income: &str,
        rx: &str,
    ) -> Option<Self> {
        let level = |equation: &Ardl, name: &str| {
            let at = |lag: &str| equation.ecm.coefficient(&format!("{name}.{lag}"));
            at("L1").or_else(|| at("L0"))
        };
        Some(Self {
            phi_m: imports.adjustment,
            b_y: level(imports, income)?,
            b_rm: level(imports, rm)?,
            phi_x: exports.adjustment,
            c_z: level(exports, foreign_income)?,
            c_rx: level(exports, rx)?,
        })
    }

    /// N and D of a form and their covariance `g V g'`, V the 6 × 6 covariance of the coefficients in the order
    /// of this struct.
    ///
    /// Multiplied by `−φ_m` (forms without an export equation) or `φ_m φ_x` (others): weak `−φ_m x̄`,
    /// `b_y`; strong `−φ_m c_z z̄`, `−φ_x b_y`; with prices `φ_m φ_x tt + φ_x b_rm rm − φ_m (c_z z̄ + c_rx rx)`, `−φ_x b_y`; inflow
    /// likewise with `θ` before the export terms, `−φ_x b_y − (1 − θ) φ_m φ_x`. Growth rates are held fixed.
    /// Intervals: [`ProductRatio::estimated`].
    #[must_use]
    pub fn ratio(&self, form: ProductForm, growth: &ProductGrowth, v: &Matrix) -> ProductRatio {
        let Self {
            phi_m,
            b_y,
            b_rm,
            phi_x,
            c_z,
            c_rx,
        } = *self;
        let g = growth;
        let pi = -b_y / phi_m;
        let with_exports = |tt: f64, rm: f64, rx: f64, theta: f64| {
            let exports = theta * (c_z * g.z + c_rx * rx);
            let n = phi_m * phi_x * tt + phi_x * b_rm * rm - phi_m * exports;
            let gradient = [
                phi_x * tt - exports,
                0.0,
                phi_x * rm,
                phi_m * tt + b_rm * rm,
                -phi_m * theta * g.z,
                -phi_m * theta * rx,
            ];
            (n, gradient)
        };
        let product = (-phi_x * b_y, [0.0, -phi_x, 0.0, -b_y, 0.0, 0.0]);
        let income = (b_y, [0.0, 1.0, 0.0, 0.0, 0.0, 0.0]);
        let ((n, dn), (d, dd), undivided) = match form {
            ProductForm::Weak => ((-phi_m * g.x, [-g.x, 0.0, 0.0, 0.0, 0.0, 0.0]), income, pi),
            ProductForm::WeakWithPrices => {
                let value = g.x + g.terms_of_trade;
                let n = -phi_m * value - b_rm * g.rm;
                ((n, [-value, 0.0, -g.rm, 0.0, 0.0, 0.0]), income, pi)
            }
            ProductForm::Strong => (with_exports(0.0, 0.0, 0.0, 1.0), product, pi),
            ProductForm::WithRelativePrices => {
                (with_exports(g.terms_of_trade, g.rm, g.rx, 1.0), product, pi)
            }
            ProductForm::InflowTiedToIncome { theta } => {
                let rest = 1.0 - theta;
                let d = -phi_x * b_y - rest * phi_m * phi_x;
                let dd = [-rest * phi_x, -phi_x, 0.0, -b_y - rest * phi_m, 0.0, 0.0];
                (
                    with_exports(g.terms_of_trade, g.rm, g.rx, theta),
                    (d, dd),
                    pi - rest,
                )
            }
        };
        let form = |a: &[f64; 6], b: &[f64; 6]| -> f64 {
            (0..6)
                .map(|i| (0..6).map(|j| a[i] * v.at(i, j) * b[j]).sum::<f64>())
                .sum()
        };
        ProductRatio {
            numerator: n,
            denominator: d,
            v_nn: form(&dn, &dn),
            v_nd: form(&dn, &dd),
            v_dd: form(&dd, &dd),
            undivided_denominator: undivided,
        }
    }
}

#[cfg(test)]
mod tests {
    use approx::assert_relative_eq;

    use super::super::test_data::penn;
    use super::super::{ArdlData, ArdlOrders, BoundsCase, CovarianceKind, covariance};
    use super::*;

    const C: ProductCoefficients = ProductCoefficients {
        phi_m: -0.4,
        b_y: 0.7,
        b_rm: 0.2,
        phi_x: -0.25,
        c_z: 0.5,
        c_rx: -0.15,
    };
    const G: ProductGrowth = ProductGrowth {
        terms_of_trade: 0.01,
        rm: -0.02,
        rx: 0.015,
        z: 0.035,
        x: 0.06,
    };
    const FORMS: [ProductForm; 5] = [
        ProductForm::Weak,
        ProductForm::WeakWithPrices,
        ProductForm::Strong,
        ProductForm::WithRelativePrices,
        ProductForm::InflowTiedToIncome { theta: 0.8 },
    ];

    fn unit() -> Matrix {
        Matrix::from_fn(6, 6, |i, j| if i == j { 1e-4 } else { 2e-5 })
    }

    /// The undivided forms of the published laws, from `π = −b_y/φ_m`, `η = −b_rm/φ_m`,
    /// `ε = −c_z/φ_x`, `η* = c_rx/φ_x`.
    #[test]
    fn the_ratio_is_the_published_law() {
        let (pi, eta) = (-C.b_y / C.phi_m, -C.b_rm / C.phi_m);
        let (epsilon, eta_star) = (-C.c_z / C.phi_x, C.c_rx / C.phi_x);
        let exports = epsilon * G.z - eta_star * G.rx;
        let prices = G.terms_of_trade - eta * G.rm;
        let expected = [
            G.x / pi,
            (G.x + prices) / pi,
            epsilon * G.z / pi,
            (prices + exports) / pi,
            (prices + 0.8 * exports) / (pi - 0.2),
        ];
        for (form, wanted) in FORMS.into_iter().zip(expected) {
            let ratio = C.ratio(form, &G, &unit());
            assert_relative_eq!(
                ratio.numerator / ratio.denominator,
                wanted,
                max_relative = 1e-13
            );
            assert!(ratio.denominator > 0.0 && ratio.undivided_denominator > 0.0);
        }
        let one = ProductForm::InflowTiedToIncome { theta: 1.0 };
        assert_eq!(
            C.ratio(one, &G, &unit()),
            C.ratio(ProductForm::WithRelativePrices, &G, &unit())
        );
    }

    /// Refitted equations give what the full ones do, joint covariance included.
    #[test]
    fn refitted_equations_give_the_same_ratio() {
        let (m, x) = (penn("BRA", "ln_m"), penn("BRA", "ln_x"));
        let imports = ["ln_y", "ln_rpm"].map(|s| penn("BRA", s));
        let exports = ["ln_z", "ln_rpx"].map(|s| penn("BRA", s));
        let [data_m, data_x] =
            [(&m, &imports), (&x, &exports)].map(|(y, x)| ArdlData { y, x, fixed: &[] });
        let orders = [vec![1, 0], vec![1, 1]].map(|q| ArdlOrders { p: 1, q });
        let slow = [(&data_m, 0), (&data_x, 1)]
            .map(|(data, i)| Ardl::fit(data, orders[i].clone(), BoundsCase::III).unwrap());
        let quick = [(&data_m, 0), (&data_x, 1)]
            .map(|(data, i)| QuickArdl::fit(data, &orders[i], BoundsCase::III, 1).unwrap());
        let coefficients = ProductCoefficients::from_equations(
            &slow[0], "ln_y", "ln_rpm", &slow[1], "ln_z", "ln_rpx",
        )
        .unwrap();
        let all = covariance(&[&slow[0].ecm, &slow[1].ecm], CovarianceKind::Classical).unwrap();
        let k = slow[0].ecm.k;
        let places = [1, 2, 3, k + 1, k + 2, k + 3];
        let v = Matrix::from_fn(6, 6, |i, j| all.at(places[i], places[j]));
        for form in FORMS {
            let found = ProductRatio::of_equations(&quick[0], &quick[1], form, &G).estimated();
            let wanted = coefficients.ratio(form, &G, &v).estimated();
            for (found, wanted) in [
                (found.numerator, wanted.numerator),
                (found.denominator, wanted.denominator),
                (found.v_nn, wanted.v_nn),
                (found.v_nd, wanted.v_nd),
                (found.v_dd, wanted.v_dd),
            ] {
                assert_relative_eq!(found, wanted, max_relative = 1e-8);
            }
        }
    }

    /// Gradients against central differences.
    #[test]
    fn covariances_follow_the_gradient() {
        let v = unit();
        let moved = |i: usize, h: f64| {
            let mut all = [C.phi_m, C.b_y, C.b_rm, C.phi_x, C.c_z, C.c_rx];
            all[i] += h;
            let [phi_m, b_y, b_rm, phi_x, c_z, c_rx] = all;
            ProductCoefficients {
                phi_m,
                b_y,
                b_rm,
                phi_x,
                c_z,
                c_rx,
            }
        };
        for form in FORMS {
            let slope = |part: fn(&ProductRatio) -> f64| -> Vec<f64> {
                let at = |i, h| part(&moved(i, h).ratio(form, &G, &v));
                (0..6)
                    .map(|i| (at(i, 1e-5) - at(i, -1e-5)) / 2e-5)
                    .collect()
            };
            let (dn, dd) = (slope(|r| r.numerator), slope(|r| r.denominator));
            let product = |a: &[f64], b: &[f64]| -> f64 {
                (0..6)
                    .map(|i| (0..6).map(|j| a[i] * v.at(i, j) * b[j]).sum::<f64>())
                    .sum()
            };
            let ratio = C.ratio(form, &G, &v);
            assert_relative_eq!(ratio.v_nn, product(&dn, &dn), max_relative = 1e-7);
            assert_relative_eq!(ratio.v_nd, product(&dn, &dd), max_relative = 1e-7);
            assert_relative_eq!(ratio.v_dd, product(&dd, &dd), max_relative = 1e-7);
        }
    }
}
