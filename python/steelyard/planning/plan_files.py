"""
Plans in TOML.

Schema, version 1::

    steelyard_plan = 1
    title = "Re-coating of quay 4"
    quantities = ["mu", "rate[3]"]          # or {label = "name"}; all parameters if left out
    probs = [0.05, 0.5, 0.95]               # quantiles, if any are wanted
    locked = "…"                            # hash, once the plan is locked

    [decision]
    event = "rate[3] > 0.12"
    level = 0.7

    [prior]                                 # what was fitted; needed on the command line
    tau = { HalfNormal = { scale = 0.05 } }
    rate = { Normal = { mean = "mu", sd = "tau" } }

    [[scenario]]
    name = "wider spread"
    swap_prior = { tau = { HalfCauchy = { scale = 0.05 } } }
    power = { likelihood = 0.7 }            # numbers, or tables by term
    drop = ["gauge B"]                      # terms or labels
    weigh_data = { "gauge A" = 0.5 }
    raise_noise = { term = "gauge A", factor = 1.2, sd = "sd_a" }
    later = true                            # added after the plan was locked

A distribution is a table with its name as only key; its value holds the hyperparameters by name.
"""

from __future__ import annotations

import re
import tomllib
from collections.abc import Callable, Mapping
from dataclasses import dataclass, fields
from functools import reduce
from operator import and_
from pathlib import Path
from typing import Any, NoReturn, TypeVar

from steelyard import densities
from steelyard.base.names import close_names
from steelyard.changes import Change, drop, power, raise_noise, swap_prior, weigh_data
from steelyard.errors import ArgumentError, ArgumentTypeError, SteelyardError, UnknownNameError
from steelyard.planning.canonical import VERSION
from steelyard.planning.scenarios import Plan, Scenario, read_probs

__all__ = ["PlanFile", "read_plan"]

_TOP = ("steelyard_plan", "title", "quantities", "probs", "locked", "decision", "prior", "scenario")
_DECISION = ("event", "level")
_SCENARIO = ("name", "later", "swap_prior", "power", "drop", "weigh_data", "raise_noise")
_NOISE = ("term", "factor", "sd")
_POWER = ("prior", "likelihood")
# What a guarded step makes.
Made = TypeVar("Made")
_FAMILIES = {n: getattr(densities, n) for n in densities.__all__ if n != "Distribution"}


@dataclass(frozen=True, eq=False)
class PlanFile:
    """A plan read from a file, and the prior that the file states for the fit."""

    plan: Plan
    prior: Mapping[str, Any]


def read_plan(source: str | Path) -> PlanFile:
    """
    Read a plan from a TOML file.

    Parameters
    ----------
    source : str or Path
        Path of the file, or its text (where it holds a line break).

    Returns
    -------
    PlanFile
        The plan, and the prior it states.

    Raises
    ------
    ArgumentError, ArgumentTypeError, UnknownNameError, ChangeError
        With the line, and the nearest valid name for one that is not known.
    """
    is_text = isinstance(source, str) and "\n" in source
    text = str(source) if is_text else Path(source).read_text(encoding="utf-8")
    return _Reader(text).read()


