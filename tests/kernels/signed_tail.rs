use _core::kernels::pareto::fit;
use _core::kernels::signed_tail::signed_tail_shape;
use _core::kernels::smooth::tail_shape;
use proptest::prelude::*;

use super::support::{close, fixed};

/// Shape of one side, by a full sort.
fn side(z: &[f64], sign: f64) -> Option<f64> {
    let mut side: Vec<f64> = z.iter().map(|z| z * sign).filter(|&z| z > 0.0).collect();
    let count = side.len() as f64;
    let length = (count / 5.0).min(3.0 * count.sqrt()).ceil() as usize;
    if length < 5 {
        return None;
    }
    side.sort_by(f64::total_cmp);
    let tail = &side[side.len() - length..];
    if tail[0] == tail[length - 1] {
        return Some(f64::NEG_INFINITY);
    }
    let cutoff = side[side.len() - length - 1];
    let exceedances: Vec<f64> = tail.iter().map(|z| z - cutoff).collect();
    Some((length as f64 * fit(&exceedances).shape + 5.0) / (length as f64 + 10.0))
}

fn series() -> impl Strategy<Value = Vec<f64>> {
    let entry = prop_oneof![6 => -5.0..5.0, 1 => Just(0.0), 2 => 100.0..1e4, 1 => -3000.0..-10.0];
    prop::collection::vec(entry, 0..400)
}

proptest! {
    #![proptest_config(fixed(400))]

    // 1e-9: the twin does not divide by the largest value of the side.
    #[test]
    fn the_heavier_side_counts(z in series()) {
        let shape = [1.0, -1.0].iter().filter_map(|&sign| side(&z, sign)).fold(f64::NEG_INFINITY, f64::max);
        prop_assert!(close(signed_tail_shape(&z, 1.0), shape, 1e-9));
    }

    #[test]
    fn sign_and_unit_do_not_matter(z in series(), exponent in -900..900_i32) {
        let unit = 2_f64.powi(exponent);
        let other: Vec<f64> = z.iter().map(|z| -z * unit).collect();
        prop_assert_eq!(signed_tail_shape(&z, 1.0).to_bits(), signed_tail_shape(&other, 1.0).to_bits());
    }
}

#[test]
fn positive_values_have_the_shape_of_their_logarithms_as_weights() {
    let z: Vec<f64> = (1..500)
        .map(|s| f64::from(s * 7919 % 997) / 100.0)
        .collect();
    let logs: Vec<f64> = z.iter().map(|z| z.ln()).collect();
    assert!(close(
        signed_tail_shape(&z, 0.5),
        tail_shape(&logs, 0.5),
        1e-10
    ));
}

#[test]
fn a_side_that_is_short_or_constant_does_not_raise_the_shape() {
    assert_eq!(signed_tail_shape(&[], 1.0), f64::NEG_INFINITY);
    assert_eq!(signed_tail_shape(&[0.0; 50], 1.0), f64::NEG_INFINITY);
    assert_eq!(signed_tail_shape(&[3.0; 50], 1.0), f64::NEG_INFINITY);
    let twenty: Vec<f64> = (1..=20).map(f64::from).collect();
    assert_eq!(signed_tail_shape(&twenty, 1.0), f64::NEG_INFINITY);
}

#[test]
fn bad_content_gives_nan() {
    for bad in [f64::NAN, f64::INFINITY, f64::NEG_INFINITY] {
        assert!(signed_tail_shape(&[1.0, bad, 2.0], 1.0).is_nan());
    }
}
