//! Numerical core of Steelyard: weighing posterior draws under a changed prior, likelihood or data
//! set.
//!
//! [`kernels`] holds the mathematics and builds without Python; the bindings, behind the feature
//! `python`, are the module `steelyard._core`.

pub mod kernels;

#[cfg(feature = "python")]
mod bindings;
