use _core::kernels::columns::{map_columns, map_columns_in_place, map_columns_into};
use _core::kernels::error::KernelError;
use _core::kernels::log_sum::{log_sum_exp, normalise};
use _core::kernels::ordered::Interrupt;
use ndarray::{Array2, ArrayView2, ArrayViewMut2, Axis, ShapeBuilder, Slice};

use super::support::Stream;

fn sample(rows: usize, columns: usize) -> Array2<f64> {
    let mut stream = Stream::new(3);
    Array2::from_shape_simple_fn((rows, columns), || 3.0 * stream.normal())
}

/// Every `steps`-th entry along each axis, from the end if negative.
fn stepped(mut view: ArrayViewMut2<'_, f64>, steps: [isize; 2]) -> ArrayViewMut2<'_, f64> {
    for (axis, step) in steps.into_iter().enumerate() {
        view.slice_axis_inplace(Axis(axis), Slice::new(0, None, step));
    }
    view
}

fn sums(x: ArrayView2<'_, f64>) -> Vec<f64> {
    map_columns(x, &Interrupt::never(), |column, _| Ok(log_sum_exp(column))).unwrap()
}

#[test]
fn memory_layout_does_not_change_a_bit() {
    let x = sample(301, 37);
    let expected = sums(x.view());
    let mut fortran = Array2::zeros((301, 37).f());
    fortran.assign(&x);
    assert_eq!(sums(fortran.view()), expected);
    let mut wide = Array2::zeros((602, 111));
    let mut strided = stepped(wide.view_mut(), [2, 3]);
    strided.assign(&x);
    assert_eq!(sums(strided.view()), expected);
    let mut plain = Array2::zeros((301, 37));
    let mut backwards = stepped(plain.view_mut(), [-1, -1]);
    backwards.assign(&x);
    assert_eq!(sums(backwards.view()), expected);
}

#[test]
fn columns_are_written_where_they_belong() {
    let x = sample(50, 21);
    let mut expected = Array2::zeros((50, 21));
    for column in 0..21 {
        let mut out = vec![0.0; 50];
        normalise(&x.column(column).to_vec(), &mut out);
        expected.column_mut(column).assign(&ndarray::aview1(&out));
    }
    let mut padded = Array2::from_elem((100, 42), 7.0);
    let into = stepped(padded.view_mut(), [-2, -2]);
    map_columns_into(x.view(), into, &Interrupt::never(), |column, _, out| {
        Ok(normalise(column, out))
    })
    .unwrap();
    assert_eq!(stepped(padded.view_mut(), [-2, -2]), expected);
    // Entries between those of the view stay as they were: they are the even ones.
    assert!(
        stepped(padded.view_mut(), [2, 1])
            .iter()
            .all(|&entry| entry == 7.0)
    );
    assert!(
        stepped(padded.view_mut(), [1, 2])
            .iter()
            .all(|&entry| entry == 7.0)
    );
    let mut fortran = Array2::zeros((50, 21).f());
    map_columns_into(
        x.view(),
        fortran.view_mut(),
        &Interrupt::never(),
        |column, _, out| Ok(normalise(column, out)),
    )
    .unwrap();
    assert_eq!(fortran, expected);
}

#[test]
fn every_kernel_is_told_its_column() {
    let x = Array2::from_shape_fn((2, 29), |(_, column)| column as f64);
    let seen = map_columns(x.view(), &Interrupt::never(), |column, index| {
        Ok((column[0], index))
    })
    .unwrap();
    assert_eq!(
        seen,
        (0..29)
            .map(|index| (index as f64, index))
            .collect::<Vec<_>>()
    );
}

#[test]
fn arrays_without_rows_or_columns_are_legal() {
    assert_eq!(sums(Array2::zeros((5, 0)).view()), Vec::<f64>::new());
    assert_eq!(
        sums(Array2::zeros((0, 3)).view()),
        vec![f64::NEG_INFINITY; 3]
    );
    let mut out = Array2::zeros((0, 3));
    let x = Array2::<f64>::zeros((0, 3));
    let lengths = map_columns_into(
        x.view(),
        out.view_mut(),
        &Interrupt::never(),
        |column, _, out| Ok((column.len(), out.len())),
    );
    assert_eq!(lengths, Ok(vec![(0, 0); 3]));
}

#[test]
fn an_output_of_another_width_is_refused() {
    let x = sample(4, 3);
    let mut out = Array2::zeros((4, 2));
    let refused = map_columns_into(x.view(), out.view_mut(), &Interrupt::never(), |_, _, _| {
        Ok(())
    });
    let expected = KernelError::Shape {
        argument: "out",
        expected: vec![4, 3],
        found: vec![4, 2],
    };
    assert_eq!(refused, Err(expected));
}

#[test]
fn the_error_of_the_first_column_that_fails_is_reported() {
    let x = sample(4, 100);
    let refused = map_columns(x.view(), &Interrupt::never(), |_, index| {
        if index < 30 {
            Ok(())
        } else {
            Err(KernelError::Memory { entries: index })
        }
    });
    assert_eq!(refused, Err(KernelError::Memory { entries: 30 }));
}

#[test]
fn large_outputs_are_written_where_they_belong() {
    // More than 2^20 entries go past the caches; odd widths lie on other boundaries.
    for (rows, columns) in [(4099, 257), (1030, 1024)] {
        let x = sample(rows, columns);
        let mut out = Array2::zeros((rows, columns));
        map_columns_into(
            x.view(),
            out.view_mut(),
            &Interrupt::never(),
            |column, _, out| {
                out.copy_from_slice(column);
                Ok(())
            },
        )
        .unwrap();
        assert_eq!(out, x);
    }
}

#[test]
fn columns_changed_in_place_are_written_where_they_belong() {
    // The large one goes past the caches; both orders of input and output, and every second entry.
    for (rows, columns) in [(50, 21), (1, 9), (4099, 257)] {
        let x = sample(rows, columns);
        let expected = x.mapv(|entry| 2.0 * entry);
        let mut fortran = Array2::zeros((rows, columns).f());
        fortran.assign(&x);
        let double = |column: &mut [f64], index: usize| {
            column.iter_mut().for_each(|entry| *entry *= 2.0);
            Ok(index)
        };
        for view in [x.view(), fortran.view()] {
            let mut plain = Array2::zeros((rows, columns));
            let mut turned = Array2::zeros((rows, columns).f());
            let mut wide = Array2::zeros((2 * rows, 2 * columns));
            let told = map_columns_in_place(view, plain.view_mut(), &Interrupt::never(), double);
            assert_eq!(told, Ok((0..columns).collect()));
            map_columns_in_place(view, turned.view_mut(), &Interrupt::never(), double).unwrap();
            let into = stepped(wide.view_mut(), [2, 2]);
            map_columns_in_place(view, into, &Interrupt::never(), double).unwrap();
            assert_eq!(plain, expected);
            assert_eq!(turned, expected);
            assert_eq!(stepped(wide.view_mut(), [2, 2]), expected);
        }
    }
}
