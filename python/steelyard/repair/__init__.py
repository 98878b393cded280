"""When the weights fail: the cheapest way to an answer."""

from steelyard.repair.climbing import repair
from steelyard.repair.cured import Cured, left_out
from steelyard.repair.evaluating import Evaluator, evaluator_of
from steelyard.repair.ladder import Ladder, Rung
from steelyard.repair.particles import Step
from steelyard.repair.tempered import Tempered
from steelyard.repair.tempering import temper

__all__ = [
    "Cured",
    "Evaluator",
    "Ladder",
    "Rung",
    "Step",
    "Tempered",
    "evaluator_of",
    "left_out",
    "repair",
    "temper",
]
