"""From a base and a change, or from bare log ratios, to an Answer."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from typing import Any

import numpy as np

from steelyard.answers.answer import Answer
from steelyard.arrays import plain_array
from steelyard.base import Base, read_base
from steelyard.base.draws import Draws
from steelyard.base.shapes import stacked
from steelyard.changes import Change, Target, form_target
from steelyard.changes import log_ratio as changed_by
from steelyard.changes.noise import NoisyTerm
from steelyard.errors import ArgumentTypeError, DrawsError, RatioError
from steelyard.verdicts import Finding, judge
from steelyard.weighing.preflight import preflight
from steelyard.weighing.trust import shared_findings, weight_findings
from steelyard.weighing.weigh import base_weights, weigh_ratio

__all__ = ["base_answer", "reweigh", "unknown_supports", "weigh"]


def base_answer(base: Base) -> Answer:
    """The answer without a change."""
    weights = base_weights(base)
    findings = [judge("base_unverified")]
    if base.log_weights is not None:
        findings += weight_findings(weights, base.draws, base.ordered)
    if base.draws.pooling is not None:
        findings += base.draws.pooling.findings
    return Answer(base, weights, weights, tuple(findings))


def reweigh(base: Base, change: Change, *, smooth: bool = True) -> Answer:
    """The answer under a change; see ``Fit.reweigh``."""
    _refuse_text(smooth)
    target = form_target(base, change)
    base = replace(base, withheld=target.withheld)
    own = base_weights(base)
    notes = [judge("base_unverified"), *unknown_supports(target)]
    if not target.terms:
        unchanged = base_answer(base)
        # A swap that equals the base on these draws may still reach beyond them.
        shared = (*preflight(base, target), judge("no_change"))
        found = (*unchanged._findings, *shared)
        return Answer(base, own, own, found, change, target)
    weights = weigh_ratio(
        target.log_ratio,
        base.reference,
        base.draws,
        ordered=base.ordered,
        smooth=smooth,
        base_weights=base.log_weights,
    )
    shared = (
        *preflight(base, target),
        *shared_findings(weights, base.draws, base.ordered),
        *notes,
    )
    if base.log_weights is not None:
        # The shift compares like with like: both sides smoothed by the same function.
        zero = np.zeros(base.draws.size)
        own = weigh_ratio(zero, base.log_weights, base.draws, ordered=base.ordered, smooth=smooth)
    own_findings = tuple(weight_findings(weights, base.draws, base.ordered))
    return Answer(base, weights, own, (*own_findings, *shared), change, target)


def weigh(log_ratio: Any, draws: Any = None, *, smooth: bool = True) -> Answer:
    """
    An Answer for those who hold only log ratios.

    Parameters
    ----------
    log_ratio : array_like
        ``log q(θ) − log p(θ)`` at each draw, up to a constant; ``(n,)`` or ``(chain, draw)``.
        −inf is a weight of zero.
    draws : mapping, xarray.Dataset, data frame or Draws, optional
        The draws, so that quantities can be named; without them quantities are arrays.
    smooth : bool, optional
        Whether the largest weights are smoothed.

    Returns
    -------
    Answer
        The answer. Supports and the base cannot be judged from ratios alone.

    Raises
    ------
    RatioError
        For NaN or +inf, or −inf for every draw.
    DrawsError, ShapeError
        Where draws and ratios disagree.

    Examples
    --------
    >>> import numpy as np, steelyard as sy
    >>> rate = np.random.default_rng(1).normal(0.10, 0.02, size=4000)
    >>> answer = sy.weigh(10 * rate, {"rate": rate})
    >>> bool(answer.shift("rate").value > 0)
    True
    """
    _refuse_text(smooth)
    base = read_base(draws) if draws is not None else Base(_bare_draws(log_ratio))
    ratio = np.array(stacked(log_ratio, base.draws, "log_ratio"), dtype=np.float64)
    if ratio.ndim != 1:
        raise RatioError(
            "log_ratio", "one number a draw", f"shape {np.shape(log_ratio)}", "Sum it first."
        )
    weights = weigh_ratio(ratio, None, base.draws, smooth=smooth)
    shared = (
        *shared_findings(weights, base.draws, True),
        judge("support_unknown", term="the ratio"),
    )
    own = tuple(weight_findings(weights, base.draws, True))
    change = changed_by(log_ratio)
    return Answer(base, weights, base_weights(base), (*own, *shared), change)


def unknown_supports(target: Target) -> Iterator[Finding]:
    """Likelihoods and ratios may vanish where nobody can see it from their values."""
    for name, term in target.loglik.items():
        if not (
            term.base is None or term.density is term.base or isinstance(term.density, NoisyTerm)
        ):
            yield judge("support_unknown", term=f"the likelihood of {name}")
    if target.ratios:
        yield judge("support_unknown", term="the given ratio")


def _refuse_text(smooth: Any) -> None:
    if not isinstance(smooth, bool | np.bool_):
        raise ArgumentTypeError("smooth", "True or False", repr(smooth), "Say which.")


def _bare_draws(log_ratio: Any) -> Draws:
    array = plain_array(log_ratio, "log_ratio", "fiu")
    dims = getattr(log_ratio, "dims", ())
    if tuple(dims) == ("draw", "chain"):
        array = array.T
    if array.ndim not in (1, 2) or array.size < 2:
        raise DrawsError(
            "log_ratio",
            "at least two draws, shape (n,) or (chain, draw)",
            f"shape {array.shape}",
            "Pass the log ratio of every draw.",
        )
    chains, length = (1, array.shape[0]) if array.ndim == 1 else array.shape
    if chains > length:
        raise DrawsError(
            "log_ratio",
            "(chain, draw) with at least as many draws as chains",
            f"{chains} chains of {length} draws",
            "Swap the axes, or flatten the ratios if the draws are one chain.",
        )
    starts = np.arange(chains + 1, dtype=np.int64) * length
    return Draws({}, starts, array.ndim == 2, chain_names=tuple(range(chains)))
