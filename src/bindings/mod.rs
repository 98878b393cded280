//! The module `steelyard._core`: convert, detach from the interpreter, call a kernel, map errors.

mod arrays;
mod chain_means;
mod deletion;
mod densities;
mod effective;
mod errors;
mod extremes;
mod f_tail;
mod influence;
mod interval;
mod largest;
mod log_sum;
mod long_run;
mod mean;
mod multi_sample;
mod nodes;
mod ordered;
mod pareto;
mod quantile;
mod resample;
mod signed_tail;
mod smooth;
mod special;
mod study;
mod weigh;

use pyo3::prelude::*;

#[pymodule]
mod _core {
    #[pymodule_export]
    use super::chain_means::chain_means;
    #[pymodule_export]
    use super::deletion::delete;
    #[pymodule_export]
    use super::densities::{
        beta_tails, digamma, gamma_tails, log_beta, log_density, log_normal_cdf, skew_normal_tails,
    };
    #[pymodule_export]
    use super::effective::{describe, effective_size, largest_share};
    #[pymodule_export]
    use super::extremes::extremes;
    #[pymodule_export]
    use super::f_tail::f_tail;
    #[pymodule_export]
    use super::influence::influence;
    #[pymodule_export]
    use super::interval::shortest_interval;
    #[pymodule_export]
    use super::largest::largest;
    #[pymodule_export]
    use super::log_sum::{log_sum_exp, normalise};
    #[pymodule_export]
    use super::long_run::{long_run_variance, variances};
    #[pymodule_export]
    use super::mean::{
        contributions, mean_square, weighted_covariance, weighted_mean, weighted_moments,
    };
    #[pymodule_export]
    use super::multi_sample::multi_sample;
    #[pymodule_export]
    use super::nodes::study_nodes;
    #[pymodule_export]
    use super::ordered::{set_threads, threads};
    #[pymodule_export]
    use super::pareto::pareto_fit;
    #[pymodule_export]
    use super::quantile::{quantile, quantile_many, sort_order};
    #[pymodule_export]
    use super::resample::resample;
    #[pymodule_export]
    use super::signed_tail::signed_tail_shape;
    #[pymodule_export]
    use super::smooth::{smooth, tail_shape};
    #[pymodule_export]
    use super::special::{normal_cdf, normal_quantile};
    #[pymodule_export]
    use super::study::study;
    #[pymodule_export]
    use super::weigh::{smooth_weights, weigh};
}
