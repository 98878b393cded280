use std::ops::Range;

use _core::kernels::chain_means::chain_means;
use _core::kernels::long_run::{chains, efficiency, of_summary, variances};
use _core::kernels::mean::contributions;
use _core::kernels::ordered::{Interrupt, set_threads};
use _core::kernels::signed_tail::signed_tail_shape;
use _core::kernels::study::{Study, Weighted, study};
use _core::kernels::summary::{Source, Summary};

use super::support::{Stream, close};

/// Draws of chains that mix, weights of a heavy tail, and the same with their tail cut off.
struct Case {
    f: Vec<f64>,
    w: Vec<f64>,
    raw: Vec<f64>,
    starts: Vec<i64>,
}

fn case(lengths: &[usize], rho: f64, seed: u64) -> Case {
    let mut stream = Stream::new(seed);
    let (mut f, mut raw, mut starts) = (Vec::new(), Vec::new(), vec![0_i64]);
    for length in lengths {
        let mut level = stream.normal();
        for _ in 0..*length {
            level = rho * level + stream.normal();
            f.push(level);
            raw.push((0.5 * level + 0.3 * stream.normal()).exp());
        }
        starts.push(f.len() as i64);
    }
    let mut sorted = raw.clone();
    sorted.sort_by(f64::total_cmp);
    let cap = sorted[sorted.len() * 99 / 100];
    let w: Vec<f64> = raw.iter().map(|r| r.min(cap)).collect();
    let total = |x: &[f64]| x.iter().sum::<f64>();
    let (of_w, of_raw) = (total(&w), total(&raw));
    Case {
        f,
        w: w.iter().map(|w| w / of_w).collect(),
        raw: raw.iter().map(|r| r / of_raw).collect(),
        starts,
    }
}

fn found(case: &Case, centre: f64) -> Study {
    let draws = case.f.len();
    let of = Weighted {
        w: &case.w,
        raw: &case.raw,
        chains: &chains(&case.starts, draws, false).unwrap(),
        halves: &chains(&case.starts, draws, true).unwrap(),
    };
    study(&case.f, centre, of, &Interrupt::never()).unwrap()
}

/// Every series formed as a whole, every figure by its own kernel.
fn twin(case: &Case, centre: f64) -> Study {
    let count = case.f.len() as f64;
    let halves = chains(&case.starts, case.f.len(), true).unwrap();
    let both = |z: &[f64]| variances(z, &halves, &Interrupt::never()).unwrap();
    let series = |w: &[f64]| -> Vec<f64> {
        let draws = case.f.iter().zip(w);
        draws.map(|(f, w)| count * w * (f - centre)).collect()
    };
    let (z, rough) = (series(&case.w), series(&case.raw));
    let psi: Vec<f64> = case.f.iter().map(|f| f - centre).collect();
    let rough_efficiency = efficiency(both(&rough));
    let whole = chains(&case.starts, case.f.len(), false).unwrap();
    Study {
        spread: psi.iter().zip(&case.w).map(|(p, w)| w * p * p).sum(),
        long_run: both(&z)[1],
        efficiency: rough_efficiency,
        shape: signed_tail_shape(&rough, rough_efficiency),
        own: efficiency(both(&psi)),
        contributions: contributions(&z),
        largest: psi.iter().fold(0.0, |most, psi| most.max(psi.abs())),
        chains: chain_means(&case.f, centre, &case.w, &whole, &Interrupt::never()).unwrap(),
    }
}

fn weighted_mean(case: &Case) -> f64 {
    case.f.iter().zip(&case.w).map(|(f, w)| f * w).sum()
}

fn assert_equal(found: &Study, twin: &Study) {
    // 1e-9: sums of up to 300,000 terms, and tail fits of entries that differ in the last digit.
    let figures = |s: &Study| {
        [
            s.spread,
            s.long_run,
            s.efficiency,
            s.shape,
            s.own,
            s.largest,
        ]
    };
    for (found, twin) in figures(found).into_iter().zip(figures(twin)) {
        assert!(close(found, twin, 1e-9), "{found} is not {twin}");
    }
    let ratio = found.contributions / twin.contributions;
    assert!(found.contributions == twin.contributions || (ratio - 1.0).abs() < 1e-8);
    for (found, twin) in found.chains.iter().zip(&twin.chains) {
        assert!(close(found.mass, twin.mass, 1e-12));
        assert!(close(found.mean, twin.mean, 1e-11) || found.mass == 0.0);
        assert!(close(found.long_run, twin.long_run, 1e-9));
        assert!(close(found.squares, twin.squares, 1e-12));
        assert!(close(found.variance, twin.variance, 1e-9));
    }
    assert_eq!(found.chains.len(), twin.chains.len());
}

