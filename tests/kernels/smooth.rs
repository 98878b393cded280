use _core::kernels::log_sum::{log_sum_exp, maximum};
use _core::kernels::pareto::{Pareto, fit};
use _core::kernels::smooth::{smooth, tail_shape};
use _core::kernels::tail::{Scale, Tail, fit_tail, tail_length};
use proptest::prelude::*;

use super::support::{assert_close, close, fixed, log_weights};

/// Smoothing by a full sort on the natural scale; the smoothed weights are normalised by division.
fn twin(x: &[f64], efficiency: f64) -> (f64, Vec<f64>) {
    let largest = x.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    let mut weights: Vec<f64> = x.iter().map(|x| (x - largest).exp()).collect();
    let draws = x.len() as f64;
    let mut length = (draws / 5.0).min(3.0 * (draws / efficiency).sqrt()).ceil() as usize;
    let positive = weights.iter().filter(|&&w| w > 0.0).count();
    while length > 0 && length + 1 > positive {
        length -= 1;
    }
    let mut order: Vec<usize> = (0..x.len()).collect();
    order.sort_by(|&a, &b| x[a].total_cmp(&x[b]));
    let tail = &order[x.len() - length..];
    let shape = if length < 5 {
        f64::INFINITY
    } else if weights[tail[0]] == weights[tail[length - 1]] {
        f64::NEG_INFINITY
    } else {
        let cutoff = weights[order[x.len() - length - 1]];
        let exceedances: Vec<f64> = tail.iter().map(|&s| weights[s] - cutoff).collect();
        let Pareto { shape, scale } = fit(&exceedances);
        let shape = (length as f64 * shape + 5.0) / (length as f64 + 10.0);
        for (z, &s) in tail.iter().enumerate() {
            let p = (z as f64 + 0.5) / length as f64;
            let quantile = scale * ((1.0 - p).powf(-shape) - 1.0) / shape;
            weights[s] = (cutoff + quantile).min(1.0);
        }
        shape
    };
    let total: f64 = weights.iter().sum();
    (shape, weights.iter().map(|w| w / total).collect())
}

proptest! {
    #![proptest_config(fixed(400))]

    // 1e-7: the twin's exceedances cancel where weights are nearly equal, and its quantiles near
    // shape 0.
    #[test]
    fn smoothing_follows_the_published_procedure(
        x in log_weights(400), efficiency in prop::sample::select(vec![1.0, 0.3, 0.02])
    ) {
        prop_assume!(maximum(&x) > f64::NEG_INFINITY);
        let mut out = vec![0.0; x.len()];
        let found = smooth(&x, efficiency, &mut out);
        let (shape, weights) = twin(&x, efficiency);
        prop_assert!(close(found, shape, 1e-7), "{found} {shape}");
        let natural: Vec<f64> = out.iter().map(|entry| entry.exp()).collect();
        assert_close(&natural, &weights, 1e-7);
    }

    #[test]
    fn smoothed_weights_are_normalised_and_keep_their_ranks(x in log_weights(400)) {
        prop_assume!(maximum(&x) > f64::NEG_INFINITY);
        let mut out = vec![0.0; x.len()];
        let shape = smooth(&x, 1.0, &mut out);
        prop_assert_eq!(shape.to_bits(), tail_shape(&x, 1.0).to_bits());
        prop_assert!(log_sum_exp(&out).abs() < 1e-13);
        let mut order: Vec<usize> = (0..x.len()).collect();
        order.sort_by(|&a, &b| x[a].total_cmp(&x[b]));
        prop_assert!(order.windows(2).all(|pair| out[pair[0]] <= out[pair[1]]));
        prop_assert!(x.iter().zip(&out).all(|(x, out)| (*x == f64::NEG_INFINITY) == (*out == f64::NEG_INFINITY)));
    }

    #[test]
    fn a_range_of_any_width_gives_a_defined_answer(
        x in prop::collection::vec(-1e5..0.0, 1..300), scale in prop::sample::select(vec![1.0, 1e-3, 1e-9, 1e-16])
    ) {
        let x: Vec<f64> = x.iter().map(|x| x * scale).collect();
        let mut out = vec![0.0; x.len()];
        let shape = smooth(&x, 1.0, &mut out);
        prop_assert!(!shape.is_nan());
        prop_assert!(out.iter().all(|entry| entry.is_finite()), "{shape}");
    }
}

#[test]
fn the_tail_is_a_fifth_of_few_draws_and_three_roots_of_many() {
    assert_eq!(tail_length(100, 1.0), 20);
    assert_eq!(tail_length(101, 1.0), 21);
    assert_eq!(tail_length(15, 1.0), 3);
    assert_eq!(tail_length(4000, 1.0), 190);
    assert_eq!(tail_length(4000, 0.25), 380);
    assert_eq!(tail_length(0, 1.0), 0);
    // Efficiencies that make no sense still give a length.
    for odd in [0.0, -1.0, f64::NAN] {
        assert_eq!(tail_length(100, odd), 20);
    }
}

#[test]
fn a_tail_without_a_value_below_it_is_short() {
    let values = [0.1, 0.2, 0.3, 0.4, 0.5, 1.0];
    for (length, fits) in [(4, false), (5, true), (6, false), (7, false)] {
        let tail = fit_tail(&values, length, Scale::Natural(1.0));
        assert_eq!(matches!(tail, Tail::Fitted { .. }), fits, "{length}");
        assert_eq!(tail == Tail::Short, !fits, "{length}");
    }
}

