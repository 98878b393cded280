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

/// Entries of a cache line.
const LINE: usize = 8;

/// An array of arbitrary finite numbers that begins with a cache line, to be written before it is
/// read.
pub struct Lease {
    room: Vec<f64>,
    start: usize,
    length: usize,
}

impl Lease {
    /// An array of `length` entries.
    pub fn new(length: usize) -> Self {
        let room = if length + LINE > MOST_KEPT {
            vec![0.0; length + LINE]
        } else {
            let spare = SPARE.with(|spare| spare.borrow_mut().pop());
            let mut room = spare.unwrap_or_default();
            if room.len() < length + LINE {
                room.resize(length + LINE, 0.0);
            }
            room
        };
        let over = room.as_ptr().addr() / size_of::<f64>() % LINE;
        Self {
            start: (LINE - over) % LINE,
            length,
            room,
        }
    }
}

impl Default for Lease {
    fn default() -> Self {
        Self::new(0)
    }
}

impl Drop for Lease {
    fn drop(&mut self) {
        if self.room.capacity() > MOST_KEPT {
            return;
        }
        let entries = std::mem::take(&mut self.room);
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
        &self.room[self.start..][..self.length]
    }
}

impl DerefMut for Lease {
    fn deref_mut(&mut self) -> &mut [f64] {
        &mut self.room[self.start..][..self.length]
    }
}
