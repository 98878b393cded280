"""Data frames of pandas, polars and pyarrow: the same answers as plain arrays, or an error."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import pandas as pd
import polars as pl
import pyarrow as pa
import pytest

import steelyard as sy
from steelyard.errors import (
    AmbiguousNameError,
    ArgumentError,
    ArgumentTypeError,
    DrawsError,
    ShapeError,
    UnknownNameError,
)

from .scenario import (
    CHAIN,
    LOGLIK,
    MU,
    OTHER_DATA,
    PRIOR,
    assert_same_answers,
    plain_columns,
    refused,
    table,
    with_entry,
)


class _Stream:
    """A table that offers nothing but Arrow's stream."""

    def __init__(self, columns: dict[str, Any]) -> None:
        self._table = pa.table(columns)

    def __arrow_c_stream__(self, requested_schema: object = None) -> object:
        return self._table.__arrow_c_stream__(requested_schema)


_LIBRARIES: list[Callable[[dict[str, Any]], Any]] = [pd.DataFrame, pl.DataFrame, pa.table, _Stream]
every_library = pytest.mark.parametrize(
    "make", _LIBRARIES, ids=["pandas", "polars", "pyarrow", "stream"]
)


@every_library
def test_a_frame_with_a_chain_column_answers_as_plain_arrays_do(make: Any) -> None:
    fit = sy.Fit(make(table()), prior=PRIOR, loglik=LOGLIK, chain="chain")
    assert_same_answers(fit, sy.Fit(plain_columns(), prior=PRIOR, loglik=LOGLIK), OTHER_DATA)
    assert list(fit.draws) == ["mu", "rate[0]", "rate[1]", "rate[2]"]
    assert fit.draws.chain_names == (0, 1, 2, 3)


@every_library
def test_chains_may_be_called_by_texts_and_be_of_unequal_length(make: Any) -> None:
    names = np.where(CHAIN < 2, "north", np.where(CHAIN < 3, "south", "west"))
    fit = sy.Fit(make({**table(), "run": names.tolist()}), chain="run", derived=["chain"])
    assert fit.draws.chain_names == ("north", "south", "west")
    np.testing.assert_array_equal(np.diff(fit.draws.starts), [500, 250, 250])


@every_library
def test_the_chain_of_each_row_may_be_an_array_beside_the_frame(make: Any) -> None:
    columns = {k: v for k, v in table().items() if k != "chain"}
    fit = sy.Fit(make(columns), prior=PRIOR, chain=CHAIN)
    assert_same_answers(fit, sy.Fit(plain_columns(), prior=PRIOR))


@every_library
def test_integers_and_float32_are_converted_and_columns_are_never_gathered(make: Any) -> None:
    fit = sy.Fit(make({"theta[1]": np.arange(10), "theta[2]": np.arange(10, dtype=np.float32)}))
    np.testing.assert_array_equal(fit.draws["theta[1]"], np.arange(10.0))
    np.testing.assert_array_equal(fit.draws["theta[2]"], np.arange(10.0))
    assert {v.dtype for v in fit.draws.values()} == {np.dtype(np.float64)}
    with refused(UnknownNameError, "theta[0]"):
        fit.base.mean("theta[0]")
    with refused(UnknownNameError, "'theta'"):
        fit.base.mean("theta")


def test_a_frame_already_in_narwhals_is_read_and_a_polars_column_of_vectors_is_a_vector() -> None:
    import narwhals as nw

    vectors = pl.DataFrame({"rate": np.arange(12.0).reshape(6, 2)})
    fit = sy.Fit(nw.from_native(vectors))
    np.testing.assert_array_equal(fit.draws["rate"], np.arange(12.0).reshape(6, 2))


@every_library
def test_a_chain_column_that_is_not_there_is_refused_with_the_nearest_name(make: Any) -> None:
    with refused(DrawsError, "chain", "'chian'", "'chain'"):
        sy.Fit(make(table()), chain="chian")


@every_library
def test_a_column_called_chain_is_not_guessed(make: Any) -> None:
    with refused(AmbiguousNameError, "'chain'", 'chain="chain"', "rename"):
        sy.Fit(make(table()))


