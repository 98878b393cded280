"""How far answers move, and where a conclusion flips."""

from steelyard.sensitivity.bounds import Bounds, worst_case
from steelyard.sensitivity.local import Local, local
from steelyard.sensitivity.perturbation import Perturbation, least_perturbation
from steelyard.sensitivity.prior_factors import PriorFactors, prior_factors
from steelyard.sensitivity.pull import Pull, pull
from steelyard.sensitivity.reach import Reach, least_data
from steelyard.sensitivity.resistance import resistance
from steelyard.sensitivity.statements import Statements, statements
from steelyard.sensitivity.sweep import Sweep, sweep
from steelyard.sensitivity.tipping import TippingPoint, tipping_point

__all__ = [
    "Bounds",
    "Local",
    "Perturbation",
    "PriorFactors",
    "Pull",
    "Reach",
    "Statements",
    "Sweep",
    "TippingPoint",
    "least_data",
    "least_perturbation",
    "local",
    "prior_factors",
    "pull",
    "resistance",
    "statements",
    "sweep",
    "tipping_point",
    "worst_case",
]
