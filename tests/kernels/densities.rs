//! Log densities of all families against their textbook formulas.

use std::f64::consts::{LN_2, PI};

use _core::kernels::densities::Kind;
use _core::kernels::densities::hyper::Hyper;
use _core::kernels::error::KernelError;
use _core::kernels::ordered::Interrupt;
use libm::lgamma;
use proptest::prelude::*;

use super::support::{close, fixed};

type Formula = fn([f64; 3], f64) -> f64;

fn normal(z: f64) -> f64 {
    -0.5 * z * z - 0.5 * (2.0 * PI).ln()
}

fn student(df: f64, z: f64) -> f64 {
    lgamma(0.5 * (df + 1.0))
        - lgamma(0.5 * df)
        - 0.5 * (df * PI).ln()
        - 0.5 * (df + 1.0) * (z * z / df).ln_1p()
}

fn log_choose(n: f64, k: f64) -> f64 {
    lgamma(n + 1.0) - lgamma(k + 1.0) - lgamma(n - k + 1.0)
}

/// Name, number of hyperparameters, and the textbook formula inside the support.
fn families() -> Vec<(&'static str, usize, Formula)> {
    vec![
        ("normal", 2, |[m, s, _], x| normal((x - m) / s) - s.ln()),
        ("half_normal", 1, |[s, ..], x| normal(x / s) + LN_2 - s.ln()),
        ("log_normal", 2, |[m, s, _], x| {
            normal((x.ln() - m) / s) - s.ln() - x.ln()
        }),
        ("student_t", 3, |[df, m, s], x| {
            student(df, (x - m) / s) - s.ln()
        }),
        ("half_student_t", 2, |[df, s, _], x| {
            student(df, x / s) + LN_2 - s.ln()
        }),
        ("cauchy", 2, |[m, s, _], x| {
            -(PI * s * (1.0 + ((x - m) / s).powi(2))).ln()
        }),
        ("half_cauchy", 1, |[s, ..], x| {
            (2.0 / PI / s / (1.0 + (x / s).powi(2))).ln()
        }),
        ("gamma", 2, |[a, b, _], x| {
            a * b.ln() - lgamma(a) + (a - 1.0) * x.ln() - b * x
        }),
        ("inverse_gamma", 2, |[a, b, _], x| {
            a * b.ln() - lgamma(a) - (a + 1.0) * x.ln() - b / x
        }),
        ("beta", 2, |[a, b, _], x| {
            (a - 1.0) * x.ln() + (b - 1.0) * (-x).ln_1p() + lgamma(a + b) - lgamma(a) - lgamma(b)
        }),
        ("exponential", 1, |[rate, ..], x| rate.ln() - rate * x),
        ("laplace", 2, |[m, s, _], x| {
            -((x - m) / s).abs() - (2.0 * s).ln()
        }),
        ("pareto", 2, |[a, m, _], x| {
            a.ln() + a * m.ln() - (a + 1.0) * x.ln()
        }),
        ("flat", 2, |[low, high, _], _| -(high - low).ln()),
        ("logistic", 2, |[m, s, _], x| {
            let z = (x - m) / s;
            -z - 2.0 * (-z).exp().ln_1p() - s.ln()
        }),
        ("gumbel", 2, |[m, s, _], x| {
            let z = (x - m) / s;
            -z - (-z).exp() - s.ln()
        }),
        ("weibull", 2, |[k, s, _], x| {
            (k / s).ln() + (k - 1.0) * (x / s).ln() - (x / s).powf(k)
        }),
        ("skew_normal", 3, |[m, s, slant], x| {
            let z = (x - m) / s;
            normal(z) - s.ln() + libm::erfc(-slant * z / 2f64.sqrt()).ln()
        }),
        ("poisson", 1, |[rate, ..], k| {
            k * rate.ln() - rate - lgamma(k + 1.0)
        }),
        ("binomial", 2, |[n, p, _], k| {
            log_choose(n, k) + k * p.ln() + (n - k) * (-p).ln_1p()
        }),
        ("negative_binomial", 2, |[m, d, _], k| {
            log_choose(k + d - 1.0, k) + d * (d / (d + m)).ln() + k * (m / (d + m)).ln()
        }),
    ]
}

