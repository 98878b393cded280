//! Long-run variances over chains of any lengths.
#![no_main]

use _core::kernels::long_run::{chains, long_run_variance};
use _core::kernels::mean::{mean, mean_square, weighted_mean, weighted_moments};
use _core::kernels::ordered::Interrupt;
use libfuzzer_sys::fuzz_target;
use steelyard_fuzz::Words;

fuzz_target!(|data: &[u8]| {
    let mut words = Words::new(data);
    let (wild, split) = (words.flag(), words.flag());
    let starts: Vec<i64> = (0..words.count(12))
        .map(|_| match words.byte() {
            0 => i64::MIN,
            1 => i64::MAX,
            2 => -1,
            _ => i64::from(words.byte()) << (words.byte() % 4),
        })
        .collect();
    let count = words.length(2048);
    let z: Vec<f64> = (0..count)
        .map(|_| if wild { words.number() } else { words.share() })
        .collect();
    assert!(chains(&starts, count, split).is_err() || starts.last() == Some(&(count as i64)));
    let mut edges: Vec<i64> = starts
        .iter()
        .copied()
        .filter(|&edge| 0 < edge && edge < count as i64)
        .chain([0, count as i64])
        .collect();
    edges.sort_unstable();
    edges.dedup();
    if count == 0 {
        return;
    }
    let ranges = chains(&edges, count, split).expect("edges rise from 0 to the number of draws");
    assert_eq!(
        ranges.iter().map(ExactSizeIterator::len).sum::<usize>(),
        count
    );
    let variance = long_run_variance(&z, &ranges, &Interrupt::never()).expect("never stopped");
    let square = mean_square(&z);
    if z.iter().any(|entry| !entry.is_finite()) {
        assert!(variance.is_nan() && square.is_nan());
        return;
    }
    let centre = mean(&z);
    let (least, most) = z
        .iter()
        .fold((z[0], z[0]), |(a, b), &v| (a.min(v), b.max(v)));
    let tame = least.abs().max(most.abs()) < 1e100;
    if tame {
        assert!(variance >= 0.0 && variance.is_finite(), "{variance}");
        assert!(square >= 0.0 && square.is_finite(), "{square}");
        let slack = 1e-12 * least.abs().max(most.abs());
        assert!(least - slack <= centre && centre <= most + slack);
        assert!(least < most || (variance == 0.0 && square == 0.0 && centre == least));
    } else {
        // Squares may overflow; they never turn negative.
        assert!(!(variance < 0.0) && !(square < 0.0));
    }
    let weights = words.weights(count);
    let (moment, spread) = weighted_moments(&z, &weights);
    assert_eq!(moment.to_bits(), weighted_mean(&z, &weights).to_bits());
    assert!(!(spread < 0.0), "{spread}");
});
