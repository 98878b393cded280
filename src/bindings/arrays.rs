//! NumPy arrays as array views whose memory may be read.

use std::borrow::Cow;

use ndarray::{ArrayView1, ArrayView2, ArrayViewMut2};
use numpy::ndarray::{Dimension, Ix2};
use numpy::{
    Element, PyArray, PyArrayMethods, PyReadonlyArray1, PyReadonlyArray2, PyReadwriteArray2,
    PyUntypedArrayMethods,
};
use pyo3::prelude::*;

use crate::kernels::error::KernelError;

/// An array of float64, or of float32 which kernels widen where they load it.
#[derive(FromPyObject)]
pub enum Numbers<'py> {
    /// float64.
    Double(PyReadonlyArray2<'py, f64>),
    /// float32.
    Single(PyReadonlyArray2<'py, f32>),
}

/// The value of `$body`, in which `$view` is the view of `$numbers` in its own type.
macro_rules! with_view {
    ($argument:literal, $numbers:expr, |$view:ident| $body:expr) => {
        match &$numbers {
            $crate::bindings::arrays::Numbers::Double(array) => {
                let $view = $crate::bindings::arrays::matrix($argument, array)?;
                $body
            }
            $crate::bindings::arrays::Numbers::Single(array) => {
                let $view = $crate::bindings::arrays::matrix($argument, array)?;
                $body
            }
        }
    };
}
pub(super) use with_view;

/// View of `array`, shape `(n, k)`, any strides.
///
/// # Errors
/// [`KernelError::Misaligned`].
pub fn matrix<'a, T: Element>(
    argument: &'static str,
    array: &'a PyReadonlyArray2<'_, T>,
) -> Result<ArrayView2<'a, T>, KernelError> {
    expect_aligned(argument, array)?;
    Ok(array.as_array())
}

/// View of `array` to write to, shape `(n, k)`, any strides.
///
/// # Errors
/// [`KernelError::Misaligned`], [`KernelError::Overlap`].
pub fn matrix_mut<'a>(
    argument: &'static str,
    array: &'a mut PyReadwriteArray2<'_, f64>,
) -> Result<ArrayViewMut2<'a, f64>, KernelError> {
    expect_aligned(argument, array)?;
    expect_apart(argument, array)?;
    Ok(array.as_array_mut())
}

/// Entries of `array`, shape `(n,)`, any stride; a copy unless they are contiguous.
///
/// # Errors
/// [`KernelError::Misaligned`].
pub fn vector<'a, T: Element + Copy>(
    argument: &'static str,
    array: &'a PyReadonlyArray1<'_, T>,
) -> Result<Cow<'a, [T]>, KernelError> {
    expect_aligned(argument, array)?;
    let view: ArrayView1<'a, T> = array.as_array();
    Ok(view
        .to_slice()
        .map_or_else(|| Cow::Owned(view.to_vec()), Cow::Borrowed))
}

/// A view of a misaligned array is undefined behaviour, and the numpy crate makes one.
fn expect_aligned<T: Element, D: Dimension>(
    argument: &'static str,
    array: &Bound<'_, PyArray<T, D>>,
) -> Result<(), KernelError> {
    let size = size_of::<T>();
    let strides = array.strides().iter().zip(array.shape());
    let even = strides
        .filter(|&(_, &length)| length > 1)
        .all(|(&stride, _)| stride.unsigned_abs().is_multiple_of(size));
    if even && (array.data() as usize).is_multiple_of(size) {
        return Ok(());
    }
    Err(KernelError::Misaligned { argument })
}

/// Columns are written by several threads: no entry may lie in two places of `array`.
fn expect_apart(
    argument: &'static str,
    array: &Bound<'_, PyArray<f64, Ix2>>,
) -> Result<(), KernelError> {
    if array.shape().contains(&0) {
        return Ok(());
    }
    let mut steps: Vec<(usize, usize)> = array
        .strides()
        .iter()
        .zip(array.shape())
        .filter(|&(_, &length)| length > 1)
        .map(|(stride, &length)| (stride.unsigned_abs(), length))
        .collect();
    steps.sort_unstable();
    let mut reach = 0;
    for (stride, length) in steps {
        if stride <= reach {
            return Err(KernelError::Overlap { argument });
        }
        reach += stride * (length - 1);
    }
    Ok(())
}
