//! Simulated economies with known elasticities.

use realterms::estimate::Regressor;
use realterms::random::Draws;

/// How imports and exports come about: `ln M = π ln Y + ½ ln Rm + u`, `ln X = 1.5 ln Z − 0.4 ln Rx + v`, both errors
/// `u_t = ρ u_{t−1} + e_t`; incomes are random walks with drift, relative prices random walks.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Economy {
    /// What is special about it.
    pub(crate) name: &'static str,
    /// Income elasticity of imports.
    pub(crate) pi: f64,
    /// Autocorrelation of the errors; at 1 there is no cointegration.
    pub(crate) rho: f64,
    /// Standard deviation of e.
    pub(crate) noise: f64,
    /// Correlation of e with the change of income in the same equation.
    pub(crate) correlation: f64,
}

/// Income elasticity of exports.
pub(crate) const EPSILON: f64 = 1.5;

const BASE: Economy = Economy {
    name: "exogenous",
    pi: 1.8,
    rho: 0.5,
    noise: 0.03,
    correlation: 0.0,
};

/// The five economies.
pub(crate) const ECONOMIES: [Economy; 5] = [
    BASE,
    Economy {
        name: "correlated with Δy",
        correlation: 0.5,
        ..BASE
    },
    Economy {
        name: "ρ = 0.8",
        rho: 0.8,
        ..BASE
    },
    Economy {
        name: "no cointegration",
        rho: 1.0,
        ..BASE
    },
    Economy {
        name: "low π with noise",
        pi: 0.6,
        noise: 0.09,
        ..BASE
    },
];

/// One draw.
#[derive(Clone, Debug)]
pub(crate) struct Sample {
    pub(crate) imports: Regressor,
    pub(crate) exports: Regressor,
    /// `ln Y`, `ln Rm`, `ln Z`, `ln Rx`.
    pub(crate) drivers: Vec<Regressor>,
}

impl Economy {
    /// n observations, after 50 periods for the errors to settle.
    pub(crate) fn draw(&self, n: usize, draws: &mut Draws) -> Sample {
        const SETTLE: usize = 50;
        let (mut levels, mut errors) = ([0.0; 4], [0.0; 2]);
        let mut series: [Vec<f64>; 6] = Default::default();
        for t in 0..SETTLE + n {
            let shock: [f64; 6] = std::array::from_fn(|_| draws.normal());
            let steps = [
                0.03 + 0.02 * shock[0],
                0.03 * shock[1],
                0.035 + 0.015 * shock[2],
                0.03 * shock[3],
            ];
            // An error that never settles starts at zero.
            if t >= SETTLE || self.rho < 1.0 {
                let share = (1.0 - self.correlation.powi(2)).sqrt();
                for (i, error) in errors.iter_mut().enumerate() {
                    let own = share * shock[4 + i] + self.correlation * shock[2 * i];
                    *error = self.rho * *error + self.noise * own;
                }
            }
            if t < SETTLE {
                continue;
            }
            for (level, step) in levels.iter_mut().zip(steps) {
                *level += step;
            }
            let [y, rm, z, rx] = levels;
            let demand = [
                self.pi * y + 0.5 * rm + errors[0],
                EPSILON * z - 0.4 * rx + errors[1],
            ];
            for (series, value) in series.iter_mut().zip(levels.iter().chain(&demand)) {
                series.push(*value);
            }
        }
        let [y, rm, z, rx, m, x] = series;
        Sample {
            imports: Regressor::new("m", m),
            exports: Regressor::new("x", x),
            drivers: [("y", y), ("rm", rm), ("z", z), ("rx", rx)]
                .map(|(name, values)| Regressor::new(name, values))
                .to_vec(),
        }
    }
}

/// Mean change of a series, log growth per period.
pub(crate) fn mean_growth(series: &Regressor) -> f64 {
    let v = &series.values;
    (v[v.len() - 1] - v[0]) / (v.len() - 1) as f64
}
