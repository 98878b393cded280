use _core::kernels::chain_means::chain_means;
use _core::kernels::long_run::{chains, long_run_variance};
use _core::kernels::ordered::Interrupt;
use proptest::prelude::*;

use super::support::{close, fixed, weighted};

proptest! {
    #![proptest_config(fixed(300))]

    // 1e-9: up to 600 terms, and squares of differences.
    #[test]
    fn every_chain_is_a_weighted_mean_of_its_own((f, w) in weighted(600), cut in 0.0..1.0, centre in -1.0..1.0) {
        let (draws, never) = (f.len(), Interrupt::never());
        let middle = (cut * draws as f64) as usize;
        let starts: Vec<i64> = [0, middle, draws].iter().map(|&edge| edge as i64).collect();
        let Ok(of) = chains(&starts, draws, false) else { return Ok(()) };
        for w in [w, vec![1.0; draws]] {
            let found = chain_means(&f, centre, &w, &of, &never).unwrap();
            for (chain, found) in of.iter().zip(found) {
                let (f, w) = (&f[chain.clone()], &w[chain.clone()]);
                let mass: f64 = w.iter().sum();
                prop_assert!(close(found.mass, mass, 1e-12));
                if mass == 0.0 {
                    continue;
                }
                let mean = f.iter().zip(w).map(|(f, w)| w * (f - centre)).sum::<f64>() / mass;
                let square = |w: &f64| (w / mass) * (w / mass);
                let z: Vec<f64> = f.iter().zip(w)
                    .map(|(f, w)| chain.len() as f64 * w / mass * (f - centre - mean))
                    .collect();
                let alone = chains(&[0, chain.len() as i64], chain.len(), true).unwrap();
                prop_assert!(close(found.mean, mean, 1e-9));
                prop_assert!(close(found.squares, w.iter().map(square).sum(), 1e-9));
                prop_assert!(close(found.long_run, long_run_variance(&z, &alone, &never).unwrap(), 1e-9));
                let variance = f.iter().zip(w).map(|(f, w)| w * (f - centre - mean).powi(2)).sum::<f64>() / mass;
                prop_assert!(close(found.variance, variance, 1e-9));
            }
        }
    }

    #[test]
    fn no_weights_are_equal_weights((f, _) in weighted(400)) {
        let (draws, never) = (f.len(), Interrupt::never());
        let of = chains(&[0, draws as i64], draws, false).unwrap();
        let none = chain_means(&f, 0.0, &[], &of, &never).unwrap()[0];
        let ones = chain_means(&f, 0.0, &vec![1.0; draws], &of, &never).unwrap()[0];
        prop_assert!(close(none.mean, ones.mean, 1e-11));
        prop_assert!(close(none.long_run, ones.long_run, 1e-9));
        prop_assert!(close(none.squares, ones.squares, 1e-12));
        prop_assert!(close(none.variance, ones.variance, 1e-9));
        prop_assert_eq!(none.mass, ones.mass);
    }
}
