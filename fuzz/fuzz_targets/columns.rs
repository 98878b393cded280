//! Columns of any strides: the same numbers in any layout give the same bits.
#![no_main]

use _core::kernels::columns::{map_columns, map_columns_into};
use _core::kernels::entry::Entry;
use _core::kernels::influence::influence;
use _core::kernels::ordered::Interrupt;
use _core::kernels::reductions::{column_sums, normalise_columns, slice_sums};
use _core::kernels::weight_sums::{Sums, form};
use libfuzzer_sys::fuzz_target;
use ndarray::{Array2, ArrayView2, Axis, ShapeBuilder, concatenate, s};
use steelyard_fuzz::Words;

fuzz_target!(|data: &[u8]| {
    let mut words = Words::new(data);
    let wild = words.flag();
    let layout = words.byte();
    let (observations, quantities) = (words.count(70), words.count(12));
    // Sums of more rows than the bytes can fill are merged from several blocks.
    let repeats = if observations + quantities < 4 {
        1 + words.count(40)
    } else {
        1
    };
    let wide = (observations + quantities).max(1);
    let draws = words.length(4096) / wide;
    let mut fill = |columns: usize| {
        let once = Array2::from_shape_simple_fn((draws, columns), || {
            if wild { words.number() } else { words.share() }
        });
        let parts = vec![once.view(); repeats];
        concatenate(Axis(0), &parts).expect("parts of one shape")
    };
    let (loglik, f) = (fill(observations), fill(quantities));
    let spread = spread_out(&loglik, layout);
    let mut strided = spread.slice(s![..;2, ..;2]);
    if layout & 4 == 4 {
        strided.invert_axis(Axis(0));
        strided.invert_axis(Axis(1));
    }
    let narrow = loglik.mapv(|entry| entry as f32);
    for view in [loglik.view(), strided, loglik.t().as_standard_layout().t()] {
        sums_agree(&loglik, view);
        normalised_agree(&loglik, view);
        copied(view);
    }
    sums_agree(&narrow.mapv(f64::from), narrow.view());
    influences_agree(loglik.view(), strided, f.view(), !wild && draws > 0);
});

/// The entries of `x` two apart, in either memory order, from either end.
fn spread_out(x: &Array2<f64>, layout: u8) -> Array2<f64> {
    let (rows, columns) = x.dim();
    let room = (2 * rows, 2 * columns).set_f(layout & 1 == 1);
    let mut spread = Array2::from_elem(room, f64::NAN);
    let mut entries = spread.slice_mut(s![..;2, ..;2]);
    if layout & 4 == 4 {
        entries.invert_axis(Axis(0));
        entries.invert_axis(Axis(1));
    }
    entries.assign(x);
    spread
}

fn same(a: f64, b: f64) -> bool {
    a.to_bits() == b.to_bits() || (a.is_nan() && b.is_nan())
}

fn sums_agree<E: Entry>(plain: &Array2<f64>, view: ArrayView2<'_, E>) {
    let found = column_sums::<E, { form::ALL }>(view, &Interrupt::never()).expect("never stopped");
    assert_eq!(found.len(), plain.ncols());
    for (column, sums) in plain.columns().into_iter().zip(found) {
        let wanted: Sums = slice_sums::<{ form::ALL }>(&column.to_vec());
        let pairs = [
            (sums.maximum, wanted.maximum),
            (sums.total, wanted.total),
            (sums.squares, wanted.squares),
            (sums.spread, wanted.spread),
        ];
        assert!(
            pairs.iter().all(|&(a, b)| same(a, b)),
            "{sums:?} {wanted:?}"
        );
    }
}

fn normalised_agree(plain: &Array2<f64>, view: ArrayView2<'_, f64>) {
    let (mut out, mut again) = (Array2::zeros(plain.dim()), Array2::zeros(plain.dim().f()));
    let never = &Interrupt::never();
    let sums = normalise_columns(plain.view(), out.view_mut(), never).expect("equal shapes");
    let others = normalise_columns(view, again.view_mut(), never).expect("equal shapes");
    assert!(sums.iter().zip(&others).all(|(&a, &b)| same(a, b)));
    assert!(out.iter().zip(&again).all(|(&a, &b)| same(a, b)));
}

fn influences_agree(
    plain: ArrayView2<'_, f64>,
    strided: ArrayView2<'_, f64>,
    f: ArrayView2<'_, f64>,
    tame: bool,
) {
    let of = |loglik: ArrayView2<'_, f64>| {
        let mut out = Array2::zeros((f.ncols(), loglik.ncols()));
        influence(loglik, f, out.view_mut(), &Interrupt::never()).expect("shapes fit");
        out
    };
    let (one, other) = (of(plain), of(strided));
    assert!(one.iter().zip(&other).all(|(&a, &b)| same(a, b)));
    if tame {
        // Shares lie in [0, 1], so no weighted mean is farther than that from the plain one.
        assert!(one.iter().all(|shift| shift.abs() <= 1.0), "{one}");
    }
}

fn copied(x: ArrayView2<'_, f64>) {
    let mut out = Array2::zeros(x.dim());
    let lengths = map_columns_into(
        x,
        out.view_mut(),
        &Interrupt::never(),
        |column, _, target| {
            target.copy_from_slice(column);
            Ok(column.len())
        },
    );
    assert_eq!(lengths, Ok(vec![x.nrows(); x.ncols()]));
    assert!(x.iter().zip(&out).all(|(a, b)| a.to_bits() == b.to_bits()));
    let order = map_columns(x, &Interrupt::never(), |_, index| Ok(index));
    assert_eq!(order, Ok((0..x.ncols()).collect()));
}