class _Reader:
    """Reads one text; knows the line of whatever it refuses."""

    def __init__(self, text: str) -> None:
        self.lines = text.splitlines()
        try:
            self.content = tomllib.loads(text)
        except tomllib.TOMLDecodeError as error:
            raise ArgumentError("plan", "TOML", str(error), "Mend the file there.") from error
        # Lines at which scenarios begin.
        self.starts = [
            i for i, line in enumerate(self.lines) if re.match(r"\s*\[\[\s*scenario\s*\]\]", line)
        ]
        self.within = (0, len(self.lines))
        # Prior terms that the file states; none where the fit states them.
        self.stated: tuple[str, ...] = ()

    def read(self) -> PlanFile:
        self.keys(self.content, _TOP)
        version = self.content.get("steelyard_plan")
        if version != VERSION:
            self.refuse(
                "steelyard_plan",
                f"the version of the schema, {VERSION}",
                repr(version),
                f"Write steelyard_plan = {VERSION} on the first line.",
            )
        decision = self.table(self.content.get("decision", {}), "decision")
        self.keys(decision, _DECISION)
        prior = self.priors(self.content.get("prior", {}), "prior")
        self.stated = tuple(prior)
        listed = self.content.get("scenario", [])
        if not isinstance(listed, list) or not listed:
            self.refuse("scenario", "at least one [[scenario]]", "none", "State what is asked.")
        scenarios = [self.scenario(i, one) for i, one in enumerate(listed)]
        self.within = (0, len(self.lines))
        self.guarded("probs", lambda: read_probs(self.content.get("probs")))
        plan = self.guarded(
            "locked",
            lambda: Plan(
                tuple(scenarios),
                self.content.get("quantities"),
                decision.get("event"),
                decision.get("level"),
                str(self.content.get("title", "")),
                self.content.get("locked"),
                self.content.get("probs"),
            ),
        )
        return PlanFile(plan, prior)

    def scenario(self, number: int, content: Any) -> Scenario:
        if number < len(self.starts):
            ends = [*self.starts[number + 1 :], len(self.lines)]
            self.within = (self.starts[number], ends[0])
        content = self.table(content, "scenario")
        self.keys(content, _SCENARIO)
        name = content.get("name")
        if not isinstance(name, str) or not name:
            self.refuse("name", "a name for each scenario", repr(name), 'Write name = "…".')
        later = content.get("later", False)
        if not isinstance(later, bool):
            self.refuse("later", "true or false", repr(later), "Leave it out, or write true.")
        parts = [self.part(key, content[key]) for key in _SCENARIO[2:] if key in content]
        if not parts:
            self.refuse(
                "scenario", f"one of {', '.join(_SCENARIO[2:])}", "none", "State what is changed."
            )
        return Scenario(name, reduce(and_, parts), later)

    def part(self, key: str, value: Any) -> Change:
        if key == "swap_prior":
            self.terms(value)
            return self.guarded(key, lambda: swap_prior(self.priors(value, key)))
        if key == "drop":
            names = [value] if isinstance(value, str) else value
            if not (isinstance(names, list) and names and all(isinstance(n, str) for n in names)):
                self.refuse(key, "names of terms or labels", repr(value), 'Write ["gauge B"].')
            return self.guarded(key, lambda: reduce(and_, [drop(name) for name in names]))
        table = self.table(value, key)
        if key == "power":
            self.keys(table, _POWER)
            self.terms(table.get("prior"))
            return self.guarded(key, lambda: power(**table))
        if key == "weigh_data":
            return self.guarded(key, lambda: weigh_data(table))
        self.keys(table, _NOISE)
        missing = [name for name in _NOISE if name not in table]
        if missing:
            self.refuse(key, f"{', '.join(_NOISE)}", f"no {missing[0]}", "State all three.")
        return self.guarded(key, lambda: raise_noise(**table))

    def terms(self, named: Any) -> None:
        """Refuse prior terms that the file's own prior does not state."""
        stated = {re.sub(r"\s*,\s*", ", ", name) for name in self.stated}
        for name in named if isinstance(named, dict) and stated else ():
            if re.sub(r"\s*,\s*", ", ", name) not in stated:
                self.unknown(name, "a term stated under [prior]", self.stated)

    def priors(self, content: Any, key: str) -> dict[Any, Any]:
        table = self.table(content, key)
        return {name: self.distribution(value, name) for name, value in table.items()}

    def distribution(self, content: Any, key: str) -> Any:
        table = self.table(content, key)
        if len(table) != 1:
            self.refuse(
                key,
                "one distribution, as in { Normal = { mean = 0, sd = 1 } }",
                f"{len(table)} keys",
                "Name one distribution.",
            )
        ((family, hyper),) = table.items()
        if family not in _FAMILIES:
            self.unknown(family, "a distribution", _FAMILIES)
        made = _FAMILIES[family]
        hyper = self.table(hyper, family)
        self.keys(hyper, tuple(f.name for f in fields(made)))
        values = {name: self.hyperparameter(value, name) for name, value in hyper.items()}
        try:
            return made(**values)
        except TypeError as error:
            wanted = ", ".join(f.name for f in fields(made))
            self.refuse(family, f"its hyperparameters {wanted}", str(error), "Give all of them.")
        except SteelyardError as error:
            self.refuse(error.argument, error.expected, error.came, error.next_step)

    def hyperparameter(self, value: Any, key: str) -> Any:
        if isinstance(value, dict):
            return self.distribution(value, key)
        if isinstance(value, list):
            return tuple(self.hyperparameter(v, key) for v in value)
        return value

    def table(self, content: Any, key: str) -> dict[str, Any]:
        if not isinstance(content, dict):
            raise ArgumentTypeError(
                self.where(key), "a table", type(content).__name__, "Write { … } or [name]."
            )
        return content

    def keys(self, content: Mapping[str, Any], known: tuple[str, ...]) -> None:
        for key in content:
            if key not in known:
                self.unknown(key, f"one of {', '.join(known)}", known)

    def guarded(self, key: str, make: Callable[[], Made]) -> Made:
        try:
            return make()
        except SteelyardError as error:
            if error.argument.startswith("plan, line"):
                raise
            self.refuse(f"{key}: {error.argument}", error.expected, error.came, error.next_step)

    def unknown(self, key: str, expected: str, known: Any) -> NoReturn:
        raise UnknownNameError(self.where(key), expected, repr(key), close_names(key, known))

    def refuse(self, key: str, expected: str, came: str, next_step: str) -> NoReturn:
        raise ArgumentError(self.where(key), expected, came, next_step)

    def where(self, key: str) -> str:
        """The line on which a key stands, looked for in the scenario at hand."""
        word = re.split(r"[:\s]", key)[0]
        pattern = re.compile(rf"(^|[\s,{{.\[\"']){re.escape(word)}([\s=.\]\"']|$)")
        first, last = self.within
        for i in range(first, last):
            if pattern.search(self.lines[i].partition("#")[0]):
                return f"plan, line {i + 1}: {key}"
        return f"plan, line {first + 1}: {key}"
