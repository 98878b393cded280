use _core::kernels::mean::{contributions, mean_square, weighted_mean};
use _core::kernels::node_series::{batch_sums, either_side, influence, take_base, weight_moments};
use proptest::prelude::*;

use super::support::{close, fixed};

fn pairs() -> impl Strategy<Value = (Vec<f64>, Vec<f64>)> {
    prop::collection::vec((-3.0..3.0, 0.0..1.0), 1..100).prop_map(|pairs| {
        let (f, w): (Vec<f64>, Vec<f64>) = pairs.into_iter().unzip();
        let total: f64 = w.iter().sum::<f64>() + 1e-9;
        (f, w.into_iter().map(|w| w / total).collect())
    })
}

proptest! {
    #![proptest_config(fixed(300))]

    #[test]
    fn an_influence_series_and_its_sums((f, w) in pairs()) {
        let count = f.len() as f64;
        let moved = weighted_mean(&f, &w);
        let mut z = vec![f64::NAN; f.len()];
        let sums = influence(&f, &w, moved, count, &mut z);
        for ((z, f), w) in z.iter().zip(&f).zip(&w) {
            prop_assert!(close(*z, count * w * (f - moved), 1e-13));
        }
        prop_assert!(close(sums.variance(), mean_square(&z), 1e-11));
        let plain: f64 = z.iter().zip(&f).map(|(z, f)| z * (f - moved)).sum();
        prop_assert!(close(sums.beside, plain, 1e-11));
        // Near no skewness at all the figure is a difference that rounding decides.
        let carried = contributions(&z);
        if carried < 1e6 {
            prop_assert!(close(sums.contributions() / carried, 1.0, 1e-6));
        }
    }

    #[test]
    fn the_base_is_taken_off((f, w) in pairs()) {
        let mut z = vec![0.25; f.len()];
        let sums = take_base(&f, &w, 2.0, &mut z);
        for ((z, f), w) in z.iter().zip(&f).zip(&w) {
            prop_assert!(close(*z, 0.25 - 2.0 * w * f, 1e-14));
        }
        prop_assert!(close(sums.variance(), mean_square(&z), 1e-11));
    }

    #[test]
    fn sums_of_weights_and_of_batches((f, w) in pairs()) {
        let [mass, moment, squares] = weight_moments(&f, &w);
        prop_assert!(close(mass, w.iter().sum(), 1e-13));
        prop_assert!(close(moment, weighted_mean(&f, &w), 1e-13));
        prop_assert!(close(squares, w.iter().map(|w| w * w).sum(), 1e-13));
        let middle = f.len() / 2;
        let mut sums = [0.0; 2];
        batch_sums(&f, &[0..middle, middle..f.len()], &mut sums);
        prop_assert!(close(sums[0], f[..middle].iter().sum(), 1e-12));
        prop_assert!(close(sums[1], f[middle..].iter().sum(), 1e-12));
    }

    #[test]
    fn effective_draws_on_both_sides((f, w) in pairs()) {
        let worth = |inside: bool| {
            let part: Vec<f64> = f.iter().zip(&w).filter(|(f, _)| (**f > 0.5) == inside).map(|(_, w)| *w).collect();
            let squares: f64 = part.iter().map(|w| w * w).sum();
            if squares > 0.0 { part.iter().sum::<f64>().powi(2) / squares } else { 0.0 }
        };
        let [inside, outside] = either_side(&f, 0.5, &w);
        prop_assert!(close(inside, worth(true), 1e-12));
        prop_assert!(close(outside, worth(false), 1e-12));
    }
}

#[test]
fn a_series_without_skewness_is_carried_by_all() {
    let mut z = [0.0; 8];
    let sums = influence(
        &[1.0, -1.0, 1.0, -1.0, 1.0, -1.0, 1.0, -1.0],
        &[0.125; 8],
        0.0,
        8.0,
        &mut z,
    );
    assert!(sums.contributions().is_infinite());
    assert!(
        influence(&[0.0; 8], &[0.125; 8], 0.0, 8.0, &mut z)
            .contributions()
            .is_infinite()
    );
}
