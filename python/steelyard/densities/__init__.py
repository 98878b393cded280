"""Distributions: vectorised log densities, supports, and hyperparameters by name."""

from steelyard.densities.beta import Beta
from steelyard.densities.distribution import Distribution
from steelyard.densities.flat import Flat
from steelyard.densities.gamma import Gamma
from steelyard.densities.half_cauchy import HalfCauchy
from steelyard.densities.half_normal import HalfNormal
from steelyard.densities.normal import Normal
from steelyard.densities.student_t import StudentT

__all__ = [
    "Beta",
    "Distribution",
    "Flat",
    "Gamma",
    "HalfCauchy",
    "HalfNormal",
    "Normal",
    "StudentT",
]
