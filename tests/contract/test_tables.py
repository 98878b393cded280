"""Tables: columns, order, printing, and what they turn into."""

from __future__ import annotations

import csv
import io
from pathlib import Path

import numpy as np
import pandas as pd
import polars as pl
import pyarrow as pa
import pytest
import xarray as xr

import steelyard as sy

COLUMNS = [
    "quantity",
    "index",
    "index 2",
    "mean",
    "error",
    "low",
    "high",
    "sd",
    "q0.05",
    "q0.5",
    "q0.95",
    "shift",
    "shift_error",
    "tail_shape",
    "level",
    "reasons",
]


def test_a_table_has_the_columns_of_the_contract_and_a_row_an_element(answer: sy.Answer) -> None:
    table = answer.table()
    assert list(table.columns) == COLUMNS
    assert len(table) == 9 + 1 + 1 + 6
    assert list(table["quantity"]) == ["rate"] * 9 + ["mu", "tau"] + ["loss"] * 6
    assert list(table["index"]) == [*"012345678", "", "", *"000111"]
    assert list(table["index 2"]) == [""] * 11 + [*"012012"]


def test_a_table_holds_the_estimates(answer: sy.Answer) -> None:
    table = answer.table("rate")
    mean, quantiles = answer.mean("rate"), answer.quantile("rate", (0.05, 0.5, 0.95))
    assert np.array_equal(table["mean"], mean.value)
    assert np.array_equal(table["error"], mean.error)
    assert np.array_equal(table["tail_shape"], mean.tail_shape)
    assert np.array_equal(table["sd"], answer.sd("rate").value)
    for row, name in enumerate(("q0.05", "q0.5", "q0.95")):
        assert np.array_equal(table[name], quantiles.value[row])


def test_the_level_of_a_row_is_the_worst_in_it(answer: sy.Answer) -> None:
    table = answer.table("rate", probs=(0.002, 0.5))
    quantiles = answer.quantile("rate", (0.002, 0.5)).verdict.level
    for place, level in enumerate(table["level"]):
        assert level == min([*quantiles[:, place], answer.mean("rate").verdict.level[place]])
    assert "refit" in table["level"]
    assert all(
        reasons
        for reasons, level in zip(table["reasons"], table["level"], strict=True)
        if level != "sound"
    )


def test_dimension_names_and_labels_become_columns() -> None:
    rate = np.random.default_rng(1).normal(size=(2, 50, 2, 2))
    data = xr.Dataset(
        {"rate": (("chain", "draw", "quay", "side"), rate)}, coords={"quay": ["east", "west"]}
    )
    table = sy.Fit(data).base.table()
    assert list(table.columns)[:3] == ["quantity", "quay", "side"]
    assert list(table["quay"]) == ["east", "east", "west", "west"]
    assert list(table["side"]) == ["0", "1", "0", "1"]


@pytest.mark.parametrize("probs", [0.5, [0.1, 0.9], (), (0.025, 1 / 3)])
def test_probabilities_name_their_columns(answer: sy.Answer, probs: object) -> None:
    if probs == ():
        with pytest.raises(sy.errors.ArgumentError):
            answer.table("mu", probs)
        return
    table = answer.table("mu", probs)
    named = [name for name in table.columns if name.startswith("q") and name != "quantity"]
    assert named == [f"q{p:g}" for p in np.atleast_1d(np.asarray(probs, dtype=float))]


def test_rows_may_be_iterated(answer: sy.Answer) -> None:
    rows = list(answer.table(["mu", "tau"]))
    assert [row["quantity"] for row in rows] == ["mu", "tau"]
    assert rows[0]["mean"] == answer.mean("mu").value


def test_a_table_becomes_a_frame_of_each_library(answer: sy.Answer) -> None:
    table = answer.table()
    for backend, kind in (
        ("pandas", pd.DataFrame),
        ("polars", pl.DataFrame),
        ("pyarrow", pa.Table),
    ):
        frame = table.to_frame(backend)  # type: ignore[arg-type]
        assert isinstance(frame, kind)
        names = frame.column_names if backend == "pyarrow" else list(frame.columns)
        assert list(names) == COLUMNS
        assert np.array_equal(np.asarray(frame["mean"]), table["mean"])
        assert list(np.asarray(frame["level"])) == list(table["level"])
    assert type(table.to_frame()) in (pd.DataFrame, pl.DataFrame, pa.Table)


def test_comma_separated_text_is_in_full_precision(answer: sy.Answer, tmp_path: Path) -> None:
    table = answer.table()
    text = table.to_csv(tmp_path / "table.csv")
    assert (tmp_path / "table.csv").read_text(encoding="utf-8") == text
    rows = list(csv.DictReader(io.StringIO(text)))
    assert list(rows[0]) == COLUMNS
    assert [float(row["mean"]) for row in rows] == list(table["mean"])
    assert [float(row["error"]) for row in rows] == list(table["error"])


def test_a_table_prints_itself_aligned(answer: sy.Answer) -> None:
    lines = str(answer.table(["rate", "mu"])).splitlines()
    assert len(lines) == 11
    assert lines[0].split()[0] == "quantity"
    assert repr(answer.table("mu")) == str(answer.table("mu"))
    assert answer.table("mu")._repr_html_().startswith("<table")


def test_a_printed_table_shows_only_supported_digits(answer: sy.Answer) -> None:
    line = str(answer.table("mu", 0.5)).splitlines()[1].split()
    printed = f"{answer.mean('mu')}".split(" (")[0].removeprefix("mu: ").split(" ± ")
    assert line[1:3] == printed


def test_a_table_cannot_be_altered(answer: sy.Answer) -> None:
    table = answer.table("rate")
    with pytest.raises(AttributeError):
        table.columns = {}  # type: ignore[misc]
    with pytest.raises(TypeError):
        table.columns["mean"] = []  # type: ignore[index]
    with pytest.raises((TypeError, AttributeError)):
        table["mean"][0] = 3  # type: ignore[index]


def test_markup_in_names_is_escaped(answer: sy.Answer) -> None:
    assert "<i>" not in answer.table({"<i>mu</i>": "mu"})._repr_html_()
