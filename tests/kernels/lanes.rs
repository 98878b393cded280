use _core::kernels::lanes::{LANES, Layout};
use _core::kernels::long_run::chains;
use proptest::prelude::*;

use super::support::fixed;

/// Starts of chains of these lengths, and draws that can be told apart.
pub fn chained(lengths: &[usize]) -> (Vec<i64>, Vec<f64>) {
    let mut starts = vec![0_i64];
    for length in lengths {
        starts.push(starts[starts.len() - 1] + *length as i64);
    }
    let count: usize = lengths.iter().sum();
    (starts, (0..count).map(|draw| 1.0 + draw as f64).collect())
}

proptest! {
    #![proptest_config(fixed(200))]

    #[test]
    fn every_draw_has_one_place(lengths in prop::collection::vec(1..90_usize, 1..20)) {
        let (starts, series) = chained(&lengths);
        let layout = Layout::new(chains(&starts, series.len(), true).unwrap());
        let mut rows = vec![f64::NAN; layout.entries()];
        layout.place(&series, &mut rows);
        let mut placed: Vec<f64> = rows.iter().copied().filter(|entry| *entry != 0.0).collect();
        placed.sort_by(f64::total_cmp);
        prop_assert_eq!(&placed, &series);
        prop_assert_eq!(&layout.restored(&rows)[..], &series[..]);
        for group in layout.groups() {
            for (lane, half) in layout.halves()[group.halves.clone()].iter().enumerate() {
                for (row, draw) in half.clone().enumerate() {
                    let place = (group.rows.start + row) * LANES + lane;
                    prop_assert_eq!(rows[place].to_bits(), series[draw].to_bits());
                }
            }
        }
    }

    #[test]
    fn draws_without_an_order_lie_somewhere(count in 0..100_usize) {
        let layout = Layout::unordered(count);
        let series: Vec<f64> = (0..count).map(|draw| 1.0 + draw as f64).collect();
        let mut rows = vec![f64::NAN; layout.entries()];
        layout.place(&series, &mut rows);
        prop_assert_eq!(layout.draws(), count);
        prop_assert_eq!(&layout.restored(&rows)[..], &series[..]);
        prop_assert!(layout.entries() < count + LANES * LANES);
    }
}
