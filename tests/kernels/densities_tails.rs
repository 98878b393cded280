//! Special functions behind the densities: tails and their slopes, without cancellation.

use _core::kernels::densities::incomplete_beta::beta_tails;
use _core::kernels::densities::incomplete_gamma::gamma_tails;
use _core::kernels::densities::normal_tail::{log_normal_cdf, skew_normal_tails};
use _core::kernels::densities::slopes::Slopes;
use _core::kernels::densities::stirling::{
    digamma, log_beta, log_beta_kernel, log_complement, log_gamma_kernel, log_minus, stirling_rest,
};
use libm::lgamma;
use proptest::prelude::*;

use super::densities_tables::{BETA_TABLE, GAMMA_TABLE, NORMAL_TABLE, SKEW_TABLE};
use super::support::{assert_close, close, fixed};

/// `Σ_j x^(a+j) e^(−x) / Γ(a+j+1)`, term by term on the log scale.
fn lower_gamma(a: f64, x: f64) -> f64 {
    (0..4000)
        .map(|j| {
            let shape = a + f64::from(j);
            (shape * x.ln() - x - lgamma(shape + 1.0)).exp()
        })
        .sum()
}

/// Integral of a beta density from 0 to `x` by Gauss's two-point rule on fine panels.
fn lower_beta(a: f64, b: f64, x: f64) -> f64 {
    let constant = lgamma(a + b) - lgamma(a) - lgamma(b);
    let density = |t: f64| (constant + (a - 1.0) * t.ln() + (b - 1.0) * (-t).ln_1p()).exp();
    let panels = 20_000;
    let width = x / f64::from(panels);
    let off = 0.5 / 3f64.sqrt();
    (0..panels)
        .map(|k| {
            let middle = (f64::from(k) + 0.5) * width;
            0.5 * width * (density(middle - off * width) + density(middle + off * width))
        })
        .sum()
}

proptest! {
    #![proptest_config(fixed(60))]

    // 1e-12: sums of some thousand positive terms.
    #[test]
    fn gamma_tails_are_those_of_the_series(a in 0.01..40.0_f64, share in 0.05..4.0_f64) {
        let x = a * share;
        let [below, above, ..] = gamma_tails(a, x);
        prop_assert!(close(below, lower_gamma(a, x).ln(), 1e-12));
        prop_assert!((below.exp() + above.exp() - 1.0).abs() < 1e-14);
    }

    // 1e-7: the error of the quadrature at shapes above 2.
    #[test]
    fn beta_tails_are_those_of_the_integral(
        a in 2.0..40.0_f64, b in 2.0..40.0_f64, x in 0.02..0.98_f64,
    ) {
        let [below, above, ..] = beta_tails(a, b, x, 1.0 - x);
        prop_assert!((below.exp() - lower_beta(a, b, x)).abs() < 1e-7);
        prop_assert!((below.exp() + above.exp() - 1.0).abs() < 1e-14);
    }

    // 1e-6: central differences with a step of 1e-5 of the shape.
    #[test]
    fn slopes_are_differences_of_tails(
        a in 0.1..40.0_f64, b in 0.1..40.0_f64, x in 0.05..0.95_f64,
    ) {
        let step = 1e-5;
        let way = |up: [f64; 6], down: [f64; 6], by: f64, row: usize| (up[row] - down[row]) / by;
        let (up, down) = (a * (1.0 + step), a * (1.0 - step));
        let slopes = beta_tails(a, b, x, 1.0 - x);
        let moved = [beta_tails(up, b, x, 1.0 - x), beta_tails(down, b, x, 1.0 - x)];
        prop_assert!(close(slopes[2], way(moved[0], moved[1], up - down, 0), 1e-6));
        prop_assert!(close(slopes[4], way(moved[0], moved[1], up - down, 1), 1e-6));
        let gamma = gamma_tails(a, b);
        let moved = [gamma_tails(up, b), gamma_tails(down, b)];
        prop_assert!(close(gamma[2], (moved[0][0] - moved[1][0]) / (up - down), 1e-6));
        prop_assert!(close(gamma[3], (moved[0][1] - moved[1][1]) / (up - down), 1e-6));
        let (up, down) = (b * (1.0 + step), b * (1.0 - step));
        let moved = [beta_tails(a, up, x, 1.0 - x), beta_tails(a, down, x, 1.0 - x)];
        prop_assert!(close(slopes[3], way(moved[0], moved[1], up - down, 0), 1e-6));
        prop_assert!(close(slopes[5], way(moved[0], moved[1], up - down, 1), 1e-6));
    }

    // 1e-12: the plain forms cancel at shapes of some 50.
    #[test]
    fn kernels_and_constants_are_their_plain_forms(
        a in 0.01..50.0_f64, b in 0.01..50.0_f64, x in 0.01..0.99_f64,
    ) {
        let plain = lgamma(a) + lgamma(b) - lgamma(a + b);
        prop_assert!(close(log_beta(a, b), plain, 1e-12));
        let kernel = a * x.ln() + b * (1.0 - x).ln() - plain;
        prop_assert!(close(log_beta_kernel(a, b, x, 1.0 - x), kernel, 1e-12));
        let kernel = a * b.ln() - b - lgamma(a);
        prop_assert!(close(log_gamma_kernel(a, b), kernel, 1e-12));
    }

    #[test]
    fn skew_normal_tails_add_up_and_mirror(z in -6.0..6.0_f64, slant in -20.0..20.0_f64) {
        let (below, above) = skew_normal_tails(z, slant);
        prop_assert!((below.exp() + above.exp() - 1.0).abs() < 1e-13);
        let (mirrored_above, mirrored_below) = skew_normal_tails(-z, -slant);
        prop_assert_eq!((below, above), (mirrored_below, mirrored_above));
    }
}

