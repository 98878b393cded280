use _core::kernels::ordered::sum_by;
use _core::kernels::vector::dot::{dot, lagged};
use _core::kernels::vector::exp::{ExpSlice, LEAST, MOST, exp_both, exp_m1, exp_slice};
use _core::kernels::vector::panel::{COLUMNS, Number, Products};
use _core::kernels::vector::rank::{Dividing, nth_largest};
use _core::kernels::vector::select::{AtLeast, at_least, beyond};
use _core::kernels::vector::stream::{copy_past, fence};
use _core::kernels::vector::transpose::{LINE, columns_to_rows, rows_to_columns};
use _core::kernels::vector::{Fused, Separate, dispatch_plain};
use proptest::prelude::*;

use super::support::{Stream, close, fixed};

/// Distance of `a` from `b` in units of the last place of `b`.
fn ulps(a: f64, b: f64) -> f64 {
    let unit = f64::from_bits(b.abs().to_bits() + 1) - b.abs();
    (a - b).abs() / unit
}

fn grid() -> Vec<f64> {
    let mut stream = Stream::new(8);
    let mut x: Vec<f64> = (0..200_000)
        .map(|_| LEAST + (MOST - LEAST) * stream.uniform())
        .collect();
    x.extend((0..100_000).map(|_| 2.0 * stream.uniform() - 1.0));
    x.extend((1..300).map(|i| 2_f64.powi(-i)));
    x
}

#[test]
fn the_exponential_is_within_two_units_of_the_last_place() {
    // The standard library's is within 1 unit; ours was measured within 1.06 of the exact value.
    for plain in [false, true] {
        let x = grid();
        let mut out = x.clone();
        if plain {
            dispatch_plain(ExpSlice(&mut out));
        } else {
            exp_slice(&mut out);
        }
        for (x, found) in x.iter().zip(out) {
            assert!(ulps(found, x.exp()) <= 2.0, "{plain} {x} {found}");
        }
    }
}

#[test]
fn one_less_than_the_exponential_keeps_its_digits_near_zero() {
    for x in grid() {
        for found in [exp_m1::<Fused>(x), exp_m1::<Separate>(x)] {
            assert!(ulps(found, x.exp_m1()) <= 4.0, "{x} {found}");
        }
    }
}

#[test]
fn an_exponential_and_its_inverse_come_from_one_argument() {
    // As `the_exponential_is_within_two_units_of_the_last_place`, with one more rounding.
    for x in grid().into_iter().filter(|x| x.abs() <= -LEAST) {
        for (up, down) in [exp_both::<Fused>(x), exp_both::<Separate>(x)] {
            assert!(ulps(up, x.exp()) <= 3.0, "{x} {up}");
            assert!(ulps(down, (-x).exp()) <= 3.0, "{x} {down}");
        }
    }
}

/// Against sums in double precision; `allowed` is a bound on the roundings.
fn check_products<T: Number, const U: usize, const W: usize>(allowed: f64) {
    let mut stream = Stream::new(4);
    let mut draw = || T::rounded(stream.normal());
    let f: Vec<[T; W]> = (0..37).map(|_| std::array::from_fn(|_| draw())).collect();
    let x: [[T; 40]; COLUMNS] = std::array::from_fn(|_| std::array::from_fn(|_| draw()));
    let one = T::products::<U, W, 40>(&f, &x);
    let two = dispatch_plain(Products { f: &f, x: &x });
    for column in 0..COLUMNS {
        for lane in 0..W {
            let terms = f.iter().zip(&x[column]);
            let exact: f64 = terms.map(|(f, x)| f[lane].into() * (*x).into()).sum();
            for found in [one[column][lane], two[column][lane]] {
                assert!((found.into() - exact).abs() < allowed);
            }
        }
    }
}

#[test]
fn products_with_panels_are_sums_draw_by_draw() {
    // 37 roundings of sums below 40, each half of 2^-24, or 2^-53, of them.
    check_products::<f32, 1, 16>(1e-4);
    check_products::<f32, 2, 32>(1e-4);
    check_products::<f32, 3, 48>(1e-4);
    check_products::<f64, 1, 8>(2e-13);
    check_products::<f64, 2, 16>(2e-13);
    check_products::<f64, 3, 24>(2e-13);
}

#[test]
fn edges_of_the_exponential_are_defined() {
    let payload = f64::from_bits(f64::NAN.to_bits() | 0xfff);
    let mut x = [
        f64::NEG_INFINITY,
        -1e5,
        -709.0,
        0.0,
        -0.0,
        f64::NAN,
        payload,
    ];
    exp_slice(&mut x);
    assert_eq!(x[..5], [0.0, 0.0, 0.0, 1.0, 1.0]);
    assert!(x[5].is_nan() && x[6].is_nan());
}

proptest! {
    #![proptest_config(fixed(100))]

    // 1e-12: up to 9000 products of either sign, relative to 1 and the sum.
    #[test]
    fn sums_of_products_are_those_of_a_plain_loop(seed: u64, length in 0..9000_usize) {
        let mut stream = Stream::new(seed);
        let a: Vec<f64> = (0..length).map(|_| stream.normal()).collect();
        let b: Vec<f64> = (0..length).map(|_| stream.normal()).collect();
        let twin = sum_by(length, |i| a[i] * b[i]);
        prop_assert!(close(dot(&a, &b), twin, 1e-12));
        let lag = length / 3;
        if length > lag + 4 {
            let to = length - lag - 3;
            let found = lagged::<4>(&a, 0, to, lag, 0.5);
            for (t, found) in found.iter().enumerate() {
                let twin = sum_by(to, |i| (a[i] - 0.5) * (a[i + lag + t] - 0.5));
                prop_assert!(close(*found, twin, 1e-12), "{found} {twin}");
            }
        }
    }
}

