"""``.npz`` and ``.npy``: the same answers as plain arrays; pickles and broken files are refused."""

from __future__ import annotations

import pickle
import zipfile
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import steelyard as sy
from steelyard.errors import (
    AmbiguousNameError,
    ArgumentError,
    ArgumentTypeError,
    DrawsError,
    LikelihoodError,
    ShapeError,
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


def plain_fit() -> sy.Fit:
    return sy.Fit(plain_draws(), prior=PRIOR, loglik=LOGLIK)


@pytest.mark.parametrize("save", [np.savez, np.savez_compressed])
def test_an_npz_file_answers_as_plain_arrays_do(save: Any, tmp_path: Path) -> None:
    save(tmp_path / "quay.npz", **plain_draws())
    save(tmp_path / "readings.npz", readings=LOGLIK)
    loglik = sy.read(tmp_path / "readings.npz", kind="loglik")
    fit = sy.Fit(sy.read(tmp_path / "quay.npz"), prior=PRIOR, loglik=loglik)
    assert_same_answers(fit, plain_fit(), OTHER_DATA)


def test_a_npy_file_is_a_log_likelihood_that_stays_on_disk(tmp_path: Path) -> None:
    np.save(tmp_path / "readings.npy", LOGLIK)
    loglik = sy.read(tmp_path / "readings.npy")
    assert isinstance(loglik, np.memmap)
    assert not loglik.flags.writeable
    assert_same_answers(sy.Fit(plain_draws(), prior=PRIOR, loglik=loglik), plain_fit(), OTHER_DATA)


def test_float32_and_column_major_log_likelihoods_are_read(tmp_path: Path) -> None:
    np.save(tmp_path / "columns.npy", np.asfortranarray(LOGLIK))
    fit = sy.Fit(plain_draws(), prior=PRIOR, loglik=sy.read(tmp_path / "columns.npy"))
    assert_same_answers(fit, plain_fit(), OTHER_DATA)
    short = LOGLIK.astype(np.float32)
    np.save(tmp_path / "short.npy", short)
    fit = sy.Fit(plain_draws(), prior=PRIOR, loglik=sy.read(tmp_path / "short.npy"))
    expected = sy.Fit(plain_draws(), prior=PRIOR, loglik=short.astype(np.float64))
    assert_same_answers(fit, expected, OTHER_DATA)


def test_stacked_draws_in_an_npz_file_name_their_chains_by_an_entry(tmp_path: Path) -> None:
    path = tmp_path / "quay.npz"
    np.savez(path, mu=MU.reshape(-1), rate=RATE.reshape(-1, 3), chain=CHAIN)
    fit = sy.Fit(sy.read(path, chain="chain"), prior=PRIOR)
    assert_same_answers(fit, sy.Fit(plain_draws(), prior=PRIOR))
    with refused(AmbiguousNameError, str(path), "'chain'"):
        sy.read(path)
    with refused(DrawsError, str(path), "'run'"):
        sy.read(path, chain="run")


def test_minus_infinity_is_a_log_likelihood_but_no_draw(tmp_path: Path) -> None:
    path = tmp_path / "readings.npz"
    np.savez(path, readings=np.where(LOGLIK < -1e-3, -np.inf, LOGLIK))
    with refused(DrawsError, f"{path}['readings']", "infinite"):
        sy.read(path)
    assert sy.read(path, kind="loglik")["readings"].shape == LOGLIK.shape


@pytest.mark.parametrize("value", [np.nan, np.inf])
def test_a_log_likelihood_of_a_reading_without_a_value_is_refused_by_place(
    value: float, tmp_path: Path
) -> None:
    broken = LOGLIK.copy()
    broken[:, :, 4] = value  # what a missing or infinite reading makes of every draw
    np.save(tmp_path / "readings.npy", broken)
    fit = sy.Fit(plain_draws(), prior=PRIOR, loglik=sy.read(tmp_path / "readings.npy"))
    with refused(LikelihoodError, "likelihood", str(value), "chain 0, draw 0, observation 4"):
        fit.reweigh(sy.drop([2]))


def test_pickled_objects_are_refused_and_never_loaded(tmp_path: Path) -> None:
    marker = tmp_path / "loaded"
    harmful = np.empty(3, dtype=object)
    harmful[:] = [_Touch(marker)] * 3
    np.save(tmp_path / "quay.npy", harmful, allow_pickle=True)
    np.savez(tmp_path / "quay.npz", mu=MU, readings=harmful)
    for name in ("quay.npy", "quay.npz"):
        with refused(ArgumentError, str(tmp_path / name), "pickled objects", "never loaded"):
            sy.read(tmp_path / name)
    for name in ("bare.npy", "bare.npz", "bare.csv"):
        (tmp_path / name).write_bytes(pickle.dumps(_Touch(marker)))
        with refused(ArgumentError, name, "a pickle"):
            sy.read(tmp_path / name)
    assert not marker.exists()
    np.load(tmp_path / "quay.npy", allow_pickle=True)
    assert marker.exists(), "the pickle of this test does nothing"


class _Touch:
    """An object that makes a file where it is unpickled."""

    def __init__(self, path: Path) -> None:
        self._path = path

    def __reduce__(self) -> tuple[Any, ...]:
        return Path.touch, (self._path,)


@pytest.mark.parametrize("name", ["quay.npz", "packed.npz", "quay.npy"])
@pytest.mark.parametrize("kept", [0.02, 0.5, 0.99])
def test_a_file_that_was_cut_short_is_refused(name: str, kept: float, tmp_path: Path) -> None:
    np.savez(tmp_path / "quay.npz", **plain_draws())
    np.savez_compressed(tmp_path / "packed.npz", **plain_draws())
    np.save(tmp_path / "quay.npy", LOGLIK)
    content = (tmp_path / name).read_bytes()
    (tmp_path / name).write_bytes(content[: int(kept * len(content))])
    with refused(ArgumentError, str(tmp_path / name), "cut short or damaged", "again"):
        sy.read(tmp_path / name)


def test_a_file_with_changed_bytes_is_refused(tmp_path: Path) -> None:
    path = tmp_path / "quay.npz"
    np.savez(path, **plain_draws())
    content = bytearray(path.read_bytes())
    content[1000] ^= 255
    path.write_bytes(content)
    with refused(ArgumentError, str(path), "damaged"):
        sy.read(path)


@pytest.mark.parametrize("name", ["quay.npz", "quay.npy", "quay.parquet", "quay.nc", "quay.csv"])
def test_a_missing_and_an_empty_file_are_refused(name: str, tmp_path: Path) -> None:
    with refused(ArgumentError, str(tmp_path / name), "none there", "relative paths"):
        sy.read(tmp_path / name)
    (tmp_path / name).touch()
    with refused(ArgumentError, str(tmp_path / name), "an empty file"):
        sy.read(tmp_path / name)


@pytest.mark.parametrize(
    ("source", "looks"), [("quay.npz", "a zip archive"), ("quay.npy", "a .npy array")]
)
@pytest.mark.parametrize("ending", ["csv", "parquet", "nc", "npy", "npz"])
def test_a_file_of_another_kind_than_its_name_says_is_refused(
    source: str, looks: str, ending: str, tmp_path: Path
) -> None:
    if source.endswith(ending):
        return
    np.savez(tmp_path / "quay.npz", **plain_draws())
    np.save(tmp_path / "quay.npy", LOGLIK)
    path = (tmp_path / source).rename(tmp_path / f"other.{ending}")
    with refused(ArgumentError, str(path), f"a .{ending} file", looks, "ending"):
        sy.read(path)


def test_a_file_whose_name_says_nothing_is_refused_with_the_endings_that_do(
    tmp_path: Path,
) -> None:
    for name in ("quay.pkl", "quay", "quay.zarr"):
        (tmp_path / name).write_text("mu\n1\n2\n")
        with refused(ArgumentError, str(tmp_path / name), ".npz, .npy, .csv, .parquet, .nc"):
            sy.read(tmp_path / name)
    with refused(ArgumentError, str(tmp_path), "Zarr store", "another folder"):
        sy.read(tmp_path)


def test_arguments_that_do_not_go_with_the_file_are_refused(tmp_path: Path) -> None:
    np.savez(tmp_path / "quay.npz", **plain_draws())
    np.save(tmp_path / "quay.npy", LOGLIK)
    with refused(ArgumentError, "group", "'posterior'", "quay.npz"):
        sy.read(tmp_path / "quay.npz", "posterior")
    with refused(ArgumentError, "kind", "'weights'"):
        sy.read(tmp_path / "quay.npz", kind="weights")  # type: ignore[call-overload]
    with refused(ArgumentError, "kind", ".npy", "names="):
        sy.read(tmp_path / "quay.npy", kind="draws")
    with refused(ArgumentTypeError, "path", "dict"):
        sy.read(plain_draws())  # type: ignore[arg-type]


def test_archives_of_something_else_are_refused(tmp_path: Path) -> None:
    path = tmp_path / "quay.npz"
    with zipfile.ZipFile(path, "w") as archive:
        archive.writestr("notes.txt", "five quays")
    with refused(ArgumentTypeError, f"{path}['notes.txt']", "real numbers"):
        sy.read(path)
    np.savez(path)
    with refused(DrawsError, str(path), "at least one parameter"):
        sy.read(path)


def test_a_log_likelihood_of_other_draws_is_refused_with_both_shapes(tmp_path: Path) -> None:
    np.save(tmp_path / "readings.npy", LOGLIK[:, :200])
    with refused(ShapeError, "loglik", "(4, 250, …)", "(4, 200, 6)"):
        sy.Fit(plain_draws(), loglik=sy.read(tmp_path / "readings.npy"))
    np.save(tmp_path / "readings.npy", LOGLIK.astype(complex))
    with refused(ArgumentTypeError, "readings.npy", "complex128"):
        sy.read(tmp_path / "readings.npy")
