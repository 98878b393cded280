use _core::kernels::largest::largest;
use proptest::prelude::*;

use super::support::{Stream, fixed, values};

/// By a stable sort of everything.
fn twin(x: &[f64], sign: f64, count: usize) -> (Vec<(f64, u32)>, f64) {
    let mut all: Vec<(f64, u32)> = x.iter().map(|x| sign * x).zip(0..).collect();
    all.sort_by(|a, b| a.0.partial_cmp(&b.0).unwrap());
    let first = all.len() - count;
    (all[first..].to_vec(), all[first - 1].0)
}

proptest! {
    #![proptest_config(fixed(400))]

    #[test]
    fn the_largest_are_those_of_a_full_sort(x in values(400), share in 0.0..1.0, up: bool) {
        let count = (share * x.len() as f64) as usize;
        let sign = if up { 1.0 } else { -1.0 };
        prop_assert_eq!(largest(&x, sign, count), Some(twin(&x, sign, count)));
    }
}

#[test]
fn a_guess_that_misleads_does_not_change_what_is_found() {
    let mut stream = Stream::new(9);
    let noise: Vec<f64> = (0..20_000).map(|_| stream.normal()).collect();
    let rising: Vec<f64> = (0..20_000).map(f64::from).collect();
    // The sample takes every so many-th value: here those alone are large, or alone small.
    for step in [2, 10, 25, 37, 83] {
        for up in [1e3, -1e3] {
            let comb: Vec<f64> = noise
                .iter()
                .enumerate()
                .map(|(s, x)| if s % step == 0 { x + up } else { *x })
                .collect();
            for x in [&comb, &noise, &rising] {
                for count in [40, 200, 1000] {
                    assert_eq!(largest(x, 1.0, count), Some(twin(x, 1.0, count)));
                }
            }
        }
    }
    let flat = vec![1.0; 5000];
    assert_eq!(largest(&flat, 1.0, 100), Some(twin(&flat, 1.0, 100)));
    let mut heavy = noise.clone();
    heavy[77] = 1e300;
    heavy[78] = f64::INFINITY;
    assert_eq!(largest(&heavy, 1.0, 300), Some(twin(&heavy, 1.0, 300)));
}

#[test]
fn a_value_must_be_left_below() {
    assert_eq!(largest(&[1.0, 2.0], 1.0, 2), None);
    assert_eq!(largest(&[], 1.0, 0), None);
    assert_eq!(largest(&[1.0, 2.0], -1.0, 0), Some((vec![], -1.0)));
}