#[test]
fn stores_past_the_cache_write_what_they_should_on_any_boundary() {
    let from: Vec<f64> = (0..100).map(f64::from).collect();
    for start in 0..3 {
        for length in [0, 1, 2, 7, 64] {
            let mut to = vec![-1.0; 100];
            copy_past(&from[..length], &mut to[start..start + length]);
            fence();
            assert_eq!(to[start..start + length], from[..length]);
            assert!(
                to[..start]
                    .iter()
                    .chain(&to[start + length..])
                    .all(|&x| x == -1.0)
            );
        }
    }
}

#[test]
fn tiles_are_turned_and_turned_back() {
    let mut stream = Stream::new(12);
    for (width, distance) in [(8, 8), (24, 9), (29, 40)] {
        let rows: Vec<Vec<f64>> = (0..LINE)
            .map(|_| (0..width).map(|_| stream.normal()).collect())
            .collect();
        let mut columns = vec![7.0; width * distance];
        let lines = std::array::from_fn(|row| &rows[row][..]);
        let whole = width / LINE * LINE;
        assert_eq!(rows_to_columns(lines, &mut columns, distance), whole);
        for column in 0..width {
            for row in 0..LINE {
                let found = columns[column * distance + row];
                let expected = if column < whole {
                    rows[row][column]
                } else {
                    7.0
                };
                assert_eq!(found, expected, "{row} {column} of {width}");
            }
        }
        let mut back = vec![vec![7.0; width]; LINE];
        let [a, b, c, d, e, f, g, h] = &mut back[..] else {
            panic!("eight rows");
        };
        let done = columns_to_rows(&columns, distance, [a, b, c, d, e, f, g, h]);
        assert_eq!(done, whole);
        for (back, row) in back.iter().zip(&rows) {
            assert_eq!(back[..whole], row[..whole]);
        }
    }
}

#[test]
fn tiles_without_room_are_left_alone() {
    let row = [1.0; 16];
    let mut columns = [0.0; 8 * 8 + 7];
    rows_to_columns([&row; LINE], &mut columns, 8);
    assert!(columns[..64].iter().all(|&entry| entry == 1.0));
    assert!(columns[64..].iter().all(|&entry| entry == 0.0));
    let mut rows = [[7.0; 16]; LINE];
    let done = columns_to_rows(&columns, 8, rows.each_mut().map(|row| &mut row[..]));
    assert_eq!(done, 8);
}

#[test]
fn the_places_of_large_values_are_those_of_a_plain_search() {
    let mut stream = Stream::new(13);
    for length in [0, 1, 15, 16, 33, 1024, 1025, 5000] {
        let values: Vec<f64> = (0..length).map(|_| stream.normal()).collect();
        for (sign, least) in [
            (1.0, 1.3),
            (-1.0, 1.3),
            (1.0, f64::NEG_INFINITY),
            (1.0, f64::NAN),
        ] {
            let expected: Vec<u32> = (0..length as u32)
                .filter(|&place| sign * values[place as usize] >= least)
                .collect();
            let mut found = Vec::new();
            at_least(&values, sign, least, &mut found);
            assert_eq!(found, expected);
            found.clear();
            dispatch_plain(AtLeast {
                values: &values,
                sign,
                least,
                found: &mut found,
            });
            assert_eq!(found, expected);
        }
    }
}

#[test]
fn values_beyond_bounds_are_found_in_order() {
    let mut stream = Stream::new(31);
    for count in [0, 1, 7, 8, 9, 511, 512, 513, 3000] {
        let values: Vec<f64> = (0..count).map(|_| stream.normal()).collect();
        for (low, high) in [(-1.0, 1.0), (0.0, 0.0), (f64::NEG_INFINITY, 2.0)] {
            let expected: Vec<f64> = values
                .iter()
                .copied()
                .filter(|&value| value >= high || value <= low)
                .collect();
            let mut found = vec![f64::NAN; 3];
            beyond(&values, low, high, &mut found);
            assert_eq!(found, expected);
        }
    }
}

proptest! {
    #![proptest_config(fixed(300))]

    #[test]
    fn a_rank_is_that_of_a_full_sort(
        values in prop::collection::vec(
            prop_oneof![4 => -3.0..3.0, 1 => Just(0.5), 1 => 1e3..1e300, 1 => -1e-300..1e-300], 1..400
        ),
        share in 0.0..1.0,
    ) {
        let rank = 1 + (share * values.len() as f64) as usize;
        let mut sorted: Vec<f64> = values.clone();
        sorted.sort_by(|a: &f64, b: &f64| b.total_cmp(a));
        let expected = sorted.get(rank - 1).copied();
        prop_assert_eq!(nth_largest(&values, rank), expected);
        let plain = dispatch_plain(Dividing { values: &values, rank });
        prop_assert!(plain.is_none() || plain == expected);
    }
}

#[test]
fn ranks_that_are_not_there_are_none() {
    assert_eq!(nth_largest(&[], 1), None);
    assert_eq!(nth_largest(&[1.0, 2.0], 0), None);
    assert_eq!(nth_largest(&[1.0, 2.0], 3), None);
    assert_eq!(nth_largest(&[1.0; 40], 17), Some(1.0));
}
