"""When the weights fail: the cheapest way to an answer."""

from steelyard.repair.particles import Step
from steelyard.repair.tempered import Tempered
from steelyard.repair.tempering import temper

__all__ = ["Step", "Tempered", "temper"]
