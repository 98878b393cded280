use std::time::{Duration, Instant};

use _core::kernels::error::KernelError;
use _core::kernels::long_run::{chains, long_run_variance};
use _core::kernels::mean::mean_square;
use _core::kernels::ordered::Interrupt;
use proptest::prelude::*;

use super::support::{Stream, close, fixed};

fn found(z: &[f64], starts: &[i64], split: bool) -> f64 {
    let chains = chains(starts, z.len(), split).unwrap();
    long_run_variance(z, &chains, &Interrupt::never()).unwrap()
}

/// All lags of all chains first, then the initial monotone sequence.
fn twin(z: &[f64], starts: &[usize], split: bool) -> f64 {
    let mut series: Vec<Vec<f64>> = Vec::new();
    for pair in starts.windows(2) {
        let chain = z[pair[0]..pair[1]].to_vec();
        if split && chain.len() >= 8 {
            let (first, second) = chain.split_at(chain.len() / 2);
            series.push(first.to_vec());
            series.push(second.to_vec());
        } else {
            series.push(chain);
        }
    }
    let n = z.len() as f64;
    let count = series.len() as f64;
    let mean = |x: &[f64]| x.iter().sum::<f64>() / x.len() as f64;
    let overall = mean(z);
    let between = if series.len() == 1 {
        0.0
    } else {
        let spread: f64 = series
            .iter()
            .map(|c| c.len() as f64 * (mean(c) - overall).powi(2))
            .sum();
        spread / n * count / (count - 1.0)
    };
    let average = n / count;
    if average < 4.0 {
        let square = z.iter().map(|z| (z - overall).powi(2)).sum::<f64>() / n;
        return if series.len() == 1 {
            square
        } else {
            average * between
        };
    }
    let auto = |lag: usize| -> f64 {
        let mut total = 0.0;
        for chain in series
            .iter()
            .filter(|chain| chain.len() > lag && chain.len() > 1)
        {
            let (length, centre) = (chain.len() as f64, mean(chain));
            let products: f64 = (0..chain.len() - lag)
                .map(|i| (chain[i] - centre) * (chain[i + lag] - centre))
                .sum();
            total += length / n * (length / (length - 1.0)) * products / length;
        }
        total
    };
    let within = auto(0);
    let variance = within * (1.0 - 1.0 / average) + between;
    let longest = series.iter().map(Vec::len).max().unwrap();
    let mut gammas = vec![variance];
    gammas.extend((1..longest).map(|lag| variance - within + auto(lag)));
    let mut pairs: Vec<f64> = gammas
        .chunks_exact(2)
        .map(|pair| pair[0] + pair[1])
        .collect();
    let end = pairs
        .iter()
        .position(|&pair| pair <= 0.0)
        .unwrap_or(pairs.len());
    pairs.truncate(end);
    for j in 1..pairs.len() {
        pairs[j] = pairs[j].min(pairs[j - 1]);
    }
    (2.0 * pairs.iter().sum::<f64>() - variance).max(variance / n.max(10.0).log10())
}

fn chained() -> impl Strategy<Value = (Vec<f64>, Vec<usize>)> {
    (
        prop::collection::vec(1..40_usize, 1..6),
        0.0..0.95,
        any::<u64>(),
    )
        .prop_map(|(lengths, rho, seed)| {
            let mut stream = Stream::new(seed);
            let mut starts = vec![0];
            let mut z = Vec::new();
            for length in lengths {
                let mut level = stream.normal();
                for _ in 0..length {
                    level = rho * level + stream.normal();
                    z.push(level);
                }
                starts.push(z.len());
            }
            (z, starts)
        })
}

proptest! {
    #![proptest_config(fixed(500))]

    // 1e-10: rounding of up to 200 terms, and of the differences between lags.
    #[test]
    fn the_long_run_variance_follows_its_definition((z, starts) in chained(), split: bool) {
        let positions: Vec<i64> = starts.iter().map(|&start| start as i64).collect();
        prop_assert!(close(found(&z, &positions, split), twin(&z, &starts, split), 1e-10));
    }

    #[test]
    fn it_grows_with_the_square_of_the_unit_and_not_with_the_offset((z, starts) in chained()) {
        let positions: Vec<i64> = starts.iter().map(|&start| start as i64).collect();
        let moved: Vec<f64> = z.iter().map(|z| 4.0 * z + 1000.0).collect();
        let (plain, moved) = (found(&z, &positions, true), found(&moved, &positions, true));
        // 1e-9: an offset of 250 sd costs three digits.
        prop_assert!(close(moved / 16.0, plain, 1e-9), "{moved} {plain}");
    }
}

