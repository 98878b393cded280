"""Leaving out: what every observation, group and future point does."""

from steelyard.leaving_out.blocks import by_observation
from steelyard.leaving_out.calibration import Calibration
from steelyard.leaving_out.combining import Combination, combine
from steelyard.leaving_out.contrast import Contrast
from steelyard.leaving_out.flipping import Flip
from steelyard.leaving_out.folds import k_fold
from steelyard.leaving_out.leave_out import leave_out
from steelyard.leaving_out.look_ahead import look_ahead
from steelyard.leaving_out.look_ahead_result import LookAhead
from steelyard.leaving_out.mixture import deletion_mixture, sampled_from
from steelyard.leaving_out.result import LeaveOut
from steelyard.leaving_out.sampling import Sampled

__all__ = [
    "Calibration",
    "Combination",
    "Contrast",
    "Flip",
    "LeaveOut",
    "LookAhead",
    "Sampled",
    "by_observation",
    "combine",
    "deletion_mixture",
    "k_fold",
    "leave_out",
    "look_ahead",
    "sampled_from",
]
