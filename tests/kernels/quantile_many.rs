use _core::kernels::interval::shortest_interval;
use _core::kernels::quantile::quantile;
use _core::kernels::quantile_many::{LANES, Sorted, Weights, quantiles};
use _core::kernels::sorting::{expect_countable, expect_order, order};
use ndarray::Array2;
use proptest::prelude::*;

use super::support::{Stream, close, fixed, values};

const PROBS: [f64; 7] = [0.0, 0.01, 0.25, 0.5, 0.9, 1.0, f64::NAN];

/// Every quantile under every set of weights, one after the other.
fn twin(x: &[f64], w: &Array2<f64>) -> Vec<Vec<f64>> {
    let one = |lane: usize| {
        let mut out = vec![0.0; PROBS.len()];
        let weights = w.column(lane).to_vec();
        quantile(x, &weights, None, PROBS.iter().copied(), &mut out);
        out
    };
    (0..w.ncols()).map(one).collect()
}

fn found(x: &[f64], w: &Array2<f64>) -> Vec<Vec<f64>> {
    let order = order(x);
    let mut out = vec![vec![7.0; PROBS.len()]; LANES];
    let weights = Weights::new(w.view());
    quantiles(
        &Sorted::new(x, &order),
        &weights,
        &PROBS,
        |lane, level, value| {
            out[lane][level] = value;
        },
    );
    out.truncate(w.ncols());
    out
}

fn assert_same(x: &[f64], w: &Array2<f64>, tolerance: f64) {
    for (found, twin) in found(x, w).iter().zip(&twin(x, w)) {
        for (found, twin) in found.iter().zip(twin) {
            assert!(close(*found, *twin, tolerance), "{found} {twin}");
        }
    }
}

proptest! {
    #![proptest_config(fixed(300))]

    // 1e-9: as for single quantiles, a rounding of the running sum moves a quantile between two
    // draws whose weights are small.
    #[test]
    fn many_sets_of_weights_give_what_each_gives_alone(
        x in values(300), lanes in 1..=LANES, zeros in 0.0..1.0, distinct: bool, seed: u64
    ) {
        let mut stream = Stream::new(seed);
        let x: Vec<f64> = x.iter().map(|x| if distinct { x + 1e-3 * stream.uniform() } else { *x }).collect();
        let w = Array2::from_shape_simple_fn((x.len(), lanes), || {
            let weight = stream.uniform();
            if weight < zeros { 0.0 } else { weight }
        });
        assert_same(&x, &w, 1e-9);
    }

    #[test]
    fn the_order_is_that_of_a_stable_sort(x in prop::collection::vec(any::<f64>(), 0..300)) {
        let mut expected: Vec<u32> = (0..x.len() as u32).collect();
        expected.sort_by(|&a, &b| x[a as usize].total_cmp(&x[b as usize]));
        prop_assert_eq!(order(&x), expected);
    }

    // Even enough for buckets; ties and zeros of both signs among them.
    #[test]
    fn the_order_of_even_values_is_that_of_a_stable_sort(
        x in prop::collection::vec(prop_oneof![-1.0..1.0_f64, Just(0.0), Just(-0.0), Just(0.25)], 0..600)
    ) {
        let x: Vec<f64> = x;
        let mut expected: Vec<u32> = (0..x.len() as u32).collect();
        expected.sort_by(|&a, &b| x[a as usize].total_cmp(&x[b as usize]));
        prop_assert_eq!(order(&x), expected);
    }

    #[test]
    fn a_known_order_changes_nothing(x in values(200), mass in 0.1..1.0) {
        let w: Vec<f64> = (0..x.len()).map(|s| (s % 4) as f64 + 0.5).collect();
        let known = order(&x);
        prop_assert_eq!(
            shortest_interval(&x, &w, Some(&known), mass),
            shortest_interval(&x, &w, None, mass)
        );
    }
}

#[test]
fn bad_weights_and_values_give_nan_in_their_own_lane_alone() {
    let x: Vec<f64> = (0..150).map(f64::from).collect();
    let mut w = Array2::from_elem((150, 5), 0.1);
    w[(3, 0)] = f64::NAN;
    w[(4, 1)] = -1.0;
    w[(5, 2)] = f64::INFINITY;
    w.column_mut(3).fill(0.0);
    assert_same(&x, &w, 1e-12);
    assert!(found(&x, &w)[4][3].is_finite());
    let mut holed = x.clone();
    holed[9] = f64::NAN;
    assert_same(&holed, &w, 1e-12);
}

#[test]
fn an_order_that_is_none_is_refused_or_gives_nan() {
    for bad in [vec![0, 0], vec![0, 2], vec![u32::MAX, 0]] {
        assert!(expect_order(bad.clone()).is_err());
        let mut out = [0.0];
        quantile(
            &[1.0, 2.0],
            &[1.0, 1.0],
            Some(&bad),
            [0.5].into_iter(),
            &mut out,
        );
        assert!(!out[0].is_finite() || (1.0..=2.0).contains(&out[0]));
    }
    assert_eq!(expect_order(vec![1, 0]), Ok(vec![1, 0]));
    assert!(expect_countable(1 << 31).is_err() && expect_countable(100).is_ok());
}