@every_library
def test_a_column_called_chain_is_a_parameter_where_the_chains_are_said(make: Any) -> None:
    fit = sy.Fit(make(table()), chain=np.zeros(len(CHAIN), int))
    np.testing.assert_array_equal(fit.draws["chain"], CHAIN)
    assert fit.draws.chains == 1


@every_library
def test_rows_of_a_chain_in_several_places_are_refused(make: Any) -> None:
    shuffled = {
        k: np.concatenate([v[500:], v[:500][::2], v[:500][1::2]]) for k, v in table().items()
    }
    with refused(DrawsError, "chain 0, 1", "several places", "ordered=False"):
        sy.Fit(make(shuffled), chain="chain")


@every_library
def test_a_row_without_a_value_is_refused(make: Any) -> None:
    with refused(DrawsError, "'mu'", "1 missing", "Remove the column"):
        sy.Fit(make(with_entry(table(), "mu", 17, None)), chain="chain")


@every_library
def test_a_row_with_nan_or_infinity_is_refused(make: Any) -> None:
    for value in (float("nan"), float("inf")):
        with refused(DrawsError, "'mu'"):
            sy.Fit(make(with_entry(table(), "mu", 17, value)), chain="chain")


@every_library
def test_a_row_without_a_chain_is_refused(make: Any) -> None:
    with refused(DrawsError, "chain", "missing"):
        sy.Fit(make(with_entry(table(), "chain", 17, None)), chain="chain")


@every_library
def test_a_column_of_text_is_refused_by_name(make: Any) -> None:
    with refused(ArgumentTypeError, "'site'", "real numbers"):
        sy.Fit(make({**table(), "site": ["east"] * len(CHAIN)}), chain="chain")


def test_duplicate_column_names_are_refused() -> None:
    twice = pd.DataFrame(np.ones((5, 3)), columns=["mu", "mu", "tau"])
    for frame in (twice, pa.Table.from_arrays([pa.array(MU[0])] * 2, names=["mu", "mu"])):
        with refused(DrawsError, "each column name once", "mu", "Rename"):
            sy.Fit(frame)


def test_columns_without_texts_for_names_are_refused() -> None:
    with refused(ArgumentTypeError, "names", "0 of type int"):
        sy.Fit(pd.DataFrame(np.ones((5, 2))))


def test_a_chain_in_the_index_of_a_pandas_frame_is_not_lost_in_silence() -> None:
    for index in ("chain", ["chain", "draw"]):
        frame = pd.DataFrame({**table(), "draw": np.tile(np.arange(250), 4)}).set_index(index)
        with refused(DrawsError, "'chain' in the index", "reset_index()"):
            sy.Fit(frame)
    with refused(DrawsError, "'run' in the index", 'chain="run"'):
        sy.Fit(pd.DataFrame({"mu": [1.0, 2.0]}, index=pd.Index([0, 0], name="run")), chain="run")


def test_a_lazy_frame_has_to_be_collected() -> None:
    with refused(ArgumentTypeError, "polars.LazyFrame", ".collect()"):
        sy.Fit(pl.LazyFrame(table()), chain="chain")


def test_names_beside_a_frame_are_refused_since_it_has_names() -> None:
    with refused(ArgumentError, "names", "DataFrame"):
        sy.Fit(pd.DataFrame({"mu": MU[0]}), names=["tau"])


def test_an_empty_frame_and_a_frame_of_one_row_are_refused() -> None:
    with refused(DrawsError, "at least one parameter"):
        sy.Fit(pd.DataFrame())
    with refused(DrawsError, "at least two draws", "no draw"):
        sy.Fit(pl.DataFrame({"mu": []}, schema={"mu": pl.Float64}))
    with refused(DrawsError, "one draw"):
        sy.Fit(pa.table({"mu": [0.1]}))


def test_a_chain_array_of_another_length_is_refused_with_both_shapes() -> None:
    with refused(ShapeError, "(250,)", "(1000,)"):
        sy.Fit(pd.DataFrame({"mu": MU[0]}), chain=CHAIN)


def test_a_frame_as_log_likelihood_is_refused_with_the_way_out() -> None:
    readings = pd.DataFrame(LOGLIK.reshape(-1, LOGLIK.shape[-1]))
    with refused(ArgumentTypeError, "loglik", "to_numpy()"):
        sy.Fit(plain_columns(), loglik=readings)