#[test]
fn two_passes_find_what_every_kernel_finds_alone() {
    let lengths: [&[usize]; 7] = [
        &[400, 400, 400, 400],
        &[1],
        &[5, 3, 7],
        &[3000, 17],
        &[1023, 1024, 2049, 8],
        &[20_000; 4],
        &[130_000, 70_001],
    ];
    for (seed, lengths) in lengths.iter().enumerate() {
        for rho in [0.0, 0.6, 0.97] {
            let case = case(lengths, rho, seed as u64);
            let centre = weighted_mean(&case);
            assert_equal(&found(&case, centre), &twin(&case, centre));
        }
    }
}

#[test]
fn a_tail_that_the_guess_misses_is_found_all_the_same() {
    // Of slow chains the tail is far longer than the sample prepares for; of a series that is 0 but
    // for its end the sample sees nothing.
    let mut case = case(&[50_000, 50_000], 0.999, 3);
    let centre = weighted_mean(&case);
    assert_equal(&found(&case, centre), &twin(&case, centre));
    case.f[..99_000].fill(0.0);
    assert_equal(&found(&case, 0.0), &twin(&case, 0.0));
}

#[test]
fn constants_have_no_error_and_chains_without_weight_do_no_harm() {
    let mut case = case(&[300, 300], 0.0, 5);
    case.f.fill(0.1);
    let of_constant = found(&case, 0.1);
    assert_eq!((of_constant.spread, of_constant.long_run), (0.0, 0.0));
    assert_eq!(
        (of_constant.own, of_constant.contributions),
        (1.0, f64::INFINITY)
    );
    assert_eq!(of_constant.shape, f64::NEG_INFINITY);
    let mut case = self::case(&[300, 300, 300], 0.2, 6);
    case.w[300..600].fill(0.0);
    case.raw[300..600].fill(0.0);
    let centre = weighted_mean(&case);
    let found = found(&case, centre);
    assert_equal(&found, &twin(&case, centre));
    assert_eq!(found.chains[1].mass, 0.0);
}

#[test]
fn a_chain_of_next_to_no_weight_has_its_own_figures() {
    let mut case = case(&[400, 400], 0.3, 8);
    for place in 400..800 {
        case.w[place] *= 1e-250;
    }
    let centre = weighted_mean(&case);
    let (found, twin) = (found(&case, centre), twin(&case, centre));
    assert!(close(found.chains[1].mean, twin.chains[1].mean, 1e-10));
    assert!(close(
        found.chains[1].squares,
        twin.chains[1].squares,
        1e-10
    ));
    assert!(found.chains[1].squares > 1.0 / 400.0);
}

#[test]
fn the_number_of_threads_does_not_show() {
    let case = case(&[70_000, 70_000, 9], 0.5, 9);
    let centre = weighted_mean(&case);
    let one = {
        set_threads(1).unwrap();
        found(&case, centre)
    };
    set_threads(3).unwrap();
    let three = found(&case, centre);
    assert_eq!(one, three);
}

#[test]
fn a_series_made_range_by_range_is_the_series_given() {
    let case = case(&[900, 901, 11], 0.9, 10);
    let halves = chains(&case.starts, case.f.len(), true).unwrap();
    let never = Interrupt::never();
    let given = Summary::new(Source::Given(&case.f), &halves, case.f.len(), &never).unwrap();
    let fill = |range: Range<usize>, out: &mut [f64]| out.copy_from_slice(&case.f[range]);
    let made = Summary::new(Source::Made(&fill), &halves, case.f.len(), &never).unwrap();
    assert_eq!(given.mean_square(), made.mean_square());
    assert_eq!(of_summary(&given, &never), of_summary(&made, &never));
    assert!(of_summary(&given, &never).unwrap() > 3.0 * given.mean_square());
}
