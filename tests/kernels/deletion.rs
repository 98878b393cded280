use _core::kernels::deletion::{Base, Deletions, FIGURES, Order, delete, fault};
use _core::kernels::error::KernelError;
use _core::kernels::long_run::{chains, long_run_variance};
use _core::kernels::mean::mean_square;
use _core::kernels::ordered::{Interrupt, set_threads};
use _core::kernels::smooth::smooth;
use ndarray::{Array2, ShapeBuilder};
use proptest::prelude::*;

use super::support::{Stream, close, fixed};

const STARTS: [i64; 3] = [0, 60, 150];

fn found(
    held: &Array2<f64>,
    scored: Option<&Array2<f64>>,
    base: Base<'_>,
    f: &Array2<f64>,
) -> Deletions {
    let scored = scored.map(|scored| scored.view());
    delete(held.view(), scored, base, f.view(), &Interrupt::never()).unwrap()
}

fn normals(stream: &mut Stream, shape: (usize, usize), scale: f64) -> Array2<f64> {
    Array2::from_shape_simple_fn(shape, || scale * stream.normal() - 3.0)
}

/// Quantities with base mean 0 and base variance 1.
fn standardised(stream: &mut Stream, count: usize, v: &[f64]) -> Array2<f64> {
    let mut f = normals(stream, (v.len(), count), 1.0);
    for mut column in f.columns_mut() {
        let mean: f64 = column.iter().zip(v).map(|(f, v)| f * v).sum();
        let square: f64 = column
            .iter()
            .zip(v)
            .map(|(f, v)| v * (f - mean).powi(2))
            .sum();
        column.mapv_inplace(|f| (f - mean) / square.sqrt());
    }
    f
}

/// Column by column and draw by draw: figures, series of the three scores, and weights.
struct Twin {
    figures: [f64; 8],
    series: [Vec<f64>; 3],
    weights: Vec<f64>,
}

fn series_error(z: &[f64], order: Order<'_>) -> f64 {
    let count = z.len() as f64;
    let variance = match order {
        Order::Chains(starts) => {
            let halves = chains(starts, z.len(), true).unwrap();
            long_run_variance(z, &halves, &Interrupt::never()).unwrap()
        }
        Order::Independent => mean_square(z),
        Order::Repeated(repeats) => {
            let mut sums = vec![0.0; z.len()];
            for (z, &repeat) in z.iter().zip(repeats) {
                sums[repeat as usize] += z;
            }
            sums.iter().map(|sum| sum * sum).sum::<f64>() / count
        }
    };
    (variance / count).sqrt()
}

fn twin(held: &[f64], scored: &[f64], same: bool, v: &[f64], order: Order<'_>) -> Twin {
    let count = held.len() as f64;
    let ratio: Vec<f64> = held.iter().zip(v).map(|(l, v)| v.ln() - l).collect();
    let largest = ratio.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    let raw: Vec<f64> = ratio.iter().map(|r| (r - largest).exp()).collect();
    let efficiency = match order {
        Order::Chains(_) => {
            let square = series_error(&raw, order).powi(2) * count;
            if square > 0.0 {
                (mean_square(&raw) / square).min(1.0)
            } else {
                1.0
            }
        }
        _ => 1.0,
    };
    let mut logs = vec![0.0; held.len()];
    let shape = smooth(&ratio, efficiency, &mut logs);
    let w: Vec<f64> = logs.iter().map(|log| log.exp()).collect();
    let density: Vec<f64> = scored.iter().map(|l| l.exp()).collect();
    let mean = |weights: &[f64]| -> f64 {
        let total: f64 = weights.iter().sum();
        weights
            .iter()
            .zip(&density)
            .map(|(w, d)| w * d)
            .sum::<f64>()
            / total
    };
    let series = |weights: &[f64]| -> Vec<f64> {
        let (p, total) = (mean(weights), weights.iter().sum::<f64>());
        let one = |(w, d): (&f64, &f64)| count * (w / total) * (d / p - 1.0);
        weights.iter().zip(&density).map(one).collect()
    };
    let z = series(&w);
    let p = mean(&w);
    let second: f64 = w.iter().zip(&density).map(|(w, d)| w * d * d).sum();
    let mut of_raw = series(&raw);
    if same {
        let total: f64 = raw.iter().sum();
        of_raw = raw
            .iter()
            .zip(v)
            .map(|(r, v)| count * (v - r / total))
            .collect();
    }
    let entropy: f64 = w
        .iter()
        .map(|w| if *w > 0.0 { w * w.ln() } else { 0.0 })
        .sum();
    Twin {
        figures: [
            p.ln(),
            series_error(&z, order),
            mean(v).ln(),
            shape,
            1.0 / w.iter().map(|w| w * w).sum::<f64>(),
            (-entropy).exp(),
            w.iter().copied().fold(0.0, f64::max),
            second / (p * p) - 1.0,
        ],
        series: [z, of_raw, series(v)],
        weights: w,
    }
}

