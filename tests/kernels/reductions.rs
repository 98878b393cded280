use _core::kernels::effective::{effective_size, entropy_size, largest_share};
use _core::kernels::log_sum::{log_sum_exp, normalise};
use _core::kernels::ordered::Interrupt;
use _core::kernels::reductions::{column_sums, normalise_columns, slice_sums};
use _core::kernels::weight_sums::{Sums, form};
use ndarray::{Array2, ArrayView2, Axis, ShapeBuilder, Slice};
use proptest::prelude::*;

use super::support::{Stream, close, fixed, log_weights};

fn all(x: ArrayView2<'_, f64>) -> Vec<Sums> {
    column_sums::<_, { form::ALL }>(x, &Interrupt::never()).unwrap()
}

/// Ordinary values, zeros of weight, and columns that hold nothing or something bad.
fn sample(rows: usize, columns: usize) -> Array2<f64> {
    let mut stream = Stream::new(21);
    let mut x = Array2::from_shape_simple_fn((rows, columns), || 3.0 * stream.normal());
    for (index, mut column) in x.columns_mut().into_iter().enumerate() {
        match index % 7 {
            1 => column
                .iter_mut()
                .step_by(3)
                .for_each(|x| *x = f64::NEG_INFINITY),
            2 => column.fill(f64::NEG_INFINITY),
            3 => column
                .iter_mut()
                .enumerate()
                .for_each(|(s, x)| *x += s as f64),
            4 => column[rows / 2] = f64::NAN,
            5 => column[rows / 3] = f64::INFINITY,
            _ => {}
        }
    }
    x
}

fn bits(sums: &[Sums]) -> Vec<[u64; 4]> {
    let figures = |s: &Sums| {
        [
            s.log_sum(),
            s.effective_size(),
            s.entropy_size(),
            s.largest_share(),
        ]
        .map(f64::to_bits)
    };
    sums.iter().map(figures).collect()
}

#[test]
fn a_column_has_the_same_bits_however_it_lies_in_memory() {
    // Widths and lengths around those of tiles, chunks and blocks.
    for (rows, columns) in [
        (1, 40),
        (63, 33),
        (64, 64),
        (100, 65),
        (4097, 70),
        (9000, 3),
    ] {
        let x = sample(rows, columns);
        let expected = bits(&all(x.view()));
        let mut fortran = Array2::zeros((rows, columns).f());
        fortran.assign(&x);
        assert_eq!(bits(&all(fortran.view())), expected, "{rows} {columns}");
        let mut wide = Array2::zeros((2 * rows, 3 * columns));
        let mut view = wide.slice_axis_mut(Axis(0), Slice::new(0, None, -2));
        view.slice_axis_inplace(Axis(1), Slice::new(0, None, 3));
        view.assign(&x);
        assert_eq!(bits(&all(view.view())), expected, "{rows} {columns}");
        for (column, sums) in x.columns().into_iter().zip(&all(x.view())) {
            let alone = slice_sums::<{ form::ALL }>(&column.to_vec());
            assert_eq!(bits(&[alone]), bits(&[*sums]), "{rows} {columns}");
        }
    }
}

#[test]
fn every_form_has_the_same_sums() {
    let x = sample(500, 80);
    let full = all(x.view());
    let never = Interrupt::never();
    let totals = column_sums::<_, { form::TOTAL }>(x.view(), &never).unwrap();
    let squares = column_sums::<_, { form::SQUARES }>(x.view(), &never).unwrap();
    let spreads = column_sums::<_, { form::SPREAD }>(x.view(), &never).unwrap();
    for column in 0..80 {
        let full = full[column];
        let same = |a: f64, b: f64| a.to_bits() == b.to_bits();
        assert!(same(totals[column].log_sum(), full.log_sum()));
        assert!(same(
            squares[column].effective_size(),
            full.effective_size()
        ));
        assert!(same(spreads[column].entropy_size(), full.entropy_size()));
    }
}

#[test]
fn single_precision_is_widened_exactly() {
    let x = sample(300, 90).mapv(|x| x as f32);
    let wide = x.mapv(f64::from);
    let never = Interrupt::never();
    let single = column_sums::<_, { form::ALL }>(x.view(), &never).unwrap();
    assert_eq!(bits(&single), bits(&all(wide.view())));
    let gathered = column_sums::<_, { form::ALL }>(x.t(), &never).unwrap();
    assert_eq!(bits(&gathered), bits(&all(wide.t())));
}

#[test]
fn columns_are_normalised_as_slices_are() {
    for (rows, columns) in [(70, 40), (5000, 35), (5000, 2)] {
        let x = sample(rows, columns);
        let mut out = Array2::zeros((rows, columns));
        let mut fortran = Array2::zeros((rows, columns).f());
        let never = Interrupt::never();
        let sums = normalise_columns(x.view(), out.view_mut(), &never).unwrap();
        normalise_columns(x.view(), fortran.view_mut(), &never).unwrap();
        for column in 0..columns {
            let mut expected = vec![0.0; rows];
            let sum = normalise(&x.column(column).to_vec(), &mut expected);
            assert_eq!(sums[column].to_bits(), sum.to_bits());
            for row in 0..rows {
                assert_eq!(out[(row, column)].to_bits(), expected[row].to_bits());
                assert_eq!(fortran[(row, column)].to_bits(), expected[row].to_bits());
            }
        }
    }
}

proptest! {
    #![proptest_config(fixed(200))]

    // 1e-13: the parts of a column are added in another order than the whole.
    #[test]
    fn parts_of_a_column_merge_to_the_whole(x in log_weights(300), y in log_weights(300)) {
        let both: Vec<f64> = x.iter().chain(&y).copied().collect();
        let merged = slice_sums::<{ form::ALL }>(&x).merge(slice_sums::<{ form::ALL }>(&y));
        prop_assert!(close(merged.log_sum(), log_sum_exp(&both), 1e-13));
        prop_assert!(close(merged.effective_size(), effective_size(&both), 1e-13));
        prop_assert!(close(merged.entropy_size(), entropy_size(&both), 1e-12));
        prop_assert!(close(merged.largest_share(), largest_share(&both), 1e-13));
    }
}
