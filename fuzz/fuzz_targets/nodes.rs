//! Nodes of any weights over chains of any lengths.
#![no_main]

use _core::kernels::chains::Chains;
use _core::kernels::long_run::{chains, long_run_variance};
use _core::kernels::mean::mean_square;
use _core::kernels::node_common::{Asked, Common};
use _core::kernels::nodes::{Room, SERIES_FIGURES, WEIGHT_FIGURES, study};
use _core::kernels::ordered::Interrupt;
use libfuzzer_sys::fuzz_target;
use steelyard_fuzz::Words;

fuzz_target!(|data: &[u8]| {
    let mut words = Words::new(data);
    let (wild, ordered, shift) = (words.flag(), words.flag(), words.flag());
    let mut starts = vec![0_i64];
    for _ in 0..1 + words.count(20) {
        let length = 1 + i64::from(words.byte()) % 60;
        starts.push(starts[starts.len() - 1] + length);
    }
    let count = starts[starts.len() - 1] as usize;
    let mut numbers = |wild: bool| -> Vec<f64> {
        (0..count)
            .map(|_| if wild { words.number() } else { words.share() })
            .collect()
    };
    let (f, x) = (numbers(wild), numbers(wild));
    let own = vec![1.0 / count as f64; count];
    let asked = Asked {
        own: [&own, &own],
        equal_base: true,
        batches: &[0, count as i64],
        shift,
    };
    let of_chains =
        Chains::new(&starts, count, ordered).expect("starts rise to the number of draws");
    let columns = [(&f[..], f64::NAN), (&f[..], 0.5)];
    let common =
        Common::new(columns.into_iter(), of_chains, asked).expect("one batch of all draws");
    let mut out = vec![0.0; common.width()];
    let (mut w, mut room) = (vec![0.0; count], Room::default());
    // What the first node leaves behind must not show in the second.
    let other: Vec<f64> = x.iter().map(|x| -x).collect();
    let mut first = out.clone();
    let mut node = |x: &[f64], out: &mut [f64]| {
        study(x, &common, &mut w, out, &mut room, &Interrupt::never()).expect("never stopped");
    };
    node(&x, &mut first);
    node(&other, &mut out);
    node(&x, &mut out);
    let same = |a: f64, b: f64| a.to_bits() == b.to_bits() || (a.is_nan() && b.is_nan());
    assert!(first.iter().zip(&out).all(|(a, b)| same(*a, *b)));
    if wild || !ordered {
        return;
    }
    let moved = out[WEIGHT_FIGURES];
    let z: Vec<f64> = f
        .iter()
        .zip(&w)
        .map(|(f, w)| count as f64 * w * (f - moved))
        .collect();
    let halves = chains(&starts, count, true).expect("starts rise to the number of draws");
    let plain = long_run_variance(&z, &halves, &Interrupt::never()).expect("never stopped");
    let value = &out[WEIGHT_FIGURES..][..SERIES_FIGURES];
    // Many chains may raise it, where they are taken as units; a series of rounding is anything.
    let unit = mean_square(&z);
    assert!(
        unit < 1e-20 || value[3] >= plain - 1e-6 * unit,
        "{} {plain}",
        value[3]
    );
    assert!(!(value[2] < 0.0) && !(value[2] > 1.0));
});
