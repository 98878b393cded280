use _core::kernels::error::KernelError;
use _core::kernels::interval::{expect_mass, shortest_interval};
use proptest::prelude::*;

use super::support::{fixed, weighted};

/// Every pair of draws tried.
fn twin(x: &[f64], w: &[f64], mass: f64) -> (f64, f64) {
    let total: f64 = w.iter().sum();
    let counted: Vec<f64> = x
        .iter()
        .zip(w)
        .filter(|(_, w)| **w > 0.0)
        .map(|(x, _)| *x)
        .collect();
    let mut best = (f64::NEG_INFINITY, f64::INFINITY);
    for &lower in &counted {
        for &upper in &counted {
            let held: f64 = x
                .iter()
                .zip(w)
                .filter(|(x, _)| lower <= **x && **x <= upper)
                .map(|(_, w)| w)
                .sum();
            let (length, shortest) = (upper - lower, best.1 - best.0);
            let better = length < shortest || (length == shortest && lower < best.0);
            if held >= (mass - 1e-12) * total && better {
                best = (lower, upper);
            }
        }
    }
    best
}

proptest! {
    #![proptest_config(fixed(400))]

    #[test]
    fn no_shorter_interval_holds_the_mass((x, w) in weighted(40), mass in prop_oneof![0.01..1.0, Just(0.5), Just(1.0)]) {
        prop_assert_eq!(shortest_interval(&x, &w, None, mass), twin(&x, &w, mass));
    }
}

#[test]
fn of_equally_short_intervals_the_first_is_taken() {
    let x = [4.0, 3.0, 2.0, 1.0, 0.0];
    assert_eq!(shortest_interval(&x, &[0.2; 5], None, 0.6), (0.0, 2.0));
}

#[test]
fn rounding_of_the_weights_does_not_cost_a_draw() {
    // Three tenths of ten draws are three draws, although 0.9 - 0.6 is below 0.3 in doubles.
    let x = [0.0, 10.0, 20.0, 30.0, 40.0, 50.0, 60.0, 61.0, 62.0, 80.0];
    assert_eq!(shortest_interval(&x, &[0.1; 10], None, 0.3), (60.0, 62.0));
}

#[test]
fn ties_count_together_and_a_heavy_value_stands_alone() {
    assert_eq!(
        shortest_interval(&[5.0, 1.0, 5.0, 2.0], &[0.3, 0.2, 0.3, 0.2], None, 0.6),
        (5.0, 5.0)
    );
}

#[test]
fn draws_without_weight_are_skipped_and_infinite_ones_are_borne() {
    assert_eq!(
        shortest_interval(&[f64::NAN, 1.0, 2.0], &[0.0, 1.0, 1.0], None, 1.0),
        (1.0, 2.0)
    );
    let x = [f64::NEG_INFINITY, 0.0, 1.0, f64::INFINITY];
    assert_eq!(shortest_interval(&x, &[1.0; 4], None, 0.5), (0.0, 1.0));
    assert_eq!(
        shortest_interval(&x, &[1.0; 4], None, 1.0),
        (f64::NEG_INFINITY, f64::INFINITY)
    );
}

#[test]
fn bad_content_gives_nan_and_a_bad_mass_is_refused() {
    let (lower, upper) = shortest_interval(&[1.0, f64::NAN], &[1.0, 1.0], None, 0.5);
    assert!(lower.is_nan() && upper.is_nan());
    assert!(shortest_interval(&[], &[], None, 0.5).0.is_nan());
    assert_eq!(expect_mass(1.0), Ok(()));
    for mass in [0.0, -0.1, 1.1, f64::NAN] {
        assert!(matches!(
            expect_mass(mass),
            Err(KernelError::Range {
                argument: "mass",
                ..
            })
        ));
    }
}
