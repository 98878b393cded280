"""How answers move along one or two hyperparameters."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from html import escape
from typing import TYPE_CHECKING, Any

import numpy as np
import numpy.typing as npt

from steelyard.answers.bands import batch_edges, critical_value
from steelyard.answers.estimate import Estimate
from steelyard.answers.quantities import Quantity, asked_for
from steelyard.answers.tabulate import element_names
from steelyard.arrays import Frozen, ReadOnly
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.errors import ArgumentError, UnknownNameError
from steelyard.sensitivity.families import (
    Family,
    members,
    nodes_of,
    read_grid,
    refuse_withheld,
    remembering,
)
from steelyard.sensitivity.gathering import Gathered, Shared
from steelyard.sensitivity.nodes import Columns, Study, node_blocks, own_weights, weight_findings
from steelyard.sensitivity.targets import Targets
from steelyard.table import Table
from steelyard.verdicts import Finding, judge

if TYPE_CHECKING:
    from steelyard.show.sweep_plots import SweepPlots

__all__ = ["Sweep", "join_findings", "sweep"]


@dataclass(frozen=True, eq=False)
class Sweep(Frozen):
    """
    Answers over a grid of changes.

    Attributes
    ----------
    grid : mapping of str to numpy.ndarray
        Nodes by hyperparameter.
    estimates : mapping of str to Estimate
        By quantity, the axes of the grid first.
    trusted : numpy.ndarray of bool
        Where every quantity is sound, in the shape of the grid.
    effective_size : numpy.ndarray
        Of the weights, in the shape of the grid.
    critical : float
        Factor of the errors within which all nodes and quantities lie together, 95 %.
    """

    grid: Mapping[str, Array]
    estimates: Mapping[str, Estimate]
    trusted: npt.NDArray[np.bool_]
    effective_size: Array
    critical: float

    @property
    def value(self) -> Mapping[str, Array]:
        """Values by quantity, the axes of the grid first."""
        return ReadOnly({k: np.asarray(e.value) for k, e in self.estimates.items()})

    @property
    def error(self) -> Mapping[str, Array]:
        """Monte Carlo errors by quantity."""
        return ReadOnly({k: np.asarray(e.error) for k, e in self.estimates.items()})

    @property
    def level(self) -> Mapping[str, npt.NDArray[Any]]:
        """Levels of the verdicts by quantity."""
        return ReadOnly({k: e.verdict.level for k, e in self.estimates.items()})

    def band(self, quantity: str | None = None) -> Array:
        """
        Band that holds the whole curve at once, with 95 % Monte Carlo probability.

        Parameters
        ----------
        quantity : str, optional
            Label of the quantity; not needed where there is one.

        Returns
        -------
        numpy.ndarray
            Lower and upper limit, shape ``(2, *grid, *shape)``.

        Raises
        ------
        UnknownNameError
            For a label that was not swept.
        """
        estimate = self.one(quantity)
        half = self.critical * np.asarray(estimate.error)
        return np.stack([np.asarray(estimate.value) - half, np.asarray(estimate.value) + half])

    def one(self, quantity: str | None) -> Estimate:
        """The estimate of one quantity; the label may be left out where there is one."""
        label = next(iter(self.estimates)) if quantity is None else quantity
        if label not in self.estimates or (quantity is None and len(self.estimates) > 1):
            raise UnknownNameError(
                "quantity", f"one of {', '.join(self.estimates)}", repr(quantity), "Name one."
            )
        return self.estimates[label]

    @property
    def plot(self) -> SweepPlots:
        """Plots of the sweep; call it for a curve or a map."""
        from steelyard.show.sweep_plots import SweepPlots

        return SweepPlots(self)

    def table(self) -> Table:
        """One row for each node and element of a quantity."""
        columns: dict[str, list[Any]] = {name: [] for name in self.grid}
        columns |= {name: [] for name in ("quantity", "value", "error", "level", "reasons")}
        nodes = nodes_of(self.grid)
        places = list(np.ndindex(*(len(axis) for axis in self.grid.values())))
        for label, estimate in self.estimates.items():
            shape = np.shape(estimate.value)[len(self.grid) :]
            names = element_names(label, _like(estimate, len(self.grid)))
            for node, place in zip(nodes, places, strict=True):
                for name, inner in zip(names, np.ndindex(*shape), strict=True):
                    for axis, at in zip(self.grid, node, strict=True):
                        columns[axis].append(at)
                    one = estimate.verdict[(*place, *inner)]
                    columns["quantity"].append(name)
                    columns["value"].append(float(estimate.value[(*place, *inner)]))
                    columns["error"].append(float(estimate.error[(*place, *inner)]))
                    columns["level"].append(str(one.level))
                    codes = dict.fromkeys(r.code for r in one.reasons if r.level < "sound")
                    columns["reasons"].append(", ".join(codes))
        return Table(columns, {"value": columns["error"], "error": columns["error"]})

    def __str__(self) -> str:
        axes = " × ".join(f"{name} ({len(axis)} nodes)" for name, axis in self.grid.items())
        share = f"{int(self.trusted.sum())} of {self.trusted.size} nodes trusted"
        return f"sweep over {axes}: {', '.join(self.estimates)}; {share}"

    def __repr__(self) -> str:
        return f"<Sweep {self}>"

    def _repr_html_(self) -> str:
        return f"<p>{escape(str(self))}</p>"


def _like(estimate: Estimate, lead: int) -> Quantity:
    """The quantity that an estimate over nodes is about, for the names of its elements."""
    shape = np.shape(estimate.value)[lead:]
    values = np.broadcast_to(0.0, (1, *shape))
    return Quantity(estimate.label, values, estimate.dims[lead:], estimate.labels)


def sweep(base: Base, family: Family, grid: Any, quantities: Any = None) -> Sweep:
    """Answers of a family of changes over a grid; see ``Fit.sweep``."""
    axes = read_grid(family, grid)
    asked = asked_for(quantities, base)
    _refuse_shared_names(axes, asked)
    names, nodes = list(axes), nodes_of(axes)
    base = remembering(base)
    own, targets = own_weights(base), Targets(base)
    columns = Columns.of(list(asked.values()), base, own)
    study = Study(base, own, columns, batch_edges(base.draws))
    gathered = Gathered.empty(list(asked.values()), len(nodes))
    sizes = np.empty(len(nodes))
    findings: list[list[Finding]] = []
    sums: list[Array] = []
    blocks = list(node_blocks(len(nodes), base.draws.size))
    for part in blocks:
        formed = members(targets, family, names, nodes[part])
        refuse_withheld(formed, lambda base: asked_for(quantities, base), base)
        found = study.of(formed.ratios)
        sizes[part] = found.about[:, 2]
        findings.append([*targets.findings(formed.made), *weight_findings(found.about, base)])
        for one in gathered:
            one.put(part, found.value)
        sums.append(found.sums.reshape(-1, found.sums.shape[-1]))
    lead = tuple(len(axis) for axis in axes.values())
    joined = join_findings(findings, [p.stop - p.start for p in blocks])
    shared = Shared(base, own, sizes, [*joined, judge("base_unverified")], lead, dict(axes))
    estimates = {
        label: one.finished(columns, shared) for label, one in zip(asked, gathered, strict=True)
    }
    return Sweep(
        ReadOnly(axes),
        ReadOnly(estimates),
        _trusted(estimates, lead),
        sizes.reshape(lead),
        critical_value(np.concatenate(sums).T),
    )


def _refuse_shared_names(axes: Mapping[str, Array], asked: Mapping[str, Quantity]) -> None:
    for name in axes:
        if name in asked:
            raise ArgumentError(
                "grid", "a hyperparameter that no quantity is called like", repr(name), "Rename it."
            )


def _trusted(estimates: Mapping[str, Estimate], lead: tuple[int, ...]) -> npt.NDArray[np.bool_]:
    out = np.ones(lead, dtype=np.bool_)
    for estimate in estimates.values():
        sound = np.asarray(estimate.verdict.is_sound, dtype=np.bool_)
        out &= sound.reshape((*lead, -1)).all(axis=-1)
    return out


def join_findings(blocks: list[list[Finding]], widths: list[int]) -> list[Finding]:
    """Findings of blocks of nodes put together: one for each code and wording."""
    keys: dict[tuple[str, str], Finding] = {}
    for block in blocks:
        for finding in block:
            keys.setdefault(finding.wording, finding)
    joined = []
    for key, first in keys.items():
        figures, spoken = [], []
        for block, width in zip(blocks, widths, strict=True):
            here = [f for f in block if f.wording == key]
            figures.append(here[0].figure if here else np.full(width, np.nan))
            told = np.zeros(width, dtype=np.bool_)
            if here:
                told[...] = True if here[0].spoken is None else here[0].spoken
            spoken.append(told)
        figure, told = np.concatenate(figures), np.concatenate(spoken)
        joined.append(
            Finding(
                first.code,
                figure,
                first.strained,
                first.refit,
                first.words,
                None if told.all() else told,
            )
        )
    return joined
