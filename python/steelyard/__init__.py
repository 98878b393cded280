"""
Steelyard: what if, asked of posterior draws that exist already.

State a fit (draws, prior terms, log likelihood), state a change (another prior, likelihood or data
set), and read an answer with Monte Carlo errors and a verdict on whether it can be trusted.
"""

from importlib import import_module
from typing import TYPE_CHECKING, Any

from steelyard import errors, weights
from steelyard.answers import Answer, Decision, Distance, Estimate, weigh
from steelyard.base import Draws
from steelyard.base.files import read
from steelyard.changes import (
    Change,
    add,
    drop,
    log_ratio,
    power,
    raise_noise,
    swap_loglik,
    swap_prior,
    weigh_data,
)
from steelyard.checking import Finding, Findings
from steelyard.densities import (
    Beta,
    Binomial,
    Cauchy,
    Dirichlet,
    Exponential,
    Flat,
    Gamma,
    Gumbel,
    HalfCauchy,
    HalfNormal,
    HalfStudentT,
    InverseGamma,
    Laplace,
    LKJCorrelation,
    Logistic,
    LogNormal,
    Mixture,
    MultivariateNormal,
    NegativeBinomial,
    Normal,
    Pareto,
    Poisson,
    SkewNormal,
    StudentT,
    Truncated,
    Uniform,
    Weibull,
)
from steelyard.fit import Fit, Pool, pool
from steelyard.table import Table
from steelyard.threads import threads
from steelyard.verdicts import Reason, Verdict

if TYPE_CHECKING:
    from steelyard.leaving_out import (
        Calibration,
        Combination,
        Contrast,
        Flip,
        LeaveOut,
        LookAhead,
        by_observation,
        combine,
        deletion_mixture,
    )
    from steelyard.planning import Plan, Scenario, read_plan

__version__ = "0.1.0"

__all__ = [
    "Answer",
    "Beta",
    "Binomial",
    "Calibration",
    "Cauchy",
    "Change",
    "Combination",
    "Contrast",
    "Decision",
    "Dirichlet",
    "Distance",
    "Draws",
    "Estimate",
    "Exponential",
    "Finding",
    "Findings",
    "Fit",
    "Flat",
    "Flip",
    "Gamma",
    "Gumbel",
    "HalfCauchy",
    "HalfNormal",
    "HalfStudentT",
    "InverseGamma",
    "LKJCorrelation",
    "Laplace",
    "LeaveOut",
    "LogNormal",
    "Logistic",
    "LookAhead",
    "Mixture",
    "MultivariateNormal",
    "NegativeBinomial",
    "Normal",
    "Pareto",
    "Plan",
    "Poisson",
    "Pool",
    "Reason",
    "Scenario",
    "SkewNormal",
    "StudentT",
    "Table",
    "Truncated",
    "Uniform",
    "Verdict",
    "Weibull",
    "add",
    "by_observation",
    "combine",
    "deletion_mixture",
    "drop",
    "errors",
    "log_ratio",
    "pool",
    "power",
    "raise_noise",
    "read",
    "read_plan",
    "swap_loglik",
    "swap_prior",
    "threads",
    "weigh",
    "weigh_data",
    "weights",
]

# Loaded when they are first asked for, so that an import of the package stays quick.
_LATER = {
    "Calibration": "steelyard.leaving_out",
    "Combination": "steelyard.leaving_out",
    "Contrast": "steelyard.leaving_out",
    "Flip": "steelyard.leaving_out",
    "LeaveOut": "steelyard.leaving_out",
    "LookAhead": "steelyard.leaving_out",
    "Plan": "steelyard.planning",
    "Scenario": "steelyard.planning",
    "by_observation": "steelyard.leaving_out",
    "combine": "steelyard.leaving_out",
    "deletion_mixture": "steelyard.leaving_out",
    "read_plan": "steelyard.planning",
}


def __getattr__(name: str) -> Any:
    if name not in _LATER:
        raise AttributeError(f"module 'steelyard' has no attribute {name!r}")
    return getattr(import_module(_LATER[name]), name)


def __dir__() -> list[str]:
    return sorted({*globals(), *_LATER})