#[test]
fn autoregressive_chains_have_their_known_long_run_variance() {
    // LRV/variance = (1 + r)/(1 - r). Four chains of 20,000: the estimate of the ratio has a
    // relative standard deviation of about sqrt(2 (2 m)/n) with m near 3/(1 - r) lags kept, 0.03
    // at r = 0.9; 5 of them with a bias of 0.02 are allowed. Seed 17, false alarms below 1e-5.
    for (rho, tolerance) in [(0.0, 0.05), (0.5, 0.08), (0.9, 0.17), (-0.5, 0.08)] {
        let mut stream = Stream::new(17);
        let mut z = Vec::new();
        for _ in 0..4 {
            let mut level = stream.normal() / f64::sqrt(1.0 - rho * rho);
            for _ in 0..20_000 {
                level = rho * level + stream.normal();
                z.push(level);
            }
        }
        let ratio = found(&z, &[0, 20_000, 40_000, 60_000, 80_000], true) / mean_square(&z);
        let expected = (1.0 + rho) / (1.0 - rho);
        assert!(
            (ratio / expected - 1.0).abs() < tolerance,
            "{rho} {ratio} {expected}"
        );
    }
}

#[test]
fn chains_that_disagree_raise_it() {
    // Two chains a distance apart: LRV/n must be at least of the size of the squared distance.
    let mut stream = Stream::new(4);
    let z: Vec<f64> = (0..2000)
        .map(|s| stream.normal() + if s < 1000 { 0.0 } else { 10.0 })
        .collect();
    assert!(found(&z, &[0, 1000, 2000], true) / 2000.0 > 10.0);
}

#[test]
fn an_antithetic_chain_earns_no_unlimited_credit() {
    let z: Vec<f64> = (0..10_000)
        .map(|s| if s % 2 == 0 { 1.0 } else { -1.0 })
        .collect();
    // Mean square 1 and n = 10,000: the floor is a quarter, to the 1/n terms of both.
    assert!(close(found(&z, &[0, 10_000], true), 0.25, 1e-3));
}

#[test]
fn chains_are_split_in_halves_without_losing_a_draw() {
    assert_eq!(
        chains(&[0, 9, 16, 24], 24, true).unwrap(),
        vec![0..4, 4..9, 9..16, 16..20, 20..24]
    );
    assert_eq!(chains(&[0, 9, 24], 24, false).unwrap(), vec![0..9, 9..24]);
}

#[test]
fn starts_that_do_not_describe_chains_are_refused_where_they_go_wrong() {
    let cases: [(&[i64], usize, Option<i64>); 7] = [
        (&[], 0, None),
        (&[1, 10], 0, Some(1)),
        (&[0, 5, 5, 10], 2, Some(5)),
        (&[0, 7, 3, 10], 2, Some(3)),
        (&[0, 5], 2, None),
        (&[0, 11], 1, Some(11)),
        (&[0, -4, 10], 1, Some(-4)),
    ];
    for (starts, position, found) in cases {
        let refused = KernelError::Starts {
            position,
            found,
            draws: 10,
        };
        assert_eq!(chains(starts, 10, true), Err(refused), "{starts:?}");
    }
}

#[test]
fn constant_series_have_none_and_bad_content_gives_nan() {
    assert_eq!(found(&[0.1; 50], &[0, 20, 50], true), 0.0);
    assert!(found(&[], &[0], true).is_nan());
    for bad in [f64::NAN, f64::INFINITY] {
        let mut z = vec![1.0; 50];
        z[20] = bad;
        assert!(found(&z, &[0, 50], true).is_nan());
    }
}

#[test]
fn squares_that_overflow_end_the_search_at_once() {
    // All lags of 100,000 draws would take a minute in a test build.
    let begun = Instant::now();
    let huge: Vec<f64> = (0..100_000)
        .map(|s| if s % 3 == 0 { 1e300 } else { -1e300 })
        .collect();
    assert!(!found(&huge, &[0, 100_000], true).is_finite());
    assert!(begun.elapsed() < Duration::from_secs(5));
}
