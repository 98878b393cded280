"""Monte Carlo errors of series in chain order, and how chains differ."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from steelyard import _core
from steelyard.arrays import in_unit
from steelyard.base import Draws
from steelyard.base.draws import Array
from steelyard.base.pooling import Pooling

__all__ = [
    "MANY_CHAINS",
    "agreement",
    "carried",
    "chains_p_value",
    "contributions_of",
    "degrees_of",
    "long_run_variance",
    "relative_efficiency",
    "standard_error",
    "tail_of",
    "variance_and_efficiency",
]

# Shorter chains, or chains of fewer effective draws, know too little of their own errors.
_SHORTEST = 50
_FEWEST = 20
# A spectral estimate from n effective draws varies like a chi-square of about a third as many.
_FREEDOM = 3

# Contributions, and effective draws of an autocorrelated series, to one degree of freedom.
_CONTRIBUTIONS_A_DEGREE = 6.0
_DRAWS_A_DEGREE = 40.0


# From this many chains on, chains taken as independent units estimate a variance well enough.
MANY_CHAINS = 20


def long_run_variance(z: Array, draws: Draws, ordered: bool) -> Array:
    """
    Long-run variance of the columns of `z` ``(n, k)`` over split chains.

    With many chains it is at least that of chains taken as independent units, since short chains
    cannot show their own autocorrelation. Draws without order have their mean square instead,
    with repeated draws taken together. In a pool only what varies within a fit counts.
    """
    groups = None if ordered and draws.pooling is None else draws.repeats
    if draws.pooling is None:
        return _of_chains(z, draws.starts, groups, ordered)
    z = draws.pooling.centred(z)
    total = np.zeros(z.shape[1])
    for fit in draws.pooling.strata(draws.starts):
        rows = fit.rows
        within = None if groups is None else groups[rows]
        one = _of_chains(z[rows], fit.starts, within, ordered and fit.ordered)
        total += (rows.stop - rows.start) * one
    return total / draws.size


def _of_chains(
    z: Array,
    starts: npt.NDArray[np.int64],
    groups: npt.NDArray[np.intp] | None,
    ordered: bool,
) -> Array:
    if not ordered:
        if groups is None:
            return _core.mean_square(z)
        return _grouped(z - z.mean(axis=0), groups)
    lrv = _core.long_run_variance(z, starts, True)
    size, chains = int(starts[-1]), len(starts) - 1
    if chains < MANY_CHAINS:
        return lrv
    lengths = np.diff(starts)
    means = np.add.reduceat(z, starts[:-1], axis=0) / lengths[:, None]
    spread = (lengths[:, None] * (means - z.mean(axis=0)) ** 2).sum(axis=0) / size
    units = size / chains * chains / (chains - 1) * spread
    return np.asarray(np.maximum(lrv, units))


def _grouped(z: Array, groups: npt.NDArray[np.intp]) -> Array:
    """Mean square of draws of which some are the same draw again."""
    sums = np.zeros((int(groups.max()) + 1, z.shape[1]))
    np.add.at(sums, groups, z)
    return np.asarray((sums**2).sum(axis=0) / len(z))


def _together(z: Array, draws: Draws, ordered: bool) -> Array:
    """The series with repeated draws of an unordered base added up."""
    groups = None if ordered else draws.repeats
    if groups is None:
        return z
    sums = np.zeros((int(groups.max()) + 1, z.shape[1]))
    np.add.at(sums, groups, z)
    return sums


def tail_of(z: Array, efficiency: Array, draws: Draws, ordered: bool) -> Array:
    """Tail shape of a series, repeated draws of an unordered base taken together."""
    return _core.signed_tail_shape(_together(z, draws, ordered), efficiency)


def contributions_of(z: Array, efficiency: Array, draws: Draws, ordered: bool) -> Array:
    """
    How many draws carry a series on its heavier side: ``√e (Σ z²)³/(Σ z³)²``.

    The number of draws over the squared skewness of their mean: that of the draws in a rare event,
    one where a single draw carries all, +inf for a symmetric series. The mean of so few skewed
    contributions is not normal; Cochran asks for 25. Autocorrelation of relative efficiency e
    leaves the skewness of a mean somewhere between none of it (power 0) and that of whole
    excursions (power 1).

    References
    ----------
    .. [1] Cochran (1977), Sampling Techniques, section 2.15.
    """
    if draws.pooling is not None:
        z = draws.pooling.centred(z)
    return np.asarray(np.sqrt(efficiency) * _core.contributions(_together(z, draws, ordered)))


def degrees_of(contributions: Array, efficiency: Array, draws: Draws) -> Array:
    """
    Degrees of freedom of an error interval, at least 1.

    A sixth of the contributions, and no more than the effective draws of an autocorrelated series
    know of its long-run variance. Both constants are ours: measured by `make honesty`.
    """
    with np.errstate(divide="ignore"):
        known = draws.size * efficiency / (1 - efficiency) / _DRAWS_A_DEGREE
    return np.asarray(np.maximum(np.minimum(contributions / _CONTRIBUTIONS_A_DEGREE, known), 1.0))


def relative_efficiency(z: Array, draws: Draws, ordered: bool) -> Array:
    """``min(1, var/LRV)`` of each column, in (0, 1]; 1 for a constant."""
    return variance_and_efficiency(z, draws, True)[1] if ordered else np.ones(z.shape[1])


def variance_and_efficiency(z: Array, draws: Draws, ordered: bool) -> tuple[Array, Array]:
    """Variance of each column, every draw counted once, and its `relative_efficiency`."""
    if not ordered:
        return _core.mean_square(z), np.ones(z.shape[1])
    if draws.chains < MANY_CHAINS and draws.pooling is None:
        variance, lrv = _core.variances(z, draws.starts, True)
    else:
        variance = _core.mean_square(z if draws.pooling is None else draws.pooling.centred(z))
        lrv = long_run_variance(z, draws, ordered)
    with np.errstate(invalid="ignore", divide="ignore"):
        ratio = variance / lrv
    known = (lrv > 0) & np.isfinite(ratio) & (ratio > 0)
    return variance, np.where(known, np.minimum(ratio, 1.0), 1.0)


def standard_error(z: Array, draws: Draws, ordered: bool) -> Array:
    """
    Monte Carlo error of a mean whose influence values are `z` ``(n, k)``: ``sqrt(LRV(z)/S)``.

    References
    ----------
    .. [1] Geyer (1992), Statistical Science 7; Jones et al. (2006), JASA 101.
    """
    return np.sqrt(long_run_variance(carried(z, draws), draws, ordered) / draws.size)


def carried(z: Array, draws: Draws) -> Array:
    """Influence values of an estimate, with what the constants of a pool add to them."""
    return z if draws.pooling is None else draws.pooling.carried(z)


def chains_p_value(
    f: Array, weights: Array | None, draws: Draws, top: Array | None = None
) -> Array:
    """
    Whether the chains agree about weighted means: p-values, one a column of `f` ``(n, k)``.

    Without weights every draw counts once. `top` is the largest magnitude in `f`, if known.

    ``Q = Σ_c (μ_c − μ̄)²/se_c²`` with μ̄ weighted by ``1/se_c²``, in Welch's form, since the
    errors of the chains are estimated: ``Q/(C − 1)``, corrected, against an F distribution whose
    second degrees of freedom come from the effective draws of each chain. A chain's error is at
    least that of as many independent draws as its weights are worth: a chain that never left one
    value has no error of its own.

    References
    ----------
    .. [1] Welch (1951), Biometrika 38.
    """
    if draws.pooling is not None:
        equal = np.full(draws.size, 1 / draws.size) if weights is None else weights
        return _of_fits(f, equal, draws, draws.pooling)
    return _of_one_fit(f, weights, draws.starts, top)


# Chains of a fit that carries less of the weight than this are not compared.
_LEAST_SHARE = 0.01


def _of_fits(f: Array, weights: Array, draws: Draws, pooling: Pooling) -> Array:
    """Chains are compared within each fit; the smallest p-value times the number of fits."""
    least, compared = np.ones(f.shape[1]), 0
    for fit in pooling.strata(draws.starts):
        own = np.ascontiguousarray(weights[fit.rows])
        share = float(own.sum()) / float(weights.sum())
        if fit.ordered and len(fit.starts) > 2 and share >= _LEAST_SHARE:
            compared += 1
            rows = np.ascontiguousarray(f[fit.rows])
            least = np.minimum(least, _of_one_fit(rows, own / own.sum(), fit.starts))
    return np.minimum(compared * least, 1.0) if compared else least


def _of_one_fit(
    f: Array, weights: Array | None, starts: npt.NDArray[np.int64], top: Array | None = None
) -> Array:
    if not _enough_chains(starts):
        return np.ones(f.shape[1])
    if top is None:
        f, _ = in_unit(f)
        top = np.maximum(f.max(axis=0), -f.min(axis=0))
    chains = _core.chain_means(f, weights, starts)
    weighs = chains[0, :, 0] > 0
    mass, mean, *_, variance = chains[:, weighs]
    share = mass / mass.sum(axis=0)
    overall = (share * mean).sum(axis=0)
    pooled = (share * (variance + (mean - overall) ** 2)).sum(axis=0)
    return agreement(chains, pooled, top, starts)


def agreement(chains: Array, pooled: Array, top: Array, starts: npt.NDArray[np.int64]) -> Array:
    """
    P-values of `chains_p_value` from figures of the chains.

    `chains` is what the kernel `chain_means` tells, ``(5, chains, k)``; `pooled` the variance of
    a draw, and `top` the largest magnitude, ``(k,)``.
    """
    if not _enough_chains(starts):
        return np.ones(len(pooled))
    weighs = chains[0, :, 0] > 0
    if weighs.sum() < 2:
        return np.ones(len(pooled))
    _, mu, lrv, squares, _ = chains[:, weighs]
    count = np.diff(starts)[weighs, None].astype(np.float64)
    # Differences in the last digits are rounding, not chains that disagree.
    variance = np.maximum(lrv / count, np.maximum(pooled * squares, (1e-10 * top) ** 2))
    # A variance whose reciprocal would overflow is none.
    known = variance > 1e-290
    safe = np.where(known, variance, 1.0)
    precision = np.where(known, 1 / safe, 0.0)
    freedom = np.maximum(np.where(known, pooled / safe, count) / _FREEDOM, 1.0)
    enough = np.median(freedom, axis=0) * _FREEDOM >= _FEWEST
    return np.where(enough, _welch(mu, precision, freedom), 1.0)


def _enough_chains(starts: npt.NDArray[np.int64]) -> bool:
    return len(starts) > 2 and int(np.diff(starts).min()) >= _SHORTEST


def _welch(mu: Array, precision: Array, freedom: Array) -> Array:
    chains = len(mu)
    total = precision.sum(axis=0)
    safe = np.where(total > 0, total, 1.0)
    centre = (precision * mu).sum(axis=0) / safe
    q = (precision * (mu - centre) ** 2).sum(axis=0)
    spread = ((1 - precision / safe) ** 2 / freedom).sum(axis=0)
    f_value = q / (chains - 1) / (1 + 2 * (chains - 2) / (chains**2 - 1) * spread)
    second = (chains**2 - 1) / (3 * np.where(spread > 0, spread, 1.0))
    return np.where(total > 0, _core.f_tail(f_value, float(chains - 1), second), 1.0)
