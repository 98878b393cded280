"""The fused kernel against plain NumPy: one figure after the other, whole matrices."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray

import steelyard as sy
from steelyard import _core
from steelyard.base import Base
from steelyard.leaving_out.deletion import Setting, delete_columns, log_ratio_of, setting_of
from steelyard.weighing.series import (
    chains_p_value,
    contributions_of,
    degrees_of,
    relative_efficiency,
    standard_error,
)

Array = NDArray[np.float64]

SEED = 71
DRAWS, COUNT = 600, 150


def _log_mean(values: Array, weights: Array) -> Array:
    top = values.max(axis=0)
    return np.asarray(top + np.log((weights * np.exp(values - top)).sum(axis=0)))


def _twin(setting: Setting, held: Array, scored: Array) -> dict[str, Array]:
    draws, ordered, n = setting.draws, setting.ordered, setting.draws.size
    ratio = log_ratio_of(setting, held)
    raw = np.exp(ratio - ratio.max(axis=0))
    efficiency = relative_efficiency(raw, draws, ordered)
    log_weights = np.empty_like(ratio)
    shape = _core.smooth(ratio, efficiency, log_weights)
    w, v = np.exp(log_weights), setting.base[:, None]
    share = raw / raw.sum(axis=0)
    score = _log_mean(scored, w)
    density = np.exp(scored - score)
    z = n * w * (density - 1)
    of_raw = v if held is scored else share * np.exp(scored - _log_mean(scored, share))
    f, shift = setting.quantities, w.T @ setting.quantities
    series = np.empty((held.shape[1], f.shape[1]))
    for i, m in enumerate(shift):
        own = w[:, i, None] * (f - m) - v * f - v * m * (f**2 - 1) / 2
        series[i] = (own**2).sum(axis=0)
    chains = np.ones(held.shape[1])
    if ordered:
        chains = chains_p_value(raw, np.full(n, 1 / n), draws)
    carried = contributions_of(z, efficiency, draws, ordered)
    inside = _log_mean(scored, v)
    return {
        "score": score,
        "in_sample": inside,
        "tail_shape": shape,
        "effective_size": 1 / (w**2).sum(axis=0),
        "entropy_size": np.exp(-(w * log_weights).sum(axis=0)),
        "largest_share": w.max(axis=0),
        "spread": (w * density**2).sum(axis=0) - 1,
        "chain_share": chains,
        "degrees": degrees_of(carried, efficiency, draws),
        "error": standard_error(z, draws, ordered),
        "shift": shift,
        "shift_error": np.sqrt(series / setting.efficiency),
        "left_out": z.sum(axis=1),
        "raw": n * (of_raw - share).sum(axis=1),
        "in_total": n * (v * np.exp(scored - inside) - v).sum(axis=1),
    }


def _base(chains: int, ordered: bool, memory: float, weighted: bool) -> tuple[Base, Array]:
    """Draws of three rates, and log densities of readings under them."""
    rng = np.random.default_rng(SEED)
    noise = rng.normal(size=(chains, DRAWS // chains, 3))
    for t in range(1, noise.shape[1]):
        noise[:, t] = memory * noise[:, t - 1] + np.sqrt(1 - memory**2) * noise[:, t]
    rate = noise.reshape(DRAWS, 3)
    loading = rng.normal(size=(3, COUNT)) * np.geomspace(0.03, 1, COUNT)
    loglik = -0.5 * (rng.normal(size=COUNT) - rate @ loading) ** 2
    fit = sy.Fit({"rate": noise}, loglik=loglik.reshape(chains, -1, COUNT), ordered=ordered)
    record = fit._record
    if weighted:
        record = replace(record, log_weights=0.5 * rng.normal(size=DRAWS))
    return record, loglik


@pytest.mark.parametrize("apart", [False, True])
@pytest.mark.parametrize("weighted", [False, True])
@pytest.mark.parametrize(
    ("chains", "ordered", "memory"),
    [(4, True, 0.0), (4, True, 0.8), (24, True, 0.0), (1, True, 0.0), (4, False, 0.0)],
)
def test_every_figure_is_that_of_plain_arrays(
    chains: int, ordered: bool, memory: float, weighted: bool, apart: bool
) -> None:
    record, held = _base(chains, ordered, memory, weighted)
    rng = np.random.default_rng(SEED + 1)
    setting = setting_of(record, rng.normal(size=(DRAWS, 7)) ** 2)
    scored = held - 0.3 * rng.normal(size=held.shape) if apart else held
    found, totals = delete_columns(setting, held, scored)
    named: dict[str, Any] = {"left_out": totals.left_out, "raw": totals.raw}
    named["in_total"] = totals.in_sample
    for name, expected in _twin(setting, held, scored).items():
        ours = named[name] if name in named else getattr(found, name)
        if name == "error":
            # The twin knows no allowance for weight unseen.
            expected = np.hypot(expected, found.unseen)
        # Tails are fitted to log ratios that differ in the last digit; shift errors are squares
        # summed in single precision, a root of them good to about 1e-6.
        tolerance = 1e-5 if name == "shift_error" else 1e-8
        np.testing.assert_allclose(ours, expected, rtol=tolerance, atol=1e-9, err_msg=name)


def test_repeated_draws_count_as_one() -> None:
    """Every draw twice: the errors of half as many draws."""
    rng = np.random.default_rng(SEED)
    rate = np.repeat(rng.normal(size=300), 2)
    loglik = -0.5 * (rng.normal(size=20) - 0.3 * rate[:, None]) ** 2
    record = sy.Fit({"rate": rate}, loglik=loglik, ordered=False)._record
    assert record.draws.repeats is not None
    setting = setting_of(record)
    found, _ = delete_columns(setting, loglik, loglik)
    expected = _twin(setting, loglik, loglik)
    error = np.hypot(expected["error"], found.unseen)
    np.testing.assert_allclose(found.error, error, rtol=1e-9)
    np.testing.assert_allclose(found.degrees, expected["degrees"], rtol=1e-8)
