"""Every kind of log likelihood, and which observations a drop means.

Sums of at most ten values of size one are compared at 1e-12: their roundings are below 1e-15.
"""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import dask.array as da
import numpy as np
import pytest
import xarray as xr

import steelyard as sy

CHAINS, DRAWS, YEARS, RIGS = 4, 60, 5, 2
RNG = np.random.default_rng(20_261_233)
MU = RNG.normal(size=(CHAINS, DRAWS))
LOGLIK = -1 + 0.1 * RNG.normal(size=(CHAINS, DRAWS, YEARS, RIGS))
FLAT = LOGLIK.reshape(CHAINS * DRAWS, YEARS, RIGS)
LABELLED = xr.DataArray(
    LOGLIK,
    dims=("chain", "draw", "year", "rig"),
    coords={"year": [2016, 2018, 2020, 2022, 2024], "rig": ["A", "B"]},
)
FACTORS = RNG.uniform(0, 2, size=(YEARS, RIGS))


def _memmap(folder: Path, dtype: Any = np.float64) -> np.ndarray:
    path = folder / "loglik.dat"
    stored = np.memmap(path, dtype=dtype, mode="w+", shape=LOGLIK.shape)
    stored[...] = LOGLIK
    stored.flush()
    return np.memmap(path, dtype=dtype, mode="r", shape=LOGLIK.shape)


def _callable(draws: Any) -> np.ndarray:
    """Finds the rows that belong to the block of draws it is given."""
    rows = np.searchsorted(np.sort(MU.ravel()), draws["mu"])
    return FLAT[np.argsort(MU.ravel())[rows]]


KINDS: dict[str, Callable[[Path], Any]] = {
    "array by chain": lambda folder: LOGLIK,
    "array stacked": lambda folder: FLAT,
    "list": lambda folder: LOGLIK.tolist(),
    "column order": lambda folder: np.asfortranarray(LOGLIK),
    "memmap": _memmap,
    "DataArray": lambda folder: LABELLED,
    "DataArray of leading axes turned round": lambda folder: LABELLED.transpose(
        "draw", "chain", ...
    ),
    "dask": lambda folder: da.from_array(LOGLIK, chunks=(2, 25, 3, 1)),
    "dask stacked": lambda folder: da.from_array(FLAT, chunks=(50, 2, 2)),
    "dask in a DataArray": lambda folder: LABELLED.chunk({"draw": 17, "year": 2}),
    "callable": lambda folder: _callable,
    "mapping": lambda folder: {"likelihood": LOGLIK},
    "Dataset": lambda folder: LABELLED.to_dataset(name="likelihood"),
}
KIND = pytest.mark.parametrize("kind", KINDS)


def _deltas(source: Any, change: sy.Change) -> np.ndarray:
    (delta,) = sy.Fit({"mu": MU}, loglik=source).reweigh(change).terms.values()
    return delta


@KIND
def test_every_kind_of_log_likelihood_gives_the_same_ratio_to_the_bit(
    kind: str, tmp_path: Path
) -> None:
    source = KINDS[kind](tmp_path)
    for change in (sy.power(likelihood=0.3), sy.weigh_data({"likelihood": FACTORS})):
        assert np.array_equal(_deltas(source, change), _deltas(LOGLIK, change))


@KIND
def test_a_replacement_or_addition_may_be_of_any_kind(kind: str, tmp_path: Path) -> None:
    source, old = KINDS[kind](tmp_path), 0.5 * LOGLIK
    if kind in ("mapping", "Dataset"):
        source = LOGLIK
    want = LOGLIK.sum((2, 3)) - old.sum((2, 3))
    # 1e-12: sums of ten terms of size one.
    np.testing.assert_allclose(_deltas(old, sy.swap_loglik(source)), want, atol=1e-12)
    np.testing.assert_allclose(
        _deltas(old, sy.add({"new": source})), LOGLIK.sum((2, 3)), atol=1e-12
    )


def test_observation_axes_in_another_order_are_the_same_observations() -> None:
    turned = LABELLED.transpose("rig", "draw", "year", "chain")
    change = sy.drop(rig="B") & sy.drop(year=[2016, 2024])
    # 1e-12: sums of ten terms in another order.
    np.testing.assert_allclose(_deltas(turned, change), _deltas(LABELLED, change), atol=1e-12)


def test_single_precision_is_converted_by_value() -> None:
    change, narrow = sy.power(likelihood=0.3), LOGLIK.astype(np.float32)
    assert np.array_equal(_deltas(narrow, change), _deltas(narrow.astype(np.float64), change))
    # 1e-5: ten values of size one, each rounded to 24 bits.
    np.testing.assert_allclose(_deltas(narrow, change), _deltas(LOGLIK, change), atol=1e-5)


def test_integers_are_log_likelihoods_too() -> None:
    whole = RNG.integers(-3, 0, size=LOGLIK.shape)
    change = sy.power(likelihood=0.5)
    assert np.array_equal(_deltas(whole, change), _deltas(whole.astype(np.float64), change))


def test_a_total_can_be_powered_swapped_and_dropped_whole() -> None:
    total = LOGLIK.sum((2, 3))
    fit = sy.Fit({"mu": MU}, loglik={"all": total})
    # 1e-12: ten terms of size one.
    for change, want in (
        (sy.power(likelihood=0.5), -0.5 * total),
        (sy.drop("all"), -total),
        (sy.weigh_data({"all": 2}), total),
        (sy.swap_loglik({"all": 2 * total}), total),
    ):
        (delta,) = fit.reweigh(change).terms.values()
        np.testing.assert_allclose(delta, want, atol=1e-12)


