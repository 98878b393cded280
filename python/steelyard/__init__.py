"""
Steelyard: what if, asked of posterior draws that exist already.

State a fit (draws, prior terms, log likelihood), state a change (another prior, likelihood or data
set), and read an answer with Monte Carlo errors and a verdict on whether it can be trusted.
"""

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
    Flat,
    Gamma,
    HalfCauchy,
    HalfNormal,
    Normal,
    StudentT,
)
from steelyard.fit import Fit
from steelyard.table import Table
from steelyard.threads import threads
from steelyard.verdicts import Reason, Verdict

__version__ = "0.1.0"

__all__ = [
    "Answer",
    "Beta",
    "Change",
    "Decision",
    "Distance",
    "Draws",
    "Estimate",
    "Finding",
    "Findings",
    "Fit",
    "Flat",
    "Gamma",
    "HalfCauchy",
    "HalfNormal",
    "Normal",
    "Reason",
    "StudentT",
    "Table",
    "Verdict",
    "add",
    "drop",
    "errors",
    "log_ratio",
    "power",
    "raise_noise",
    "read",
    "swap_loglik",
    "swap_prior",
    "threads",
    "weigh",
    "weigh_data",
    "weights",
]
