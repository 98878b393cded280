//! Kernels: plain numerical functions on slices and array views, which know no Python.
//!
//! `columns` applies a kernel for one column to every column of an array, `ordered` runs the tasks
//! on threads without letting their number show in the result.

pub mod chain_means;
pub mod columns;
pub mod correlation;
pub mod cumulated;
pub mod densities;
pub mod effective;
pub mod entry;
pub mod error;
pub mod extremes;
pub mod f_tail;
pub mod influence;
pub mod interrupt;
pub mod interval;
pub mod largest;
pub mod lease;
pub mod log_sum;
pub mod long_run;
pub mod mean;
pub mod mean_logs;
pub mod moments;
pub mod ordered;
pub mod pareto;
pub mod points;
pub mod quantile;
pub mod quantile_many;
pub mod reductions;
pub mod resample;
pub mod signed_tail;
pub mod smooth;
pub mod sorting;
pub mod special;
pub mod study;
pub mod study_blocks;
pub mod study_sums;
pub mod summary;
pub mod tail;
pub mod vector;
pub mod weigh;
pub mod weight_sums;
pub mod weight_tiles;
