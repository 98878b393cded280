use _core::kernels::f_tail::f_tail;

/// Values of scipy.stats.f.sf (scipy 1.16), printed in full.
#[test]
fn known_values_are_met() {
    for (f, first, second, expected) in [
        (1.0, 3.0, 20.0, 0.413_251_914_062_460_3),
        (5.0, 3.0, 20.0, 0.009_510_337_477_233_805),
        (30.0, 3.0, 50.0, 3.072_767_902_949_644e-11),
        (0.2, 1.0, 1.0, 0.732_279_527_198_769_9),
    ] {
        let found: f64 = f_tail(f, first, second);
        // Twelve digits: the continued fraction behind it is summed to 1e-15.
        assert!(
            (found / expected - 1.0).abs() < 1e-12,
            "{f} {first} {second}: {found}"
        );
    }
}

#[test]
fn edges_are_defined() {
    assert_eq!(f_tail(0.0, 3.0, 5.0), 1.0);
    assert_eq!(f_tail(f64::INFINITY, 3.0, 5.0), 0.0);
    assert!(f_tail(f64::NAN, 3.0, 5.0).is_nan());
    assert!(f_tail(1.0, 3.0, 0.0).is_nan());
}

#[test]
fn a_probability_stays_between_nothing_and_all() {
    // Near f = 0 the continued fraction was 2e-15 beyond 1.
    let degrees = [0.3, 1.0, 2.5, 7.0, 40.0, 1e3, 1e5];
    for first in degrees {
        for second in degrees {
            for exponent in -400..200 {
                let f = 10_f64.powf(f64::from(exponent) / 20.0);
                let tail = f_tail(f, first, second);
                assert!((0.0..=1.0).contains(&tail), "{f} {first} {second}: {tail}");
            }
        }
    }
}
