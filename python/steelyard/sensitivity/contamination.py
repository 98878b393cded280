"""The worst that contaminating the prior of one parameter can do, whatever the contamination."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from steelyard.answers.estimate import Estimate
from steelyard.answers.estimating import Scale, finish, study
from steelyard.answers.quantities import Quantity
from steelyard.answers.reweigh import base_answer
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.base.priors import PriorTerm
from steelyard.sensitivity.prior_perturbation import one_number_prior, spread_and_size
from steelyard.verdicts import judge

__all__ = ["contaminated"]

# Positions of the point mass that are tried.
_NODES = 601
# Below this share of its variance, what a quantity varies by between neighbours in the parameter
# is rounding or an edge: it is then a function of the parameter.
_JUMPS = 0.01


@dataclass(frozen=True, eq=False)
class _Ratio:
    """
    Ratio of the posterior's marginal to the prior, by a kernel reflected at finite supports.

    Of fourth order, ``½(3 − t²) φ(t)``, so that its bias falls with the fourth power of the width.
    """

    phi: Array
    width: float
    term: PriorTerm

    def at(self, node: float) -> Array:
        """What each draw gives to the ratio at one node, ``(n,)``; their mean is the ratio."""
        low, high = (float(limit) for limit in self.term.density.support())
        images = [self.phi]
        images += [2 * edge - self.phi for edge in (low, high) if math.isfinite(edge)]
        out = np.zeros(len(self.phi))
        for image in images:
            t2 = ((node - image) / self.width) ** 2
            out += 0.5 * (3 - t2) * np.exp(-0.5 * t2)
        prior = math.exp(float(self.term.density.log_density(node)))
        return out / (self.width * math.sqrt(2 * math.pi) * prior)


def contaminated(
    base: Base, asked: Quantity, share: float, parameter: str
) -> list[tuple[Estimate, Array]]:
    """
    Lowest and highest mean under ``(1 − ε) p + ε q``, q any prior of one parameter φ.

    The extremes are reached where q is a point mass (Berger & Berliner 1986). With m the ratio of
    the posterior's marginal to the prior and ``D(φ) = E[f | φ]`` the mean is then
    ``((1 − ε) E f + ε m(φ) D(φ))/((1 − ε) + ε m(φ))``; its influence at the extreme φ is that of
    the ratio with φ held, since it is stationary there.
    """
    term = one_number_prior(base, parameter)
    phi = np.ascontiguousarray(term.value(base.draws))
    v, f = base_answer(base)._weights.linear, np.ascontiguousarray(asked.columns[:, 0])
    smoother = _Ratio(phi, _width(base, phi, v), term)
    owned = _is_function(phi, f)
    nodes = np.quantile(phi, np.linspace(0, 1, _NODES))
    density, moment = np.empty(len(nodes)), np.empty(len(nodes))
    for place, node in enumerate(nodes):
        kernel = v * smoother.at(node)
        density[place], moment[place] = kernel.sum(), kernel @ f
    density = np.maximum(density, 1e-300)
    ends = []
    for sign in (-1.0, 1.0):
        inner = _at_nodes(phi, f, nodes, sign) if owned else moment / density
        rest = (1 - share) * float(v @ f)
        means = (rest + share * density * inner) / (1 - share + share * density)
        place = int(np.argmax(sign * means))
        ends.append(_end(base, asked, share, smoother.at(nodes[place]), inner[place], owned))
    return ends


def _width(base: Base, phi: Array, v: Array) -> float:
    spread, effective = spread_and_size(base, phi, v)
    # The normal rule for a kernel of fourth order (Silverman 1986, section 3.6).
    return float(1.08 * spread * effective ** (-1 / 9))


def _is_function(phi: Array, f: Array) -> bool:
    """Whether a quantity hangs on the parameter alone: neighbours in it have the same value."""
    ranked = f[np.argsort(phi, kind="stable")]
    return float((np.diff(ranked) ** 2).mean()) < _JUMPS * 2 * float(ranked.var())


def _at_nodes(phi: Array, f: Array, nodes: Array, sign: float) -> Array:
    """A function of the parameter at the nodes: the better of the two draws beside each."""
    order = np.argsort(phi, kind="stable")
    right = np.clip(np.searchsorted(phi[order], nodes), 1, len(phi) - 1)
    beside = np.stack([f[order][right - 1], f[order][right]])
    return np.asarray(beside.max(axis=0) if sign > 0 else beside.min(axis=0))


def _end(
    base: Base, asked: Quantity, share: float, kernel: Array, inner: float, owned: bool
) -> tuple[Estimate, Array]:
    """The bound at one point mass, and the normalised log weights of the target there."""
    answer, f = base_answer(base), asked.columns[:, 0]
    v = answer._weights.linear
    held = inner if owned else f
    ratio = (1 - share) + share * kernel
    total = float(v @ ratio)
    value = float(v @ ((1 - share) * f + share * kernel * held)) / total
    psi = ((1 - share) * (f - value) + share * kernel * (held - value)) / total
    scale = answer._scale
    near = np.maximum(v * kernel, 0.0)
    worth = float(near.sum() ** 2 / (near**2).sum())
    extra = (judge("few_effective_draws", np.array([worth])),)
    found = Scale(base, scale.weights, scale.base_weights, scale.findings)
    series = study(found, psi[:, None])
    plain = Quantity(asked.label, f)
    estimate = finish(found, plain, np.array([value]), series, None, extra=extra)
    # The point mass itself has no draw; the draws around it stand for it.
    with np.errstate(divide="ignore"):
        logs = np.log(np.maximum(v * ratio, 0.0) / np.maximum(v * ratio, 0.0).sum())
    return estimate, logs
