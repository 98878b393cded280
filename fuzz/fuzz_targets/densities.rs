//! Log densities: an entry has the same density alone and among others, under any hyperparameters.
#![no_main]

use _core::kernels::densities::Kind;
use _core::kernels::densities::hyper::Hyper;
use _core::kernels::ordered::Interrupt;
use libfuzzer_sys::fuzz_target;
use steelyard_fuzz::Words;

fuzz_target!(|data: &[u8]| {
    let mut words = Words::new(data);
    let names: Vec<&str> = Kind::names().collect();
    let name = names[usize::from(words.byte()) % names.len()];
    let kind = Kind::named(name).expect("one of the names");
    let wild = words.flag();
    let sets = 1 + words.count(9);
    let repeat = words.count(6);
    let given = kind.hyperparameters() + usize::from(words.byte() == 255);
    let mut one = || {
        if wild {
            words.number()
        } else {
            within(&mut words)
        }
    };
    let mut hyper: Vec<Vec<f64>> = Vec::new();
    for _ in 0..given {
        hyper.push((0..sets).map(|_| one()).collect());
    }
    if name == "flat" && !wild {
        // Its limits are ordered, whatever else.
        hyper[1].iter_mut().for_each(|upper| *upper += 1.0);
    }
    let count = words.length(1024);
    let x = words.numbers(count);
    let views: Vec<&[f64]> = hyper.iter().map(Vec::as_slice).collect();
    let together = Hyper::new(&views, repeat).expect("equal lengths, none empty");
    let mut out = vec![7.0; count];
    let result = kind.log_density(&x, &together, &mut out, &Interrupt::never());
    assert_eq!(result.is_ok(), given == kind.hyperparameters());
    if result.is_err() {
        return;
    }
    for (place, (&entry, &found)) in x.iter().zip(&out).enumerate() {
        let number = place / repeat.max(1) % sets;
        let own: Vec<[f64; 1]> = hyper.iter().map(|values| [values[number]]).collect();
        let views: Vec<&[f64]> = own.iter().map(<[f64; 1]>::as_slice).collect();
        let alone = Hyper::new(&views, 1).expect("equal lengths, none empty");
        let mut target = [7.0];
        kind.log_density(&[entry], &alone, &mut target, &Interrupt::never())
            .expect("lengths fit");
        let same = target[0].to_bits() == found.to_bits() || (target[0].is_nan() && found.is_nan());
        assert!(
            same,
            "{name}{own:?} at {entry:e}: {:e} alone, {found:e} among others",
            target[0]
        );
        if !wild {
            assert_eq!(
                found.is_nan(),
                entry.is_nan(),
                "{name}{own:?} at {entry:e}: {found:e}"
            );
        }
    }
});

/// A number that every hyperparameter may have: above 0, below 1.
fn within(words: &mut Words<'_>) -> f64 {
    0.004 + 0.992 * words.share()
}
