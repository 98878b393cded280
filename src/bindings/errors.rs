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
    let raised: Mutex<Option<PyErr>> = Mutex::new(None);
    let wished = || match Python::attach(|py| py.check_signals()) {
        Ok(()) => false,
        Err(error) => {
            *raised.lock().unwrap_or_else(PoisonError::into_inner) = Some(error);
            true
        }
    };
    let result = py.detach(|| work(&Interrupt::new(&wished)));
    match raised.into_inner().unwrap_or_else(PoisonError::into_inner) {
        Some(error) => Err(error),
        None => Ok(result?),
    }
}
