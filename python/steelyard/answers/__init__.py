"""Answers and estimates: what the weighted draws say, with errors and verdicts."""

from steelyard.answers.answer import Answer
from steelyard.answers.distances import Distance
from steelyard.answers.estimate import Decision, Estimate
from steelyard.answers.reweigh import base_answer, reweigh, weigh

__all__ = ["Answer", "Decision", "Distance", "Estimate", "base_answer", "reweigh", "weigh"]
