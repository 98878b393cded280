//! Weighted quantiles and shortest intervals, with and without a known order.
#![no_main]

use _core::kernels::interval::{expect_mass, shortest_interval};
use _core::kernels::quantile::quantile;
use _core::kernels::quantile_many::{LANES, Sorted, Weights, quantiles};
use _core::kernels::sorting::{expect_order, order};
use libfuzzer_sys::fuzz_target;
use ndarray::Array2;
use steelyard_fuzz::Words;

fuzz_target!(|data: &[u8]| {
    let mut words = Words::new(data);
    let wild = words.flag();
    let mass = if wild {
        words.number()
    } else {
        (f64::from(words.byte()) + 1.0) / 256.0
    };
    let mut probs: Vec<f64> = (0..words.count(20))
        .map(|_| if wild { words.number() } else { words.share() })
        .collect();
    probs.sort_by(f64::total_cmp);
    let lanes = words.count(LANES);
    let count = words.length(2048);
    let x = words.numbers(count);
    let w = if wild {
        words.numbers(count)
    } else {
        words.weights(count)
    };
    let known = sorted(&x);
    let mut out = vec![7.0; probs.len()];
    quantile(&x, &w, None, probs.iter().copied(), &mut out);
    let mut again = vec![7.0; probs.len()];
    quantile(&x, &w, Some(&known), probs.iter().copied(), &mut again);
    assert!(
        out.iter()
            .zip(&again)
            .all(|(a, b)| a.to_bits() == b.to_bits())
    );
    let ends = expect_mass(mass).map(|()| {
        let ends = shortest_interval(&x, &w, None, mass);
        let again = shortest_interval(&x, &w, Some(&known), mass);
        assert_eq!(
            (ends.0.to_bits(), ends.1.to_bits()),
            (again.0.to_bits(), again.1.to_bits())
        );
        ends
    });
    let many = in_lanes(&x, &w, &known, &probs, lanes);
    let Some((least, most)) = range(&x, &w) else {
        return;
    };
    if let Ok((lower, upper)) = ends {
        assert!(
            least <= lower && lower <= upper && upper <= most,
            "{lower} to {upper}"
        );
    }
    let within = |q: f64| q.is_nan() || (least <= q && q <= most);
    assert!(many.iter().copied().all(within), "{many:?} at {probs:?}");
    if !wild && least.is_finite() && most.is_finite() {
        assert!(out.is_sorted(), "{out:?} at {probs:?}");
        assert!(
            out.iter().all(|&q| least <= q && q <= most),
            "{out:?} at {probs:?}"
        );
    }
});

fn sorted(x: &[f64]) -> Vec<u32> {
    let found = expect_order(order(x)).expect("every index once");
    assert_eq!(found.len(), x.len());
    assert!(found.windows(2).all(|pair| {
        let (a, b) = (pair[0], pair[1]);
        x[a as usize]
            .total_cmp(&x[b as usize])
            .then(a.cmp(&b))
            .is_lt()
    }));
    found
}

/// The quantiles of the last of several sets of weights, all alike.
fn in_lanes(x: &[f64], w: &[f64], order: &[u32], probs: &[f64], lanes: usize) -> Vec<f64> {
    let sets = Array2::from_shape_fn((w.len(), lanes), |(draw, _)| w[draw]);
    let mut found = vec![vec![f64::NAN; probs.len()]; LANES];
    quantiles(
        &Sorted::new(x, order),
        &Weights::new(sets.view()),
        probs,
        |lane, level, value| found[lane][level] = value,
    );
    let alike = |a: &f64, b: &f64| a.to_bits() == b.to_bits() || (a.is_nan() && b.is_nan());
    for lane in 1..lanes {
        assert!(found[lane].iter().zip(&found[0]).all(|(a, b)| alike(a, b)));
    }
    found.swap_remove(0)
}

/// Least and largest value that counts; nothing where weights or values are such that there is
/// no distribution.
fn range(x: &[f64], w: &[f64]) -> Option<(f64, f64)> {
    let total: f64 = w.iter().sum();
    if !total.is_finite() || w.iter().any(|weight| !(*weight >= 0.0)) {
        return None;
    }
    let counted = || {
        x.iter()
            .zip(w)
            .filter(|pair| *pair.1 > 0.0)
            .map(|pair| *pair.0)
    };
    if counted().any(f64::is_nan) {
        return None;
    }
    Some((counted().reduce(f64::min)?, counted().reduce(f64::max)?))
}
