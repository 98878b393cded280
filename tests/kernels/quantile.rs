use _core::kernels::quantile::quantile;
use proptest::prelude::*;

use super::support::{close, fixed, values, weighted};

fn found(x: &[f64], w: &[f64], probs: &[f64]) -> Vec<f64> {
    let mut out = vec![0.0; probs.len()];
    quantile(x, w, None, probs.iter().copied(), &mut out);
    out
}

/// Weight below `value` plus half the weight at it, as a share: the distribution at a draw.
fn midpoint(x: &[f64], w: &[f64], value: f64) -> f64 {
    let weight_where = |wanted: &dyn Fn(f64) -> bool| -> f64 {
        x.iter()
            .zip(w)
            .filter(|(x, _)| wanted(**x))
            .map(|(_, w)| w)
            .sum()
    };
    let (below, at) = (weight_where(&|x| x < value), weight_where(&|x| x == value));
    (below + at / 2.0) / w.iter().sum::<f64>()
}

fn twin(x: &[f64], w: &[f64], prob: f64) -> f64 {
    let mut knots: Vec<(f64, f64)> = Vec::new();
    for (&value, &weight) in x.iter().zip(w) {
        if weight > 0.0 && !knots.iter().any(|knot| knot.1 == value) {
            knots.push((midpoint(x, w, value), value));
        }
    }
    knots.sort_by(|a, b| a.1.total_cmp(&b.1));
    let (first, last) = (knots[0], knots[knots.len() - 1]);
    if prob <= first.0 {
        return first.1;
    }
    if prob >= last.0 {
        return last.1;
    }
    let above = knots.iter().position(|knot| knot.0 >= prob).unwrap();
    let (a, b) = (knots[above - 1], knots[above]);
    a.1 + (prob - a.0) / (b.0 - a.0) * (b.1 - a.1)
}

proptest! {
    #![proptest_config(fixed(400))]

    // 1e-9: between two knots a weight of 0.01 apart, a rounding of 1e-14 in F moves the quantile
    // by 1e-14/1e-4 of their distance.
    #[test]
    fn quantiles_follow_the_interpolated_distribution(
        (x, w) in weighted(80), prob in prop_oneof![0.0..1.0, Just(0.0), Just(1.0), Just(0.5)]
    ) {
        prop_assert!(close(found(&x, &w, &[prob])[0], twin(&x, &w, prob), 1e-9));
    }

    #[test]
    fn quantiles_rise_with_the_level_and_stay_within_the_draws((x, w) in weighted(80)) {
        let probs: Vec<f64> = (0..=50).map(|p| f64::from(p) / 50.0).collect();
        let quantiles = found(&x, &w, &probs);
        prop_assert!(quantiles.windows(2).all(|pair| pair[0] <= pair[1]));
        let counted: Vec<f64> = x.iter().zip(&w).filter(|(_, w)| **w > 0.0).map(|(x, _)| *x).collect();
        prop_assert_eq!(quantiles[0], counted.iter().copied().fold(f64::INFINITY, f64::min));
        prop_assert_eq!(quantiles[50], counted.iter().copied().fold(f64::NEG_INFINITY, f64::max));
    }

    #[test]
    fn a_copied_draw_counts_as_a_draw_of_twice_the_weight(x in values(40), prob in 0.0..1.0) {
        let mut twice = x.clone();
        twice.push(x[0]);
        let mut w = vec![1.0; x.len()];
        w[0] = 2.0;
        let copied = found(&twice, &vec![1.0; twice.len()], &[prob]);
        prop_assert!(close(copied[0], found(&x, &w, &[prob])[0], 1e-12));
    }

    #[test]
    fn neither_order_nor_unit_of_the_weights_matters((x, w) in weighted(80), prob in 0.0..1.0) {
        let backwards = |values: &[f64], unit: f64| values.iter().rev().map(|v| v * unit).collect::<Vec<f64>>();
        let other = found(&backwards(&x, 1.0), &backwards(&w, 1024.0), &[prob]);
        prop_assert!(close(other[0], found(&x, &w, &[prob])[0], 1e-12));
    }
}

#[test]
fn equal_weights_give_the_hazen_rule() {
    // Position n p + 1/2 among the sorted draws.
    let x = [3.0, 1.0, 4.0, 1.5, 9.0];
    let w = [0.2; 5];
    let expected = [1.0, 1.0, 1.25, 3.0, 3.75, 9.0, 9.0];
    let probs = [0.0, 0.1, 0.2, 0.5, 0.65, 0.9, 1.0];
    for (quantile, expected) in found(&x, &w, &probs).iter().zip(expected) {
        assert!(close(*quantile, expected, 1e-14), "{quantile} {expected}");
    }
}

#[test]
fn many_small_weights_do_not_drift() {
    // 0.1 is not exact: added one by one, 300,000 of them are off by 1e-7 draws at some levels.
    let x: Vec<f64> = (0..300_000).map(f64::from).collect();
    let w = vec![0.1; x.len()];
    for (quantile, prob) in found(&x, &w, &[0.2, 0.4, 0.6]).iter().zip([0.2, 0.4, 0.6]) {
        let error = quantile - (prob * 300_000.0 - 0.5);
        // The position itself is rounded to 3e-11.
        assert!(error.abs() < 1e-9, "{prob} {error}");
    }
}

#[test]
fn draws_without_weight_are_skipped_whatever_they_are() {
    let x = [f64::NAN, 1.0, f64::INFINITY, 2.0];
    assert_eq!(
        found(&x, &[0.0, 0.5, 0.0, 0.5], &[0.0, 0.5, 1.0]),
        [1.0, 1.5, 2.0]
    );
}

#[test]
fn infinite_draws_and_huge_distances_are_borne() {
    let x = [f64::NEG_INFINITY, 0.0, f64::INFINITY];
    let third = [1.0; 3];
    assert_eq!(
        found(&x, &third, &[0.0, 0.3, 0.5, 0.7, 1.0]),
        [
            f64::NEG_INFINITY,
            f64::NEG_INFINITY,
            0.0,
            f64::INFINITY,
            f64::INFINITY
        ]
    );
    assert_eq!(found(&[-1.5e308, 1.5e308], &[1.0; 2], &[0.5]), [0.0]);
}

#[test]
fn zeros_of_both_signs_are_one_value() {
    assert_eq!(found(&[0.0, -0.0, 1.0, -1.0], &[1.0; 4], &[0.5]), [0.0]);
    // Steps at 1/8, 1/2 and 7/8.
    assert!(close(
        found(&[0.0, -0.0, 1.0, -1.0], &[1.0; 4], &[0.6875])[0],
        0.5,
        1e-15
    ));
}

#[test]
fn bad_content_gives_nan() {
    let ones = [1.0, 1.0];
    assert!(found(&[1.0, f64::NAN], &ones, &[0.5])[0].is_nan());
    assert!(found(&[1.0, 2.0], &ones, &[f64::NAN])[0].is_nan());
    assert!(found(&[], &[], &[0.5])[0].is_nan());
    for bad in [
        [0.0, 0.0],
        [1.0, f64::NAN],
        [1.0, -1.0],
        [1.0, f64::INFINITY],
        [f64::MAX, f64::MAX],
    ] {
        assert!(found(&[1.0, 2.0], &bad, &[0.5])[0].is_nan(), "{bad:?}");
    }
}
