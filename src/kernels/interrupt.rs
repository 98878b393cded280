//! The caller's wish to stop, and how far the work is.

use std::sync::atomic::{AtomicBool, AtomicU64, AtomicUsize, Ordering};
use std::thread::{self, ThreadId};
use std::time::{Duration, Instant};

use super::error::KernelError;

/// Time between two looks at the caller's wish to stop.
pub(super) const LOOK_EVERY: Duration = Duration::from_millis(40);

/// The caller's wish to stop, looked up at most every 40 ms and only on the caller's own thread;
/// other threads see the answer. The look also tells the caller how many tasks are done, of how
/// many.
pub struct Interrupt<'a> {
    wished: Wish<'a>,
    pub(super) done: AtomicUsize,
    pub(super) total: AtomicUsize,
    home: ThreadId,
    begun: Instant,
    next_look: AtomicU64,
    raised: AtomicBool,
}

/// How the caller is asked.
#[derive(Clone, Copy)]
enum Wish<'a> {
    Plain(&'a (dyn Fn() -> bool + Sync)),
    Told(&'a (dyn Fn(usize, usize) -> bool + Sync)),
}

impl<'a> Interrupt<'a> {
    /// A watch on `wished`, which is only ever called on the thread that calls `new`.
    pub fn new(wished: &'a (dyn Fn() -> bool + Sync)) -> Self {
        Self::on(Wish::Plain(wished))
    }

    /// As [`Self::new`], on `wished(done, total)`, which is told the tasks done and known of.
    pub fn telling(wished: &'a (dyn Fn(usize, usize) -> bool + Sync)) -> Self {
        Self::on(Wish::Told(wished))
    }

    fn on(wished: Wish<'a>) -> Self {
        Self {
            wished,
            done: AtomicUsize::new(0),
            total: AtomicUsize::new(0),
            home: thread::current().id(),
            begun: Instant::now(),
            next_look: AtomicU64::new(LOOK_EVERY.as_millis() as u64),
            raised: AtomicBool::new(false),
        }
    }

    /// A watch that never stops anything.
    pub fn never() -> Interrupt<'static> {
        Interrupt::new(&|| false)
    }

    /// Tasks done, and tasks known of.
    pub fn progress(&self) -> (usize, usize) {
        let done = self.done.load(Ordering::Relaxed);
        (done, self.total.load(Ordering::Relaxed))
    }

    /// # Errors
    /// [`KernelError::Interrupted`] once the caller has asked to stop.
    pub fn check(&self) -> Result<(), KernelError> {
        if self.raised.load(Ordering::Relaxed) {
            return Err(KernelError::Interrupted);
        }
        if thread::current().id() != self.home {
            return Ok(());
        }
        let now = self.begun.elapsed().as_millis() as u64;
        if now < self.next_look.load(Ordering::Relaxed) {
            return Ok(());
        }
        let next = now + LOOK_EVERY.as_millis() as u64;
        self.next_look.store(next, Ordering::Relaxed);
        let (done, total) = self.progress();
        let wished = match self.wished {
            Wish::Plain(wished) => wished(),
            Wish::Told(wished) => wished(done, total),
        };
        if wished {
            self.raised.store(true, Ordering::Relaxed);
            return Err(KernelError::Interrupted);
        }
        Ok(())
    }
}
