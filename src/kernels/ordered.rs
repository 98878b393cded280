//! Work in parallel whose result does not depend on the number of threads.
//!
//! Tasks are independent and their results are kept in index order; sums run in one fixed order.
//! The pool is private to the process, because a pool inherited through `fork` has no threads.

use std::collections::BTreeMap;
use std::sync::atomic::{AtomicUsize, Ordering};
use std::sync::{Arc, Condvar, Mutex, PoisonError, TryLockError};
use std::thread;
use std::time::Duration;

use rayon::prelude::*;
use rayon::{ThreadPool, ThreadPoolBuilder};

use super::error::KernelError;
pub use super::interrupt::Interrupt;
use super::interrupt::LOOK_EVERY;

/// Most threads that may be asked for; more would only cost memory.
pub const MOST_THREADS: usize = 1024;

/// Environment variable that sets the number of threads.
pub const THREADS_VARIABLE: &str = "STEELYARD_THREADS";

/// Below this length a sum is formed by the plain loop; above, halves are added.
const SUM_BLOCK: usize = 256;

/// Entries of a slice that one task takes.
const SLICE_BLOCK: usize = 4096;

static CHOSEN: AtomicUsize = AtomicUsize::new(0);
static POOLS: Mutex<BTreeMap<(u32, usize), Arc<ThreadPool>>> = Mutex::new(BTreeMap::new());

/// Number of threads in use: the number set, else `STEELYARD_THREADS` if it is a positive
/// integer, else what the machine offers.
pub fn threads() -> usize {
    match CHOSEN.load(Ordering::Relaxed) {
        0 => default_threads(),
        chosen => chosen,
    }
}

/// Sets the number of threads for this process, 1 to [`MOST_THREADS`].
///
/// # Errors
/// [`KernelError::Range`] outside that range.
pub fn set_threads(count: usize) -> Result<(), KernelError> {
    if count == 0 || count > MOST_THREADS {
        return Err(KernelError::Range {
            argument: "n",
            expected: "1 to 1024 threads",
            found: count as f64,
        });
    }
    CHOSEN.store(count, Ordering::Relaxed);
    Ok(())
}

fn default_threads() -> usize {
    let stated = std::env::var(THREADS_VARIABLE)
        .ok()
        .and_then(|text| text.trim().parse::<usize>().ok())
        .filter(|&count| count > 0);
    let count = stated.unwrap_or_else(|| thread::available_parallelism().map_or(1, usize::from));
    count.min(MOST_THREADS)
}

/// `task(item)` for every item, in the order of the items, on [`threads`] threads.
///
/// # Errors
/// The error of the first item that fails, or [`KernelError::Interrupted`].
pub fn map_tasks<I, T, F>(
    items: Vec<I>,
    interrupt: &Interrupt<'_>,
    task: F,
) -> Result<Vec<T>, KernelError>
where
    I: Send,
    T: Send,
    F: Fn(I) -> Result<T, KernelError> + Sync,
{
    interrupt.total.fetch_add(items.len(), Ordering::Relaxed);
    let guarded = |item| {
        interrupt.check()?;
        let result = task(item);
        interrupt.done.fetch_add(1, Ordering::Relaxed);
        result
    };
    // A task that has tasks of its own runs them itself: were it to wait for them, all threads might.
    let inside = rayon::current_thread_index().is_some();
    let wanted = if inside {
        1
    } else {
        threads().min(items.len())
    };
    // A pool of the size set, not of the size wanted: else every count of tasks has its own pool.
    let pool = if wanted > 1 { pool(threads()) } else { None };
    match pool {
        None => items.into_iter().map(guarded).collect(),
        Some(pool) => {
            let finished = Bell::default();
            let mut results = Vec::new();
            pool.in_place_scope(|scope| {
                scope.spawn(|_| {
                    let _rings_at_end = Ringer(&finished);
                    items
                        .into_par_iter()
                        .with_max_len(1)
                        .map(guarded)
                        .collect_into_vec(&mut results);
                });
                while !finished.rung_within(LOOK_EVERY) {
                    // The tasks see the wish themselves, so its result is not needed here.
                    let _ = interrupt.check();
                }
            });
            results.into_iter().collect()
        }
    }
}

