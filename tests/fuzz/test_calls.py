"""
Seeded exploration: every public call returns a result or refuses, and nothing else ever comes.

`STEELYARD_FUZZ_CALLS=1000000` makes that many calls instead of the few of every day; a finding
names its seed, and `explored(*seed)` makes the same calls again.
"""

from __future__ import annotations

import os

import pytest

from steelyard import _core

from .arrays import bindings, densities, functions
from .exploring import Explorer
from .files import files
from .fits import fits, ratios
from .wild import Wild

SESSIONS = (bindings, functions, densities, fits, ratios, files, fits)
BATCH = 5_000
CALLS = int(os.environ.get("STEELYARD_FUZZ_CALLS", "10000"))


@pytest.fixture(autouse=True)
def threads_as_before() -> object:
    before = _core.threads()
    yield
    _core.set_threads(before)


def explored(batch: int, number: int, explorer: Explorer | None = None) -> Explorer:
    """The calls of one seed."""
    explorer = explorer or Explorer()
    explorer.seed = (batch, number)
    SESSIONS[number % len(SESSIONS)](Wild(batch, number), explorer)
    return explorer


@pytest.mark.parametrize("batch", range(-(-CALLS // BATCH)))
def test_every_call_returns_a_result_or_refuses(batch: int) -> None:
    explorer, number = Explorer(), 0
    while explorer.made < BATCH:
        explored(batch, number, explorer)
        number += 1
    if explorer.findings:
        report = "\n".join(sorted(explorer.findings.values()))
        pytest.fail(f"{len(explorer.findings)} findings\n{report}", pytrace=False)
    names = set(explorer.answered) | set(explorer.refused)
    never = {name for name in names - set(explorer.answered) if not name.endswith("(any)")}
    assert not never, f"only ever refused, so nothing was learnt: {sorted(never)}"
