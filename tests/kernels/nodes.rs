use _core::kernels::chains::Chains;
use _core::kernels::effective::{effective_size, entropy_size, largest_share};
use _core::kernels::log_sum::log_sum_exp;
use _core::kernels::long_run::{chains, long_run_variance};
use _core::kernels::mean::{contributions, mean_square, weighted_mean};
use _core::kernels::node_common::{Asked, Common};
use _core::kernels::nodes::{Room, SERIES_FIGURES, WEIGHT_FIGURES, study};
use _core::kernels::ordered::Interrupt;
use _core::kernels::signed_tail::signed_tail_shape;
use _core::kernels::smooth::smooth;

use super::support::{Stream, assert_close};

const STARTS: [i64; 4] = [0, 200, 420, 600];
const DRAWS: usize = 600;

fn uniform(seed: u64) -> Vec<f64> {
    let mut stream = Stream::new(seed);
    (0..DRAWS).map(|_| stream.uniform()).collect()
}

fn centred(f: Vec<f64>) -> (Vec<f64>, f64) {
    let mean = f.iter().sum::<f64>() / DRAWS as f64;
    (f.iter().map(|f| f - mean).collect(), mean)
}

fn lrv(z: &[f64]) -> f64 {
    let chains = chains(&STARTS, DRAWS, true).unwrap();
    long_run_variance(z, &chains, &Interrupt::never()).unwrap()
}

fn efficiency(z: &[f64]) -> f64 {
    (mean_square(z) / lrv(z)).min(1.0)
}

/// The figures of one series but for the test of the chains, from the single kernels.
fn series(z: &[f64], z_raw: &[f64]) -> Vec<f64> {
    let efficiency = efficiency(z_raw);
    vec![
        lrv(z),
        efficiency,
        signed_tail_shape(z_raw, efficiency),
        contributions(z),
    ]
}

fn common(f: &[f64], event: f64, batches: &[i64]) -> Common {
    let own = vec![1.0 / DRAWS as f64; DRAWS];
    let asked = Asked {
        own: [&own, &own],
        equal_base: true,
        batches,
        shift: true,
    };
    let chains = Chains::new(&STARTS, DRAWS, true).unwrap();
    Common::new(std::iter::once((f, event)), chains, asked).unwrap()
}

#[test]
fn figures_are_those_of_the_single_kernels() {
    let x: Vec<f64> = uniform(1).iter().map(|u| -2.0 * (1.0 - u).ln()).collect();
    let (f, mean) = centred(
        uniform(2)
            .iter()
            .map(|u| f64::from(u8::from(*u > 0.6)))
            .collect(),
    );
    let common = common(&f, mean, &[0, 300, 600]);
    let mut out = vec![f64::NAN; common.width()];
    let mut weights = vec![f64::NAN; DRAWS];
    let mut room = Room::default();
    study(
        &x,
        &common,
        &mut weights,
        &mut out,
        &mut room,
        &Interrupt::never(),
    )
    .unwrap();

    let total = log_sum_exp(&x);
    let raw: Vec<f64> = x.iter().map(|x| (x - total).exp()).collect();
    let mut logs = vec![0.0; DRAWS];
    let shape = smooth(&x, efficiency(&raw), &mut logs);
    let w: Vec<f64> = logs.iter().map(|w| w.exp()).collect();
    assert_close(&weights, &w, 1e-14);
    let about = [
        total,
        shape,
        effective_size(&logs),
        entropy_size(&logs),
        largest_share(&logs),
    ];
    assert_close(&out[..5], &about, 1e-9);
    assert_close(&out[8..WEIGHT_FIGURES], &[0.0, 1.0], 0.0);

    let scale = DRAWS as f64;
    let moved = weighted_mean(&f, &w);
    let form = |w: &[f64]| -> Vec<f64> {
        f.iter()
            .zip(w)
            .map(|(f, w)| scale * w * (f - moved))
            .collect()
    };
    let (z, z_raw) = (form(&w), form(&raw));
    let value = &out[WEIGHT_FIGURES..][..SERIES_FIGURES];
    assert_close(&value[..1], &[moved], 1e-12);
    assert_close(&value[3..7], &series(&z, &z_raw), 1e-7);
    let inside: Vec<f64> = w
        .iter()
        .zip(&f)
        .filter(|(_, f)| **f > 0.0)
        .map(|(w, _)| *w)
        .collect();
    let squares: f64 = inside.iter().map(|w| w * w).sum();
    assert_close(
        &value[7..8],
        &[inside.iter().sum::<f64>().powi(2) / squares],
        1e-10,
    );

    let off = |z: &[f64]| -> Vec<f64> { z.iter().zip(&f).map(|(z, f)| z - f).collect() };
    let (z, z_raw) = (off(&z), off(&z_raw));
    let shift = &out[WEIGHT_FIGURES + SERIES_FIGURES..][..SERIES_FIGURES];
    assert_close(&shift[..2], &[moved, mean_square(&z)], 1e-10);
    assert_close(&shift[3..7], &series(&z, &z_raw), 1e-7);
    let sums = [z[..300].iter().sum(), z[300..].iter().sum()];
    assert_close(&out[WEIGHT_FIGURES + 2 * SERIES_FIGURES..], &sums, 1e-9);
}

#[test]
fn equal_ratios_move_nothing() {
    let (f, _) = centred(uniform(5));
    let common = common(&f, f64::NAN, &[0, 600]);
    let mut out = vec![f64::NAN; common.width()];
    let x = vec![0.7; DRAWS];
    study(
        &x,
        &common,
        &mut [],
        &mut out,
        &mut Room::default(),
        &Interrupt::never(),
    )
    .unwrap();
    assert_eq!(out[9], 0.0);
    let shift = &out[WEIGHT_FIGURES + SERIES_FIGURES..];
    assert_close(&shift[..5], &[0.0, 0.0, 1.0, 0.0, 1.0], 0.0);
}
