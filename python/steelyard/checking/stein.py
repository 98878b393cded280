"""Do hyperparameters that the likelihood does not touch follow their prior code?"""

from __future__ import annotations

import numpy as np

from steelyard.arrays import in_unit
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.checking.findings import Finding, not_testable
from steelyard.checking.scales import Scale, scale_of
from steelyard.checking.significance import STRICT, z_and_p
from steelyard.checking.totals import prior_totals, with_values
from steelyard.densities import Distribution
from steelyard.digits import short

__all__ = ["check_hyperpriors", "untouched_hyperparameters"]

_NAME = "hyperpriors"


def check_hyperpriors(base: Base) -> Finding:
    """
    Stein's identity ``E[g' + g d log p/du] = 0`` for hyperparameters, with prior code alone.

    On the unconstrained scale u of each hyperparameter, for g = 1 and g = u; a wrong hyperprior
    or a missing Jacobian breaks it. Hyperparameters are those that other prior terms name.

    References
    ----------
    Stein (1981), Annals of Statistics 9.
    """
    names = untouched_hyperparameters(base)
    if not names:
        return not_testable(_NAME, "No prior term names a parameter as its hyperparameter.")
    if any(isinstance(t.density, np.ndarray) for t in (base.prior or {}).values()):
        return not_testable(_NAME, "A prior term is an array, so its derivative is not known.")
    tested, worst, culprit = [], 1.0, ""
    for name, scale in names:
        series = _stein_series(name, scale, base)
        if series is None:
            continue
        _, p = z_and_p(series, base)
        tested.append(name)
        if float(p.min()) < worst:
            worst, culprit = float(p.min()), name
    if not tested:
        return not_testable(_NAME, "No hyperparameter has a support that this check knows.")
    worst = min(1.0, worst * 2 * len(tested))
    if worst < STRICT:
        return Finding(
            _NAME,
            "found",
            worst,
            STRICT,
            f"The draws of {culprit} do not follow the stated priors (p = {short(worst)}), if the "
            "likelihood does not depend on it directly.",
            f"See whether the prior of {culprit} is the one that was fitted, and on which scale.",
        )
    sentence = f"The draws of {', '.join(tested)} agree with the stated priors."
    return Finding(_NAME, "nothing found", worst, STRICT, sentence)


def untouched_hyperparameters(base: Base) -> list[tuple[str, Scale]]:
    """Single-number parameters that stand for hyperparameters of other terms, with their scale."""
    named: dict[str, None] = {}
    for term in (base.prior or {}).values():
        if isinstance(term.density, Distribution):
            named |= dict.fromkeys(term.density.names)
    found = []
    for name in named:
        if name in base.draws and base.draws.values_by_name[name].ndim == 1:
            scale = scale_of(name, base)
            if scale is not None:
                found.append((name, scale))
    return found


def _stein_series(name: str, scale: Scale, base: Base) -> Array | None:
    """``g' + g s`` for both g, shape ``(n, 2)``, with the score s by central differences."""
    free = scale.free(base.draws.values_by_name[name])
    scaled, unit = in_unit(free[:, None])
    sd = float(scaled.std())
    if sd == 0:
        return None
    z = (scaled[:, 0] - scaled.mean()) / sd
    step = 1e-4 * sd * float(unit[0])
    with np.errstate(over="ignore", invalid="ignore"):
        up, down = (_log_prior(name, scale, free + sign * step, base) for sign in (1, -1))
        # The score times the sd.
        score = (up - down) / 2e-4
    if not np.isfinite(score).all():
        return None
    return np.stack([score, 1 + z * score], axis=1)


def _log_prior(name: str, scale: Scale, free: Array, base: Base) -> Array:
    moved = with_values(base.draws, {name: scale.bound(free)})
    total = np.sum(list(prior_totals(base, moved).values()), axis=0)
    return np.asarray(total + scale.log_jacobian(free))
