//! Element types that kernels read: they compute in `f64` and widen where they load.

/// A number in an input array.
pub trait Entry: Copy + Send + Sync {
    /// `−inf`: a weight of zero.
    const NONE: Self;

    /// The same number as `f64`, exactly.
    fn wide(self) -> f64;

    /// `entries` as `f64` where they are that already.
    fn as_wide(entries: &[Self]) -> Option<&[f64]>;
}

impl Entry for f64 {
    const NONE: Self = Self::NEG_INFINITY;

    #[inline(always)]
    fn wide(self) -> f64 {
        self
    }

    fn as_wide(entries: &[Self]) -> Option<&[f64]> {
        Some(entries)
    }
}

impl Entry for f32 {
    const NONE: Self = Self::NEG_INFINITY;

    #[inline(always)]
    fn wide(self) -> f64 {
        f64::from(self)
    }

    fn as_wide(_: &[Self]) -> Option<&[f64]> {
        None
    }
}
