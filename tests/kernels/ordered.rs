use std::sync::{Mutex, MutexGuard, PoisonError};
use std::time::{Duration, Instant};

use _core::kernels::columns::{map_columns, map_columns_into};
use _core::kernels::error::KernelError;
use _core::kernels::influence::influence;
use _core::kernels::long_run::{chains, long_run_variance};
use _core::kernels::ordered::{Interrupt, map_slice, map_tasks, set_threads, sum, sum_by, threads};
use _core::kernels::signed_tail::signed_tail_shape;
use _core::kernels::smooth::smooth;
use ndarray::Array2;
use proptest::prelude::*;

use super::support::{Stream, close, fixed};

/// The number of threads belongs to the process: tests that set it take turns.
fn turn() -> MutexGuard<'static, ()> {
    static TURN: Mutex<()> = Mutex::new(());
    TURN.lock().unwrap_or_else(PoisonError::into_inner)
}

/// Bits of everything that a few kernels make of one array.
fn bits(count: usize) -> Vec<u64> {
    set_threads(count).unwrap();
    let mut stream = Stream::new(11);
    let x = Array2::from_shape_simple_fn((400, 61), || 2.0 * stream.normal());
    let never = Interrupt::never();
    let mut out = Array2::zeros(x.dim());
    let mut results = map_columns_into(x.view(), out.view_mut(), &never, |column, _, target| {
        Ok(smooth(column, 0.7, target))
    })
    .unwrap();
    let chains = chains(&[0, 150, 400], 400, true).unwrap();
    results.extend(
        map_columns(x.view(), &never, |z, _| {
            long_run_variance(z, &chains, &never)
        })
        .unwrap(),
    );
    results.extend(map_columns(x.view(), &never, |z, _| Ok(signed_tail_shape(z, 1.0))).unwrap());
    let mut shifts = Array2::zeros((5, 61));
    let quantities = Array2::from_shape_simple_fn((400, 5), || stream.normal());
    influence(x.view(), quantities.view(), shifts.view_mut(), &never).unwrap();
    results.extend(out.iter().chain(shifts.iter()));
    results.iter().map(|result| result.to_bits()).collect()
}

#[test]
fn results_are_the_same_bits_for_any_number_of_threads() {
    let _turn = turn();
    let serial = bits(1);
    assert_eq!(bits(2), serial);
    assert_eq!(bits(7), serial);
}

#[test]
fn the_number_of_threads_is_what_was_set() {
    let _turn = turn();
    for count in [3, 1, 1024] {
        set_threads(count).unwrap();
        assert_eq!(threads(), count);
    }
    set_threads(2).unwrap();
    for count in [0, 1025] {
        assert!(matches!(
            set_threads(count),
            Err(KernelError::Range { argument: "n", .. })
        ));
        assert_eq!(threads(), 2);
    }
}

#[test]
fn tasks_return_in_the_order_of_their_items() {
    let _turn = turn();
    for count in [1, 4] {
        set_threads(count).unwrap();
        let squares = map_tasks((0..1000).collect(), &Interrupt::never(), |item: u64| {
            Ok(item * item)
        });
        assert_eq!(
            squares.unwrap(),
            (0..1000).map(|item| item * item).collect::<Vec<u64>>()
        );
    }
    let x: Vec<f64> = (0..10_000).map(f64::from).collect();
    assert_eq!(
        map_slice(&x, &Interrupt::never(), |x| -x).unwrap(),
        x.iter().map(|x| -x).collect::<Vec<f64>>()
    );
}

#[test]
fn work_stops_soon_after_the_caller_asks() {
    let _turn = turn();
    for count in [1, 3] {
        set_threads(count).unwrap();
        let begun = Instant::now();
        let wished = || true;
        let stopped = map_tasks((0..4000).collect(), &Interrupt::new(&wished), |_: u64| {
            std::thread::sleep(Duration::from_millis(5));
            Ok(())
        });
        assert_eq!(stopped, Err(KernelError::Interrupted));
        // The promise is 0.2 s, and a second is left to a busy machine; all tasks take 6.7 s.
        assert!(
            begun.elapsed() < Duration::from_secs(1),
            "{:?}",
            begun.elapsed()
        );
    }
}