/// Hyperparameters in range and a value in the support, from three numbers in (0, 1).
fn placed(name: &str, [u, v, w]: [f64; 3], at: f64) -> ([f64; 3], f64) {
    let spread = |share: f64| (4.0 * share - 2.0).exp();
    match name {
        "half_normal" | "half_cauchy" | "exponential" => ([spread(u), 0.0, 0.0], spread(at)),
        "student_t" => ([spread(u), 4.0 * v - 2.0, spread(w)], 20.0 * at - 10.0),
        "half_student_t" | "gamma" | "inverse_gamma" | "weibull" => {
            ([spread(u), spread(v), 0.0], spread(at))
        }
        "log_normal" => ([4.0 * u - 2.0, spread(v), 0.0], spread(at)),
        "beta" => ([spread(u), spread(v), 0.0], at),
        "pareto" => ([spread(u), spread(v), 0.0], spread(v) * (1.0 + spread(at))),
        "flat" => ([-spread(u), spread(v), 0.0], spread(v) * at),
        "skew_normal" => ([4.0 * u - 2.0, spread(v), 4.0 * w - 2.0], 6.0 * at - 3.0),
        "poisson" => ([9.0 * u + 0.01, 0.0, 0.0], (30.0 * at).floor()),
        "binomial" => (
            [(30.0 * u).floor(), v, 0.0],
            ((30.0 * u).floor() * at).round(),
        ),
        "negative_binomial" => ([9.0 * u + 0.01, spread(v), 0.0], (30.0 * at).floor()),
        _ => ([4.0 * u - 2.0, spread(v), 0.0], 20.0 * at - 10.0),
    }
}

fn evaluate(name: &str, hyper: &Hyper<'_>, x: &[f64]) -> Vec<f64> {
    let kind = Kind::named(name).expect("a family of the list");
    let mut out = vec![0.0; x.len()];
    kind.log_density(x, hyper, &mut out, &Interrupt::never())
        .expect("arguments that fit");
    out
}

fn rows(sets: &[[f64; 3]], count: usize) -> Vec<Vec<f64>> {
    (0..count)
        .map(|row| sets.iter().map(|set| set[row]).collect())
        .collect()
}

fn alone(name: &str, count: usize, set: [f64; 3], x: f64) -> f64 {
    let columns = rows(&[set], count);
    let slices: Vec<&[f64]> = columns.iter().map(Vec::as_slice).collect();
    evaluate(name, &Hyper::new(&slices, 1).expect("equal lengths"), &[x])[0]
}

#[test]
fn the_list_of_families_is_complete() {
    let named: Vec<&str> = families().iter().map(|family| family.0).collect();
    assert_eq!(Kind::names().collect::<Vec<_>>(), named);
    assert!(Kind::named("norm").is_none());
}

