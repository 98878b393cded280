"""Do several densities agree about the normalising constant that the claim implies?"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import numpy.typing as npt

from steelyard import _core
from steelyard.arrays import in_unit
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.checking.findings import Finding, not_testable
from steelyard.checking.scales import scale_of
from steelyard.checking.significance import STRICT, z_and_p
from steelyard.checking.totals import likelihood_totals, prior_totals
from steelyard.digits import short

__all__ = ["check_normaliser"]

_NAME = "prior and likelihood together"
_MOST_PARAMETERS = 40
# Covariance of the test densities, as a share of that of the draws. The wide ones see more, the
# narrow ones still have finite variance where the claim is twice as sharp as the draws.
_WIDTHS = (0.7, 0.4)
_OFFSET = 0.6
Mask = npt.NDArray[np.bool_]

# Beyond this tail shape the ratios have no variance that an error could rest on.
_HEAVY = 0.5


def check_normaliser(base: Base) -> Finding:
    """
    ``E[g/(π L)]`` is the same constant for every normalised g inside the bulk.

    Gaussians fitted to the first quarter of every chain, moved apart along the main directions,
    must therefore agree on the rest: terms that are dropped, doubled or rescaled show.

    References
    ----------
    Gelfand, Dey (1994), J. R. Stat. Soc. B 56.
    """
    if not base.prior or not base.loglik:
        return not_testable(_NAME, "Prior and log likelihood must both be stated.")
    free = _unconstrained(base)
    if free is None:
        return not_testable(
            _NAME, "Some parameter has no stated prior, or a support this check does not know."
        )
    # Another unit adds one constant to all log densities.
    u, log_jacobian = in_unit(free[0])[0], free[1]
    if u.shape[1] > min(_MOST_PARAMETERS, base.draws.size // 100):
        return not_testable(_NAME, "There are too many parameters for this number of draws.")
    terms = [*prior_totals(base).values(), *likelihood_totals(base).values()]
    target = np.sum(terms, axis=0) + log_jacobian
    if not np.isfinite(target).all():
        return not_testable(_NAME, "The log density is not finite at some draw.")
    early = _first_quarters(base)
    if (np.ptp(u[early], axis=0) == 0).any():
        return not_testable(_NAME, "Some parameter does not move in the first quarter of a chain.")
    rest = replace(base, draws=base.draws.take(np.flatnonzero(~early)))
    worst, gap, tested = 1.0, 0.0, 0
    for width in _WIDTHS:
        logs = (_test_densities(u, early, width) - target[:, None])[~early]
        if float(_core.tail_shape(logs, np.ones(logs.shape[1])).max()) > _HEAVY:
            continue
        p, difference = _agreement(logs, rest)
        tested += 1
        if p < worst:
            worst, gap = p, difference
    if not tested:
        return not_testable(
            _NAME,
            "The posterior is too far from a normal one, or the claim too far from the draws, for "
            "the test densities.",
        )
    worst = min(1.0, worst * tested)
    if worst < STRICT:
        return Finding(
            _NAME,
            "found",
            worst,
            STRICT,
            f"Densities that must agree about the normalising constant differ by {short(gap)} on "
            f"the log scale (p = {short(worst)}): the draws are not those of the claimed terms.",
            "Look for a term that is dropped, doubled or rescaled, or for rows in another order.",
        )
    sentence = "Several densities agree about the normalising constant of the claimed terms."
    return Finding(_NAME, "nothing found", worst, STRICT, sentence)


def _agreement(logs: Array, rest: Base) -> tuple[float, float]:
    """p-value of the hypothesis that all log means of ``exp logs`` agree, and their largest gap."""
    ratios = np.exp(logs - logs.max(axis=0))
    means = ratios.mean(axis=0)
    log_means = np.log(means) + logs.max(axis=0)
    difference = log_means[1:] - log_means[0]
    # The influence of a log mean is r/mean − 1, that of a pair the difference.
    series = ratios[:, 1:] / means[1:] - ratios[:, :1] / means[0] + difference
    _, p = z_and_p(series, rest)
    return min(1.0, float(p.min()) * series.shape[1]), float(np.abs(difference).max())


def _unconstrained(base: Base) -> tuple[Array, Array] | None:
    columns, jacobian = [], np.zeros(base.draws.size)
    for name in base.parameters:
        scale = scale_of(name, base)
        if scale is None:
            return None
        free = scale.free(base.draws.values_by_name[name]).reshape(base.draws.size, -1)
        columns.append(free)
        jacobian += scale.log_jacobian(free).sum(axis=1)
    if not columns:
        return None
    return np.concatenate(columns, axis=1), jacobian


def _first_quarters(base: Base) -> Mask:
    early = np.zeros(base.draws.size, dtype=np.bool_)
    for start, stop in zip(base.draws.starts[:-1], base.draws.starts[1:], strict=True):
        early[start : start + (stop - start) // 4] = True
    return early


def _test_densities(u: Array, early: Mask, width: float) -> Array:
    """Log densities of Gaussians: one in the middle, pairs moved along the main directions."""
    mean, covariance = u[early].mean(axis=0), np.atleast_2d(np.cov(u[early], rowvar=False))
    values, vectors = np.linalg.eigh(covariance)
    values = np.maximum(values, 1e-12 * values.max())
    sd = np.sqrt(values * width)
    z = (u - mean) @ vectors / sd
    constant = -np.log(sd).sum() - 0.5 * len(sd) * np.log(2 * np.pi)
    directions = list(range(len(sd) - 1, max(len(sd) - 4, -1), -1))
    moves = [np.zeros(len(sd))]
    for direction in directions:
        for sign in (1.0, -1.0):
            moves.append(np.where(np.arange(len(sd)) == direction, sign * _OFFSET, 0.0))
    # All directions together: what a wrong prior on any one parameter moves shows here.
    moves += [np.full(len(sd), s * _OFFSET / np.sqrt(len(sd))) for s in (1.0, -1.0)]
    return np.stack(
        [constant - 0.5 * ((z - m / np.sqrt(width)) ** 2).sum(axis=1) for m in moves], axis=1
    )
