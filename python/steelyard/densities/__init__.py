"""Distributions: log densities, gradients, supports, tails, and hyperparameters by name."""

from steelyard.densities.beta import Beta
from steelyard.densities.binomial import Binomial
from steelyard.densities.cauchy import Cauchy
from steelyard.densities.dirichlet import Dirichlet
from steelyard.densities.distribution import Distribution
from steelyard.densities.exponential import Exponential
from steelyard.densities.flat import Flat
from steelyard.densities.gamma import Gamma
from steelyard.densities.gumbel import Gumbel
from steelyard.densities.half_cauchy import HalfCauchy
from steelyard.densities.half_normal import HalfNormal
from steelyard.densities.half_student_t import HalfStudentT
from steelyard.densities.inverse_gamma import InverseGamma
from steelyard.densities.laplace import Laplace
from steelyard.densities.lkj_correlation import LKJCorrelation
from steelyard.densities.log_normal import LogNormal
from steelyard.densities.logistic import Logistic
from steelyard.densities.mixture import Mixture
from steelyard.densities.multivariate_normal import MultivariateNormal
from steelyard.densities.negative_binomial import NegativeBinomial
from steelyard.densities.normal import Normal
from steelyard.densities.pareto import Pareto
from steelyard.densities.poisson import Poisson
from steelyard.densities.skew_normal import SkewNormal
from steelyard.densities.student_t import StudentT
from steelyard.densities.truncated import Truncated
from steelyard.densities.uniform import Uniform
from steelyard.densities.weibull import Weibull

__all__ = [
    "Beta",
    "Binomial",
    "Cauchy",
    "Dirichlet",
    "Distribution",
    "Exponential",
    "Flat",
    "Gamma",
    "Gumbel",
    "HalfCauchy",
    "HalfNormal",
    "HalfStudentT",
    "InverseGamma",
    "LKJCorrelation",
    "Laplace",
    "LogNormal",
    "Logistic",
    "Mixture",
    "MultivariateNormal",
    "NegativeBinomial",
    "Normal",
    "Pareto",
    "Poisson",
    "SkewNormal",
    "StudentT",
    "Truncated",
    "Uniform",
    "Weibull",
]
