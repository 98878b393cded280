use _core::kernels::lanes::Layout;
use _core::kernels::long_run::chains;
use _core::kernels::mean::{contributions, mean_square, weighted_mean};
use _core::kernels::node_moments::Moments;
use _core::kernels::node_series::{Formed, Weighing};
use _core::kernels::node_sums::{either_side, half_sums};
use _core::kernels::signed_tail::Sides;
use proptest::prelude::*;

use super::support::{close, fixed};

/// Columns, weights and unsmoothed weights, and the lengths of chains, whose rest is one more.
fn given() -> impl Strategy<Value = (Vec<[f64; 3]>, Vec<usize>)> {
    let draw = (-3.0..3.0, 0.0..1.0, 0.0..1.0).prop_map(|(f, w, raw)| [f, w, raw]);
    let lengths = prop::collection::vec(1..40_usize, 0..6);
    (prop::collection::vec(draw, 1..150), lengths)
}

struct Case {
    layout: Layout,
    series: [Vec<f64>; 3],
    rows: [Vec<f64>; 3],
}

fn case(draws: &[[f64; 3]], lengths: &[usize]) -> Case {
    let count = draws.len();
    let mut starts = vec![0_i64];
    for length in lengths {
        let next = starts[starts.len() - 1] + *length as i64;
        if next < count as i64 {
            starts.push(next);
        }
    }
    starts.push(count as i64);
    let layout = Layout::new(chains(&starts, count, true).unwrap());
    let total = |kind: usize| draws.iter().map(|draw| draw[kind]).sum::<f64>().max(1e-9);
    let unit = [1.0, total(1), total(2)];
    let series = [0, 1, 2].map(|kind| draws.iter().map(|draw| draw[kind] / unit[kind]).collect());
    let rows = [0, 1, 2].map(|kind: usize| {
        let of: &Vec<f64> = &series[kind];
        let mut rows = vec![f64::NAN; layout.entries()];
        layout.place(of, &mut rows);
        rows
    });
    Case {
        layout,
        series,
        rows,
    }
}

fn formed(case: &Case, into: &mut Formed) -> (Moments, Sides, f64) {
    let moved = weighted_mean(&case.series[0], &case.series[1]);
    let halves = case.layout.halves().len();
    let means: Vec<f64> = (0..halves).map(|half| 0.1 * half as f64).collect();
    let scales: Vec<f64> = (0..halves).map(|half| 1.0 + half as f64).collect();
    let by = Weighing {
        w: &case.rows[1],
        raw: &case.rows[2],
        moved,
        own_means: &means,
        own_scales: &scales,
    };
    let (moments, sides) = into.influence(&case.rows[0], by, &case.layout);
    (moments, sides, moved)
}

/// What sums are of a series `z`.
fn check(moments: &Moments, z: &[f64]) -> Result<(), TestCaseError> {
    prop_assert!(close(moments.variance(), mean_square(z), 1e-11));
    // Near no skewness at all the figure is a difference that rounding decides.
    let carried = contributions(z);
    if carried < 1e6 {
        prop_assert!(close(moments.contributions() / carried, 1.0, 1e-6));
    }
    Ok(())
}

fn count(z: &[f64], sign: f64) -> usize {
    z.iter().filter(|z| sign * **z > 0.0).count()
}