/// `Σ w f`, and the sum of the squares of the series of the shift.
fn twin_shift(w: &[f64], v: &[f64], f: &[f64]) -> (f64, f64) {
    let m: f64 = w.iter().zip(f).map(|(w, f)| w * f).sum();
    let z = |s: usize| w[s] * (f[s] - m) - v[s] * f[s] - v[s] * m * (f[s] * f[s] - 1.0) / 2.0;
    (m, (0..w.len()).map(|s| z(s).powi(2)).sum())
}

fn check(
    found: &Deletions,
    held: &Array2<f64>,
    scored: Option<&Array2<f64>>,
    base: Base<'_>,
    f: &Array2<f64>,
) {
    let draws = held.nrows();
    let v: Vec<f64> = base.log_weights.map_or_else(
        || vec![1.0 / draws as f64; draws],
        |logs| logs.iter().map(|log| log.exp()).collect(),
    );
    let mut totals = Array2::<f64>::zeros((3, draws));
    for i in 0..held.ncols() {
        let column = held.column(i).to_vec();
        let own = scored.map_or_else(|| column.clone(), |scored| scored.column(i).to_vec());
        let twin = twin(&column, &own, scored.is_none(), &v, base.order);
        for (place, &figure) in twin.figures.iter().enumerate() {
            let ours = found.figures[[i, place]];
            assert!(
                close(ours, figure, 1e-9),
                "column {i} figure {place}: {ours} {figure}"
            );
        }
        for (row, series) in twin.series.iter().enumerate() {
            for (total, z) in totals.row_mut(row).iter_mut().zip(series) {
                *total += z;
            }
        }
        for p in 0..f.ncols() {
            let (shift, square) = twin_shift(&twin.weights, &v, &f.column(p).to_vec());
            assert!(close(found.shift[[i, p]], shift, 1e-10));
            let ours = found.shift_square[[i, p]];
            assert!(
                (ours - square).abs() <= 1e-4 * square + 1e-16,
                "{ours} {square}"
            );
        }
    }
    for (ours, total) in found.totals.iter().zip(&totals) {
        assert!(close(*ours, *total, 1e-8), "{ours} {total}");
    }
}

proptest! {
    #![proptest_config(fixed(60))]

    // 1e-9: tails are fitted to log ratios that differ in the last digit from the twin's, and the
    // twin works on the natural scale. Squares of shifts: single precision over 128 draws.
    #[test]
    fn every_figure_is_that_of_one_deletion_at_a_time(
        columns in 1..40_usize, quantities in 0..20_usize, scale in prop::sample::select(vec![0.0, 0.1, 1.0, 4.0]),
        weighted: bool, apart: bool, order in 0..3_usize, seed: u64
    ) {
        let mut stream = Stream::new(seed);
        let held = normals(&mut stream, (150, columns), scale);
        let other = normals(&mut stream, (150, columns), 0.5);
        let mut logs: Vec<f64> = (0..150).map(|_| stream.normal()).collect();
        let total: f64 = logs.iter().map(|log| log.exp()).sum();
        logs.iter_mut().for_each(|log| *log -= total.ln());
        let repeats: Vec<i64> = (0..150).map(|s| s / 2).collect();
        let base = Base {
            log_weights: weighted.then_some(logs.as_slice()),
            order: [Order::Independent, Order::Chains(&STARTS), Order::Repeated(&repeats)][order],
        };
        let v: Vec<f64> = if weighted {
            logs.iter().map(|log| log.exp()).collect()
        } else {
            vec![1.0 / 150.0; 150]
        };
        let f = standardised(&mut stream, quantities, &v);
        let scored = apart.then_some(&other);
        check(&found(&held, scored, base, &f), &held, scored, base, &f);
    }
}

