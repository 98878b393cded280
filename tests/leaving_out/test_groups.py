"""Which observations go together: labels, lists, names, dimensions; shapes and coordinates."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
import xarray as xr

import steelyard as sy
from steelyard.leaving_out import k_fold, leave_out

from .models import Array, normal_log_density

SEED = 61


def _readings(shape: tuple[int, ...], draws: int = 600) -> tuple[dict[str, Array], Array]:
    rng = np.random.default_rng(SEED)
    y = 0.10 + 0.03 * rng.normal(size=shape)
    rate = y.mean() + 0.03 / np.sqrt(y.size) * rng.normal(size=(2, draws // 2))
    loglik = normal_log_density(y, rate.reshape(2, -1, *(1,) * y.ndim), 0.03**2)
    return {"rate": rate}, loglik


def _plain(loglik: Array, positions: list[int]) -> float:
    """The left-out score with raw weights: the smoothed one differs in the tail draws only."""
    held = loglik.reshape(loglik.shape[0] * loglik.shape[1], -1)[:, positions].sum(axis=1)
    return float(-np.log(np.mean(np.exp(-held))))


def test_labels_lists_and_names_say_the_same_groups() -> None:
    draws, loglik = _readings((12,))
    record = sy.Fit(draws, loglik=loglik)._record
    labels = np.arange(12) % 3
    lists = [np.flatnonzero(labels == g).tolist() for g in range(3)]
    by_label = leave_out(record, labels)
    by_text = leave_out(record, np.array(["a", "b", "c"])[labels])
    by_list = leave_out(record, lists)
    by_name = leave_out(record, dict(zip(("north", "middle", "south"), lists, strict=True)))
    for other in (by_text, by_list, by_name):
        np.testing.assert_array_equal(other.by_group.value, by_label.by_group.value)
    assert by_name.by_group.labels["group"].tolist() == ["north", "middle", "south"]
    score = by_label.by_group
    for value, error, positions in zip(score.value, score.error, lists, strict=True):
        # Smoothing moves a score by less than its error.
        assert value == pytest.approx(_plain(loglik, positions), abs=float(error))


def test_groups_may_overlap_and_leave_observations_in() -> None:
    draws, loglik = _readings((6,))
    left = leave_out(sy.Fit(draws, loglik=loglik)._record, [[0, 1], [1]])
    alone = leave_out(sy.Fit(draws, loglik=loglik)._record)
    assert left.by_group.value[1] == alone.by_group.value[1]


def test_several_axes_keep_their_shape_and_coordinates() -> None:
    draws, loglik = _readings((3, 4))
    array = xr.DataArray(
        loglik,
        dims=("chain", "draw", "pile", "rig"),
        coords={"pile": ["P1", "P2", "P3"], "rig": [10, 20, 30, 40]},
    )
    record = sy.Fit(draws, loglik=array)._record
    left = leave_out(record)
    assert left.by_group.value.shape == (3, 4)
    assert left.by_group.dims == ("pile", "rig")
    assert left.by_group.labels["pile"].tolist() == ["P1", "P2", "P3"]
    assert left.by_group.to_xarray()["value"].sel(pile="P2", rig=30) == left.by_group.value[1, 2]
    assert left.name_of(6) == "P2, 30"
    flat = leave_out(sy.Fit(draws, loglik=loglik.reshape(2, -1, 12))._record)
    np.testing.assert_array_equal(left.by_group.value.reshape(-1), flat.by_group.value)
    piles = leave_out(record, "pile")
    assert piles.by_group.dims == ("pile",)
    rows = [list(range(4 * p, 4 * p + 4)) for p in range(3)]
    by_rows = leave_out(sy.Fit(draws, loglik=loglik.reshape(2, -1, 12))._record, rows)
    np.testing.assert_array_equal(piles.by_group.value, by_rows.by_group.value)
    rigs = leave_out(record, np.broadcast_to(np.arange(4), (3, 4)))
    np.testing.assert_allclose(rigs.by_group.value, leave_out(record, "rig").by_group.value)


def test_one_of_several_terms_is_named() -> None:
    draws, loglik = _readings((6,))
    both = {"gauge A": loglik[..., :4], "gauge B": loglik[..., 4:]}
    record = sy.Fit(draws, loglik=both)._record
    left = leave_out(record, term="gauge B")
    alone = leave_out(sy.Fit(draws, loglik=loglik)._record)
    np.testing.assert_array_equal(left.by_group.value, alone.by_group.value[4:])
    # All of gauge B may go: gauge A is left.
    assert leave_out(record, [[0, 1]], term="gauge B").by_group.value.shape == (1,)


def test_draws_that_come_with_weights_are_weighed_by_both() -> None:
    draws, loglik = _readings((5,))
    flat = loglik.reshape(600, 5)
    # Sampled from the fit without observation 0: the base weight puts it back.
    weights = flat[:, 0]
    record = sy.Fit(draws, loglik=loglik, log_weights=weights)._record
    left = leave_out(record)
    # Leaving it out again takes the weights away: the plain mean of the density is the score.
    assert left.by_group.value[0] == pytest.approx(np.log(np.exp(flat[:, 0]).mean()), rel=1e-12)
    assert left.effective_size[0] == pytest.approx(600)


def test_conditional_terms_leave_out_correlated_rows_exactly() -> None:
    """Joint normal rows with correlation 0.7: one known mean draw would give the exact density."""
    rng = np.random.default_rng(SEED)
    count = 15
    covariance = 0.04 * 0.7 ** np.abs(np.subtract.outer(np.arange(count), np.arange(count)))
    precision = np.linalg.inv(covariance)
    y = 8 + np.linalg.cholesky(covariance) @ rng.normal(size=count)
    total = precision.sum()
    mean = (precision @ y).sum() / total
    mu = mean + rng.normal(size=20_000) / np.sqrt(total)
    residual = y - mu[:, None]
    own = 1 / np.diag(precision)
    conditional = normal_log_density(residual @ precision * own, np.zeros(1), own)
    # The fit's own term holds one-step densities; deletion by them would be wrong.
    chol = np.linalg.inv(np.linalg.cholesky(covariance))
    steps = normal_log_density(residual @ chol.T, np.zeros(1), 1.0) + np.log(np.diag(chol))
    record = sy.Fit({"mu": mu}, loglik=steps, ordered=False)._record
    left = leave_out(record, conditional=conditional)
    exact = np.empty(count)
    for i in range(count):
        rest = np.delete(np.arange(count), i)
        inverse = np.linalg.inv(covariance[np.ix_(rest, rest)])
        line = covariance[i, rest] @ inverse
        spread = inverse.sum()
        centre = (inverse @ y[rest]).sum() / spread
        middle = centre + line @ (y[rest] - centre)
        variance = covariance[i, i] - line @ covariance[rest, i] + (1 - line.sum()) ** 2 / spread
        exact[i] = normal_log_density(y[i], middle, variance)
    assert np.all(np.abs(left.by_group.value - exact) <= 4 * left.by_group.error)
    wrong = leave_out(record)
    assert np.any(np.abs(wrong.by_group.value - exact) > 20 * wrong.by_group.error)
    assert "rows_independent" in {r.code for r in wrong.verdict.reasons}
    assert "rows_independent" not in {r.code for r in left.verdict.reasons}


def test_folds_by_chance_order_and_place() -> None:
    draws, loglik = _readings((24,))
    record = sy.Fit(draws, loglik=loglik)._record
    chance = k_fold(record, 4, rng=3)
    assert sorted(np.concatenate(chance._groups.members).tolist()) == list(range(24))
    assert {len(m) for m in chance._groups.members} == {6}
    again = k_fold(record, 4, rng=3)
    np.testing.assert_array_equal(again.by_group.value, chance.by_group.value)
    order = k_fold(record, 4, by="order")
    assert [m.tolist() for m in order._groups.members][1] == list(range(6, 12))
    places = np.stack([np.arange(24) % 6, np.arange(24) // 6], axis=1)
    cells = k_fold(record, 4, by="place", places=places)._groups.members
    for cell in cells:
        assert np.ptp(places[cell], axis=0).max() <= 2, "a cell is compact"


def test_neighbours_of_a_block_are_deleted_but_not_scored() -> None:
    draws, loglik = _readings((24,))
    record = sy.Fit(draws, loglik=loglik)._record
    wide = k_fold(record, 4, by="order", apart=2)
    assert wide._groups.deleted[1].tolist() == list(range(4, 14))
    flat = loglik.reshape(600, 24)
    w = np.exp(-flat[:, 4:14].sum(axis=1))
    plain = np.log((w * np.exp(flat[:, 6:12].sum(axis=1))).sum() / w.sum())
    assert wide.by_group.value[1] == pytest.approx(plain, abs=0.05)
    placed = k_fold(record, 4, by="place", places=np.arange(24.0), apart=2)._groups
    assert [m.tolist() for m in placed.deleted] == [m.tolist() for m in wide._groups.deleted]


def test_the_result_keeps_through_a_pickle(tmp_path: Any) -> None:
    import pickle

    draws, loglik = _readings((6,))
    left = leave_out(sy.Fit(draws, loglik=loglik)._record, quantities="rate")
    back = pickle.loads(pickle.dumps(left))
    np.testing.assert_array_equal(back.by_group.value, left.by_group.value)
    assert not back.by_group.value.flags.writeable
    assert str(back) == str(left)
