use _core::kernels::lane_series::Series;
use _core::kernels::lanes::Layout;
use _core::kernels::long_run::chains;
use _core::kernels::node_batches::Batches;
use proptest::prelude::*;

use super::lanes::chained;
use super::support::fixed;

proptest! {
    #![proptest_config(fixed(200))]

    // Sums of whole numbers are exact.
    #[test]
    fn sums_are_those_over_the_draws_of_each(
        lengths in prop::collection::vec(1..90_usize, 1..20), width in 1..200_usize
    ) {
        let (starts, z) = chained(&lengths);
        let layout = Layout::new(chains(&starts, z.len(), true).unwrap());
        let mut edges: Vec<i64> = (0..z.len()).step_by(width).map(|edge| edge as i64).collect();
        edges.push(z.len() as i64);
        let ranges = chains(&edges, z.len(), false).unwrap();
        let batches = Batches::new(&ranges, &layout);
        let mut series = Series::default();
        series.put(&z, &layout);
        let mut sums = vec![f64::NAN; batches.count()];
        batches.sums(&series, &layout, &mut sums);
        for (sum, range) in sums.iter().zip(ranges) {
            prop_assert_eq!(*sum, z[range].iter().sum::<f64>());
        }
    }
}
