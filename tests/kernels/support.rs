//! What several tests share: closeness, fixed seeds, and inputs that kernels must bear.

use proptest::prelude::*;
use proptest::test_runner::{Config, RngSeed};

/// Property tests on a fixed seed.
pub fn fixed(cases: u32) -> Config {
    Config {
        cases,
        rng_seed: RngSeed::Fixed(20_261_201),
        failure_persistence: None,
        ..Config::default()
    }
}

/// Equal, both NaN, or within `tolerance` relative to the larger of 1 and the size of `b`.
pub fn close(a: f64, b: f64, tolerance: f64) -> bool {
    a == b || (a.is_nan() && b.is_nan()) || (a - b).abs() <= tolerance * b.abs().max(1.0)
}

/// Asserts that two slices are close, entry by entry.
pub fn assert_close(a: &[f64], b: &[f64], tolerance: f64) {
    assert_eq!(a.len(), b.len());
    for (index, (&left, &right)) in a.iter().zip(b).enumerate() {
        assert!(
            close(left, right, tolerance),
            "index {index}: {left} is not {right} within {tolerance}"
        );
    }
}

/// Log weights as they come: ordinary ones, ties, zeros, at any offset.
pub fn log_weights(longest: usize) -> impl Strategy<Value = Vec<f64>> {
    let entry = prop_oneof![
        8 => -30.0..5.0,
        2 => (-3..3_i32).prop_map(f64::from),
        1 => Just(f64::NEG_INFINITY),
        1 => -1000.0..-700.0,
    ];
    let offset = prop_oneof![Just(0.0), Just(4096.0), Just(-1e5)];
    (prop::collection::vec(entry, 1..longest), offset)
        .prop_map(|(entries, offset)| entries.iter().map(|entry| entry + offset).collect())
}

/// Values with ties among them.
pub fn values(longest: usize) -> impl Strategy<Value = Vec<f64>> {
    let entry = prop_oneof![4 => -10.0..10.0, 1 => (-3..3_i32).prop_map(f64::from)];
    prop::collection::vec(entry, 1..longest)
}

/// Values and as many weights, zeros among them, at least one of them positive.
pub fn weighted(longest: usize) -> impl Strategy<Value = (Vec<f64>, Vec<f64>)> {
    let weight = prop_oneof![4 => 0.01..2.0, 1 => Just(0.0), 1 => Just(1.0)];
    values(longest).prop_flat_map(move |values| {
        let count = values.len();
        (
            Just(values),
            prop::collection::vec(weight.clone(), count).prop_map(|mut weights| {
                if weights.iter().all(|&weight| weight == 0.0) {
                    weights[0] = 1.0;
                }
                weights
            }),
        )
    })
}

/// A simple generator for Monte Carlo tests (Marsaglia 2003, xorshift 13-7-17): independent of the
/// one that the kernels use.
pub struct Stream(u64);

impl Stream {
    pub fn new(seed: u64) -> Self {
        let mut stream = Self(seed.wrapping_mul(0x9E37_79B9_7F4A_7C15) | 1);
        for _ in 0..16 {
            stream.uniform();
        }
        stream
    }

    /// Uniform on (0, 1).
    pub fn uniform(&mut self) -> f64 {
        self.0 ^= self.0 << 13;
        self.0 ^= self.0 >> 7;
        self.0 ^= self.0 << 17;
        ((self.0 >> 12) as f64 + 0.5) / (1_u64 << 52) as f64
    }

    /// Standard normal (Box & Muller 1958).
    pub fn normal(&mut self) -> f64 {
        let radius = (-2.0 * self.uniform().ln()).sqrt();
        radius * (std::f64::consts::TAU * self.uniform()).cos()
    }
}
