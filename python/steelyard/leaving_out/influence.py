"""What leaving out groups does to quantities: groups by quantities, in base sd."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import numpy as np

from steelyard.answers import Estimate
from steelyard.answers.quantities import asked_for
from steelyard.answers.tabulate import element_names
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.errors import ArgumentError, QuantityError
from steelyard.leaving_out.deletion import Setting, delete_columns, group_findings, setting_of
from steelyard.table import Table
from steelyard.verdicts import Verdict, judge

if TYPE_CHECKING:
    from steelyard.leaving_out.result import LeaveOut

__all__ = ["Held", "influence", "influential", "read_quantities"]


@dataclass(frozen=True, eq=False)
class Held:
    """Quantities as columns ``(n, P)``, their names, and shifts that a pass has found already."""

    names: tuple[str, ...]
    columns: Array
    shift: Array | None = None
    error: Array | None = None


def read_quantities(base: Base, quantities: Any) -> Held:
    """Quantities and events as columns, one name an element."""
    asked = asked_for(quantities, base)
    names = tuple(name for label, q in asked.items() for name in element_names(label, q))
    return Held(names, np.concatenate([q.columns for q in asked.values()], axis=1))


def influence(left: LeaveOut, quantities: Any = None) -> Estimate:
    """Groups by quantities; see ``LeaveOut.influence``."""
    asked = read_quantities(left._base, quantities)
    setting = setting_of(left._base, asked.columns)
    held = _found(left, asked, setting)
    shape = (*left.shape, len(held.names))
    verdict = _verdict(left, setting, shape)
    dims, labels = left._axes
    return Estimate(
        np.reshape(held.shift, shape),  # type: ignore[arg-type]
        np.reshape(held.error, shape),  # type: ignore[arg-type]
        np.broadcast_to(left.tail_shape[..., None], shape),
        verdict,
        np.full(shape, np.nan),
        label="influence (base sd)",
        dims=(*dims, "quantity"),
        labels={**labels, "quantity": np.array(held.names)},
    )


def _found(left: LeaveOut, held: Held, setting: Setting) -> Held:
    """Shifts from the pass that made `left` where they are there, else from a new one."""
    known = left._held
    if known is not None and known.shift is not None and known.error is not None:
        try:
            columns = [known.names.index(name) for name in held.names]
        except ValueError:
            columns = []
        if columns and np.array_equal(known.columns[:, columns], held.columns):
            return replace(held, shift=known.shift[:, columns], error=known.error[:, columns])
    rows, width = len(left._chosen), len(held.names)
    shift, error = np.empty((rows, width)), np.empty((rows, width))
    for part, deleted, scored in left._groups.blocks(left._base.draws, left._chosen, checked=False):
        block, _ = delete_columns(setting, deleted, scored)
        shift[part], error[part] = block.shift, block.shift_error
    return replace(held, shift=shift, error=error)


def _verdict(left: LeaveOut, setting: Setting, shape: tuple[int, ...]) -> Verdict:
    wide = (*left.shape, 1)
    findings = group_findings(left._found, left._base.draws.size, wide)
    effective = left.effective_size[..., None] * setting.efficiency
    findings.append(judge("few_effective_draws", effective))
    return Verdict([*findings, *left._notes], shape)


def influential(left: LeaveOut, quantity: Any, n: int = 10) -> Table:
    """The groups that move a quantity most; see ``LeaveOut.influential``."""
    if isinstance(n, bool) or not isinstance(n, int | np.integer) or n < 1:
        raise ArgumentError("n", "an integer of at least 1", repr(n), "Say how many groups.")
    found = influence(left, quantity)
    if found.value.shape[-1] != 1:
        raise QuantityError(
            "quantity",
            "a single number for each draw",
            f"{found.value.shape[-1]} elements",
            'Name one element, such as "rate[3]".',
        )
    value, error = found.value.reshape(-1), found.error.reshape(-1)
    size = np.where(np.isnan(value), -np.inf, np.abs(value))
    rows = np.argsort(-size, kind="stable")[: int(n)]
    places = [np.unravel_index(int(row), left.shape) for row in rows]
    verdicts = [found.verdict[(*place, 0)] for place in places]
    columns = {
        "group": [left.name_of(int(row)) for row in rows],
        "influence": [float(value[row]) for row in rows],
        "error": [float(error[row]) for row in rows],
        "log_score": [float(left._scores[row]) for row in rows],
        "tail_shape": [float(left._found.tail_shape[row]) for row in rows],
        "level": [str(v.level) for v in verdicts],
        "reasons": [", ".join(r.code for r in v.reasons if r.level < "sound") for v in verdicts],
    }
    digits = {"influence": columns["error"], "error": columns["error"]}
    title = f"influence on {found.labels['quantity'][0]}, in base sd"
    return Table(columns, digits, title)  # type: ignore[arg-type]
