"""When the weights fail: the cheapest way to an answer."""

from steelyard.repair.climbing import repair
from steelyard.repair.evaluating import Evaluator, evaluator_of
from steelyard.repair.ladder import Ladder, Rung

__all__ = ["Evaluator", "Ladder", "Rung", "evaluator_of", "repair"]
