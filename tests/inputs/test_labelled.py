"""xarray: dimensions by name, coordinates as labels, and no integer of two meanings."""

from __future__ import annotations

from typing import Any

import dask.array
import numpy as np
import pytest
import xarray as xr

import steelyard as sy
from steelyard.errors import (
    AmbiguousNameError,
    DrawsError,
    LikelihoodError,
    ShapeError,
    UnknownNameError,
)

from .scenario import (
    CHAIN,
    LOGLIK,
    MU,
    OTHER_DATA,
    PRIOR,
    RATE,
    assert_same_answers,
    plain_draws,
    refused,
)

DATASET = xr.Dataset(
    {"mu": (("chain", "draw"), MU), "rate": (("chain", "draw", "quay"), RATE)},
    coords={"quay": ["north", "south", "west"], "chain": [11, 12, 13, 14]},
)
READINGS = xr.DataArray(
    LOGLIK, dims=("chain", "draw", "reading"), coords={"reading": list("uvwxyz")}
)


def plain_fit() -> sy.Fit:
    return sy.Fit(plain_draws(), prior=PRIOR, loglik=LOGLIK)


def _stacked() -> xr.Dataset:
    return DATASET.stack(sample=("chain", "draw"))


@pytest.mark.parametrize(
    "draws",
    [
        DATASET,
        DATASET.transpose("quay", "draw", "chain"),
        DATASET.chunk({"draw": 60}),
        xr.DataTree(DATASET),
        xr.DataTree.from_dict({"/after": DATASET, "/before": DATASET})["after"],
        {"mu": DATASET["mu"], "rate": DATASET["rate"].transpose("quay", "draw", "chain")},
        {"mu": MU, "rate": DATASET["rate"]},
        _stacked(),
        DATASET.rename(draw="sample"),
    ],
    ids=str.split("whole transposed dask tree node arrays mixed stacked sample"),
)
def test_labelled_draws_answer_as_plain_arrays_do(draws: Any) -> None:
    fit = sy.Fit(draws, prior=PRIOR, loglik=LOGLIK)
    assert_same_answers(fit, plain_fit(), OTHER_DATA)
    assert_same_answers(fit, plain_fit(), OTHER_DATA, ("mu",))
    np.testing.assert_array_equal(
        fit.base.mean("rate[south]").value, plain_fit().base.mean("rate[1]").value
    )


@pytest.mark.parametrize(
    "loglik",
    [
        READINGS,
        READINGS.transpose("reading", "draw", "chain"),
        READINGS.chunk({"reading": 2}),
        dask.array.from_array(LOGLIK, chunks=(2, 100, 3)),
        READINGS.to_dataset(name="readings"),
        {"readings": READINGS.stack(sample=("chain", "draw"))},
    ],
    ids=str.split("whole transposed chunked dask dataset stacked"),
)
def test_labelled_log_likelihoods_answer_as_plain_arrays_do(loglik: Any) -> None:
    assert_same_answers(sy.Fit(DATASET, prior=PRIOR, loglik=loglik), plain_fit(), OTHER_DATA)


def test_an_observation_is_left_out_by_its_label_along_a_dimension() -> None:
    fit = sy.Fit(DATASET, prior=PRIOR, loglik=READINGS)
    expected = fit.reweigh(sy.drop(position=[2])).mean("mu").value
    for change in (sy.drop(reading="w"), sy.drop("w"), sy.drop([2])):
        assert fit.reweigh(change).mean("mu").value == expected


def test_names_and_labels_stay_with_the_draws_and_come_back_out() -> None:
    draws = sy.Fit(DATASET).draws
    assert draws.chain_names == (11, 12, 13, 14)
    assert draws.dims["rate"] == ("quay",)
    back = draws.to_xarray()
    xr.testing.assert_equal(
        back["rate"].drop_vars("chain", errors="ignore"), DATASET["rate"].drop_vars("chain")
    )


def test_draws_of_unequal_chains_make_the_way_through_xarray() -> None:
    columns = {"mu": MU.reshape(-1)[:900]}
    fit = sy.Fit(columns, prior=PRIOR, chain=CHAIN[:900])
    again = sy.Fit(fit.draws.to_xarray(), prior=PRIOR)
    assert_same_answers(again, fit, names=("mu",))
    np.testing.assert_array_equal(again.draws.starts, [0, 250, 500, 750, 900])


