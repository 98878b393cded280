//! Every way to resample.
#![no_main]

use _core::kernels::resample::{Method, resample};
use libfuzzer_sys::fuzz_target;
use steelyard_fuzz::Words;

fuzz_target!(|data: &[u8]| {
    let mut words = Words::new(data);
    let name = Method::NAMES[usize::from(words.byte()) % Method::NAMES.len()];
    let method: Method = name.parse().expect("one of the names");
    let wild = words.flag();
    let size = words.count(3000);
    let mut key = [0; 32];
    key[..8].copy_from_slice(&words.raw().to_be_bytes());
    let count = words.length(1024);
    let w = if wild {
        words.numbers(count)
    } else {
        words.weights(count)
    };
    let positive = w.iter().filter(|&&weight| weight > 0.0).count();
    let usable = w.iter().all(|weight| *weight >= 0.0 && weight.is_finite()) && positive > 0;
    match resample(&w, size, method, key) {
        Ok(chosen) => {
            assert!(usable);
            assert_eq!(chosen.len(), size, "{name}");
            assert!(chosen.is_sorted());
            assert!(
                chosen.iter().all(|&index| w[index as usize] > 0.0),
                "{name} chose a weight of 0"
            );
            if name == "without_replacement" {
                assert!(chosen.windows(2).all(|pair| pair[0] < pair[1]));
            }
        }
        // Weights that vanish beside the largest are zero, so that fewer may be there than counted.
        Err(error) => assert!(!usable || name == "without_replacement", "{name}: {error}"),
    }
    if let Ok(text) = std::str::from_utf8(data) {
        assert_eq!(
            text.parse::<Method>().is_ok(),
            Method::NAMES.contains(&text)
        );
    }
});
