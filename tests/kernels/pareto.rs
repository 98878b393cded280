use _core::kernels::pareto::{Pareto, fit};
use proptest::prelude::*;

use super::support::{Stream, close, fixed};

/// The estimator word by word, in the unit of the data, without any of the edge rules.
fn twin(x: &[f64]) -> (f64, f64) {
    let mut x = x.to_vec();
    x.sort_by(f64::total_cmp);
    let n = x.len() as f64;
    let m = 20.0 + n.sqrt().floor();
    let quartile = x[(n / 4.0 + 0.5).floor() as usize - 1];
    let mean_log = |b: f64| x.iter().map(|x| (1.0 - b * x).ln()).sum::<f64>() / n;
    let mut grid = Vec::new();
    let mut profile = Vec::new();
    let mut j = 1.0;
    while j <= m {
        let b = 1.0 / x[x.len() - 1] + (1.0 - (m / (j - 0.5)).sqrt()) / (3.0 * quartile);
        let k = mean_log(b);
        grid.push(b);
        profile.push(n * ((-b / k).ln() - k - 1.0));
        j += 1.0;
    }
    // Weight of point j: one over the sum of exp(L_i - L_j), as the paper writes it.
    let weight = |j: usize| 1.0 / profile.iter().map(|l| (l - profile[j]).exp()).sum::<f64>();
    let b: f64 = (0..grid.len()).map(|j| weight(j) * grid[j]).sum();
    let k = mean_log(b);
    (k, -k / b)
}

proptest! {
    #![proptest_config(fixed(300))]

    // 1e-9: the twin takes log(1 - b x) where the kernel takes log1p, and loses digits near b = 0.
    #[test]
    fn the_fit_follows_the_paper(
        x in prop::collection::vec(1e-3..50.0, 5..200), unit in prop::sample::select(vec![1e-12, 1.0, 1e9])
    ) {
        let scaled: Vec<f64> = x.iter().map(|x| x * unit).collect();
        let (found, (shape, scale)) = (fit(&scaled), twin(&scaled));
        prop_assert!(close(found.shape, shape, 1e-9), "{found:?} {shape}");
        prop_assert!(close(found.scale / scale, 1.0, 1e-8), "{found:?} {scale}");
    }

    #[test]
    fn the_order_of_the_exceedances_does_not_matter(x in prop::collection::vec(0.0..50.0, 5..60)) {
        let mut reversed = x.clone();
        reversed.reverse();
        prop_assert_eq!(fit(&x), fit(&reversed));
    }

    #[test]
    fn exceedances_of_any_range_have_a_shape(
        exponents in prop::collection::vec(-330.0..0.0, 5..80), zeros in 0..100_usize
    ) {
        let mut x: Vec<f64> = exponents.iter().map(|&e: &f64| 10_f64.powf(e)).collect();
        x.extend(vec![0.0; zeros]);
        let found = fit(&x);
        prop_assert!(!found.shape.is_nan() && found.shape < f64::INFINITY, "{found:?}");
    }
}

#[test]
fn exact_quantiles_give_back_their_distribution() {
    // At n = 4000 midpoint quantiles the estimator is within 0.01 of the shape they come from.
    for shape in [-0.4, -0.1, 0.0, 0.3, 0.7, 1.2] {
        let source = Pareto { shape, scale: 2.5 };
        let x: Vec<f64> = (0..4000)
            .map(|z| source.quantile((f64::from(z) + 0.5) / 4000.0))
            .collect();
        let found = fit(&x);
        assert!((found.shape - shape).abs() < 0.01, "{shape} {found:?}");
        assert!((found.scale - 2.5).abs() < 0.03, "{shape} {found:?}");
    }
}

#[test]
fn simulated_exceedances_have_the_published_error() {
    // Shape 0.5 at n = 100: the standard deviation is near (1 + k)/sqrt(n) = 0.15, the bias below
    // 0.01. The mean of 400 fits then lies within 0.01 + 5 · 0.15/20 = 0.05; seed 7, false alarms
    // below 1e-6.
    let mut stream = Stream::new(7);
    let source = Pareto {
        shape: 0.5,
        scale: 1.0,
    };
    let total: f64 = (0..400)
        .map(|_| {
            let x: Vec<f64> = (0..100)
                .map(|_| source.quantile(stream.uniform()))
                .collect();
            fit(&x).shape
        })
        .sum();
    assert!((total / 400.0 - 0.5).abs() < 0.05, "{}", total / 400.0);
}

