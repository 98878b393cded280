//! Work arrays that a thread keeps for its next task: the first touch of fresh memory costs more
//! than most kernels do with it.

use std::cell::RefCell;
use std::ops::{Deref, DerefMut};

/// Largest array that is kept, 8 MiB; longer ones go back to the system.
const MOST_KEPT: usize = 1 << 20;

/// Arrays kept by a thread.
const KEPT: usize = 2;

thread_local! {
    static SPARE: RefCell<Vec<Vec<f64>>> = const { RefCell::new(Vec::new()) };
}

/// An array of arbitrary finite numbers, to be written before it is read.
pub struct Lease(Vec<f64>);

impl Lease {
    /// An array of `length` entries.
    pub fn new(length: usize) -> Self {
        let spare = SPARE.with(|spare| spare.borrow_mut().pop());
        let mut entries = spare.unwrap_or_default();
        entries.resize(length, 0.0);
        Self(entries)
    }
}

impl Drop for Lease {
    fn drop(&mut self) {
        if self.0.capacity() > MOST_KEPT {
            return;
        }
        let entries = std::mem::take(&mut self.0);
        // At the end of a thread there is nothing left to keep it in.
        let _ = SPARE.try_with(|spare| {
            let mut spare = spare.borrow_mut();
            if spare.len() < KEPT {
                spare.push(entries);
            }
        });
    }
}

impl Deref for Lease {
    type Target = [f64];

    fn deref(&self) -> &[f64] {
        &self.0
    }
}

impl DerefMut for Lease {
    fn deref_mut(&mut self) -> &mut [f64] {
        &mut self.0
    }
}
