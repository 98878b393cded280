"""What may be altered, and the target that results."""

from steelyard.changes.edits import Change
from steelyard.changes.making import (
    add,
    drop,
    log_ratio,
    power,
    raise_noise,
    swap_loglik,
    swap_prior,
    weigh_data,
)
from steelyard.changes.target import Target, form_target

__all__ = [
    "Change",
    "Target",
    "add",
    "drop",
    "form_target",
    "log_ratio",
    "power",
    "raise_noise",
    "swap_loglik",
    "swap_prior",
    "weigh_data",
]
