"""Three invented quays with corrosion rates, thickness readings, and what is asked of them."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray

import steelyard as sy
from steelyard.errors import SteelyardError

Array = NDArray[np.float64]

CHAINS, DRAWS, QUAYS, READINGS = 4, 250, 3, 6
CHAIN = np.repeat(np.arange(CHAINS), DRAWS)
PRIOR = {"mu": sy.Normal(0.1, 0.1)}
OTHER_PRIOR = sy.swap_prior(mu=sy.Normal(0.12, 0.05))
# Another prior, and one thickness reading left out.
OTHER_DATA = OTHER_PRIOR & sy.drop(position=[2])
_RNG = np.random.default_rng(20)
# Each chain a little off the others, so that losing the chains changes the Monte Carlo errors.
_SHIFT = 0.01 * np.arange(CHAINS)[:, None]
MU: Array = 0.1 + 0.02 * _RNG.normal(size=(CHAINS, DRAWS)) + _SHIFT
RATE: Array = MU[..., None] + 0.01 * _RNG.normal(size=(CHAINS, DRAWS, QUAYS))
_READ: Array = 0.1 + 0.02 * _RNG.normal(size=READINGS)
LOGLIK: Array = -0.5 * ((_READ - MU[..., None]) / 0.05) ** 2


def plain_draws() -> dict[str, Array]:
    """The draws as plain arrays ``(chain, draw, *shape)``."""
    return {"mu": MU, "rate": RATE}


def plain_columns() -> dict[str, Array]:
    """The same as columns: one an element, ``(chain, draw)``."""
    return {"mu": MU, **{f"rate[{i}]": RATE[..., i] for i in range(QUAYS)}}


def table() -> dict[str, Any]:
    """The same as stacked columns ``(n,)``, with a column for the chain."""
    return {"chain": CHAIN, **{k: v.reshape(-1) for k, v in plain_columns().items()}}


def answers(fit: sy.Fit, change: sy.Change, names: tuple[str, ...]) -> dict[str, Any]:
    """What a fit answers to a change."""
    answer = fit.reweigh(change)
    out: dict[str, Any] = {"effective_size": answer.effective_size}
    for name in names:
        for kind in ("value", "error", "tail_shape"):
            out[f"{kind} of {name}"] = getattr(answer.mean(name), kind)
    return out


def assert_same_answers(
    fit: sy.Fit,
    plain: sy.Fit,
    change: sy.Change = OTHER_PRIOR,
    names: tuple[str, ...] = ("mu", "rate[1]"),
) -> None:
    """To the last bit: another container of the same numbers is the same fit."""
    expected = answers(plain, change, names)
    for name, value in answers(fit, change, names).items():
        np.testing.assert_array_equal(value, expected[name], err_msg=name)


@contextmanager
def refused(kind: type[SteelyardError], *words: str) -> Iterator[None]:
    """An error of the class whose message holds all of the words, and whose four parts are set."""
    with pytest.raises(kind) as info:
        yield
    message = str(info.value)
    for word in words:
        assert word in message, f"{word!r} is not in: {message}"
    parts = (info.value.argument, info.value.expected, info.value.came, info.value.next_step)
    assert all(parts), parts


def with_entry(columns: Mapping[str, Any], name: str, row: int, value: object) -> dict[str, Any]:
    """The columns with one entry replaced."""
    changed = list(columns[name].tolist())
    changed[row] = value
    return {**columns, name: changed}
