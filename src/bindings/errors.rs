//! Kernel errors as Python exceptions, and Ctrl-C as a kernel sees it.

use std::sync::{Mutex, PoisonError};

use pyo3::exceptions::PyValueError;
use pyo3::prelude::*;

use crate::kernels::error::KernelError;
use crate::kernels::ordered::Interrupt;

impl From<KernelError> for PyErr {
    fn from(error: KernelError) -> Self {
        PyValueError::new_err(error.to_string())
    }
}

/// Runs `work` detached from the interpreter. A signal that arrives meanwhile stops it, and the
/// exception of the signal's handler is what the caller sees.
pub fn detached<T: Send>(
    py: Python<'_>,
    work: impl FnOnce(&Interrupt<'_>) -> Result<T, KernelError> + Send,
) -> PyResult<T> {
    reporting(py, None, work)
}

/// As [`detached`]; calls `progress(done, total)` now and then, and once at the end. What it raises
/// stops the work too.
pub fn reporting<T: Send>(
    py: Python<'_>,
    progress: Option<&Py<PyAny>>,
    work: impl FnOnce(&Interrupt<'_>) -> Result<T, KernelError> + Send,
) -> PyResult<T> {
    let tell = |py: Python<'_>, done: usize, total: usize| match progress {
        Some(progress) => progress.call1(py, (done, total)).map(drop),
        None => Ok(()),
    };
    let raised: Mutex<Option<PyErr>> = Mutex::new(None);
    let wished = |done, total| {
        let found = Python::attach(|py| py.check_signals().and_then(|()| tell(py, done, total)));
        match found {
            Ok(()) => false,
            Err(error) => {
                *raised.lock().unwrap_or_else(PoisonError::into_inner) = Some(error);
                true
            }
        }
    };
    let (result, (done, total)) = py.detach(|| {
        let interrupt = Interrupt::telling(&wished);
        (work(&interrupt), interrupt.progress())
    });
    if let Some(error) = raised.into_inner().unwrap_or_else(PoisonError::into_inner) {
        return Err(error);
    }
    let result = result?;
    tell(py, done, total)?;
    Ok(result)
}
