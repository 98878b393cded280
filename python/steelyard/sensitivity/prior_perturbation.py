"""The least change of one parameter's prior that brings a quantity to a target value."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from steelyard import _core
from steelyard.answers.bands import batch_edges, batch_sums
from steelyard.answers.estimate import Estimate
from steelyard.answers.estimating import Scale, Series, finish
from steelyard.answers.quantities import Quantity
from steelyard.answers.reweigh import base_answer
from steelyard.arrays import Frozen
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.base.priors import PriorTerm, known_term, stated_prior
from steelyard.densities import Distribution
from steelyard.errors import ArgumentError, PriorError
from steelyard.sensitivity.bounds import weighed_by
from steelyard.sensitivity.tilting import find_root
from steelyard.weighing.series import relative_efficiency

__all__ = ["LeastPrior", "PriorShape", "least_in_prior", "one_number_prior", "spread_and_size"]

# Nodes at which the leverage is smoothed, and reach of the grid of the prior in posterior sds.
_NODES = 400
_PRIOR_NODES = 6001
_REACH = 14.0


@dataclass(frozen=True, eq=False)
class PriorShape(Frozen):
    """
    A stated prior and the one that a perturbation implies, for the eye.

    Attributes
    ----------
    parameter : str
        Whose prior it is.
    values, stated, implied : numpy.ndarray
        Values of the parameter, and both densities there.
    """

    parameter: str
    values: Array
    stated: Array
    implied: Array


@dataclass(frozen=True, eq=False)
class LeastPrior:
    """What the search found: multiplier, log ratio at the draws, divergence, and the shape."""

    eta: float
    log_ratio: Array
    divergence: Estimate
    shape: PriorShape


@dataclass(frozen=True, eq=False)
class _Leverage:
    """
    The leverage ``m(φ)(D(φ) − c)`` over the prior's own probability scale u, and at the draws.

    On that scale the prior is uniform, so that the marginal of u under the posterior is the
    ratio m itself. `parts` are what single batches of draws contribute at the nodes.
    """

    nodes: Array
    at_nodes: Array
    parts: Array
    u: Array

    def at(self, at_nodes: Array) -> Array:
        return np.interp(self.u, self.nodes, at_nodes)


def least_in_prior(base: Base, asked: Quantity, goal: float, parameter: str) -> LeastPrior:
    """
    The prior ``p exp(η m (D − c))`` of one parameter under which the mean is `goal`.

    ``m`` is the ratio of the posterior's marginal to the prior, ``D(φ) = E[f | φ]``; both come
    from one kernel smoothing on the prior's probability scale, reflected at its ends. The error
    of the divergence is a batch jackknife's.
    """
    term = one_number_prior(base, parameter)
    phi = term.value(base.draws)
    grid, cdf, density = _prior_grid(term, np.ascontiguousarray(phi), parameter)
    u = np.interp(phi, grid, cdf)
    f, v = asked.columns[:, 0], base_answer(base)._weights.linear
    leverage = _smooth(base, u, f - goal, v)
    eta = _solve(leverage.at(leverage.at_nodes), f - goal, v, goal)
    value = _divergence(leverage.nodes, eta * leverage.at_nodes)
    error, degrees = _jackknife(base, leverage, f - goal, v, goal)
    log_ratio = eta * leverage.at(leverage.at_nodes)
    return LeastPrior(
        eta,
        log_ratio,
        _estimate(base, log_ratio, value, (error, degrees), parameter),
        _shape(parameter, grid, cdf, density, leverage, eta),
    )


def one_number_prior(base: Base, parameter: str) -> PriorTerm:
    stated = stated_prior(base.prior, "prior_of")
    known_term(parameter, stated, "prior_of", "prior")
    term = stated[parameter].resolved(base.draws)
    density = term.density
    if not isinstance(density, Distribution) or density.names or not density.is_proper:
        raise PriorError(
            f"prior_of={parameter!r}",
            "a proper distribution whose hyperparameters are numbers",
            str(density) if isinstance(density, Distribution) else type(density).__name__,
            "Name a parameter with such a prior, or leave prior_of out.",
        )
    if term.value(base.draws).ndim != 1:
        raise PriorError(
            f"prior_of={parameter!r}",
            "the prior of one number",
            f"one of shape {term.value(base.draws).shape[1:]}",
            "Name a parameter that is a single number.",
        )
    return term


def _prior_grid(term: PriorTerm, phi: Array, parameter: str) -> tuple[Array, Array, Array]:
    """Values, distribution function and density of the prior, dense where the draws are."""
    low, high = (float(limit) for limit in term.density.support())
    centre, scale = float(np.median(phi)), float(phi.std()) or 1.0
    grid = centre + scale * np.sinh(np.linspace(-_REACH, _REACH, _PRIOR_NODES))
    edges = [edge for edge in (low, high) if math.isfinite(edge)]
    if edges:
        # Geometric steps to each edge, where a density may be steep.
        near = scale * np.logspace(-12, 0, 400)
        grid = np.concatenate([grid, *(e + near for e in edges), *(e - near for e in edges), edges])
    grid = np.unique(grid[(grid >= low) & (grid <= high)])
    density = np.exp(term.density.log_density(grid))
    density = np.where(np.isfinite(density), density, 0.0)
    pieces = _trapezia(grid, density)
    total = float(pieces.sum())
    if not 0.99 < total < 1.01:
        raise ArgumentError(
            "prior_of",
            "a prior whose mass can be found around the draws",
            f"that of {parameter!r}, of which {total:.3g} was found",
            "Use worst_case() or least_perturbation() without prior_of.",
        )
    return grid, np.concatenate([[0.0], np.cumsum(pieces) / total]), density / total


def _trapezia(x: Array, y: Array) -> Array:
    """Areas under y between neighbours in x."""
    return np.diff(x) * (y[1:] + y[:-1]) / 2


def spread_and_size(base: Base, values: Array, v: Array) -> tuple[float, float]:
    """Sd of values under weights v, and how many independent draws they are worth."""
    square = (values - v @ values) ** 2
    spread = math.sqrt(float(_core.weighted_mean(square[:, None], v)[0]))
    effective = 1 / float((v**2).sum())
    if base.ordered:
        centred = (values - values.mean())[:, None]
        effective *= float(relative_efficiency(centred, base.draws, True)[0])
    return spread, effective


def _smooth(base: Base, u: Array, gap: Array, v: Array) -> _Leverage:
    spread, effective = spread_and_size(base, u, v)
    width = 1.06 * spread * effective**-0.2
    inner = np.quantile(u, np.linspace(0, 1, _NODES // 2))
    nodes = np.unique(np.concatenate([np.linspace(0, 1, _NODES // 2), inner]))
    kernel = np.zeros((len(nodes), len(u)))
    for image in (u, -u, 2 - u):
        kernel += np.exp(-0.5 * ((nodes[:, None] - image) / width) ** 2)
    kernel /= width * math.sqrt(2 * math.pi)
    parts = batch_sums((kernel * (v * gap)).T, batch_edges(base.draws))
    return _Leverage(nodes, parts.sum(axis=0), parts, u)


def _solve(leverage: Array, gap: Array, v: Array, goal: float) -> float:
    """The η at which the reweighted gap is zero; it rises with η where m and D are smooth."""

    def mean_gap(eta: float) -> float:
        ratio = eta * leverage
        w = v * np.exp(ratio - ratio.max())
        return float((w * gap).sum() / w.sum())

    scale = 1 / max(float(np.abs(leverage).max()), 1e-300)
    eta = find_root(mean_gap, scale)
    if abs(mean_gap(eta)) > 1e-6 * max(float(np.abs(gap).max()), 1e-300):
        raise ArgumentError(
            "target",
            "a mean that some prior of this parameter gives",
            f"{goal:g}, which none near these draws does",
            "The parameter does not move the quantity that far: name another, or ask for less.",
        )
    return eta


def _divergence(nodes: Array, log_factor: Array) -> float:
    """``KL(p'‖p)`` on the probability scale, where p is uniform."""

    def over(values: Array) -> float:
        return float(_trapezia(nodes, values).sum())

    shifted = np.exp(log_factor - log_factor.max())
    constant = over(shifted)
    mean = over(shifted * log_factor) / constant
    return max(mean - math.log(constant) - float(log_factor.max()), 0.0)


def _jackknife(
    base: Base, leverage: _Leverage, gap: Array, v: Array, goal: float
) -> tuple[float, float]:
    """Error from batches left out in groups of three, some twenty, and its degrees of freedom."""
    edges = batch_edges(base.draws)
    groups = [edges[i : i + 4] for i in range(0, len(edges) - 1, 3)]
    values = []
    for i, group in enumerate(groups):
        kept = np.ones(len(gap), dtype=np.bool_)
        kept[group[0] : group[-1]] = False
        at_nodes = leverage.at_nodes - leverage.parts[3 * i : 3 * i + len(group) - 1].sum(axis=0)
        share = float(v[kept].sum())
        at_nodes = at_nodes / share
        eta = _solve(leverage.at(at_nodes)[kept], gap[kept], v[kept], goal)
        values.append(_divergence(leverage.nodes, eta * at_nodes))
    count = len(values)
    squares = float(((np.array(values) - np.mean(values)) ** 2).sum())
    return math.sqrt((count - 1) / count * squares), float(count - 1)


def _estimate(
    base: Base, log_ratio: Array, value: float, unsure: tuple[float, float], parameter: str
) -> Estimate:
    """The divergence with its jackknife error and degrees of freedom."""
    weights, findings = weighed_by(base, log_ratio)
    scale = Scale(base, weights, base_answer(base)._weights, findings)
    one, (error, degrees) = np.ones(1), (np.array([part]) for part in unsure)
    shape = np.array([weights.tail_shape])
    series = Series(error, shape, one, one, None, degrees)
    label = f"divergence of the implied prior of {parameter}"
    return finish(scale, Quantity(label, log_ratio), np.array([value]), series, None)


def _shape(
    parameter: str, grid: Array, cdf: Array, density: Array, leverage: _Leverage, eta: float
) -> PriorShape:
    shown = (cdf > 5e-4) & (cdf < 1 - 5e-4)
    log_factor = eta * np.interp(cdf, leverage.nodes, leverage.at_nodes)
    implied = density * np.exp(log_factor - log_factor.max())
    implied = implied / float(_trapezia(grid, implied).sum())
    return PriorShape(parameter, grid[shown], density[shown], implied[shown])
