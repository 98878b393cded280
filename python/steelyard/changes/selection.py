"""Which observations a `drop` means."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
import numpy.typing as npt

from steelyard.arrays import plain_array
from steelyard.base.likelihood import LoglikTerm
from steelyard.base.names import close_names, label_hits, label_texts, refuse_if_ambiguous
from steelyard.changes.edits import Drop
from steelyard.errors import (
    AmbiguousNameError,
    ArgumentTypeError,
    ChangeError,
    UnknownNameError,
)

__all__ = ["selected"]

Mask = npt.NDArray[np.bool_]


def selected(edit: Drop, terms: Mapping[str, LoglikTerm]) -> dict[str, Mask]:
    """Masks of the dropped observations ``(*obs)`` by term."""
    if edit.by_dim:
        return _by_dim(edit.by_dim, terms)
    what = edit.what
    if isinstance(what, str) and edit.kind != "position":
        return _by_text(what, edit.kind, terms)
    if isinstance(what, Mapping):
        if not what:
            raise ChangeError("drop", "at least one term", "an empty mapping", "Name one.")
        out: dict[str, Mask] = {}
        for name, part in what.items():
            if name not in terms:
                raise UnknownNameError(
                    "drop", "a stated likelihood term", repr(name), close_names(str(name), terms)
                )
            out[name] = _positions(part, edit.kind, terms[name], f"drop[{name!r}]")
        return out
    if len(terms) > 1:
        raise AmbiguousNameError(
            "drop",
            f"the term that the positions belong to, one of {', '.join(terms)}",
            repr(what),
            "Write drop({term: positions}).",
        )
    ((name, term),) = terms.items()
    return {name: _positions(what, edit.kind, term, "drop")}


def _by_text(what: str, kind: str, terms: Mapping[str, LoglikTerm]) -> dict[str, Mask]:
    holders = {
        (name, dim)
        for name, term in terms.items()
        for dim in term.dims
        if label_hits(term.labels.get(dim), what).any()
    }
    if what in terms and holders and kind != "label":
        raise AmbiguousNameError(
            "drop",
            "a text that means one thing",
            f"{what!r}, which is a term and a label of {sorted(d for _, d in holders)}",
            "Write drop({term: …}) or drop(dim=label).",
        )
    if what in terms and kind != "label":
        return {what: np.ones(terms[what].obs_shape, dtype=np.bool_)}
    if not holders:
        known = [text for t in terms.values() for d in t.labels.values() for text in label_texts(d)]
        raise UnknownNameError(
            "drop",
            "a stated likelihood term or an observation's label",
            repr(what),
            close_names(what, [*terms, *known]),
        )
    if len({dim for _, dim in holders}) > 1:
        raise AmbiguousNameError(
            "drop",
            "a label of one dimension",
            f"{what!r}, which stands along {sorted({d for _, d in holders})}",
            "Write drop(dim=label).",
        )
    return {name: _along(terms[name], dim, [what]) for name, dim in sorted(holders)}


def _by_dim(
    by_dim: tuple[tuple[str, Any], ...], terms: Mapping[str, LoglikTerm]
) -> dict[str, Mask]:
    dims = dict(by_dim)
    known = sorted({d for t in terms.values() for d in t.dims})
    for dim in dims:
        if dim not in known:
            raise UnknownNameError(
                f"drop: {dim}",
                "a dimension of the log likelihood",
                repr(dim),
                close_names(dim, known),
            )
    holders = {n: t for n, t in terms.items() if set(dims) <= set(t.dims)}
    if not holders:
        raise ChangeError(
            "drop",
            f"one term with all of the dimensions {sorted(dims)}",
            "none",
            "Name the dimensions of one term.",
        )
    for dim, labels in dims.items():
        _refuse_unknown_labels(dim, _listed(labels), list(holders.values()))
    masks = {}
    for name, term in holders.items():
        mask = np.ones(term.obs_shape, dtype=np.bool_)
        for dim, labels in dims.items():
            mask &= _along(term, dim, _listed(labels))
        if mask.any():
            masks[name] = mask
    if not masks:
        raise ChangeError(
            "drop", "labels that occur together", "none that do", "Drop them one after the other."
        )
    return masks


def _listed(labels: Any) -> list[Any]:
    listed = [labels] if np.ndim(labels) == 0 else list(labels)
    if not listed:
        raise ChangeError("drop", "at least one label", "none", "Name what to leave out.")
    return listed


def _refuse_unknown_labels(dim: str, labels: list[Any], terms: list[LoglikTerm]) -> None:
    """Every label must stand in one of the terms, else it would be passed over in silence."""
    known = [text for t in terms for text in label_texts(t.labels.get(dim))]
    for label in labels:
        if not any(label_hits(t.labels.get(dim), label).any() for t in terms):
            raise UnknownNameError(
                f"drop: {dim}",
                f"a label of dimension {dim!r}",
                repr(label),
                close_names(str(label), known),
            )


def _along(term: LoglikTerm, dim: str, labels: list[Any]) -> Mask:
    """Observations of a term whose label along `dim` is one of `labels`."""
    axis = term.dims.index(dim)
    hits = np.zeros(term.obs_shape[axis], dtype=np.bool_)
    for label in labels:
        found = label_hits(term.labels.get(dim), label)
        if len(found):
            hits |= found
    shape = [1] * len(term.obs_shape)
    shape[axis] = -1
    return np.broadcast_to(hits.reshape(shape), term.obs_shape).copy()


def _positions(what: Any, kind: str, term: LoglikTerm, argument: str) -> Mask:
    if term.is_total:
        raise ChangeError(
            argument,
            "a term with observations",
            f"{term.name!r}, which is a total",
            "Give the log likelihood by observation, or drop the whole term by its name.",
        )
    array = plain_array(what, argument, "fiubUS")
    if array.dtype == np.bool_ and array.shape == term.obs_shape:
        return array.copy()
    one_axis = len(term.obs_shape) == 1
    dim = term.dims[0] if term.dims else ""
    labels = term.labels.get(dim) if one_axis else None
    if kind == "label" or (array.dtype.kind in "US" and not kind):
        if not one_axis or labels is None:
            raise UnknownNameError(
                argument, "labelled observations on one axis", repr(what), "Use positions."
            )
        listed = _listed(what)
        _refuse_unknown_labels(dim, listed, [term])
        return _along(term, dim, listed)
    if array.dtype.kind not in "iu" or array.ndim > 1 or array.size == 0:
        raise ArgumentTypeError(
            argument,
            "integer positions, labels, or a boolean mask of the observations",
            f"dtype {array.dtype}, shape {array.shape}",
            f"The observations of {term.name!r} have shape {term.obs_shape}.",
        )
    if kind != "position":
        refuse_if_ambiguous(labels, term.observations, argument, dim)
    return _mask_of(array.reshape(-1), term, argument)


def _mask_of(positions: npt.NDArray[Any], term: LoglikTerm, argument: str) -> Mask:
    count = term.observations
    if len(term.obs_shape) > 1:
        raise ChangeError(
            argument,
            f"a boolean mask of shape {term.obs_shape}",
            "integer positions",
            "Positions are understood for observations on one axis; or name a dimension.",
        )
    outside = positions[(positions < 0) | (positions >= count)]
    if outside.size:
        raise UnknownNameError(
            argument, f"positions from 0 to {count - 1}", str(int(outside[0])), "Count from 0."
        )
    if len(np.unique(positions)) < len(positions):
        raise ChangeError(argument, "each position once", "one twice", "Name it once.")
    mask = np.zeros(count, dtype=np.bool_)
    mask[positions] = True
    return mask
