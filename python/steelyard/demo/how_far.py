"""How far the decision of the demonstration holds: ten scenarios, a tipping point, its parts."""

from __future__ import annotations

import steelyard as sy
from steelyard.demo.model import EVENT, LEVEL, changes, fit

__all__ = ["compose_how_far", "plan", "spread"]


def spread(scale: float) -> sy.Change:
    """
    Give the spread of rates between quays another half-normal prior.

    Parameters
    ----------
    scale : float
        Its scale, mm a year.

    Returns
    -------
    sy.Change
        The change.
    """
    return sy.swap_prior(tau=sy.HalfNormal(scale))


def plan() -> sy.Plan:
    """
    State the ten scenarios and the decision they are about.

    Returns
    -------
    sy.Plan
        The locked plan.
    """
    more = {
        "spread 0.1": spread(0.1),
        "spread 0.02": spread(0.02),
        "spread 0.01": spread(0.01),
        "half of gauge A": sy.weigh_data({"gauge A": 0.5}),
    }
    return sy.Plan({**changes(), **more}, None, EVENT, LEVEL, "Is quay 4 to be re-coated?").lock()


def compose_how_far() -> str:
    """
    Answer the plan, look for the tipping point in the prior on the spread, and attribute it.

    Returns
    -------
    str
        Plain text.
    """
    base = fit()
    found = base.tipping_point(spread, EVENT, LEVEL, (0.002, 0.2), start=0.05)
    joint = spread(found.at) & sy.swap_prior(mu=sy.Gamma(64, 800)) & sy.power(likelihood=0.9)
    parts = (
        "Everything here is invented: harbour, gauges, readings.",
        str(base.triage(plan())),
        "The prior on the spread of rates between quays, half-normal of some scale (base: 0.05).",
        str(found),
        str(base.resistance(EVENT, LEVEL)),
        f"What moves it when the spread stands at {found.at:.2g}, the mean is sceptical, and the\n"
        "readings count for 0.9:",
        str(base.reweigh(joint).attribute(EVENT)),
        "Not a design check; applicable local codes and a licensed engineer govern.",
    )
    return "\n\n".join(parts)