/// `function(entry)` for every entry of `x`, in order.
///
/// # Errors
/// [`KernelError::Interrupted`] only.
pub fn map_slice<F>(
    x: &[f64],
    interrupt: &Interrupt<'_>,
    function: F,
) -> Result<Vec<f64>, KernelError>
where
    F: Fn(f64) -> f64 + Sync,
{
    let blocks: Vec<&[f64]> = x.chunks(SLICE_BLOCK).collect();
    let results = map_tasks(blocks, interrupt, |block| {
        Ok(block
            .iter()
            .map(|&entry| function(entry))
            .collect::<Vec<f64>>())
    })?;
    Ok(results.concat())
}

/// The pool of this process with `count` threads; nothing when it cannot be had, so that the
/// caller runs serially.
fn pool(count: usize) -> Option<Arc<ThreadPool>> {
    let mut pools = None;
    // Another thread may have held the lock at the moment of a fork; the child would wait for ever.
    for _ in 0..200 {
        match POOLS.try_lock() {
            Ok(guard) => pools = Some(guard),
            Err(TryLockError::Poisoned(poisoned)) => pools = Some(poisoned.into_inner()),
            Err(TryLockError::WouldBlock) => {
                thread::sleep(Duration::from_millis(1));
                continue;
            }
        }
        break;
    }
    let mut pools = pools?;
    let key = (std::process::id(), count);
    if let Some(pool) = pools.get(&key) {
        return Some(Arc::clone(pool));
    }
    let built = ThreadPoolBuilder::new()
        .num_threads(count)
        .thread_name(|index| format!("steelyard-{index}"))
        .build();
    let pool = Arc::new(built.ok()?);
    pools.insert(key, Arc::clone(&pool));
    Some(pool)
}

/// Tells the waiting thread that the tasks are done.
#[derive(Default)]
struct Bell {
    rung: Mutex<bool>,
    changed: Condvar,
}

impl Bell {
    fn ring(&self) {
        *self.rung.lock().unwrap_or_else(PoisonError::into_inner) = true;
        self.changed.notify_all();
    }

    fn rung_within(&self, time: Duration) -> bool {
        let rung = self.rung.lock().unwrap_or_else(PoisonError::into_inner);
        if *rung {
            return true;
        }
        let (rung, _) = self
            .changed
            .wait_timeout(rung, time)
            .unwrap_or_else(PoisonError::into_inner);
        *rung
    }
}

/// Rings when dropped, so that the waiting thread is released even if a task panics.
struct Ringer<'a>(&'a Bell);

impl Drop for Ringer<'_> {
    fn drop(&mut self) {
        self.0.ring();
    }
}

/// `Σ_i term(i)` for `i` in `0..count`, added pairwise in a fixed order: the error grows with
/// `log count`, not with `count` (Higham 1993, SIAM Journal on Scientific Computing 14, 783-799).
pub fn sum_by(count: usize, term: impl Fn(usize) -> f64 + Copy) -> f64 {
    sum_range(0, count, term)
}

fn sum_range(from: usize, to: usize, term: impl Fn(usize) -> f64 + Copy) -> f64 {
    let count = to - from;
    if count > SUM_BLOCK {
        let middle = from + (count / 2).next_multiple_of(SUM_BLOCK);
        return sum_range(from, middle, term) + sum_range(middle, to, term);
    }
    let mut lanes = [0.0; 4];
    let whole = from + count / 4 * 4;
    for start in (from..whole).step_by(4) {
        for (lane, total) in lanes.iter_mut().enumerate() {
            *total += term(start + lane);
        }
    }
    let rest: f64 = (whole..to).map(term).sum();
    (lanes[0] + lanes[1]) + (lanes[2] + lanes[3]) + rest
}

/// `Σ values`, added as in [`sum_by`].
pub fn sum(values: &[f64]) -> f64 {
    sum_by(values.len(), |index| values[index])
}
