use _core::kernels::correlation::correlations;
use _core::kernels::long_run::{chains, long_run_variance};
use _core::kernels::ordered::Interrupt;
use proptest::prelude::*;

use super::support::{Stream, close, fixed};

fn walk(length: usize, seed: u64) -> Vec<f64> {
    let mut stream = Stream::new(seed);
    let mut level = 0.0;
    let step = |_| {
        level += stream.normal();
        level
    };
    (0..length).map(step).collect()
}

proptest! {
    #![proptest_config(fixed(60))]

    // 1e-13 of lag 0: roundings of a transform of at most 1024 points.
    #[test]
    fn correlations_are_sums_of_products(a in 1..300_usize, b in 0..300_usize, seed: u64) {
        let (a, b) = (walk(a, seed), walk(b, seed ^ 1));
        let lags = a.len().max(b.len());
        let found = correlations(&a, &b, lags, &Interrupt::never()).unwrap();
        let product = |z: &[f64], t: usize| -> f64 {
            (t..z.len()).map(|i| z[i] * z[i - t]).sum()
        };
        prop_assert_eq!(found.len(), lags);
        let scale = 1e-13 * (product(&a, 0) + product(&b, 0)).max(1.0);
        for (t, found) in found.iter().enumerate() {
            let twin = product(&a, t) + product(&b, t);
            prop_assert!((found - twin).abs() <= scale, "{t}: {found} {twin}");
        }
    }
}

#[test]
fn lags_beyond_the_direct_ones_belong_to_the_same_sequence() {
    // Chains that disagree keep all lags, 1500 of them, of which 256 are formed directly. The twin
    // forms all of them by definition.
    let mut z = walk(3000, 3);
    z.extend(walk(2000, 4).iter().map(|z| z + 300.0));
    let ranges = chains(&[0, 3000, 5000], 5000, true).unwrap();
    let found = long_run_variance(&z, &ranges, &Interrupt::never()).unwrap();
    let mean = |z: &[f64]| z.iter().sum::<f64>() / z.len() as f64;
    let (n, count) = (5000.0, ranges.len() as f64);
    let overall = mean(&z);
    let auto = |t: usize| -> f64 {
        let of_chain = |range: &std::ops::Range<usize>| {
            let chain = &z[range.clone()];
            let (length, centre) = (chain.len() as f64, mean(chain));
            let sum: f64 = (t..chain.len())
                .map(|i| (chain[i] - centre) * (chain[i - t] - centre))
                .sum();
            length / (n * (length - 1.0)) * sum
        };
        ranges.iter().map(of_chain).sum()
    };
    let between: f64 = ranges
        .iter()
        .map(|range| range.len() as f64 / n * (mean(&z[range.clone()]) - overall).powi(2))
        .sum::<f64>()
        * count
        / (count - 1.0);
    let within = auto(0);
    let variance = within * (1.0 - count / n) + between;
    let gamma = |t: usize| {
        if t == 0 {
            variance
        } else {
            variance - within + auto(t)
        }
    };
    let (mut total, mut least) = (0.0, f64::INFINITY);
    for lag in (0..1499).step_by(2) {
        let pair = gamma(lag) + gamma(lag + 1);
        if pair <= 0.0 {
            break;
        }
        least = pair.min(least);
        total += least;
    }
    assert!(
        close(found / (2.0 * total - variance), 1.0, 1e-10),
        "{found}"
    );
}
