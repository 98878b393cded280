"""Chains that do not go with the draws, and frames and datasets that hide something."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
import polars as pl
import pyarrow as pa
import pytest
import xarray as xr

import steelyard as sy
from steelyard.errors import (
    AmbiguousNameError,
    ArgumentTypeError,
    DrawsError,
    ShapeError,
)

from .telling import refused

X = np.random.default_rng(20_261_223).normal(size=12)
FRAMES = pytest.mark.parametrize(
    "frame", [pd.DataFrame, pl.DataFrame, pa.table], ids=["pandas", "polars", "pyarrow"]
)


@pytest.mark.parametrize("shape", [(11,), (3, 4), (12, 1), ()])
def test_chains_of_another_shape_than_the_draws_are_refused(shape: tuple[int, ...]) -> None:
    chain = np.zeros(shape, dtype=int)
    refused(lambda: sy.Fit({"mu": X}, chain=chain), ShapeError, "chain", shape, "(12,)")


def test_chains_whose_rows_are_scattered_are_refused() -> None:
    chain = np.tile([0, 1, 2], 4)
    told = refused(lambda: sy.Fit({"mu": X}, chain=chain), DrawsError, "chain", "0, 1, 2")
    assert "Sort" in told.next_step


def test_the_next_step_for_scattered_chains_works() -> None:
    # What the message advises where there is no order has to be accepted.
    chain = np.tile([0, 1, 2], 4)
    with pytest.raises(DrawsError) as caught:
        sy.Fit({"mu": X}, chain=chain)
    if "ordered=False" in caught.value.next_step:
        assert sy.Fit({"mu": X}, chain=chain, ordered=False).draws.size == 12


@pytest.mark.parametrize(
    "chain",
    [
        np.array([0.0] * 4 + [np.nan] * 4 + [1.0] * 4),
        np.array([0.0] * 4 + [np.inf] * 4 + [1.0] * 4),
        np.array(["a"] * 4 + [None] * 4 + ["b"] * 4, dtype=object),
    ],
    ids=["NaN", "inf", "None"],
)
def test_chains_that_are_missing_for_some_draws_are_refused(chain: Any) -> None:
    refused(lambda: sy.Fit({"mu": X}, chain=chain), DrawsError, "chain", "4")


def test_a_chain_beside_an_axis_of_chains_is_refused() -> None:
    source = np.arange(12.0).reshape(2, 6)
    data = xr.Dataset({"mu": (("chain", "draw"), source)})
    refused(lambda: sy.Fit(data, chain=np.zeros(12, dtype=int)), DrawsError, "chain", "(12,)")


def test_a_chain_column_that_a_mapping_does_not_have_is_refused() -> None:
    refused(lambda: sy.Fit({"mu": X}, chain="chain"), DrawsError, "chain", "'chain'")


def test_an_entry_called_chain_is_not_taken_for_a_parameter_unasked() -> None:
    source = {"mu": X, "chain": np.repeat([0, 1], 6)}
    refused(lambda: sy.Fit(source), AmbiguousNameError, "chain")
    assert sy.Fit(source, chain="chain").draws.chains == 2


@FRAMES
def test_a_frame_without_the_named_chain_column_is_refused(frame: Any) -> None:
    told = refused(lambda: sy.Fit(frame({"mu": X}), chain="chian"), DrawsError, "chain", "'chian'")
    assert "mu" in str(told)


@FRAMES
def test_a_frame_with_scattered_chain_rows_is_refused(frame: Any) -> None:
    source = frame({"mu": X, "chain": np.tile([0, 1], 6)})
    refused(lambda: sy.Fit(source, chain="chain"), DrawsError, "chain", "0, 1")


@FRAMES
def test_a_frame_with_missing_chains_is_refused(frame: Any) -> None:
    source = frame({"mu": X, "chain": [0] * 6 + [None] * 2 + [1] * 4})
    with pytest.raises(DrawsError) as caught:
        sy.Fit(source, chain="chain")
    assert "chain" in caught.value.argument
    assert "2" in caught.value.came


@pytest.mark.parametrize(
    "source",
    [
        pd.DataFrame({"mu": [0.1, None, 0.3], "tau": [1.0, 2.0, 3.0]}),
        pl.DataFrame({"mu": [0.1, None, 0.3], "tau": [1.0, 2.0, 3.0]}),
        pa.table({"mu": [0.1, None, 0.3], "tau": [1.0, 2.0, 3.0]}),
        pd.DataFrame({"mu": pd.array([1, None, 3]), "tau": [1.0, 2.0, 3.0]}),
    ],
    ids=["pandas", "polars", "pyarrow", "pandas nullable"],
)
def test_a_frame_with_missing_values_is_refused_by_column(source: Any) -> None:
    refused(lambda: sy.Fit(source), DrawsError, "draws['mu']", "1 missing")


def test_nan_in_a_polars_column_is_refused_too() -> None:
    source = pl.DataFrame({"mu": [0.1, float("nan"), 0.3]})
    refused(lambda: sy.Fit(source), DrawsError, "draws['mu']", "NaN")


def test_a_frame_with_two_columns_of_one_name_is_refused() -> None:
    source = pd.DataFrame(np.ones((5, 3)), columns=["mu", "tau", "mu"])
    refused(lambda: sy.Fit(source), DrawsError, "draws", "'mu'")


@pytest.mark.parametrize("columns", [[0, 1], [("a", 1), ("a", 2)]], ids=repr)
def test_a_frame_whose_columns_are_not_named_by_texts_is_refused(columns: list[Any]) -> None:
    source = pd.DataFrame(np.ones((5, 2)), columns=pd.Index(columns, tupleize_cols=False))
    refused(lambda: sy.Fit(source), ArgumentTypeError, "draws: names", repr(columns[0]))


def test_a_frame_with_a_column_of_text_is_refused() -> None:
    source = pd.DataFrame({"mu": X, "quay": ["east"] * 12})
    refused(lambda: sy.Fit(source), ArgumentTypeError, "draws['quay']")


def test_a_chain_in_the_index_of_a_frame_is_not_lost() -> None:
    source = pd.DataFrame({"mu": X, "chain": np.repeat([0, 1], 6)}).set_index("chain")
    told = refused(lambda: sy.Fit(source), DrawsError, "draws", "chain")
    assert "reset_index" in told.next_step


def test_a_lazy_frame_is_refused_without_a_warning_of_its_library() -> None:
    source = pl.DataFrame({"mu": X}).lazy()
    told = refused(lambda: sy.Fit(source), ArgumentTypeError, "draws", "LazyFrame")
    assert "collect" in told.next_step


@FRAMES
def test_a_frame_without_columns_is_refused(frame: Any) -> None:
    refused(lambda: sy.Fit(frame({})), DrawsError, "draws", "none")


@FRAMES
def test_a_frame_without_rows_is_refused(frame: Any) -> None:
    refused(lambda: sy.Fit(frame({"mu": np.empty(0)})), DrawsError, "draws", "no draw")


def test_a_dataset_without_a_draw_dimension_is_refused() -> None:
    data = xr.Dataset({"mu": (("chain", "step"), np.ones((2, 6)))})
    refused(lambda: sy.Fit(data), DrawsError, "draws", "'draw'", "step")


def test_a_dataset_with_a_variable_that_has_no_draws_is_refused() -> None:
    data = xr.Dataset({"mu": (("chain", "draw"), np.ones((2, 6))), "length": ("quay", [1.0, 2.0])})
    refused(lambda: sy.Fit(data), DrawsError, "draws['length']", "quay")


def test_a_tree_of_groups_is_refused_until_one_is_taken() -> None:
    data = xr.Dataset({"mu": (("chain", "draw"), np.arange(12.0).reshape(2, 6))})
    tree = xr.DataTree.from_dict({"/posterior": data, "/prior": data})
    refused(lambda: sy.Fit(tree), AmbiguousNameError, "draws", "/posterior")
    assert sy.Fit(tree["posterior"]).draws.size == 12


def test_a_mapping_of_labelled_arrays_is_read_by_dimension_names() -> None:
    values = np.random.default_rng(1).normal(size=(2, 3, 20))
    source = {"rate": xr.DataArray(values, dims=("chain", "quay", "draw"))}
    read = sy.Fit(source).draws
    assert (read.chains, read.size) == (2, 40)
    assert np.array_equal(read["rate"], np.swapaxes(values, 1, 2).reshape(40, 3))
