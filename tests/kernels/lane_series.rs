use _core::kernels::lane_series::{Series, Spread};
use _core::kernels::lanes::Layout;
use _core::kernels::long_run::{chains, long_run_variance};
use _core::kernels::mean::mean_square;
use _core::kernels::ordered::Interrupt;
use proptest::prelude::*;

use super::support::{Stream, close, fixed};

fn found(z: &[f64], starts: &[i64]) -> Spread {
    let layout = Layout::new(chains(starts, z.len(), true).unwrap());
    let mut series = Series::default();
    // Whatever the work array held before must not show.
    series.begin(&layout);
    series.entries.fill(f64::NAN);
    series.put(z, &layout);
    let all = 0..layout.halves().len();
    series.spread(all, &layout, &Interrupt::never()).unwrap()
}

fn twin(z: &[f64], starts: &[i64]) -> Spread {
    let chains = chains(starts, z.len(), true).unwrap();
    Spread {
        variance: mean_square(z),
        long_run: long_run_variance(z, &chains, &Interrupt::never()).unwrap(),
    }
}

/// A chain that remembers `memory` of its last value, around `centre`.
fn series(memory: f64, centre: f64, lengths: &[usize], seed: u64) -> (Vec<f64>, Vec<i64>) {
    let mut stream = Stream::new(seed);
    let (mut z, mut starts, mut last) = (Vec::new(), vec![0_i64], 0.0);
    for &length in lengths {
        for _ in 0..length {
            last = memory * last + stream.uniform() - 0.5;
            z.push(centre + last);
        }
        starts.push(z.len() as i64);
    }
    (z, starts)
}

proptest! {
    #![proptest_config(fixed(300))]

    // 1e-9 of the variance: where a pair of lags nearly cancels the search may end one pair later,
    // which adds next to nothing.
    #[test]
    fn it_is_the_long_run_variance(
        memory in -0.9..0.97,
        centre in prop_oneof![Just(0.0), -1e3..1e3],
        lengths in prop::collection::vec(1..400_usize, 1..7),
        seed in any::<u64>(),
    ) {
        let (z, starts) = series(memory, centre, &lengths, seed);
        let (ours, theirs) = (found(&z, &starts), twin(&z, &starts));
        let unit = theirs.variance.max(1e-300);
        prop_assert!(close(ours.variance / unit, theirs.variance / unit, 1e-9));
        prop_assert!(close(ours.long_run / unit, theirs.long_run / unit, 1e-9));
    }
}

#[test]
fn a_chain_alone_has_its_own() {
    let lengths = [90, 1, 700, 33, 64, 3];
    let (z, starts) = series(0.6, 2.0, &lengths, 11);
    let halves = chains(&starts, z.len(), true).unwrap();
    let layout = Layout::new(halves.clone());
    let mut placed = Series::default();
    placed.put(&z, &layout);
    for pair in starts.windows(2) {
        let (from, to) = (pair[0] as usize, pair[1] as usize);
        let first = halves.iter().position(|half| half.start == from).unwrap();
        let last = halves.iter().position(|half| half.end == to).unwrap();
        let ours = placed.spread(first..last + 1, &layout, &Interrupt::never());
        let theirs = twin(&z[from..to], &[0, (to - from) as i64]);
        let ours = ours.unwrap();
        assert!(close(ours.variance, theirs.variance, 1e-12));
        assert!(close(ours.long_run, theirs.long_run, 1e-12));
    }
}

#[test]
fn slow_chains_and_chains_apart_agree_too() {
    for (memory, step) in [(0.999, 0.0), (0.2, 3.0)] {
        let (mut z, starts) = series(memory, 0.0, &[700, 300, 500], 3);
        z[700..].iter_mut().for_each(|z| *z += step);
        let (ours, theirs) = (found(&z, &starts), twin(&z, &starts));
        assert!(close(ours.long_run / theirs.long_run, 1.0, 1e-9));
    }
}

#[test]
fn a_constant_has_none_and_what_is_not_finite_has_nan() {
    for value in [0.0, 0.1, 1e300] {
        let spread = found(&vec![value; 400], &[0, 200, 400]);
        assert_eq!((spread.variance, spread.long_run), (0.0, 0.0));
        assert_eq!(spread.efficiency().to_bits(), 1.0_f64.to_bits());
    }
    let mut z = vec![1.0; 400];
    z[17] = f64::INFINITY;
    assert!(found(&z, &[0, 200, 400]).long_run.is_nan());
    assert!(found(&[], &[0]).variance.is_nan());
}

#[test]
fn squares_beyond_the_range_of_numbers_are_left_to_the_other_kernel() {
    let z: Vec<f64> = (0..400).map(|i| 1e200 * f64::from(i % 7)).collect();
    let (ours, theirs) = (found(&z, &[0, 400]), twin(&z, &[0, 400]));
    assert_eq!(ours.long_run.to_bits(), theirs.long_run.to_bits());
}