def test_a_term_by_observation_may_be_replaced_by_a_total_and_the_other_way_round() -> None:
    total = LOGLIK.sum((2, 3))
    for old, new in ((0.5 * LOGLIK, total), (0.5 * total, LOGLIK)):
        # 1e-12: ten terms of size one.
        np.testing.assert_allclose(_deltas(old, sy.swap_loglik(new)), 0.5 * total, atol=1e-12)


def test_log_likelihoods_are_referenced_and_unchanged(tmp_path: Path) -> None:
    for source in (LOGLIK, _memmap(tmp_path), np.asfortranarray(LOGLIK)):
        before = np.array(source)
        source.flags.writeable = False
        fit = sy.Fit({"mu": MU}, loglik=source)
        fit.reweigh(sy.power(likelihood=0.5)).table()
        assert np.array_equal(source, before)
        assert fit._record.loglik is not None
        assert np.shares_memory(fit._record.loglik["likelihood"].source, source)
    LOGLIK.flags.writeable = True


def test_a_dask_array_is_not_computed_before_it_is_used() -> None:
    def fail(block: np.ndarray) -> np.ndarray:
        raise AssertionError("computed")

    lazy = da.from_array(LOGLIK, chunks=(1, 60, 5, 2)).map_blocks(
        fail, dtype=float, meta=LOGLIK[:0]
    )
    fit = sy.Fit({"mu": MU}, loglik=lazy)
    with pytest.raises(AssertionError, match="computed"):
        fit.reweigh(sy.power(likelihood=0.5))


def test_a_callable_gets_blocks_of_the_draws_as_a_read_only_mapping() -> None:
    seen: list[int] = []

    def loglik(draws: Any) -> np.ndarray:
        seen.append(len(draws["mu"]))
        with pytest.raises(TypeError):
            draws["mu"] = 0
        with pytest.raises(ValueError, match="read-only"):
            draws["mu"][0] = 0
        return np.repeat(-(draws["mu"][:, None] ** 2), 7, axis=1)

    fit = sy.Fit({"mu": MU}, loglik=loglik)
    (delta,) = fit.reweigh(sy.power(likelihood=0.5)).terms.values()
    # 1e-12: a sum of seven equal terms.
    np.testing.assert_allclose(delta, 3.5 * MU**2, rtol=1e-12)
    assert sum(n for n in seen if n > 1) == CHAINS * DRAWS


DROPS: dict[str, tuple[sy.Change, np.ndarray]] = {
    "a term": (sy.drop("likelihood"), np.ones((YEARS, RIGS), bool)),
    "a label of one dimension": (sy.drop("B"), np.array([[False, True]] * YEARS)),
    "a label said to be one": (sy.drop(label="B"), np.array([[False, True]] * YEARS)),
    "by dimension": (sy.drop(rig="A"), np.array([[True, False]] * YEARS)),
    "by dimension, several labels": (
        sy.drop(year=[2016, 2024]),
        np.isin(np.arange(YEARS), [0, 4])[:, None] * np.ones(RIGS, bool),
    ),
    "by two dimensions": (
        sy.drop(year=2018, rig="B"),
        (np.arange(YEARS) == 1)[:, None] & (np.arange(RIGS) == 1),
    ),
    "by a mask": (sy.drop({"likelihood": FACTORS > 1}), FACTORS > 1),
}


@pytest.mark.parametrize("kind", DROPS)
def test_a_drop_leaves_out_what_it_names(kind: str) -> None:
    change, mask = DROPS[kind]
    # 1e-12: sums of at most ten terms of size one.
    np.testing.assert_allclose(_deltas(LABELLED, change), -(LOGLIK * mask).sum((2, 3)), atol=1e-12)


ONE_AXIS = LABELLED.isel(rig=0, drop=True)
ONE_AXIS_DROPS: dict[str, tuple[sy.Change, list[int]]] = {
    "position": (sy.drop(position=[0, 3]), [0, 3]),
    "one position": (sy.drop(position=2), [2]),
    "label": (sy.drop(label=[2016, 2022]), [0, 3]),
    "by term": (sy.drop({"likelihood": np.array([True, False, False, True, False])}), [0, 3]),
    "by dimension": (sy.drop(year=2020), [2]),
}


@pytest.mark.parametrize("kind", ONE_AXIS_DROPS)
def test_positions_and_labels_are_told_apart(kind: str) -> None:
    change, places = ONE_AXIS_DROPS[kind]
    want = -LOGLIK[..., places, 0].sum(2)
    np.testing.assert_allclose(_deltas(ONE_AXIS, change), want, atol=1e-12)


def test_bare_positions_serve_where_there_are_no_labels() -> None:
    plain = LOGLIK[..., 0]
    for change in (sy.drop([0, 3]), sy.drop({"likelihood": [3, 0]}), sy.drop(position=[0, 3])):
        np.testing.assert_allclose(_deltas(plain, change), -plain[..., [0, 3]].sum(2), atol=1e-12)


def test_a_label_is_dropped_from_every_term_that_has_it() -> None:
    fit = sy.Fit(
        {"mu": MU},
        loglik={"A": LABELLED.sel(rig="A", drop=True), "B": LABELLED.sel(year=[2016, 2018])},
    )
    terms = fit.reweigh(sy.drop(year=[2018, 2024])).terms
    assert set(terms) == {"likelihood: A", "likelihood: B"}
    np.testing.assert_allclose(terms["likelihood: A"], -LOGLIK[..., [1, 4], 0].sum(2), atol=1e-12)
    np.testing.assert_allclose(terms["likelihood: B"], -LOGLIK[..., 1, :].sum(2), atol=1e-12)