#[test]
fn fewer_than_five_tail_draws_are_left_alone() {
    let x: Vec<f64> = (0..20).map(|s| f64::from(s).sqrt()).collect();
    let mut out = [0.0; 20];
    assert_eq!(smooth(&x, 1.0, &mut out), f64::INFINITY);
    let log_sum = log_sum_exp(&x);
    let raw: Vec<f64> = x.iter().map(|x| x - log_sum).collect();
    assert_close(&out, &raw, 1e-15);
}

#[test]
fn a_constant_tail_is_left_alone() {
    let mut x = vec![0.0; 60];
    x.extend((0..40).map(|s| -1.0 - f64::from(s)));
    let mut out = [0.0; 100];
    assert_eq!(smooth(&x, 1.0, &mut out), f64::NEG_INFINITY);
    assert!(out[..60].iter().all(|&entry| entry == out[0]));
}

#[test]
fn log_weights_that_differ_by_less_than_a_weight_can_show_are_constant() {
    let x: Vec<f64> = (0..100).map(|s| 1e-19 * f64::from(s)).collect();
    assert_eq!(tail_shape(&x, 1.0), f64::NEG_INFINITY);
}

#[test]
fn tied_weights_are_smoothed_in_input_order() {
    // 100 draws, 20 in the tail; six of the tail tie, and their smoothed values must rise.
    let mut x: Vec<f64> = (0..100).map(|s| f64::from(s) / 50.0).collect();
    for s in [84, 86, 88, 90, 92, 94] {
        x[s] = 1.9;
    }
    let mut out = [0.0; 100];
    smooth(&x, 1.0, &mut out);
    let tied: Vec<f64> = [84, 86, 88, 90, 92, 94]
        .iter()
        .map(|&s: &usize| out[s])
        .collect();
    assert!(tied.windows(2).all(|pair| pair[0] < pair[1]), "{tied:?}");
}

#[test]
fn a_weight_of_zero_stays_zero_and_is_never_the_cutoff() {
    // 200 draws ask for a tail of 40, but only 30 have weight: 29 are in the tail.
    let mut x = vec![f64::NEG_INFINITY; 200];
    for s in 0..30 {
        x[s * 6] = (s as f64 / 4.0).sin();
    }
    let mut out = [0.0; 200];
    let shape = smooth(&x, 1.0, &mut out);
    assert!(shape.is_finite());
    assert_eq!(out.iter().filter(|entry| entry.is_finite()).count(), 30);
    let positive: Vec<f64> = x
        .iter()
        .copied()
        .filter(|entry| entry.is_finite())
        .collect();
    let expected = {
        let mut weights: Vec<f64> = positive
            .iter()
            .map(|entry| entry - maximum(&positive))
            .collect();
        weights.sort_by(f64::total_cmp);
        let excess: Vec<f64> = weights[1..]
            .iter()
            .map(|w| weights[0].exp() * (w - weights[0]).exp_m1())
            .collect();
        fit(&excess).shrunk(29).shape
    };
    // 1e-13: rounding of the exceedances and of the fit.
    assert!(close(shape, expected, 1e-13), "{shape} {expected}");
}

#[test]
fn a_dominating_draw_that_smoothing_pulls_down_leaves_no_nan() {
    let mut x: Vec<f64> = (0..1000).map(|s| -2000.0 + f64::from(s) / 100.0).collect();
    x[500] = 0.0;
    let mut out = vec![0.0; 1000];
    assert_eq!(smooth(&x, 1.0, &mut out), f64::INFINITY);
    assert_eq!(out[500], 0.0);
    let x: Vec<f64> = (0..1000).map(|s| -0.7 * f64::from(s)).collect();
    assert!(smooth(&x, 1.0, &mut out).is_finite());
    assert!(out.iter().all(|entry| entry.is_finite()));
    assert!(log_sum_exp(&out).abs() < 1e-13);
}

#[test]
fn a_tail_across_the_smallest_doubles_has_a_shape() {
    // Weights of exp(-705) to exp(-745): some of them round to 0, their cut-off need not.
    for top in [-700.0, -705.0, -709.0, -720.0, -740.0] {
        let mut x = vec![-30_000.0; 118];
        x[0] = 0.0;
        x[1] = -105.0;
        x[2..18].fill(top);
        for (place, entry) in x[18..26].iter_mut().enumerate() {
            *entry = top - place as f64;
        }
        let mut out = vec![0.0; x.len()];
        assert!(!smooth(&x, 1.0, &mut out).is_nan(), "{top}");
        assert!(out.iter().all(|entry| !entry.is_nan()), "{top}");
    }
}

#[test]
fn bad_content_gives_nan_and_nothing_gives_no_weight() {
    let mut out = [0.0; 3];
    for bad in [[0.0, f64::NAN, 1.0], [0.0, f64::INFINITY, 1.0]] {
        assert!(smooth(&bad, 1.0, &mut out).is_nan());
        assert!(out.iter().all(|entry| entry.is_nan()));
        assert!(tail_shape(&bad, 1.0).is_nan());
    }
    assert_eq!(
        smooth(&[f64::NEG_INFINITY; 3], 1.0, &mut out),
        f64::INFINITY
    );
    assert_eq!(out, [f64::NEG_INFINITY; 3]);
    assert_eq!(smooth(&[], 1.0, &mut []), f64::INFINITY);
}