#[test]
fn a_single_long_column_can_be_stopped() {
    // A random walk keeps all its lags: 3e5 draws would take minutes.
    let mut stream = Stream::new(5);
    let mut level = 0.0;
    let z: Vec<f64> = (0..300_000)
        .map(|_| {
            level += stream.normal();
            level
        })
        .collect();
    let whole = 0..z.len();
    let wished = || true;
    let begun = Instant::now();
    let stopped = long_run_variance(&z, &[whole], &Interrupt::new(&wished));
    assert_eq!(stopped, Err(KernelError::Interrupted));
    assert!(
        begun.elapsed() < Duration::from_secs(1),
        "{:?}",
        begun.elapsed()
    );
}

#[test]
fn the_wish_is_only_asked_for_on_the_callers_thread() {
    let _turn = turn();
    set_threads(4).unwrap();
    let home = std::thread::current().id();
    let wished = || {
        assert_eq!(std::thread::current().id(), home);
        false
    };
    // Looks are due every 40 ms, and for most of them a task on another thread comes first.
    let done = map_tasks((0..400).collect(), &Interrupt::new(&wished), |item: u64| {
        std::thread::sleep(Duration::from_millis(2));
        Ok(item)
    });
    assert_eq!(done, Ok((0..400).collect()));
}

proptest! {
    #![proptest_config(fixed(200))]

    // 1e-15: pairwise sums of at most 3000 terms, relative to the sum of absolute values.
    #[test]
    fn sums_are_exact_to_the_last_digits(x in prop::collection::vec(-1e3..1e3, 0..3000)) {
        // Sum without any rounding: every entry as an integer multiple of 2^-60.
        let rounded: Vec<f64> = x.iter().map(|x: &f64| (x * 1048576.0).round() / 1048576.0).collect();
        let exact: i128 = rounded.iter().map(|x| (x * 1048576.0) as i128).sum();
        let size: f64 = rounded.iter().map(|x| x.abs()).sum();
        let error = (sum(&rounded) - exact as f64 / 1048576.0).abs();
        prop_assert!(error <= 1e-15 * size, "{error} {size}");
        prop_assert_eq!(sum(&rounded), sum_by(rounded.len(), |s| rounded[s]));
    }
}

#[test]
fn long_sums_do_not_drift() {
    // Added one by one, ten million times 0.1 is off by 1.6e-4; here 64 are, and then halves.
    assert!(close(sum_by(10_000_000, |_| 0.1), 1e6, 1e-14));
}

#[test]
fn the_caller_is_told_how_far_the_work_is() {
    let _turn = turn();
    for count in [1, 3] {
        set_threads(count).unwrap();
        let seen = Mutex::new(Vec::new());
        let told = |done, total| {
            seen.lock().unwrap().push((done, total));
            false
        };
        let interrupt = Interrupt::telling(&told);
        map_tasks((0..60).collect(), &interrupt, |_: u64| {
            std::thread::sleep(Duration::from_millis(5));
            Ok(())
        })
        .unwrap();
        assert_eq!(interrupt.progress(), (60, 60));
        let seen = seen.into_inner().unwrap();
        // 60 tasks of 5 ms on at most 3 threads take 100 ms, and a look is due every 40 ms.
        assert!(!seen.is_empty(), "{count}");
        assert!(seen.is_sorted() && seen.iter().all(|&(done, total)| done <= 60 && total == 60));
    }
}

#[test]
fn tasks_may_have_tasks_of_their_own() {
    let _turn = turn();
    set_threads(3).unwrap();
    let never = Interrupt::never();
    let sums = map_tasks((0..50).collect(), &never, |item: u64| {
        let parts = map_tasks((0..20).collect(), &never, |part: u64| Ok(item * part))?;
        Ok(parts.iter().sum::<u64>())
    });
    assert_eq!(sums, Ok((0..50).map(|item| 190 * item).collect()));
}
