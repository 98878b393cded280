"""Scenario plans: what is going to be asked, stated before the answers are seen."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from html import escape
from typing import Any

import numpy as np

from steelyard.arrays import plain_array
from steelyard.changes import Change
from steelyard.errors import ArgumentError, ArgumentTypeError, ChangeError
from steelyard.planning.canonical import canonical_hash

__all__ = ["Plan", "Scenario", "read_scenarios"]


@dataclass(frozen=True, eq=False)
class Scenario:
    """
    One what-if.

    Parameters
    ----------
    name : str
        What it is called in the table.
    change : Change
        What is changed.
    later : bool
        Whether it was added after the plan was locked.
    """

    name: str
    change: Change
    later: bool = False


@dataclass(frozen=True, eq=False)
class Plan:
    """
    A list of scenarios and what is asked of each.

    Parameters
    ----------
    scenarios : mapping of str to Change, or iterable of Scenario
        The what-ifs, in order.
    quantities : str, list, mapping, callable or array_like, optional
        What is asked of each; all parameters by default.
    event : str, callable or array_like, optional
        The event of a decision.
    level : float, optional
        The level that its probability is held against.
    title : str
        Printed above the table.
    locked : str or None
        Hash taken when the plan was locked; scenarios added since are marked as later.
    probs : sequence of float, optional
        Probabilities of the quantiles that are wanted beside each mean.

    Examples
    --------
    >>> import steelyard as sy
    >>> from steelyard.planning import Plan
    >>> plan = Plan({"wider": sy.swap_prior(tau=sy.HalfNormal(0.1))}, "mu").lock()
    >>> [s.later for s in plan.adding("tighter", sy.swap_prior(tau=sy.HalfNormal(0.02))).scenarios]
    [False, True]
    """

    # Read from any of the forms above; then a tuple of scenarios.
    scenarios: Any = ()
    quantities: Any = None
    event: Any = None
    level: float | None = None
    title: str = ""
    locked: str | None = None
    probs: Any = None

    def __post_init__(self) -> None:
        object.__setattr__(self, "scenarios", read_scenarios(self.scenarios))
        object.__setattr__(self, "probs", read_probs(self.probs))
        if self.locked is not None and self.locked != self.hash:
            raise ChangeError(
                "locked",
                f"the hash of what was planned, {self.hash}",
                str(self.locked),
                "The plan was changed after it was locked: restore it, or mark additions as later.",
            )

    @property
    def hash(self) -> str:
        """SHA-256 of the planned scenarios (later ones left out) and of what is asked of them."""
        planned = [(s.name, s.change) for s in self.scenarios if not s.later]
        return canonical_hash(planned, self.quantities, self.event, self.level, self.probs)

    def lock(self) -> Plan:
        """
        Take the hash of the plan.

        Returns
        -------
        Plan
            The same plan, locked: scenarios added from now on are marked as later.
        """
        return replace(self, locked=self.hash)

    def adding(self, name: str, change: Change) -> Plan:
        """
        Add one more scenario.

        Parameters
        ----------
        name : str
            What it is called in the table.
        change : Change
            What is changed.

        Returns
        -------
        Plan
            The longer plan; the scenario is marked as later if the plan is locked.
        """
        more = Scenario(name, change, later=self.locked is not None)
        return replace(self, scenarios=(*self.scenarios, more))

    def __str__(self) -> str:
        lines = [self.title or "plan", f"hash {self.hash}{'' if self.locked else ' (not locked)'}"]
        lines += [
            f"  {s.name}: {s.change}{' (added later)' if s.later else ''}" for s in self.scenarios
        ]
        return "\n".join(lines)

    def __repr__(self) -> str:
        return f"<Plan of {len(self.scenarios)} scenarios, {self.hash[:12]}>"

    def _repr_html_(self) -> str:
        return f"<pre>{escape(str(self))}</pre>"


def _can_be_gone_through(things: Any) -> bool:
    try:
        iter(things)
    except TypeError:
        return False
    return True


def read_probs(probs: Any) -> tuple[float, ...] | None:
    """Probabilities strictly between 0 and 1, ascending; None for none."""
    if probs is None:
        return None
    array = plain_array(probs, "probs", "fiu").astype(np.float64).reshape(-1)
    if not array.size or not ((array > 0) & (array < 1)).all() or not (np.diff(array) > 0).all():
        raise ArgumentError(
            "probs",
            "probabilities between 0 and 1, in ascending order, each once",
            repr(probs),
            "Write (0.05, 0.5, 0.95).",
        )
    shown = [f"{p:g}" for p in array]
    if len(set(shown)) < len(shown):
        raise ArgumentError("probs", "each once, to six digits", repr(probs), "Drop one.")
    return tuple(array.tolist())


def read_scenarios(scenarios: Any) -> tuple[Scenario, ...]:
    """Scenarios from a mapping, pairs, or scenarios; names are told once each."""
    items: list[Scenario] = []
    if isinstance(scenarios, Mapping):
        scenarios = scenarios.items()
    if isinstance(scenarios, str | Change) or not _can_be_gone_through(scenarios):
        raise ArgumentTypeError(
            "scenarios",
            "{name: change}, or a Plan",
            type(scenarios).__name__,
            'Write {"wider": sy.swap_prior(tau=sy.HalfNormal(0.1))}.',
        )
    for number, one in enumerate(scenarios):
        is_pair = isinstance(one, tuple) and len(one) == 2
        item = Scenario(str(one[0]), one[1]) if is_pair else one
        if not isinstance(item, Scenario) or not isinstance(item.change, Change):
            came = type(item.change if isinstance(item, Scenario) else item).__name__
            named = f"scenarios[{item.name!r}]" if is_pair else f"scenarios[{number}]"
            raise ArgumentTypeError(
                named, "a change", came, "Make one with swap_prior or the like."
            )
        items.append(item)
    names = [item.name for item in items]
    twice = sorted({name for name in names if names.count(name) > 1})
    if twice:
        raise ArgumentError("scenarios", "each name once", f"{twice[0]!r} twice", "Rename one.")
    return tuple(items)
