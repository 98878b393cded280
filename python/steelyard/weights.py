"""Functions on arrays of log weights, for those who hold arrays rather than a fit."""

from steelyard.weighing.reductions import effective_size, largest_share, log_sum_exp, normalise
from steelyard.weighing.resampling import resample
from steelyard.weighing.smoothing import Smoothed, smooth, tail_shape
from steelyard.weighing.summaries import influence, quantile

__all__ = [
    "Smoothed",
    "effective_size",
    "influence",
    "largest_share",
    "log_sum_exp",
    "normalise",
    "quantile",
    "resample",
    "smooth",
    "tail_shape",
]