def test_the_chain_of_each_draw_may_stand_in_a_coordinate_of_another_name() -> None:
    flat = xr.Dataset({"mu": ("draw", MU.reshape(-1))}, coords={"walker": ("draw", CHAIN)})
    plain = sy.Fit({"mu": MU}, prior=PRIOR)
    assert_same_answers(sy.Fit(flat, prior=PRIOR, chain="walker"), plain, names=("mu",))
    assert sy.Fit(flat).draws.chains == 1
    with refused(DrawsError, "'walkers'", "'walker'"):
        sy.Fit(flat, chain="walkers")


def test_integer_labels_that_differ_from_positions_have_to_be_called_labels_or_positions() -> None:
    fit = sy.Fit(DATASET.assign_coords(quay=[2, 1, 3]))
    with refused(AmbiguousNameError, "'quay'", "rate[label=4]", "rate[position=3]"):
        fit.base.mean("rate[1]")
    with refused(AmbiguousNameError, "label= or position="):
        fit.base.prob("rate[1] > 0.12")
    label, position = (fit.base.mean(f"rate[{word}=2]").value for word in ("label", "position"))
    plain = plain_fit().base
    assert label == plain.mean("rate[0]").value
    assert position == plain.mean("rate[2]").value


def test_integer_labels_that_are_the_positions_need_no_word() -> None:
    fit = sy.Fit(DATASET.assign_coords(quay=[0, 1, 2]))
    assert fit.base.mean("rate[1]").value == plain_fit().base.mean("rate[1]").value


def test_drop_refuses_bare_integers_where_labels_differ_from_positions() -> None:
    fit = sy.Fit(DATASET, prior=PRIOR, loglik=READINGS.assign_coords(reading=[5, 4, 3, 2, 1, 0]))
    for change in (sy.drop([2]), sy.drop({"likelihood": [2]})):
        with refused(AmbiguousNameError, "'reading'", "label=", "position="):
            fit.reweigh(change)
    by_label = fit.reweigh(sy.drop(label=[2])).mean("mu").value
    assert by_label == fit.reweigh(sy.drop(position=[3])).mean("mu").value
    assert by_label == fit.reweigh(sy.drop(reading=2)).mean("mu").value
    assert by_label != fit.reweigh(sy.drop(position=[2])).mean("mu").value


def test_a_label_that_is_not_there_or_stands_twice_is_refused() -> None:
    fit = sy.Fit(DATASET.assign_coords(quay=["north", "south", "south"]))
    with refused(UnknownNameError, "'nord'", "'north'"):
        fit.base.mean("rate[nord]")
    with refused(UnknownNameError, "'south'", "2 times"):
        fit.base.mean("rate[south]")


def test_data_without_the_dimension_of_the_draws_are_refused() -> None:
    with refused(DrawsError, "'draw'", "'time'", "Rename"):
        sy.Fit(DATASET.rename(draw="time"))
    with refused(LikelihoodError, "loglik", "'draw'", "time"):
        sy.Fit(DATASET, loglik=READINGS.rename(draw="time"))


def test_a_variable_that_is_no_draw_is_refused_by_name() -> None:
    depth = DATASET.assign(depth=("quay", [3.0, 4.0, 5.0]))
    with refused(DrawsError, "'depth'", "('quay',)", "Leave out"):
        sy.Fit(depth)


def test_a_tree_of_several_groups_is_refused_with_their_names() -> None:
    tree = xr.DataTree.from_dict({"/after": DATASET, "/before": DATASET})
    with refused(AmbiguousNameError, "/after, /before", "tree["):
        sy.Fit(tree)


def test_arrays_whose_labels_along_one_dimension_differ_are_refused() -> None:
    other = DATASET["rate"].assign_coords(quay=["east", "south", "west"])
    with refused(DrawsError, "'quay'", "north", "east", "Rename"):
        sy.Fit({"rate": DATASET["rate"], "depth": other})


def test_missing_draws_and_swapped_shapes_are_refused() -> None:
    with refused(DrawsError, "'mu'", "NaN"):
        sy.Fit(DATASET.assign(mu=DATASET["mu"].where(DATASET["mu"] < 0.15)))
    with refused(ShapeError, "'depth'", "(4, 250)"):
        sy.Fit({"mu": DATASET["mu"], "depth": MU.T})


def test_names_of_chains_beside_a_chain_dimension_are_refused_unless_they_name_it() -> None:
    assert sy.Fit(DATASET, chain="chain").draws.chains == 4
    with refused(DrawsError, "chain", "(1000,)"):
        sy.Fit(DATASET, chain=CHAIN)
