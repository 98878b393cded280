//! Kernels: plain numerical functions on slices and array views, which know no Python.
//!
//! `columns` applies a kernel for one column to every column of an array, `ordered` runs the tasks
//! on threads without letting their number show in the result.

mod blocks;
pub mod chain_means;
pub mod columns;
pub mod correlation;
pub mod cumulated;
pub mod deletion;
mod deletion_column;
mod deletion_error;
mod deletion_general;
mod deletion_lag_loops;
mod deletion_lags;
mod deletion_loops;
mod deletion_products;
mod deletion_shift;
mod deletion_smooth;
mod deletion_survey;
mod deletion_welch;
pub mod densities;
pub mod effective;
pub mod entry;
pub mod error;
pub mod f_tail;
pub mod influence;
pub mod interrupt;
pub mod interval;
pub mod largest;
pub mod largest_weights;
pub mod lease;
pub mod log_sum;
pub mod long_run;
pub mod mean;
pub mod mean_logs;
pub mod moments;
pub mod multi_sample;
pub mod node_series;
pub mod nodes;
pub mod ordered;
pub mod pareto;
pub mod points;
pub mod positive;
pub mod quantile;
pub mod quantile_many;
pub mod reductions;
pub mod resample;
pub mod shares;
pub mod signed_tail;
pub mod smooth;
pub mod sorting;
pub mod special;
pub mod spectrum;
pub mod tail;
pub mod vector;
pub mod weight_sums;
pub mod weight_tiles;
