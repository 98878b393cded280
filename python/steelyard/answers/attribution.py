"""What each term of a change contributes to a shift: contributions that add up to it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from html import escape
from typing import TYPE_CHECKING, Any

import numpy as np

from steelyard import _core
from steelyard.answers.estimate import Estimate
from steelyard.answers.estimating import Scale, Series, finish, series_of
from steelyard.answers.quantities import Quantity
from steelyard.answers.shifts import shift_of
from steelyard.arrays import Frozen, ReadOnly, in_unit, plain_array
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.base.names import close_names
from steelyard.changes import Target
from steelyard.changes.merging import LoglikTarget
from steelyard.errors import ArgumentTypeError, ChangeError, ShapeError, UnknownNameError
from steelyard.table import Table
from steelyard.weighing.series import standard_error

if TYPE_CHECKING:
    from steelyard.show.shift_plots import AttributionPlots

__all__ = ["Attribution", "attribution_of"]

# Nodes along the path: contributions of a smooth path are exact to about 1e-8 with twelve.
_NODES = 12
_CUT = "outside the new support"


@dataclass(frozen=True, eq=False)
class Attribution(Frozen):
    """
    Contributions to a shift of a mean, by term, group of terms, or block of observations.

    Attributes
    ----------
    terms : mapping of str to Estimate
        Contributions in the order of the change's terms; their sum is the shift but for
        `residual`.
    shift : Estimate
        The paired shift that they explain.
    residual, residual_error : float or numpy.ndarray
        What the contributions leave of the shift, and its Monte Carlo error: smoothing of the
        largest weights, and the quadrature along the path.
    """

    terms: Mapping[str, Estimate]
    shift: Estimate
    residual: Any
    residual_error: Any

    @property
    def plot(self) -> AttributionPlots:
        """Plot of the contributions, step by step."""
        from steelyard.show.shift_plots import AttributionPlots

        return AttributionPlots(self)

    def table(self) -> Table:
        """One row for each contribution and element of the quantity, then residual and shift."""
        names = ("term", "element", "contribution", "error", "level")
        columns: dict[str, list[Any]] = {name: [] for name in names}
        for place in np.ndindex(np.shape(self.shift.value)):
            rows = [*self.terms.items(), ("shift", self.shift)]
            for label, estimate in rows:
                if label == "shift":
                    left = float(np.asarray(self.residual)[place])
                    unsure = float(np.asarray(self.residual_error)[place])
                    _add(columns, "residual", place, left, unsure, "")
                verdict = estimate.verdict[place] if place else estimate.verdict
                value, error = (
                    float(np.asarray(part)[place]) for part in (estimate.value, estimate.error)
                )
                _add(columns, label, place, value, error, str(verdict.level))
        if not np.shape(self.shift.value):
            del columns["element"]
        return Table(columns, {"contribution": columns["error"], "error": columns["error"]})

    def __str__(self) -> str:
        return f"{self.shift.label}: contributions to its shift\n{self.table()}"

    def __repr__(self) -> str:
        return str(self)

    def _repr_html_(self) -> str:
        return f"<p>{escape(self.shift.label)}</p>" + self.table()._repr_html_()


def _add(
    columns: dict[str, list[Any]],
    label: str,
    place: tuple[int, ...],
    value: float,
    error: float,
    level: str,
) -> None:
    columns["term"].append(label)
    columns["element"].append(", ".join(map(str, place)))
    columns["contribution"].append(value)
    columns["error"].append(error)
    columns["level"].append(level)


def attribution_of(
    scale: Scale, target: Target | None, quantity: Quantity, groups: Any = None, blocks: Any = None
) -> Attribution:
    """Contributions to the shift of a mean; see ``Answer.attribute``."""
    if target is None or not target.terms:
        raise ChangeError(
            "attribute", "an answer under a change", "one without", "Reweigh with a change first."
        )
    parts = dict(target.terms)
    if blocks is not None:
        parts = _with_blocks(parts, target, scale.base, blocks)
    if groups is not None:
        parts = _grouped(parts, groups)
    shift = shift_of(scale, quantity, "mean")
    contributions, series, left = _along_the_path(scale, target.log_ratio, parts, quantity)
    plain = Quantity(quantity.label, quantity.values, quantity.dims, quantity.labels)
    terms = {
        label: finish(scale, plain, contributions[i], series[i], None)
        for i, label in enumerate([*parts, *([_CUT] if len(series) > len(parts) else [])])
    }
    residual = np.ravel(shift.value) - contributions.sum(axis=0)
    shape = np.shape(shift.value)
    return Attribution(
        ReadOnly(terms),
        shift,
        *(a.reshape(shape) if shape else float(a[0]) for a in (residual, left)),
    )


def _along_the_path(
    scale: Scale, log_ratio: Array, parts: Mapping[str, Array], quantity: Quantity
) -> tuple[Array, list[Series], Array]:
    """
    ``∫₀¹ Cov_λ(f, Δ_j) dλ`` over ``w^(λ) ∝ v exp(λ ℓ)``, by Gauss–Legendre quadrature.

    Draws that the change rules out leave the path at its start; what that moves is a row of its
    own. The influence of a covariance is ``w ((f − μ)(Δ − δ) − Cov)``.
    """
    count, (f, unit) = scale.count, in_unit(quantity.columns)
    v = scale.base_weights.linear
    start, kept = _start(log_ratio, scale.base_weights.log)
    nodes, shares = np.polynomial.legendre.leggauss(_NODES)
    deltas = [np.where(kept, delta, 0.0) for delta in parts.values()]
    values = np.zeros((len(deltas), f.shape[1]))
    z = np.zeros((len(deltas), count, f.shape[1]))
    for place, share in zip((nodes + 1) / 2, shares / 2, strict=True):
        w = _at(place, log_ratio, start, kept)
        centred = f - _core.weighted_mean(f, w)
        for j, delta in enumerate(deltas):
            product = centred * (delta - float(_core.weighted_mean(delta[:, None], w)[0]))[:, None]
            covariance = _core.weighted_mean(product, w)
            values[j] += share * covariance
            z[j] += share * count * w[:, None] * (product - covariance)
    rows = list(z)
    if not kept.all() and float(v[~kept].sum()) > 0:
        before, after = _core.weighted_mean(f, v), _core.weighted_mean(f, start)
        values = np.concatenate([values, (after - before)[None]])
        rows.append(count * (start[:, None] * (f - after) - v[:, None] * (f - before)))
    w = scale.weights.linear
    about = f - _core.weighted_mean(f, w)
    series = [series_of(scale.base, np.ascontiguousarray(row), about).times(unit) for row in rows]
    whole = w[:, None] * about - v[:, None] * (f - _core.weighted_mean(f, v))
    left = np.ascontiguousarray(count * whole - np.sum(rows, axis=0))
    unsure = standard_error(left, scale.base.draws, scale.base.ordered)
    return values * unit, series, unsure * unit


def _start(log_ratio: Array, log_base: Array) -> tuple[Array, Any]:
    kept = log_ratio > -np.inf
    # On the log scale: all that is kept may weigh less than a float can say.
    logs = np.where(kept, log_base, -np.inf)
    w = np.exp(logs - logs.max())
    return w / w.sum(), kept


def _at(place: float, log_ratio: Array, start: Array, kept: Any) -> Array:
    finite = np.where(kept, log_ratio, 0.0)
    with np.errstate(divide="ignore"):
        logs = np.log(start) + place * finite
    # The largest product counts, not the largest ratio: that one's draw may weigh nothing.
    w = np.exp(logs - logs.max())
    return np.asarray(w / w.sum())


def _grouped(parts: Mapping[str, Array], groups: Any) -> dict[str, Array]:
    """Terms put together by name; those that no group names stay alone."""
    if not isinstance(groups, Mapping):
        raise ArgumentTypeError(
            "groups", "{label: list of terms}", type(groups).__name__, "Name each group."
        )
    out: dict[str, Array] = {}
    used: dict[str, str] = {}
    for label, members in groups.items():
        where, kind = f"groups[{label!r}]", type(members).__name__
        if not isinstance(members, str | list | tuple | set | frozenset):
            raise ArgumentTypeError(where, "a list of terms", kind, "Name the terms.")
        for member in [members] if isinstance(members, str) else members:
            if not isinstance(member, str) or member not in parts:
                near = close_names(str(member), parts)
                raise UnknownNameError(where, "terms that the change alters", repr(member), near)
            if member in used:
                raise ChangeError(
                    where,
                    "each term in one group",
                    f"{member!r}, which is in {used[member]!r} too",
                    "Keep one of them.",
                )
            used[member] = str(label)
            out[str(label)] = out.get(str(label), 0.0) + parts[member]
    return {**out, **{k: v for k, v in parts.items() if k not in used}}


def _with_blocks(
    parts: Mapping[str, Array], target: Target, base: Base, blocks: Any
) -> dict[str, Array]:
    """Likelihood terms split by the label of each observation: ``{term: labels}``."""
    if not isinstance(blocks, Mapping):
        raise ArgumentTypeError(
            "blocks", "{likelihood term: a label an observation}", type(blocks).__name__, "Name it."
        )
    out = dict(parts)
    for name, labels in blocks.items():
        key = f"likelihood: {name}"
        if key not in parts:
            known = [k.partition(": ")[2] for k in parts if k.startswith("likelihood: ")]
            raise UnknownNameError(
                "blocks",
                "a likelihood term that the change alters",
                repr(name),
                close_names(str(name), known),
            )
        place = list(out).index(key)
        split = _split(target.loglik[name], base, labels, name)
        items = list(out.items())
        out = dict([*items[:place], *split.items(), *items[place + 1 :]])
    return out


def _split(term: LoglikTarget, base: Base, labels: Any, name: str) -> dict[str, Array]:
    array = plain_array(labels, f"blocks[{name!r}]", "iubUS")
    shape = term.density.obs_shape
    if array.shape != shape or not shape:
        raise ShapeError(
            f"blocks[{name!r}]",
            f"one label an observation, shape {shape}",
            str(array.shape),
            "Give the block of every observation; a total cannot be split.",
        )
    if term.base is not None and term.base.obs_shape != shape:
        raise ChangeError(
            f"blocks[{name!r}]",
            "old and new observations of one shape",
            f"{term.base.obs_shape} and {shape}",
            "Attribute the whole term.",
        )
    names, which = np.unique(array.reshape(-1), return_inverse=True)
    member = (which[:, None] == np.arange(len(names))).astype(np.float64)
    factor = np.broadcast_to(np.asarray(term.factor), shape).reshape(-1)
    sums = np.zeros((base.draws.size, len(names)))
    touched = (factor != 1) if term.base is term.density else np.ones(len(factor), np.bool_)
    new = term.density.blocks(base.draws)
    if term.base is None or term.base is term.density:
        weight = factor if term.base is None else factor - 1
        for part, block in new:
            sums[part] = (block[:, touched] * weight[touched]) @ member[touched]
    else:
        for (part, ours), (_, theirs) in zip(new, term.base.blocks(base.draws), strict=True):
            sums[part] = (np.where(factor == 0, 0.0, factor * ours) - theirs) @ member
    return {f"{name}: {label}": sums[:, i] for i, label in enumerate(names)}
