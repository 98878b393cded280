"""The short form of `make honesty`: intervals and verdicts on problems with known answers.

Seed in conftest, 20 data sets of each problem, some 40 s on one free core. Each bound is held with
3.7 of the figure's own errors to spare, one in 10,000 for a tool just on a bound; with some 40
bounds that is a false alarm for at most 0.4 % of seeds, and the tool is not just on most of them.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest


def _bounds() -> Any:
    from battery import bounds

    return bounds


def test_all_bounds_are_met_with_the_allowance_of_the_short_form(cells: list[Any]) -> None:
    from battery.report import verdicts_on
    from run import ALLOWANCE

    found = _bounds().bounds(cells)
    assert len(found) > 20
    missed = [bound for bound in found if not bound.met(ALLOWANCE)]
    assert not missed, "\n".join(verdicts_on(missed, ALLOWANCE))


def test_every_family_of_the_list_is_there(cells: list[Any]) -> None:
    groups = set(_bounds().by_group(cells))
    finite = {name for name in groups if not name.endswith(", infinite variance")}
    assert len(finite) >= 20
    assert len(groups - finite) >= 7


def test_nothing_is_called_sound_where_the_support_grows(cells: list[Any]) -> None:
    grown = [c for c in cells if c.group == "support grows"]
    assert grown
    assert all((c.rank == 0).all() for c in grown)


def test_the_exact_answers_are_what_the_estimates_scatter_about(cells: list[Any]) -> None:
    # In cells of finite variance that are sound nearly always, the mean of 20 misses has an error
    # of 0.22 of their spread; six of those (2e-9 each, 450 cells) and half a spread for bias.
    checked = 0
    for cell in cells:
        if not cell.finite or cell.sound.mean() < 0.9 or cell.miss.std() == 0:
            continue
        checked += 1
        spread = cell.miss.std(ddof=1)
        limit = (6 / np.sqrt(len(cell.miss)) + 0.5) * spread
        assert abs(cell.miss.mean()) <= limit, (cell.problem, cell.quantity)
    assert checked > 200


def test_the_same_seed_gives_the_same_cells() -> None:
    from battery.measure import measure

    one, two = measure(3, 2, [0, 5], 1), measure(3, 2, [5, 0], 1)
    found = {(c.problem, c.quantity): c.miss for c in two}
    for cell in one:
        np.testing.assert_array_equal(cell.miss, found[cell.problem, cell.quantity])


@pytest.mark.parametrize(
    ("change", "bound"),
    [
        ("intervals of half the length", "coverage overall"),
        ("everything called sound", "coverage overall"),
        ("nothing called sound", "called sound where it holds"),
        ("errors twice as large", "reported over actual error"),
        ("intervals without end", "coverage overall, at most"),
    ],
)
def test_a_worse_tool_misses_its_bound(cells: list[Any], change: str, bound: str) -> None:
    from run import ALLOWANCE

    found = _bounds().bounds([_worse(cell, change) for cell in cells])
    missed = {b.name for b in found if not b.met(ALLOWANCE)}
    assert bound in missed


def _worse(cell: Any, change: str) -> Any:
    from dataclasses import replace

    if change == "everything called sound":
        return replace(cell, rank=np.full_like(cell.rank, 2))
    if change == "nothing called sound":
        return replace(cell, rank=np.ones_like(cell.rank))
    if change == "errors twice as large":
        return replace(cell, error=2 * cell.error)
    if change == "intervals without end":
        return replace(cell, covered=np.ones_like(cell.covered))
    with np.errstate(invalid="ignore"):
        inside = np.abs(cell.miss) <= 0.98 * cell.error
    return replace(cell, covered=np.broadcast_to(inside, cell.covered.shape))


def test_shares_have_the_error_of_whole_data_sets() -> None:
    # Two quantities that always agree say no more than one: the error is that of 100, not 200.
    from battery.bounds import share_of
    from battery.measure import Cell

    hits = np.arange(100) < 80
    covered = np.broadcast_to(hits, (3, 100))
    one = Cell("g", "p", "a", True, 1.0, np.zeros(100), np.ones(100), covered, np.full(100, 2))
    two = Cell("g", "p", "b", True, 1.0, np.zeros(100), np.ones(100), covered, np.full(100, 2))
    share = share_of([one, two], lambda c: c.covered[1], lambda c: c.sound)
    assert share.share == pytest.approx(0.8, abs=1e-12)
    assert share.error == pytest.approx(np.sqrt(0.8 * 0.2 / 100), rel=1e-12)
