"""xarray's Dataset, DataArray and DataTree: dimensions by name, coordinates kept as labels."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
import numpy.typing as npt

from steelyard.arrays import plain_array
from steelyard.base.chains import Found, take_chain
from steelyard.errors import AmbiguousNameError, DrawsError

__all__ = ["from_labelled", "is_labelled", "leading_dims"]


def is_labelled(source: Any) -> bool:
    """Whether a source names its dimensions and coordinates."""
    return hasattr(source, "dims") and hasattr(source, "coords")


def from_labelled(source: Any, chain: Any, argument: str) -> Found:
    """Draws from a Dataset, a DataArray, a tree's node, or a mapping of DataArrays."""
    variables = _variables(source, argument)
    lead = leading_dims(variables, argument)
    found = Found({}, has_chain_axis=len(lead) == 2)
    for name, variable in variables.items():
        ordered = variable.transpose(*lead, ...)
        found.arrays[name] = plain_array(ordered.values, f"{argument}[{name!r}]")
        found.dims[name] = tuple(str(d) for d in ordered.dims[len(lead) :])
        for dim in found.dims[name]:
            if dim in variable.coords:
                _keep_labels(found, dim, np.asarray(variable.coords[dim].values), argument)
    _read_chains(found, variables, lead, chain, argument)
    return found


def leading_dims(variables: Mapping[str, Any], argument: str) -> tuple[str, ...]:
    """``("chain", "draw")``, ``("draw",)``, or the same with "sample"; in every variable."""
    known = {str(d) for v in variables.values() for d in v.dims}
    draw = next((d for d in ("draw", "sample") if d in known), None)
    if draw is None:
        raise DrawsError(
            argument,
            "a dimension 'draw' (and 'chain'), or 'sample'",
            f"dimensions {sorted(known)}" if known else "no dimensions",
            "Rename the dimensions; of several groups take the one with the draws.",
        )
    lead = ("chain", draw) if "chain" in known else (draw,)
    for name, variable in variables.items():
        if any(d not in variable.dims for d in lead):
            raise DrawsError(
                f"{argument}[{name!r}]",
                f"dimensions {lead} in every variable",
                f"{tuple(map(str, variable.dims))}",
                "Leave out variables that do not go with the draws.",
            )
    return lead


def _variables(source: Any, argument: str) -> dict[str, Any]:
    children = getattr(source, "children", None)
    if children:
        groups = [str(g) for g in source.groups]
        raise AmbiguousNameError(
            argument,
            "one group",
            f"a tree of {len(groups)} groups: {', '.join(groups)}",
            f"Pass one of them, for instance tree[{groups[-1]!r}].",
        )
    if hasattr(source, "data_vars"):
        return {str(k): v for k, v in source.data_vars.items()}
    if isinstance(source, Mapping):
        return dict(source)
    return {str(source.name or "value"): source}


def _keep_labels(found: Found, dim: str, labels: npt.NDArray[Any], argument: str) -> None:
    known = found.labels.setdefault(dim, labels)
    if not np.array_equal(known, labels):
        raise DrawsError(
            argument,
            f"the same labels along {dim!r} in every variable",
            f"{known.tolist()[:3]}… and {labels.tolist()[:3]}…",
            "Rename one of the dimensions.",
        )


def _read_chains(
    found: Found, variables: Mapping[str, Any], lead: tuple[str, ...], chain: Any, argument: str
) -> None:
    """Names of the chains along their dimension, or the chain of each draw in a coordinate."""
    coords = {str(k): c for k, c in next(iter(variables.values())).coords.items()}
    if found.has_chain_axis:
        if "chain" in coords and coords["chain"].dims == ("chain",):
            found.chain_names = tuple(coords["chain"].values.tolist())
        found.chain = None if isinstance(chain, str) and chain == "chain" else chain
        found.chain = take_chain({}, found.chain, argument)
        return
    along = {k: c.values for k, c in coords.items() if tuple(map(str, c.dims)) == lead}
    if chain is None and "chain" in along:
        chain = "chain"
    found.chain = take_chain(along, chain, argument)
