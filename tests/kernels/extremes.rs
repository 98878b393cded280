use _core::kernels::extremes::extremes;
use _core::kernels::ordered::Interrupt;
use proptest::prelude::*;

use super::support::{fixed, values};

fn found(x: &[f64]) -> (f64, f64) {
    extremes(x, &Interrupt::never()).unwrap()
}

proptest! {
    #![proptest_config(fixed(300))]

    #[test]
    fn the_extremes_are_those_of_a_sort(x in values(300)) {
        let mut sorted = x.clone();
        sorted.sort_by(f64::total_cmp);
        prop_assert_eq!(found(&x), (sorted[0], sorted[sorted.len() - 1]));
    }

    #[test]
    fn one_entry_that_is_no_number_shows_wherever_it_stands(x in values(300), place: prop::sample::Index) {
        let mut x = x;
        let place = place.index(x.len());
        x[place] = f64::NAN;
        let (low, high) = found(&x);
        prop_assert!(low.is_nan() && high.is_nan());
    }
}

#[test]
fn infinities_are_extremes_and_nothing_has_none() {
    let mut x = vec![1.0; 100_000];
    x[70_000] = f64::INFINITY;
    x[99_999] = f64::NEG_INFINITY;
    assert_eq!(found(&x), (f64::NEG_INFINITY, f64::INFINITY));
    assert_eq!(found(&[]), (f64::INFINITY, f64::NEG_INFINITY));
    x[1] = -f64::NAN;
    assert!(found(&x).0.is_nan());
}
