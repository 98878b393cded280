//! Criterion benchmarks of the main kernels, without Python: `cargo bench`.

#![allow(missing_docs, clippy::unwrap_used)]

use std::hint::black_box;

use _core::kernels::chain_means::chain_means;
use _core::kernels::columns::{map_columns, map_columns_into};
use _core::kernels::extremes::extremes;
use _core::kernels::influence::influence;
use _core::kernels::interval::shortest_interval;
use _core::kernels::long_run::{chains, long_run_variance};
use _core::kernels::moments::covariance;
use _core::kernels::ordered::Interrupt;
use _core::kernels::quantile_many::{LANES, Sorted, Weights, quantiles};
use _core::kernels::reductions::{column_sums, normalise_columns};
use _core::kernels::resample::{Method, resample};
use _core::kernels::signed_tail::signed_tail_shape;
use _core::kernels::smooth::{smooth, tail_shape};
use _core::kernels::sorting::order;
use _core::kernels::study::{Weighted, study};
use _core::kernels::vector::exp::exp_slice;
use _core::kernels::weigh::weigh;
use _core::kernels::weight_sums::form;
use criterion::{Criterion, criterion_group, criterion_main};
use ndarray::Array2;

const DRAWS: usize = 4000;
const COLUMNS: usize = 256;
const LONG: usize = 100_000;

/// Normal numbers by the method of Box & Muller over a xorshift generator.
fn normal(count: usize) -> Vec<f64> {
    let mut state = 0x9E37_79B9_7F4A_7C15_u64;
    let mut uniform = || {
        state ^= state << 13;
        state ^= state >> 7;
        state ^= state << 17;
        ((state >> 12) as f64 + 0.5) / (1_u64 << 52) as f64
    };
    let one = |_| (-2.0 * uniform().ln()).sqrt() * (std::f64::consts::TAU * uniform()).cos();
    (0..count).map(one).collect()
}

fn matrix(columns: usize) -> Array2<f64> {
    Array2::from_shape_vec((DRAWS, columns), normal(DRAWS * columns)).unwrap()
}

fn reductions(c: &mut Criterion) {
    let x = matrix(COLUMNS);
    let turned = x.t().as_standard_layout().into_owned();
    let mut out = x.clone();
    let never = Interrupt::never();
    c.bench_function("sums of columns, rows contiguous", |b| {
        b.iter(|| column_sums::<_, { form::ALL }>(black_box(x.view()), &never));
    });
    c.bench_function("sums of columns, columns contiguous", |b| {
        b.iter(|| column_sums::<_, { form::ALL }>(black_box(turned.t()), &never));
    });
    c.bench_function("normalise", |b| {
        b.iter(|| normalise_columns(black_box(x.view()), out.view_mut(), &never));
    });
    let values = normal(DRAWS);
    c.bench_function("exponential", |b| {
        b.iter_batched_ref(
            || values.clone(),
            |values| exp_slice(values),
            criterion::BatchSize::SmallInput,
        );
    });
}

fn tails(c: &mut Criterion) {
    let x = matrix(COLUMNS);
    let mut out = x.clone();
    let never = Interrupt::never();
    c.bench_function("smooth", |b| {
        b.iter(|| {
            map_columns_into(black_box(x.view()), out.view_mut(), &never, |x, _, out| {
                Ok(smooth(x, 1.0, out))
            })
        });
    });
    c.bench_function("tail shape", |b| {
        b.iter(|| map_columns(black_box(x.view()), &never, |x, _| Ok(tail_shape(x, 1.0))));
    });
    let z = normal(LONG);
    c.bench_function("signed tail shape", |b| {
        b.iter(|| signed_tail_shape(black_box(&z), 1.0));
    });
}

fn resampling(c: &mut Criterion) {
    let w: Vec<f64> = normal(LONG).iter().map(|x| x.exp()).collect();
    for (name, method) in [
        ("multinomial", Method::Multinomial),
        ("stratified", Method::Stratified),
        ("systematic", Method::Systematic),
        ("residual", Method::Residual),
        ("without replacement", Method::WithoutReplacement),
    ] {
        c.bench_function(&format!("resample, {name}"), |b| {
            b.iter(|| resample(black_box(&w), LONG / 2, method, [7; 32]));
        });
    }
}

fn quantities(c: &mut Criterion) {
    let never = Interrupt::never();
    let (x, w) = (normal(DRAWS), matrix(LANES).mapv(f64::exp));
    let known = order(&x);
    c.bench_function("order of a column", |b| b.iter(|| order(black_box(&x))));
    c.bench_function("quantiles under eight sets of weights", |b| {
        b.iter(|| {
            let weights = Weights::new(w.view());
            let column = Sorted::new(&x, &known);
            quantiles(&column, &weights, &[0.05, 0.5, 0.95], |_, _, value| {
                black_box(value);
            });
        });
    });
    let first = w.column(0).to_vec();
    c.bench_function("shortest interval", |b| {
        b.iter(|| shortest_interval(black_box(&x), &first, Some(&known), 0.9));
    });
    let f = matrix(20);
    let share = vec![1.0 / DRAWS as f64; DRAWS];
    c.bench_function("covariance", |b| {
        b.iter(|| covariance(black_box(f.view()), &share, &never));
    });
    let (loglik, mut out) = (matrix(COLUMNS), Array2::zeros((20, COLUMNS)));
    c.bench_function("influence", |b| {
        b.iter(|| influence(black_box(loglik.view()), f.view(), out.view_mut(), &never));
    });
}

fn series(c: &mut Criterion) {
    let never = Interrupt::never();
    let z = normal(LONG);
    let whole = chains(&[0, LONG as i64], LONG, true).unwrap();
    c.bench_function("long-run variance", |b| {
        b.iter(|| long_run_variance(black_box(&z), &whole, &never));
    });
    let mut level = 0.0;
    let walk: Vec<f64> = z
        .iter()
        .map(|z| {
            level += z;
            level
        })
        .collect();
    c.bench_function("long-run variance of a slow chain", |b| {
        b.iter(|| long_run_variance(black_box(&walk), &whole, &never));
    });
}

fn influence_series(c: &mut Criterion) {
    let (f, never) = (normal(LONG), Interrupt::never());
    let w: Vec<f64> = f.iter().map(|f| (0.3 * f).exp() / LONG as f64).collect();
    let starts = [0, LONG as i64 / 2, LONG as i64];
    let whole = chains(&starts, LONG, false).unwrap();
    let halves = chains(&starts, LONG, true).unwrap();
    let of = Weighted {
        w: &w,
        raw: &w,
        chains: &whole,
        halves: &halves,
    };
    c.bench_function("study of a weighted mean", |b| {
        b.iter(|| study(black_box(&f), 0.3, of, &never));
    });
    c.bench_function("means of chains", |b| {
        b.iter(|| chain_means(black_box(&f), 0.3, &w, &whole, &never));
    });
    let mut out = vec![0.0; LONG];
    c.bench_function("normalise and describe", |b| {
        b.iter(|| weigh(black_box(&f), &mut out, &never));
    });
    c.bench_function("extremes", |b| {
        b.iter(|| extremes(black_box(&f), &never));
    });
}

criterion_group!(
    kernels,
    reductions,
    tails,
    resampling,
    quantities,
    series,
    influence_series
);
criterion_main!(kernels);