#[test]
fn tails_and_slopes_keep_their_digits() {
    // P(a, x) and Q(a, x) with their slopes in a, each at most 1e-13 of the larger of 1 and itself.
    for (a, x, expected) in GAMMA_TABLE {
        assert_close(&gamma_tails(a, x), &expected, 1e-13);
    }
    for (a, b, x, y, expected) in BETA_TABLE {
        assert_close(&beta_tails(a, b, x, y), &expected, 1e-12);
    }
    for (z, slant, below, above) in SKEW_TABLE {
        let (log_below, log_above) = skew_normal_tails(z, slant);
        assert_close(&[log_below, log_above], &[below, above], 1e-13);
    }
    for (x, expected) in NORMAL_TABLE {
        assert!((log_normal_cdf(x) / expected - 1.0).abs() <= 1e-15, "{x}");
    }
}

#[test]
fn edges_of_the_tails_are_defined() {
    let inf = f64::INFINITY;
    assert_eq!(gamma_tails(2.0, 0.0), [-inf, 0.0, 0.0, 0.0]);
    assert_eq!(gamma_tails(2.0, inf), [0.0, -inf, 0.0, 0.0]);
    assert!(
        gamma_tails(f64::NAN, 1.0)
            .iter()
            .all(|entry| entry.is_nan())
    );
    assert_eq!(beta_tails(2.0, 3.0, 0.0, 1.0)[..2], [-inf, 0.0]);
    assert_eq!(beta_tails(2.0, 3.0, 1.0, 0.0)[..2], [0.0, -inf]);
    assert!(
        beta_tails(1.0, 1.0, f64::NAN, 0.5)
            .iter()
            .all(|entry| entry.is_nan())
    );
    assert_eq!(log_normal_cdf(-inf), -inf);
    assert_eq!(log_normal_cdf(inf), 0.0);
    assert!(log_normal_cdf(f64::NAN).is_nan());
    assert_eq!(skew_normal_tails(-inf, 2.0), (-inf, 0.0));
    assert_eq!(skew_normal_tails(inf, 2.0), (0.0, -inf));
    assert!(skew_normal_tails(f64::NAN, 1.0).0.is_nan());
    assert_eq!(log_complement(0.0), -inf);
    assert_eq!(log_complement(-inf), 0.0);
    assert_eq!(log_gamma_kernel(2.0, inf), -inf);
}

#[test]
fn pieces_without_cancellation_keep_their_relative_accuracy() {
    // Expected values: mpmath 1.4.1 with 80 digits.
    // log(1 + u) − u where both sides share all but a few digits.
    for (u, expected) in [
        (1e-8, -4.999999966666667e-17),
        (-1e-3, -5.003335835335002e-07),
        (0.3, -0.03763573553250894),
        (-0.49, -0.1833445532637656),
        (1.0, -0.3068528194400547),
    ] {
        assert!(
            (log_minus(u, 1.0 + u) / expected - 1.0).abs() < 1e-15,
            "{u}"
        );
    }
    for (a, expected) in [
        (0.1, 0.512740081331915),
        (1.0, 0.08106146679532726),
        (7.9, 0.010542914704115187),
        (8.1, 0.010282861471580359),
        (1e6, 8.333333333333056e-08),
    ] {
        // Below 8 an absolute 1e-15: the difference of two numbers of some 8.
        assert!((stirling_rest(a) - expected).abs() < 2e-15, "{a}");
    }
    assert!((digamma(1e-8) + 100_000_000.57721564).abs() < 1e-7);
    assert!(digamma(1.4616321449683622).abs() < 2e-15);
    assert!((log_beta(1e9, 2.0) / -41.446531674892825 - 1.0).abs() < 1e-15);
}

#[test]
fn slopes_follow_the_rules_of_differentiation() {
    let (a, b) = (Slopes::shape(3.0, 0), Slopes::shape(2.0, 1));
    assert_eq!((a * b).by, [2.0, 3.0]);
    assert_eq!((a / b).by, [0.5, -0.75]);
    assert_eq!((a - b).by, [1.0, -1.0]);
    assert_eq!((a + b * 2.0 + 5.0).by, [1.0, 2.0]);
    assert_eq!((-a).log().by[0], 1.0 / 3.0);
    assert!(Slopes::constant(1.0).is_one() && !(a / a * b).is_one());
}
