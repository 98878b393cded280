"""Reading what is left out together: labels, lists of positions, a dimension, nothing."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
import numpy.typing as npt

from steelyard.arrays import plain_array
from steelyard.base import Base
from steelyard.base.likelihood import LoglikTerm, read_loglik_term
from steelyard.base.names import close_names
from steelyard.errors import (
    AmbiguousNameError,
    ArgumentError,
    ArgumentTypeError,
    LikelihoodError,
    ShapeError,
    UnknownNameError,
)
from steelyard.leaving_out.groups import Groups, Positions

__all__ = ["read_groups", "refuse_everything", "term_of"]


def term_of(base: Base, term: Any) -> LoglikTerm:
    """The likelihood term with observations that is meant."""
    terms = base.loglik or {}
    if not terms:
        raise LikelihoodError(
            "loglik",
            "a log likelihood by observation",
            "a fit without one",
            "Pass Fit(…, loglik=array of shape (chain, draw, observations)).",
        )
    if term is None:
        pointwise = [t for t in terms.values() if not t.is_total]
        if len(pointwise) > 1:
            raise AmbiguousNameError(
                "term",
                f"which of {', '.join(t.name for t in pointwise)} to leave out of",
                "nothing",
                f"Pass for instance term={pointwise[0].name!r}.",
            )
        term = pointwise[0].name if pointwise else next(iter(terms))
    if not isinstance(term, str) or term not in terms:
        raise UnknownNameError(
            "term", "a stated likelihood term", repr(term), close_names(str(term), terms)
        )
    if terms[term].is_total:
        raise LikelihoodError(
            f"loglik[{term!r}]",
            "values by observation",
            "a total, one value a draw",
            "A total can be powered or swapped, not left out: store the terms of the sum.",
        )
    return terms[term]


def read_groups(base: Base, groups: Any, term: Any = None, conditional: Any = None) -> Groups:
    """Read what is left out together; see ``Fit.leave_out``."""
    found = _found(term_of(base, term), groups)
    refuse_everything(base, found)
    if conditional is None:
        return found
    given = read_loglik_term("conditional", conditional, base.draws, "conditional")
    if given.obs_shape != found.shape:
        raise ShapeError(
            "conditional",
            f"one value a draw and group, groups of shape {found.shape}",
            f"{given.obs_shape}",
            "Give the log density of each group given all other observations.",
        )
    return Groups(given, found.shape, found.dims, found.labels, is_conditional=True)


def _found(term: LoglikTerm, groups: Any) -> Groups:
    dims = term.dims or ("",) * len(term.obs_shape)
    if groups is None:
        return Groups(term, term.obs_shape, dims, term.labels)
    if isinstance(groups, str):
        return _by_dimension(term, groups)
    if isinstance(groups, Mapping):
        members = _lists(term, list(groups.values()))
        return _named(term, members, np.array([str(name) for name in groups]))
    is_lists = isinstance(groups, list | tuple) and any(np.ndim(g) > 0 for g in groups)
    if is_lists and np.shape(groups[0])[1:] == () and not _is_label_array(groups, term):
        members = _lists(term, groups)
        return Groups(term, (len(members),), ("",), {}, members)
    return _by_label(term, groups)


def _is_label_array(groups: Any, term: LoglikTerm) -> bool:
    lengths = {np.shape(g) for g in groups}
    return len(term.obs_shape) > 1 and lengths == {term.obs_shape[1:]}


def _named(term: LoglikTerm, members: tuple[Positions, ...], names: npt.NDArray[Any]) -> Groups:
    return Groups(term, (len(members),), ("group",), {"group": names}, members)


def _by_dimension(term: LoglikTerm, dim: str) -> Groups:
    if dim not in term.dims:
        raise UnknownNameError(
            "groups",
            f"a dimension of loglik[{term.name!r}], labels, or lists of positions",
            repr(dim),
            close_names(dim, term.dims)
            if term.dims
            else "The term names no dimensions: pass an array of labels.",
        )
    axis = term.dims.index(dim)
    along = np.indices(term.obs_shape)[axis].reshape(-1)
    size = term.obs_shape[axis]
    members = tuple(np.flatnonzero(along == i).astype(np.int64) for i in range(size))
    labels = {dim: term.labels[dim]} if dim in term.labels else {}
    return Groups(term, (size,), (dim,), labels, members)


def _by_label(term: LoglikTerm, groups: Any) -> Groups:
    array = plain_array(groups, "groups", "iuUSbf")
    if array.shape != term.obs_shape:
        raise ShapeError(
            "groups",
            f"a label for each observation, shape {term.obs_shape}",
            str(array.shape),
            "Give one label an observation, or lists of positions.",
        )
    if array.dtype.kind not in "iuUS":
        raise ArgumentTypeError(
            "groups",
            "integer or text labels",
            f"dtype {array.dtype}",
            "Convert them; for True and False write integers.",
        )
    names, label = np.unique(array.reshape(-1), return_inverse=True)
    order = np.argsort(label, kind="stable").astype(np.int64)
    ends = np.cumsum(np.bincount(label))[:-1]
    return _named(term, tuple(np.split(order, ends)), names)


def _lists(term: LoglikTerm, groups: Any) -> tuple[Positions, ...]:
    if len(term.obs_shape) > 1:
        raise ArgumentError(
            "groups",
            f"labels of shape {term.obs_shape}, or a dimension's name",
            "lists of positions",
            "Positions are understood for observations on one axis.",
        )
    count = term.observations
    out = []
    for number, group in enumerate(groups):
        array = plain_array(group, f"groups[{number}]", "fiu").reshape(-1)
        if array.size == 0:
            raise ArgumentError(
                f"groups[{number}]", "at least one observation", "an empty group", "Leave it away."
            )
        if array.dtype.kind not in "iu":
            raise ArgumentTypeError(
                f"groups[{number}]", "integer positions", f"dtype {array.dtype}", "Count from 0."
            )
        outside = array[(array < 0) | (array >= count)]
        if outside.size:
            raise UnknownNameError(
                f"groups[{number}]",
                f"positions from 0 to {count - 1}",
                str(int(outside[0])),
                "Positions count from 0.",
            )
        positions = np.unique(array).astype(np.int64)
        if len(positions) < len(array):
            raise ArgumentError(
                f"groups[{number}]", "each position once", "one twice", "Name it once."
            )
        out.append(positions)
    if not out:
        raise ArgumentError("groups", "at least one group", "none", "Name what to leave out.")
    return tuple(out)


def refuse_everything(base: Base, groups: Groups) -> None:
    """All data left out at once is the prior, which draws of the posterior seldom reach."""
    count = groups.term.observations
    held = groups.deleted or groups.members
    largest = 1 if held is None else max(len(m) for m in held)
    if largest >= count and len(base.loglik or {}) == 1:
        raise ArgumentError(
            "groups",
            f"groups that leave some of the {count} observations in",
            "a group that holds all of them",
            "Without data the target is the prior: draw from it instead.",
        )
