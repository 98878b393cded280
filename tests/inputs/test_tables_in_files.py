"""``.csv`` and ``.parquet``: the same answers as plain arrays, or an error with line and column."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import polars as pl
import pyarrow as pa
import pyarrow.parquet
import pytest

import steelyard as sy
from steelyard.base import tables
from steelyard.errors import (
    AmbiguousNameError,
    ArgumentError,
    ArgumentTypeError,
    DrawsError,
    MissingExtraError,
    ShapeError,
    SteelyardError,
    UnknownNameError,
)

from .scenario import (
    CHAIN,
    LOGLIK,
    PRIOR,
    READINGS,
    assert_same_answers,
    plain_columns,
    refused,
    table,
    with_entry,
)


def write_csv(path: Path, columns: dict[str, Any], before: str = "") -> Path:
    """A table as the standard library would write it; numbers in full."""
    rows = zip(*[[repr(v) for v in np.asarray(c).tolist()] for c in columns.values()], strict=True)
    lines = [",".join(columns), *(",".join(row) for row in rows)]
    path.write_text(before + "\n".join(lines) + "\n", encoding="utf-8")
    return path


def _pandas(path: Path, columns: dict[str, Any]) -> Path:
    pd.DataFrame(columns).to_csv(path, index=False)
    return path


def _polars(path: Path, columns: dict[str, Any]) -> Path:
    pl.DataFrame(columns).write_csv(path)
    return path


@pytest.mark.parametrize("write", [write_csv, _pandas, _polars])
def test_a_csv_file_answers_as_plain_arrays_do(write: Any, tmp_path: Path) -> None:
    draws = sy.read(write(tmp_path / "quay.csv", table()), chain="chain")
    fit = sy.Fit(draws, prior=PRIOR)
    assert_same_answers(fit, sy.Fit(plain_columns(), prior=PRIOR))
    assert list(draws) == ["mu", "rate[0]", "rate[1]", "rate[2]"]


def test_a_parquet_file_answers_as_plain_arrays_do(tmp_path: Path) -> None:
    path = tmp_path / "quay.parquet"
    pl.DataFrame(table()).write_parquet(path)
    fit = sy.Fit(sy.read(str(path), chain="chain"), prior=PRIOR)
    assert_same_answers(fit, sy.Fit(plain_columns(), prior=PRIOR))


@pytest.mark.parametrize("missing", ["polars", "pyarrow"])
def test_parquet_is_read_with_either_library(
    missing: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = tmp_path / "quay.parquet"
    pyarrow.parquet.write_table(pa.table(table()), path)
    monkeypatch.setattr(tables, "find_spec", lambda name: None if name == missing else name)
    frame = tables.read_parquet(path)
    assert type(frame).__module__.partition(".")[0] != missing
    np.testing.assert_array_equal(sy.read(path, chain="chain")["mu"], table()["mu"])


def test_parquet_without_a_library_that_reads_it_says_what_to_install(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = tmp_path / "quay.parquet"
    pl.DataFrame(table()).write_parquet(path)
    monkeypatch.setattr(tables, "find_spec", lambda name: None)
    with refused(MissingExtraError, str(path), "polars or pyarrow", "pip install"):
        sy.read(path)


def test_a_csv_file_needs_no_frame_library(tmp_path: Path) -> None:
    path = write_csv(tmp_path / "quay.csv", table())
    code = (
        f"import sys, steelyard as sy; sy.read({str(path)!r}, chain='chain');"
        "print([m for m in ('pandas', 'polars', 'pyarrow', 'xarray') if m in sys.modules])"
    )
    done = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, timeout=60, check=True
    )
    assert done.stdout.strip() == "[]"


def test_comments_quotes_spaces_and_a_byte_order_mark_are_understood(tmp_path: Path) -> None:
    path = tmp_path / "quay.csv"
    path.write_text(
        '\ufeff# invented\n"theta[1,2]", mu\n# warm-up ended here\n1, 2e-1\n"-3",inf\n3,4\n\n\n',
        encoding="utf-8",
    )
    with refused(DrawsError, "'mu'", "infinite", "draw 1"):
        sy.read(path)
    read = sy.read(path, kind="loglik")
    np.testing.assert_array_equal(read["theta[1,2]"], [1, -3, 3])
    np.testing.assert_array_equal(read["mu"], [0.2, np.inf, 4])


def test_chains_in_a_csv_file_may_be_called_by_texts(tmp_path: Path) -> None:
    path = tmp_path / "quay.csv"
    path.write_text("run,mu\nnorth,1\nnorth,2\nsouth,3\n")
    draws = sy.read(path, chain="run")
    assert draws.chain_names == ("north", "south")


def test_columns_of_a_table_are_terms_of_a_log_likelihood_where_that_is_said(
    tmp_path: Path,
) -> None:
    columns = {f"reading {i}": LOGLIK[..., i].reshape(-1) for i in range(READINGS)}
    frame = pl.DataFrame({"chain": CHAIN, **columns})
    frame.write_parquet(tmp_path / "readings.parquet")
    frame.write_csv(tmp_path / "readings.csv")
    plain = {k: v.reshape(LOGLIK.shape[:2]) for k, v in columns.items()}
    change = sy.drop("reading 2")
    expected = sy.Fit(plain_columns(), prior=PRIOR, loglik=plain)
    draws = sy.read(write_csv(tmp_path / "quay.csv", table()), chain="chain")
    for name in ("readings.parquet", "readings.csv"):
        loglik = sy.read(tmp_path / name, chain="chain", kind="loglik")
        assert_same_answers(sy.Fit(draws, prior=PRIOR, loglik=loglik), expected, change)
        with refused(AmbiguousNameError, "'chain'", name):
            sy.read(tmp_path / name, kind="loglik")


@pytest.mark.parametrize("ending", ["csv", "parquet"])
def test_a_chain_column_is_neither_guessed_nor_invented(ending: str, tmp_path: Path) -> None:
    path = tmp_path / f"quay.{ending}"
    frame = pl.DataFrame(table())
    frame.write_csv(path) if ending == "csv" else frame.write_parquet(path)
    with refused(AmbiguousNameError, str(path), "'chain'", 'chain="chain"', "rename"):
        sy.read(path)
    with refused(DrawsError, str(path), "'chian'", "'chain'"):
        sy.read(path, chain="chian")
    assert sy.read(path, chain=CHAIN // 2)["chain"].shape == (1000,)
    with refused(ShapeError, "(1000,)", "(3,)"):
        sy.read(path, chain=[0, 1, 2])


def test_missing_values_in_a_parquet_file_are_refused(tmp_path: Path) -> None:
    path = tmp_path / "quay.parquet"
    for value in (None, float("nan")):
        pl.DataFrame(with_entry(table(), "mu", 3, value)).write_parquet(path)
        with refused(DrawsError, str(path), "'mu'"):
            sy.read(path, chain="chain")


@pytest.mark.parametrize(
    ("text", "kind", "words"),
    [
        ("mu,tau\n1,2\n3,x\n5,6\n", DrawsError, ("line 3", "'tau'", "'x'")),
        ("# a\nmu,tau\n1,2\n# b\n3,\n5,6\n", DrawsError, ("line 5", "'tau'", "an empty cell")),
        ("mu,tau\n1,2\n3,NA\n", DrawsError, ("line 3", "'tau'", "'NA'")),
        ("mu,tau\n1,2\n3,nan\n", DrawsError, ("'tau'", "NaN", "draw 1")),
        ("mu,tau\n1,2\n3,4_0\n", DrawsError, ("line 3", "'tau'", "'4_0'")),
        ("mu,tau\n1,2\n3\n", DrawsError, ("line 3", "2 cells", "got 1", "cut short")),
        ("mu,tau\n1,2\n3,4,5\n", DrawsError, ("line 3", "2 cells", "got 3")),
        ("mu,tau\n1,2\n\n3,4\n", DrawsError, ("line 3", "an empty line")),
        ("mu\n1\n\n3\n", DrawsError, ("line 3", "an empty line")),
        ("mu;tau\n0,1;0,2\n", DrawsError, ("line 2", "1 cells", "Decimals need a point")),
        ("mu,mu,tau\n1,2,3\n4,5,6\n", DrawsError, ("['mu'] more than once",)),
        (",mu\n0,1\n1,2\n", DrawsError, ("a name for every column", "column 1 of 2", "index")),
        ("1,2\n3,4\n", DrawsError, ("names of the columns", "numbers: 1, 2", "without #")),
        ("# mu,tau\n1,2\n3,4\n", DrawsError, ("names of the columns", "without #")),
        ("mu,tau\n", DrawsError, ("a header only",)),
        ("# nothing\n", DrawsError, ("no line",)),
        ('mu,tau\n1,"2\n3,4\n', DrawsError, ("line",)),
        ("mu\n1\n", DrawsError, ("one draw",)),
    ],
)
def test_a_csv_file_that_is_no_whole_table_of_numbers_is_refused(
    text: str, kind: type[SteelyardError], words: tuple[str, ...], tmp_path: Path
) -> None:
    path = tmp_path / "quay.csv"
    path.write_text(text, encoding="utf-8")
    with refused(kind, str(path), *words):
        sy.read(path)


def test_a_chain_column_with_holes_or_nothing_beside_it_is_refused(tmp_path: Path) -> None:
    path = tmp_path / "quay.csv"
    path.write_text("chain,mu\n0,1\n,2\n")
    with refused(DrawsError, "line 3", "'chain'", "an empty cell"):
        sy.read(path, chain="chain")
    path.write_text("chain\n0\n0\n")
    with refused(DrawsError, str(path), "besides the chain"):
        sy.read(path, chain="chain")


def test_a_csv_file_in_another_encoding_is_refused(tmp_path: Path) -> None:
    path = tmp_path / "quay.csv"
    path.write_bytes("Mühlenkai,mu\n1,2\n".encode("latin-1"))
    with refused(DrawsError, str(path), "UTF-8"):
        sy.read(path)


@pytest.mark.parametrize("kept", [0.5, 0.98])
def test_a_parquet_file_that_was_cut_short_is_refused(kept: float, tmp_path: Path) -> None:
    path = tmp_path / "quay.parquet"
    pl.DataFrame(table()).write_parquet(path)
    content = path.read_bytes()
    path.write_bytes(content[: int(kept * len(content))])
    with refused(ArgumentError, str(path), "cut short or damaged"):
        sy.read(path)


def test_text_in_a_parquet_file_and_brackets_that_gather_are_refused(tmp_path: Path) -> None:
    path = tmp_path / "quay.parquet"
    pl.DataFrame({"mu": [1.0, 2.0], "site": ["east", "west"]}).write_parquet(path)
    with refused(ArgumentTypeError, str(path), "'site'"):
        sy.read(path)
    write_csv(tmp_path / "quay.csv", table())
    with refused(UnknownNameError, "'rate'"):
        sy.read(tmp_path / "quay.csv", chain="chain")["rate"]
