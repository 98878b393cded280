use _core::kernels::chains::{Chains, Test};
use _core::kernels::f_tail::f_tail;
use _core::kernels::lane_series::Series;
use _core::kernels::lease::Lease;
use _core::kernels::long_run::long_run_variance;
use _core::kernels::mean::weighted_moments;
use _core::kernels::node_series::{Formed, Weighing};
use _core::kernels::node_sums::half_sums;
use _core::kernels::ordered::Interrupt;

use super::support::{Stream, close};

const LENGTH: usize = 200;
const CHAINS: usize = 4;

fn draws(seed: u64) -> (Vec<f64>, Vec<f64>) {
    let mut stream = Stream::new(seed);
    let count = LENGTH * CHAINS;
    let f: Vec<f64> = (0..count).map(|_| stream.uniform()).collect();
    let w: Vec<f64> = (0..count).map(|_| 0.1 + stream.uniform()).collect();
    let total: f64 = w.iter().sum();
    (f, w.iter().map(|w| w / total).collect())
}

fn starts() -> Vec<i64> {
    (0..=CHAINS).map(|c| (c * LENGTH) as i64).collect()
}

fn found(f: &[f64], w: &[f64]) -> f64 {
    agreement(f, w, &starts())
}

fn agreement(f: &[f64], w: &[f64], starts: &[i64]) -> f64 {
    let (moved, pooled) = weighted_moments(f, w);
    let chains = Chains::new(starts, f.len(), true).unwrap();
    let layout = chains.layout();
    let [f_rows, w_rows] = [f, w].map(|series| {
        let mut rows = Lease::new(layout.entries());
        layout.place(series, &mut rows);
        rows
    });
    let ones = vec![1.0; layout.entries()];
    let [masses, moments, squares] =
        [&ones[..], &f_rows, &w_rows].map(|by| half_sums(by, &w_rows, layout));
    let [own_means, own_scales] = chains.alone(&moments, &masses);
    let by = Weighing {
        w: &w_rows,
        raw: &w_rows,
        moved,
        own_means: &own_means,
        own_scales: &own_scales,
    };
    let mut formed = Formed::default();
    formed.influence(&f_rows, by, layout);
    let test = Test {
        masses: &masses,
        moments: &moments,
        squares: &squares,
        pooled,
        largest: f.iter().fold(0.0, |most, f| (f - moved).abs().max(most)),
    };
    chains
        .agreement(&mut formed.alone, &test, &Interrupt::never())
        .unwrap()
}

/// Welch's test written out, for chains whose errors all come from their long-run variances.
fn twin(f: &[f64], w: &[f64]) -> f64 {
    let (_, pooled) = weighted_moments(f, w);
    let mut rows = Vec::new();
    for (f, w) in f.chunks(LENGTH).zip(w.chunks(LENGTH)) {
        let mass: f64 = w.iter().sum();
        let w: Vec<f64> = w.iter().map(|w| w / mass).collect();
        let mean: f64 = w.iter().zip(f).map(|(w, f)| w * f).sum();
        let z: Vec<f64> = w
            .iter()
            .zip(f)
            .map(|(w, f)| LENGTH as f64 * w * (f - mean))
            .collect();
        let halves = [0..LENGTH / 2, LENGTH / 2..LENGTH];
        let own = long_run_variance(&z, &halves, &Interrupt::never()).unwrap() / LENGTH as f64;
        let least = pooled * w.iter().map(|w| w * w).sum::<f64>();
        let variance = own.max(least);
        rows.push((mean, 1.0 / variance, (pooled / variance / 3.0).max(1.0)));
    }
    let total: f64 = rows.iter().map(|row| row.1).sum();
    let centre = rows.iter().map(|row| row.0 * row.1).sum::<f64>() / total;
    let q: f64 = rows
        .iter()
        .map(|row| row.1 * (row.0 - centre).powi(2))
        .sum();
    let spread: f64 = rows
        .iter()
        .map(|row| (1.0 - row.1 / total).powi(2) / row.2)
        .sum();
    let k = CHAINS as f64;
    let correction = 1.0 + 2.0 * (k - 2.0) / (k * k - 1.0) * spread;
    f_tail(
        q / (k - 1.0) / correction,
        k - 1.0,
        (k * k - 1.0) / (3.0 * spread),
    )
}

#[test]
fn it_is_welchs_test_of_the_chain_means() {
    for seed in 0..20 {
        let (f, w) = draws(seed);
        assert!(close(found(&f, &w), twin(&f, &w), 1e-8));
    }
}

#[test]
fn a_chain_apart_is_seen_and_chains_alike_are_not() {
    let (mut f, w) = draws(1);
    assert!(found(&f, &w) > 1e-3);
    f[..LENGTH].iter_mut().for_each(|f| *f += 1.0);
    assert!(found(&f, &w) < 1e-6);
}

#[test]
fn equal_weights_are_the_plain_means() {
    let (f, _) = draws(2);
    let equal = vec![1.0 / f.len() as f64; f.len()];
    let (_, pooled) = weighted_moments(&f, &equal);
    let chains = Chains::new(&starts(), f.len(), true).unwrap();
    let mut z = Series::default();
    z.put(&f, chains.layout());
    let plain = chains
        .equal_agreement(&mut z, pooled, 1.0, &Interrupt::never())
        .unwrap();
    assert!(close(plain, found(&f, &equal), 1e-9));
}

#[test]
fn one_chain_and_short_chains_say_nothing() {
    let (f, w) = draws(3);
    for starts in [vec![0, f.len() as i64], (0..=40).map(|c| c * 20).collect()] {
        let p = agreement(&f, &w, &starts);
        assert_eq!(p.to_bits(), 1.0_f64.to_bits());
    }
}

#[test]
fn a_chain_without_weight_is_left_out() {
    let (f, mut w) = draws(4);
    w[..LENGTH].fill(0.0);
    assert!(found(&f, &w).is_finite());
    w[..3 * LENGTH].fill(0.0);
    assert_eq!(found(&f, &w).to_bits(), 1.0_f64.to_bits());
}