#[test]
fn quantiles_invert_the_distribution() {
    for shape in [-0.5, -1e-9, 0.0, 1e-9, 0.8] {
        let source = Pareto { shape, scale: 3.0 };
        for p in [0.0, 1e-9, 0.3, 0.999] {
            let x = source.quantile(p);
            let survival = if shape == 0.0 {
                (-x / 3.0).exp()
            } else {
                (1.0 + shape * x / 3.0).powf(-1.0 / shape)
            };
            // 1e-7: near shape 0 the twin's power loses the digits of 1 + k x.
            assert!((survival - (1.0 - p)).abs() < 1e-7, "{shape} {p} {x}");
        }
    }
}

#[test]
fn shrinking_adds_ten_exceedances_of_shape_one_half() {
    let shrunk = Pareto {
        shape: 0.2,
        scale: 7.0,
    }
    .shrunk(30);
    assert!(close(shrunk.shape, (30.0 * 0.2 + 10.0 * 0.5) / 40.0, 1e-15));
    assert_eq!(shrunk.scale, 7.0);
}

#[test]
fn edges_of_the_fit_are_defined() {
    let constant = fit(&[2.0; 9]);
    assert_eq!(constant.shape, f64::NEG_INFINITY);
    assert!(constant.scale.is_nan());
    assert_eq!(fit(&[0.0; 9]).shape, f64::NEG_INFINITY);
    for bad in [
        vec![],
        vec![1.0; 4],
        vec![1.0, 2.0, 3.0, 4.0, f64::NAN],
        vec![1.0, 2.0, 3.0, 4.0, f64::INFINITY],
        vec![-1.0, 2.0, 3.0, 4.0, 5.0],
    ] {
        assert!(fit(&bad).shape.is_nan(), "{bad:?}");
        assert!(fit(&bad).scale.is_nan(), "{bad:?}");
    }
}

#[test]
fn a_quartile_of_zero_is_replaced_by_the_smallest_positive_exceedance() {
    let x = [0.0, 0.0, 0.0, 0.5, 1.0, 2.0, 4.0, 8.0];
    // The rule in the twin's words: the same sample with its quartile, the second smallest of 8,
    // set to 0.5 changes nothing but the grid, so the grid must be that of 0.5.
    let found = fit(&x);
    assert!(
        found.shape.is_finite() && found.scale.is_finite(),
        "{found:?}"
    );
    let by_hand = grid_fit(&x, 0.5);
    assert!(close(found.shape, by_hand, 1e-12), "{found:?} {by_hand}");
}

#[test]
fn a_grid_point_of_zero_is_an_exponential_distribution() {
    // Quartile 1/3 of the largest and 22 grid points: the sixth is 1 + (1 - 2)/1 = 0, where the
    // formula for the likelihood is 0/0. In the twin that point is moved by 1e-9.
    let x = [1.0, 1.5, 2.0, 2.5, 3.0];
    let by_hand = grid_fit(&x, 1.0 + 1e-9);
    assert!(
        close(fit(&x).shape, by_hand, 1e-7),
        "{} {by_hand}",
        fit(&x).shape
    );
}

/// Shape from the grid of a given quartile.
fn grid_fit(x: &[f64], quartile: f64) -> f64 {
    let n = x.len() as f64;
    let m = 20.0 + n.sqrt().floor();
    let mean_log = |b: f64| x.iter().map(|x| (-b * x).ln_1p()).sum::<f64>() / n;
    let points: Vec<(f64, f64)> = (1..=m as i32)
        .map(|j| {
            let b =
                1.0 / x[x.len() - 1] + (1.0 - (m / (f64::from(j) - 0.5)).sqrt()) / (3.0 * quartile);
            let k = mean_log(b);
            (b, (n * ((-b / k).ln() - k - 1.0)).exp())
        })
        .collect();
    let total: f64 = points.iter().map(|(_, likelihood)| likelihood).sum();
    mean_log(
        points
            .iter()
            .map(|(b, likelihood)| b * likelihood)
            .sum::<f64>()
            / total,
    )
}
