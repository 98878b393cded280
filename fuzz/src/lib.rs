//! Kernel inputs from raw bytes: short words of a small language, so that one changed byte changes
//! one number, and ties, zeros, infinities and extreme sizes are common.

/// Bytes still to be read; zeros follow the last.
pub struct Words<'a>(&'a [u8]);

impl<'a> Words<'a> {
    pub fn new(bytes: &'a [u8]) -> Self {
        Self(bytes)
    }

    pub fn byte(&mut self) -> u8 {
        let Some((&first, rest)) = self.0.split_first() else {
            return 0;
        };
        self.0 = rest;
        first
    }

    pub fn flag(&mut self) -> bool {
        self.byte() & 1 == 1
    }

    /// From 0 to `most`.
    pub fn count(&mut self, most: usize) -> usize {
        let number = usize::from(self.byte()) | usize::from(self.byte()) << 8;
        number % (most + 1)
    }

    pub fn raw(&mut self) -> u64 {
        (0..8).fold(0, |word, _| word << 8 | u64::from(self.byte()))
    }

    /// Any number at all, edge cases first.
    pub fn number(&mut self) -> f64 {
        let kind = self.byte();
        match kind {
            0 => 0.0,
            1 => -0.0,
            2 => f64::INFINITY,
            3 => f64::NEG_INFINITY,
            4 => f64::NAN,
            5 => f64::MAX,
            6 => f64::MIN,
            7 => f64::MIN_POSITIVE,
            8 => f64::from_bits(1),
            9 => -f64::from_bits(1),
            10 => f64::EPSILON,
            11..32 => f64::from_bits(self.raw()),
            32..64 => self.finite() * 1e3,
            64..96 => self.finite() * 1e-9,
            96..112 => 1e5 + self.finite(),
            112..128 => f64::from(kind) - 120.0,
            _ => self.finite(),
        }
    }

    /// From -128 to 128, in steps that make ties.
    fn finite(&mut self) -> f64 {
        f64::from(i16::from_be_bytes([self.byte(), self.byte()])) / 256.0
    }

    /// From 0 to 1, both ends likely.
    pub fn share(&mut self) -> f64 {
        f64::from(self.byte()) / 255.0
    }

    /// Finite and not negative.
    pub fn weight(&mut self) -> f64 {
        match self.byte() {
            0..48 => 0.0,
            48..64 => 1.0,
            64 => f64::MAX,
            65 => f64::from_bits(1),
            66 => 1e-300,
            _ => f64::from(self.byte()) / 64.0,
        }
    }

    pub fn numbers(&mut self, count: usize) -> Vec<f64> {
        (0..count).map(|_| self.number()).collect()
    }

    pub fn weights(&mut self, count: usize) -> Vec<f64> {
        (0..count).map(|_| self.weight()).collect()
    }

    /// A log weight: finite, or -inf.
    pub fn log_weights(&mut self, count: usize) -> Vec<f64> {
        (0..count)
            .map(|_| {
                let number = self.number();
                if number.is_nan() || number == f64::INFINITY {
                    f64::NEG_INFINITY
                } else {
                    number
                }
            })
            .collect()
    }

    /// As many numbers as the bytes that are left can fill, at most `most`.
    pub fn length(&self, most: usize) -> usize {
        self.0.len().min(most)
    }
}

/// Equal, both NaN, or apart by at most `tolerance` of the larger.
pub fn close(a: f64, b: f64, tolerance: f64) -> bool {
    a == b || (a.is_nan() && b.is_nan()) || (a - b).abs() <= tolerance * a.abs().max(b.abs())
}
