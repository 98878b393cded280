"""Whether groups have latent effects of their own, on which their likelihood is conditioned."""

from __future__ import annotations

import numpy as np

from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.leaving_out.groups import Groups
from steelyard.verdicts import Finding, judge

__all__ = ["own_latents"]

# So many groups are looked at: the question is whether they have effects, not which.
_LOOKED_AT = 24


def own_latents(base: Base, groups: Groups) -> Finding | None:
    """
    A finding where a parameter has one element a group and the group's density hangs on it.

    The figure is how much more of the variance of a group's log density a cubic in its own element
    explains than one in its neighbour's, median over groups. Deleting such a group by weights that
    condition on its effect asks draws of the effect given the data for its prior spread.
    """
    if groups.is_conditional or groups.count < 2:
        return None
    names = [n for n in base.parameters if base.draws[n].shape[1:] == groups.shape]
    if not names:
        return None
    chosen = np.unique(np.linspace(0, groups.count - 1, _LOOKED_AT).astype(np.int64))
    figures: dict[str, list[float]] = {name: [] for name in names}
    for part, _, scored in groups.blocks(base.draws, chosen):
        for column, group in enumerate(chosen[part].tolist()):
            other = (group + 1) % groups.count
            for name in names:
                values = base.draws[name].reshape(base.draws.size, -1)
                own = _explained(scored[:, column], values[:, group])
                figures[name].append(own - _explained(scored[:, column], values[:, other]))
    name, found = max(figures.items(), key=lambda item: float(np.median(item[1])))
    return judge("own_latents", float(np.median(found)), term=name)


def _explained(target: Array, x: Array) -> float:
    """Share of the variance of `target` that a cubic in x explains."""
    spread = float(np.var(target))
    width = float(np.std(x))
    if not (np.isfinite(spread) and spread > 0 and width > 0):
        return 0.0
    scaled = (x - x.mean()) / width
    design = np.stack([np.ones_like(scaled), scaled, scaled**2, scaled**3], axis=1)
    coefficients, *_ = np.linalg.lstsq(design, target, rcond=None)
    return 1.0 - float(np.var(target - design @ coefficients)) / spread
