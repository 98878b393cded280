//! Every kernel against its plain twin: slow, obvious code that shares nothing with it.
//!
//! Property tests run on a fixed seed, so that a run says the same thing every time.

#![allow(clippy::expect_used, clippy::panic, clippy::unwrap_used)]

mod kernels {
    mod chain_means;
    mod chains;
    mod columns;
    mod correlation;
    mod deletion;
    mod densities;
    mod densities_ln;
    mod densities_tables;
    mod densities_tails;
    mod effective;
    mod error;
    mod extremes;
    mod f_tail;
    mod influence;
    mod interval;
    mod lane_series;
    mod lanes;
    mod largest;
    mod log_sum;
    mod long_run;
    mod mean;
    mod moments;
    mod multi_sample;
    mod node_batches;
    mod node_series;
    mod nodes;
    mod ordered;
    mod pareto;
    mod quantile;
    mod quantile_many;
    mod reductions;
    mod resample;
    mod signed_tail;
    mod smooth;
    mod smooth_weights;
    mod special;

    mod study;
    mod support;
    mod vector;
    mod weigh;
}
