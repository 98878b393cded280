"""The next temperature: as far as the weights bear it."""

from __future__ import annotations

import math

import numpy as np

from steelyard.base.draws import Array

__all__ = ["conditional_share", "next_temperature"]

# Halvings of the ratio of two step lengths that start 12 orders of magnitude apart.
_HALVINGS = 60


def conditional_share(weights: Array, ratio: Array, step: float) -> float:
    """
    Conditional effective size of a step, as a share: ``(Σ W v)²/Σ W v²`` with ``v = exp(Δλ ℓ)``.

    W are normalised weights [1]_.

    References
    ----------
    .. [1] Zhou, Johansen, Aston (2016), Journal of Computational and Graphical Statistics 25.
    """
    v = np.exp(step * (ratio - ratio.max()))
    return float((weights @ v) ** 2 / (weights @ v**2))


def next_temperature(
    temperature: float, weights: Array, ratio: Array, efficiency: float
) -> tuple[float, float]:
    """
    The next temperature and the conditional share there.

    Particles outside of the target's support have no weight at any temperature above zero: the
    share is that of the others.
    """
    inside = np.isfinite(ratio) & (weights > 0)
    w, kept = weights[inside] / weights[inside].sum(), ratio[inside]
    whole = 1.0 - temperature
    share = conditional_share(w, kept, whole)
    if share >= efficiency:
        return 1.0, share
    low, high = whole * 1e-3, whole
    while conditional_share(w, kept, low) < efficiency and low > 1e-300:
        low, high = low * 1e-3, low
    for _ in range(_HALVINGS):
        middle = math.sqrt(low * high)
        if conditional_share(w, kept, middle) >= efficiency:
            low = middle
        else:
            high = middle
    # A step that is lost in rounding would go on for ever.
    after = max(temperature + low, math.nextafter(temperature, 2.0))
    return min(after, 1.0), conditional_share(w, kept, low)