fn plain(order: Order<'_>) -> Base<'_> {
    Base {
        log_weights: None,
        order,
    }
}

fn same_bits(one: &Deletions, two: &Deletions) -> bool {
    let bits = |x: &Array2<f64>| x.iter().map(|x| x.to_bits()).collect::<Vec<_>>();
    bits(&one.figures) == bits(&two.figures)
        && bits(&one.totals) == bits(&two.totals)
        && bits(&one.shift) == bits(&two.shift)
        && bits(&one.shift_square) == bits(&two.shift_square)
}

#[test]
fn memory_order_and_threads_change_no_bit() {
    let mut stream = Stream::new(7);
    let held = normals(&mut stream, (150, 300), 1.0);
    let f = standardised(&mut stream, 17, &[1.0 / 150.0; 150]);
    let base = plain(Order::Chains(&STARTS));
    let rows = found(&held, None, base, &f);
    let mut columns = Array2::zeros((150, 300).f());
    columns.assign(&held);
    assert!(same_bits(&rows, &found(&columns, None, base, &f)));
    set_threads(3).unwrap();
    assert!(same_bits(&rows, &found(&held, None, base, &f)));
    set_threads(1).unwrap();
    assert!(same_bits(&rows, &found(&held, None, base, &f)));
    let single = held.mapv(|x| x as f32);
    let wide = single.mapv(f64::from);
    let ours = delete(single.view(), None, base, f.view(), &Interrupt::never()).unwrap();
    assert!(same_bits(&ours, &found(&wide, None, base, &f)));
}

#[test]
fn bad_content_is_named_and_stays_in_its_column() {
    let mut stream = Stream::new(3);
    let mut held = normals(&mut stream, (80, 5), 1.0);
    held[[4, 1]] = f64::NAN;
    held[[5, 2]] = f64::INFINITY;
    held[[6, 3]] = f64::NEG_INFINITY;
    let f = Array2::zeros((80, 0));
    let ours = found(&held, None, plain(Order::Independent), &f);
    let faults: Vec<u8> = ours.figures.column(11).iter().map(|&x| x as u8).collect();
    assert_eq!(
        faults,
        [0, fault::NAN, fault::INFINITE, fault::IMPOSSIBLE, 0]
    );
    for (i, &fault) in faults.iter().enumerate() {
        let is_nan = ours.figures[[i, 0]].is_nan();
        assert_eq!(is_nan, fault & (fault::NAN | fault::IMPOSSIBLE) != 0);
    }
    assert_eq!(ours.figures.ncols(), FIGURES);
    // A draw without base weight may make an observation impossible.
    let mut logs = vec![-(79.0_f64.ln()); 80];
    logs[6] = f64::NEG_INFINITY;
    let base = Base {
        log_weights: Some(&logs),
        order: Order::Independent,
    };
    let ours = found(&held, None, base, &f);
    assert_eq!(ours.figures[[3, 11]], 0.0);
    assert!(ours.figures[[3, 0]].is_finite());
}

/// Columns on both sides of what the common way takes: ties, a draw that dominates, a constant but for
/// one draw, offsets, and ranges up to the bound of 300 and beyond.
fn odd_columns(stream: &mut Stream) -> Array2<f64> {
    let mut held = normals(stream, (150, 16), 1.0);
    held.column_mut(0).mapv_inplace(|x| x.round());
    held.column_mut(1).mapv_inplace(|x| (x / 4.0).round());
    held[[7, 2]] = -40.0;
    held[[8, 3]] = -250.0;
    held[[9, 4]] = -310.0;
    held.column_mut(5).fill(2.0);
    held[[11, 5]] = 1.0;
    held.column_mut(6).mapv_inplace(|x| x - 100.0);
    held.column_mut(7).mapv_inplace(|x| 1e-3 * x);
    for (column, range) in [(8, 290.0), (9, 299.9), (10, 300.1), (11, 340.0)] {
        let step = range / 149.0;
        for (s, entry) in held.column_mut(column).iter_mut().enumerate() {
            *entry = step * ((s * 37) % 150) as f64;
        }
    }
    held[[12, 12]] = -6.0;
    held[[13, 12]] = -6.1;
    held[[14, 13]] = 200.0;
    held
}

// As `every_figure_is_that_of_one_deletion_at_a_time`. 150 draws are two parts of 128 draws, the last
// of them not full.
#[test]
fn odd_columns_are_as_any_other() {
    let mut stream = Stream::new(21);
    let held = odd_columns(&mut stream);
    let f = standardised(&mut stream, 5, &[1.0 / 150.0; 150]);
    let repeats: Vec<i64> = (0..150).map(|s| s / 2).collect();
    for order in [
        Order::Independent,
        Order::Chains(&STARTS),
        Order::Repeated(&repeats),
    ] {
        let base = plain(order);
        check(&found(&held, None, base, &f), &held, None, base, &f);
    }
}

#[test]
fn ranges_beyond_the_exponential_have_defined_scores() {
    let mut stream = Stream::new(5);
    let wild = Array2::from_shape_simple_fn((100, 6), || 1e5 * stream.normal());
    let ours = found(
        &wild,
        None,
        plain(Order::Independent),
        &Array2::zeros((100, 0)),
    );
    for row in ours.figures.rows() {
        assert!(
            row[0].is_finite() && row[2].is_finite() && !row[4].is_nan(),
            "{row}"
        );
    }
    let flat = Array2::from_elem((100, 2), -1234.5);
    let ours = found(
        &flat,
        None,
        plain(Order::Chains(&[0, 50, 100])),
        &Array2::zeros((100, 0)),
    );
    for row in ours.figures.rows() {
        assert_eq!((row[0], row[1], row[2]), (-1234.5, 0.0, -1234.5));
        assert!(close(row[4], 100.0, 1e-12));
    }
}

#[test]
fn arrays_that_do_not_fit_are_refused_and_a_wish_to_stop_is_heard() {
    let (held, f) = (Array2::<f64>::zeros((10, 3)), Array2::<f64>::zeros((9, 2)));
    let refused = |held: &Array2<f64>, base: Base<'_>, f: &Array2<f64>| {
        delete(held.view(), None, base, f.view(), &Interrupt::never()).err()
    };
    let base = plain(Order::Independent);
    let shape = KernelError::Shape {
        argument: "f",
        expected: vec![10, 2],
        found: vec![9, 2],
    };
    assert_eq!(refused(&held, base, &f), Some(shape));
    let none = Array2::zeros((10, 0));
    let empty = Array2::zeros((0, 3));
    assert_eq!(
        refused(&empty, base, &Array2::zeros((0, 0))),
        Some(KernelError::Empty { argument: "held" })
    );
    let wrong = plain(Order::Repeated(&[0, 1, 2, 3, 4, 5, 6, 7, 8, 10]));
    assert!(matches!(
        refused(&held, wrong, &none),
        Some(KernelError::Range { .. })
    ));
    assert!(matches!(
        refused(&held, plain(Order::Chains(&[0, 5])), &none),
        Some(KernelError::Starts { .. })
    ));
    let stop = || {
        std::thread::sleep(std::time::Duration::from_millis(1));
        true
    };
    let large = Array2::<f64>::zeros((4000, 3000));
    let result = delete(
        large.view(),
        None,
        base,
        Array2::zeros((4000, 0)).view(),
        &Interrupt::new(&stop),
    );
    assert_eq!(result.err(), Some(KernelError::Interrupted));
}