proptest! {
    #![proptest_config(fixed(300))]

    #[test]
    fn influence_series_and_their_sums((draws, lengths) in given()) {
        let case = case(&draws, &lengths);
        let mut into = Formed::default();
        let (moments, sides, moved) = formed(&case, &mut into);
        let scale = draws.len() as f64;
        let [f, w, raw] = &case.series;
        let [z, z_raw, alone] = [&into.z, &into.raw, &into.alone].map(|s| case.layout.restored(&s.entries));
        for (half, range) in case.layout.halves().iter().enumerate() {
            for draw in range.clone() {
                prop_assert!(close(z[draw], scale * w[draw] * (f[draw] - moved), 1e-13));
                prop_assert!(close(z_raw[draw], scale * raw[draw] * (f[draw] - moved), 1e-13));
                let own = (1.0 + half as f64) * w[draw] * (f[draw] - 0.1 * half as f64);
                prop_assert!(close(alone[draw], own, 1e-13));
            }
            prop_assert!(close(into.z.totals[half], z[range.clone()].iter().sum(), 1e-11));
            prop_assert!(close(into.alone.totals[half], alone[range.clone()].iter().sum(), 1e-11));
        }
        check(&moments, &z)?;
        let beside: f64 = z.iter().zip(f).map(|(z, f)| z * (f - moved)).sum();
        prop_assert!(close(moments.beside, beside, 1e-11));
        prop_assert!(sides.finite);
        prop_assert_eq!([sides.above, sides.below], [count(&z_raw, 1.0), count(&z_raw, -1.0)]);
    }

    #[test]
    fn the_base_is_taken_off((draws, lengths) in given()) {
        let case = case(&draws, &lengths);
        let mut into = Formed::default();
        formed(&case, &mut into);
        let before = [&into.z, &into.raw].map(|s| case.layout.restored(&s.entries).to_vec());
        let own = [&case.rows[2][..], &case.rows[1]];
        let (moments, sides) = into.take_base(&case.rows[0], own, &case.layout);
        let scale = draws.len() as f64;
        let [f, w, raw] = &case.series;
        let [z, z_raw] = [&into.z, &into.raw].map(|s| case.layout.restored(&s.entries));
        for draw in 0..draws.len() {
            prop_assert!(close(z[draw], before[0][draw] - scale * raw[draw] * f[draw], 1e-12));
            prop_assert!(close(z_raw[draw], before[1][draw] - scale * w[draw] * f[draw], 1e-12));
        }
        check(&moments, &z)?;
        prop_assert!(close(moments.largest, z.iter().fold(0.0, |most, z| z.abs().max(most)), 1e-15));
        prop_assert_eq!([sides.above, sides.below], [count(&z_raw, 1.0), count(&z_raw, -1.0)]);
    }

    #[test]
    fn sums_over_halves((draws, lengths) in given()) {
        let case = case(&draws, &lengths);
        let [f, w, _] = &case.series;
        let sums = half_sums(&case.rows[0], &case.rows[1], &case.layout);
        for (sum, half) in sums.iter().zip(case.layout.halves()) {
            prop_assert!(close(*sum, half.clone().map(|draw| w[draw] * f[draw]).sum(), 1e-13));
        }
    }

    #[test]
    fn effective_draws_on_both_sides((draws, lengths) in given()) {
        let case = case(&draws, &lengths);
        let [f, w, _] = &case.series;
        let worth = |inside: bool| {
            let part: Vec<f64> = f.iter().zip(w).filter(|(f, _)| (**f > 0.5) == inside).map(|(_, w)| *w).collect();
            let squares: f64 = part.iter().map(|w| w * w).sum();
            if squares > 0.0 { part.iter().sum::<f64>().powi(2) / squares } else { 0.0 }
        };
        let [inside, outside] = either_side(&case.rows[0], 0.5, &case.rows[1]);
        prop_assert!(close(inside, worth(true), 1e-12));
        prop_assert!(close(outside, worth(false), 1e-12));
    }
}

#[test]
fn a_series_without_skewness_is_carried_by_all() {
    for f in [1.0, 0.0] {
        let draws: Vec<[f64; 3]> = (0..8)
            .map(|i| [if i % 2 == 0 { f } else { -f }, 1.0, 1.0])
            .collect();
        let (moments, _, _) = formed(&case(&draws, &[]), &mut Formed::default());
        assert!(moments.contributions().is_infinite());
    }
}

#[test]
fn what_is_not_a_number_is_seen() {
    let mut draws = vec![[1.0, 0.5, 0.5]; 40];
    assert!(formed(&case(&draws, &[]), &mut Formed::default()).1.finite);
    draws[7][0] = f64::INFINITY;
    assert!(!formed(&case(&draws, &[]), &mut Formed::default()).1.finite);
}
