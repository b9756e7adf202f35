//! Counter-based random draws.
//!
//! Every draw is a function of a seed, a stream and its place in the stream (`ChaCha` with 12 rounds:
//! the seed is the key, the stream the nonce, the place the counter). A replication that takes its
//! own number as its stream therefore draws the same numbers whatever the number of threads and in
//! whatever order replications run. Logarithm and cosine come from `libm`, not from the platform.

use std::f64::consts::TAU;

use rand_chacha::ChaCha12Rng;
use rand_chacha::rand_core::{Rng, SeedableRng};

/// A stream of draws.
#[derive(Clone, Debug)]
pub struct Draws {
    generator: ChaCha12Rng,
    /// The second normal deviate of the last Box–Muller pair.
    spare: Option<f64>,
}

impl Draws {
    /// The draws of one stream (a replication, an equation) under a seed, from its start.
    #[must_use]
    pub fn new(seed: u64, stream: u64) -> Self {
        let mut key = [0; 32];
        key[..8].copy_from_slice(&seed.to_le_bytes());
        let mut generator = ChaCha12Rng::from_seed(key);
        generator.set_stream(stream);
        Self {
            generator,
            spare: None,
        }
    }

    /// A draw from the uniform distribution on the open interval (0, 1): the midpoints of 2⁵²
    /// equal cells, so neither bound is ever returned.
    pub fn uniform(&mut self) -> f64 {
        let cell = self.generator.next_u64() >> 12;
        // Exact: 52 bits and the half fit the mantissa, and the divisor is a power of two.
        (cell as f64 + 0.5) / 4_503_599_627_370_496.0
    }

    /// A draw from the standard normal distribution, by the transform of Box & Muller (1958, Annals
    /// of Mathematical Statistics 29(2)): `√(−2 ln u) · cos 2πv` and `… sin 2πv`.
    pub fn normal(&mut self) -> f64 {
        if let Some(spare) = self.spare.take() {
            return spare;
        }
        let radius = (-2.0 * libm::log(self.uniform())).sqrt();
        let (sine, cosine) = libm::sincos(TAU * self.uniform());
        self.spare = Some(radius * sine);
        radius * cosine
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn normals(seed: u64, stream: u64, n: usize) -> Vec<f64> {
        let mut draws = Draws::new(seed, stream);
        (0..n).map(|_| draws.normal()).collect()
    }

    #[test]
    fn a_stream_is_a_function_of_seed_and_number() {
        assert_eq!(normals(7, 3, 50), normals(7, 3, 50));
        assert_ne!(normals(7, 3, 50), normals(7, 4, 50));
        assert_ne!(normals(7, 3, 50), normals(8, 3, 50));
    }

    /// Block 0 of `ChaCha12` with a zero key and nonce begins `9b f4 9a 6a 07 55 f9 53` (test vector
    /// TC1 of draft-strombergson-chacha-test-vectors-01).
    #[test]
    fn the_generator_is_chacha12() {
        let word = u64::from_le_bytes([0x9b, 0xf4, 0x9a, 0x6a, 0x07, 0x55, 0xf9, 0x53]);
        assert_eq!(Draws::new(0, 0).generator.next_u64(), word);
    }

    #[test]
    fn uniform_draws_fill_their_cells_evenly() {
        let mut draws = Draws::new(1, 0);
        let mut cells = [0_u32; 20];
        for _ in 0..100_000 {
            let u = draws.uniform();
            assert!(u > 0.0 && u < 1.0);
            #[expect(clippy::cast_possible_truncation, reason = "0 to 19")]
            let cell = (u * 20.0) as usize;
            cells[cell] += 1;
        }
        let chi2: f64 = cells
            .iter()
            .map(|c| (f64::from(*c) - 5000.0).powi(2) / 5000.0)
            .sum();
        // 0.1 % point of χ²(19).
        assert!(chi2 < 43.8, "{chi2}");
    }

    #[test]
    fn normal_draws_have_the_moments_of_the_normal_distribution() {
        let n = 200_000;
        let sample = normals(1, 1, n);
        let moment = |k: i32| sample.iter().map(|z| z.powi(k)).sum::<f64>() / 200_000.0;
        // Four standard errors: the variance of z^k is E z^2k − (E z^k)².
        let band = |variance: f64| 4.0 * (variance / 200_000.0).sqrt();
        assert!(moment(1).abs() < band(1.0));
        assert!((moment(2) - 1.0).abs() < band(2.0));
        assert!(moment(3).abs() < band(15.0));
        assert!((moment(4) - 3.0).abs() < band(96.0));
        let lagged: f64 = sample.windows(2).map(|w| w[0] * w[1]).sum::<f64>() / 200_000.0;
        assert!(lagged.abs() < band(1.0), "pairs are independent");
    }
}