proptest! {
    #![proptest_config(fixed(150))]

    // 1e-11 of the larger of 1 and the value: the formulas cancel where shapes are some 10.
    #[test]
    fn log_densities_are_those_of_the_textbook(
        u in 0.001..0.999_f64, v in 0.001..0.999_f64, w in 0.001..0.999_f64, at in 0.001..0.999_f64,
    ) {
        for (name, count, formula) in families() {
            let (hyper, x) = placed(name, [u, v, w], at);
            let value = alone(name, count, hyper, x);
            prop_assert!(close(value, formula(hyper, x), 1e-11), "{name} {hyper:?} {x}: {value}");
        }
    }

    #[test]
    fn hyperparameters_in_rows_and_columns_reach_their_entries(
        u in prop::collection::vec(0.001..0.999_f64, 7),
        repeat in 1..5_usize,
        sets in 1..7_usize,
        rounds in 1..60_usize,
    ) {
        for (name, count, _) in families() {
            let placed: Vec<_> = (0..sets).map(|k| placed(name, [u[k], u[(k + 1) % 7], u[6]], 0.4)).collect();
            let columns = rows(&placed.iter().map(|pair| pair.0).collect::<Vec<_>>(), count);
            let slices: Vec<&[f64]> = columns.iter().map(Vec::as_slice).collect();
            let hyper = Hyper::new(&slices, repeat).expect("equal lengths");
            let number = |index: usize| (index / repeat) % sets;
            let x: Vec<f64> = (0..sets * repeat * rounds).map(|i| placed[number(i)].1).collect();
            for (index, value) in evaluate(name, &hyper, &x).into_iter().enumerate() {
                let (set, x) = placed[number(index)];
                prop_assert_eq!(value.to_bits(), alone(name, count, set, x).to_bits());
            }
        }
    }

    #[test]
    fn extreme_hyperparameters_give_no_nan(
        exponents in prop::collection::vec(-1074..1024_i32, 4),
        share in 0.0..1.0_f64,
        negative in any::<bool>(),
    ) {
        let [u, v, w, x] = [0, 1, 2, 3].map(|k| (1.0 + share) * 2f64.powi(exponents[k]) / 2.0);
        let [u, v, w] = [u, v, w].map(|entry| entry.max(5e-324));
        for (name, count, _) in families() {
            let hyper = match name {
                "flat" => [-u, v, 0.0],
                "binomial" => [u.ceil(), share, 0.0],
                _ => [u, v, w],
            };
            let x = if negative { -x } else { x };
            for x in [x, x.round(), u, u.floor()] {
                let value = alone(name, count, hyper, x);
                prop_assert!(!value.is_nan(), "{name} {hyper:?} {x:e}");
            }
        }
    }

    #[test]
    fn any_value_has_a_log_density(
        u in 0.001..0.999_f64, v in 0.001..0.999_f64, x in prop::collection::vec(any::<f64>(), 1..40),
    ) {
        for (name, count, _) in families() {
            let (hyper, _) = placed(name, [u, v, 0.5], 0.5);
            let columns = rows(&[hyper], count);
            let slices: Vec<&[f64]> = columns.iter().map(Vec::as_slice).collect();
            let hyper = Hyper::new(&slices, 1).expect("equal lengths");
            for (x, value) in x.iter().zip(evaluate(name, &hyper, &x)) {
                prop_assert_eq!(value.is_nan(), x.is_nan(), "{}({}) = {}", name, x, value);
            }
        }
    }
}

#[test]
fn many_sets_of_hyperparameters_need_no_table() {
    // Above 65,536 sets the normalisers are formed entry by entry.
    let shapes: Vec<f64> = (0..70_000).map(|k| 1.0 + f64::from(k / 10)).collect();
    let rates = vec![2.0; shapes.len()];
    let x = vec![3.0; shapes.len()];
    let hyper = Hyper::new(&[&shapes, &rates], 1).expect("equal lengths");
    let values = evaluate("gamma", &hyper, &x);
    for index in (0..shapes.len()).step_by(977) {
        let expected = alone("gamma", 2, [shapes[index], 2.0, 0.0], 3.0);
        assert_eq!(values[index].to_bits(), expected.to_bits());
    }
}

#[test]
fn arguments_that_do_not_fit_are_refused() {
    let (one, two) = ([1.0], [1.0, 2.0]);
    let kind = Kind::named("normal").expect("a family");
    let hyper = Hyper::new(&[&one], 1).expect("one hyperparameter");
    let mut out = [0.0];
    let refused = kind.log_density(&[0.0], &hyper, &mut out, &Interrupt::never());
    assert!(matches!(
        refused,
        Err(KernelError::Shape {
            argument: "hyper",
            ..
        })
    ));
    let hyper = Hyper::new(&[&one, &one], 1).expect("two hyperparameters");
    let refused = kind.log_density(&[0.0, 1.0], &hyper, &mut out, &Interrupt::never());
    assert!(matches!(
        refused,
        Err(KernelError::Shape {
            argument: "out",
            ..
        })
    ));
    assert!(matches!(
        Hyper::new(&[&one, &two], 1),
        Err(KernelError::Shape {
            argument: "hyper",
            ..
        })
    ));
    assert!(matches!(
        Hyper::new(&[&[], &[]], 1),
        Err(KernelError::Empty { argument: "hyper" })
    ));
    let stopped = Interrupt::new(&|| true);
    std::thread::sleep(std::time::Duration::from_millis(60));
    assert_eq!(
        kind.log_density(&[0.0], &hyper, &mut out, &stopped),
        Err(KernelError::Interrupted)
    );
}
