"""NetCDF and Zarr: the same answers as plain arrays, or an error that names the groups."""

from __future__ import annotations

import gc
import warnings
from collections.abc import Callable
from pathlib import Path
from typing import Any

import h5py
import numpy as np
import pytest
import xarray as xr

import steelyard as sy
from steelyard.base import groups
from steelyard.errors import (
    AmbiguousNameError,
    ArgumentError,
    ArgumentTypeError,
    DrawsError,
    LikelihoodError,
    MissingExtraError,
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

DRAWS = xr.Dataset(
    {"mu": (("chain", "draw"), MU), "rate": (("chain", "draw", "quay"), RATE)},
    coords={"quay": ["north", "south", "west"], "chain": [0, 1, 2, 3]},
)
READINGS = xr.Dataset(
    {"gauge": (("chain", "draw", "reading"), LOGLIK)}, coords={"reading": list("uvwxyz")}
)
TREE = xr.DataTree.from_dict({"/fit/after": DRAWS, "/log_likelihood": READINGS})


def _hdf5(data: Any, path: Path) -> Path:
    data.to_netcdf(path.with_suffix(".nc"), engine="h5netcdf")
    return path.with_suffix(".nc")


def _classic(data: Any, path: Path) -> Path:
    data.to_netcdf(path.with_suffix(".nc"), engine="scipy")
    return path.with_suffix(".nc")


def _zarr(version: int) -> Callable[[Any, Path], Path]:
    def write(data: Any, path: Path) -> Path:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")  # zarr's, on texts and consolidated metadata
            data.to_zarr(path.with_suffix(".zarr"), zarr_format=version)
        return path.with_suffix(".zarr")

    return write


_WRITERS = {"hdf5": _hdf5, "classic": _classic, "zarr 2": _zarr(2), "zarr 3": _zarr(3)}
every_form = pytest.mark.parametrize("write", _WRITERS.values(), ids=_WRITERS.keys())
_GROUPED = {k: v for k, v in _WRITERS.items() if k != "classic"}
every_grouped_form = pytest.mark.parametrize("write", _GROUPED.values(), ids=_GROUPED.keys())


def plain_fit() -> sy.Fit:
    return sy.Fit(plain_draws(), prior=PRIOR, loglik={"gauge": LOGLIK})


@every_form
def test_a_file_of_one_group_answers_as_plain_arrays_do(write: Any, tmp_path: Path) -> None:
    draws = sy.read(write(DRAWS, tmp_path / "quay"))
    loglik = sy.read(write(READINGS, tmp_path / "readings"), kind="loglik")
    fit = sy.Fit(draws, prior=PRIOR, loglik=loglik)
    assert_same_answers(fit, plain_fit(), OTHER_DATA)
    assert_same_answers(fit, plain_fit(), OTHER_DATA, ("rate[2]",))
    np.testing.assert_array_equal(draws.labels["quay"], ["north", "south", "west"])


@every_form
def test_the_order_of_dimensions_in_the_file_does_not_matter(write: Any, tmp_path: Path) -> None:
    draws = sy.read(write(DRAWS.transpose("quay", "draw", "chain"), tmp_path / "quay"))
    turned = READINGS.transpose("reading", "draw", "chain")
    loglik = sy.read(write(turned, tmp_path / "readings"), kind="loglik")
    assert_same_answers(sy.Fit(draws, prior=PRIOR, loglik=loglik), plain_fit(), OTHER_DATA)


@every_grouped_form
def test_groups_are_read_by_name_and_one_called_a_likelihood_is_one(
    write: Any, tmp_path: Path
) -> None:
    path = write(TREE, tmp_path / "quay")
    draws, loglik = sy.read(path, "fit/after"), sy.read(path, group="/log_likelihood")
    assert isinstance(draws, sy.Draws)
    assert list(loglik) == ["gauge"]
    fit = sy.Fit(draws, prior=PRIOR, loglik=loglik)
    assert_same_answers(fit, plain_fit(), OTHER_DATA)
    by_label = fit.reweigh(sy.drop(reading="w")).mean("mu").value
    assert by_label == plain_fit().reweigh(sy.drop(position=[2])).mean("mu").value


@every_grouped_form
def test_kind_overrules_the_name_of_the_group(write: Any, tmp_path: Path) -> None:
    path = write(TREE, tmp_path / "quay")
    assert isinstance(sy.read(path, "log_likelihood", kind="draws"), sy.Draws)
    assert isinstance(sy.read(path, "fit/after", kind="loglik")["mu"], xr.DataArray)


@pytest.mark.parametrize("name", ["LogLik", "log-likelihood", "gauges/log_lik", "Likelihood A"])
def test_any_spelling_of_likelihood_in_the_name_of_the_group_counts(
    name: str, tmp_path: Path
) -> None:
    path = _hdf5(xr.DataTree.from_dict({f"/{name}": READINGS}), tmp_path / "quay")
    assert isinstance(sy.read(path, name), dict)
    assert isinstance(sy.read(path), dict)


@every_grouped_form
def test_several_groups_without_a_word_which_are_refused_with_their_names(
    write: Any, tmp_path: Path
) -> None:
    path = write(TREE, tmp_path / "quay")
    with refused(AmbiguousNameError, "group", str(path), "fit/after", "log_likelihood", "2 groups"):
        sy.read(path)


@every_grouped_form
def test_a_group_that_is_not_there_is_refused_with_the_nearest(write: Any, tmp_path: Path) -> None:
    path = write(TREE, tmp_path / "quay")
    with refused(UnknownNameError, "group", str(path), "'fit/aftr'", "'fit/after'"):
        sy.read(path, "fit/aftr")


@every_grouped_form
def test_an_empty_group_is_refused(write: Any, tmp_path: Path) -> None:
    path = write(TREE, tmp_path / "quay")
    with refused(DrawsError, f"{path}, group 'fit'", "'draw'", "no dimensions"):
        sy.read(path, "fit")
    empty = write(xr.Dataset(), tmp_path / "empty")
    with refused(DrawsError, str(empty), "a group with variables"):
        sy.read(empty)


@every_form
def test_a_file_without_the_dimensions_is_refused_with_those_it_has(
    write: Any, tmp_path: Path
) -> None:
    path = write(DRAWS.drop_vars("chain").rename(draw="time", chain="walker"), tmp_path / "quay")
    for kind in ("draws", "loglik"):
        with refused(DrawsError, str(path), "'draw'", "'time'", "'walker'"):
            sy.read(path, kind=kind)  # type: ignore[call-overload]


@every_form
def test_a_variable_that_does_not_go_with_the_draws_is_refused(write: Any, tmp_path: Path) -> None:
    path = write(DRAWS.assign(depth=("quay", [3.0, 4.0, 5.0])), tmp_path / "quay")
    for kind in ("draws", "loglik"):
        with refused(DrawsError, str(path), "'depth'", "('quay',)"):
            sy.read(path, kind=kind)  # type: ignore[call-overload]


@every_form
def test_the_chain_of_stacked_draws_is_a_coordinate(write: Any, tmp_path: Path) -> None:
    flat = xr.Dataset({"mu": ("draw", MU.reshape(-1))}, coords={"chain": ("draw", CHAIN)})
    path = write(flat, tmp_path / "quay")
    plain = sy.Fit({"mu": MU}, prior=PRIOR)
    for chain in (None, "chain", CHAIN):
        fit = sy.Fit(sy.read(path, chain=chain), prior=PRIOR)
        assert_same_answers(fit, plain, names=("mu",))


@every_form
def test_draws_with_missing_values_and_texts_are_refused(write: Any, tmp_path: Path) -> None:
    path = write(DRAWS.assign(mu=DRAWS["mu"].where(DRAWS["mu"] < 0.15)), tmp_path / "holes")
    with refused(DrawsError, f"{path}['mu']", "NaN"):
        sy.read(path)
    sites = DRAWS.assign(site=(("chain", "draw"), np.full(MU.shape, "east")))
    path = write(sites, tmp_path / "texts")
    with refused(ArgumentTypeError, f"{path}['site']", "real numbers"):
        sy.read(path)


@every_form
def test_a_missing_value_in_a_stored_log_likelihood_is_refused_by_place(
    write: Any, tmp_path: Path
) -> None:
    broken = READINGS.where(READINGS["reading"] != "y")
    loglik = sy.read(write(broken, tmp_path / "readings"), kind="loglik")
    with refused(LikelihoodError, "gauge", "nan", "chain 0, draw 0, observation 4"):
        sy.Fit(plain_draws(), prior=PRIOR, loglik=loglik).reweigh(sy.drop([2]))


# scipy leaves the map of a broken classic file open, and warns of that when it is collected.
@pytest.mark.filterwarnings("ignore::pytest.PytestUnraisableExceptionWarning")
@pytest.mark.parametrize("write", [_hdf5, _classic], ids=["hdf5", "classic"])
@pytest.mark.parametrize("kept", [0.01, 0.5, 0.99])
def test_a_netcdf_file_that_was_cut_short_is_refused(
    write: Any, kept: float, tmp_path: Path
) -> None:
    path = write(DRAWS, tmp_path / "quay")
    content = path.read_bytes()
    path.write_bytes(content[: int(kept * len(content))])
    with refused(ArgumentError, str(path), "cut short or damaged"):
        sy.read(path)
    gc.collect()


@pytest.mark.parametrize("version", [2, 3])
def test_a_zarr_store_that_was_copied_in_part_is_refused(version: int, tmp_path: Path) -> None:
    path = _zarr(version)(DRAWS.chunk({"draw": 50}), tmp_path / "quay")
    chunk = path / ("mu/c/0/2" if version == 3 else "mu/0.2")
    chunk.unlink()
    for kind in ("draws", "loglik"):
        with refused(DrawsError, str(path), "'mu'", "5 chunks stored", "got 4", "Copy"):
            sy.read(path, kind=kind)  # type: ignore[call-overload]


def test_a_zarr_store_without_chunks_of_zeros_is_whole(tmp_path: Path) -> None:
    zeros = DRAWS.assign(flag=(("chain", "draw"), np.zeros(MU.shape, int)))
    path = _zarr(3)(zeros.chunk({"draw": 50}), tmp_path / "quay")
    assert not sy.read(path)["flag"].any()


def test_a_damaged_chunk_is_refused(tmp_path: Path) -> None:
    path = _zarr(3)(DRAWS, tmp_path / "quay")
    (path / "mu/c/0/0").write_bytes(b"no chunk")
    with refused(ArgumentError, str(path), "damaged"):
        sy.read(path)
    loglik = sy.read(path, kind="loglik")
    with refused(LikelihoodError, "'mu'", "failure to read"):
        sy.Fit(plain_draws(), loglik=loglik).reweigh(sy.drop("mu"))


def test_an_hdf5_file_whose_axes_have_no_names_is_refused(tmp_path: Path) -> None:
    path = tmp_path / "quay.nc"
    with h5py.File(path, "w") as file:
        file["mu"] = MU
    with refused(DrawsError, str(path), "'draw'"):
        sy.read(path)


def test_a_folder_that_only_looks_like_a_zarr_store_is_refused(tmp_path: Path) -> None:
    path = tmp_path / "quay.zarr"
    path.mkdir()
    with refused(ArgumentError, str(path), "Zarr store", "another folder"):
        sy.read(path)
    (path / "zarr.json").write_text("{")
    with refused(ArgumentError, str(path), "damaged"):
        sy.read(path)


@every_form
def test_a_library_that_is_missing_is_named(
    write: Any, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = write(DRAWS, tmp_path / "quay")
    monkeypatch.setattr(groups, "find_spec", lambda name: None)
    with refused(MissingExtraError, str(path), "to be installed", "pip install"):
        sy.read(path)


def test_a_file_may_be_moved_after_its_draws_were_read(tmp_path: Path) -> None:
    path = _hdf5(DRAWS, tmp_path / "quay")
    draws = sy.read(path)
    path.unlink()
    np.testing.assert_array_equal(draws["mu"], MU.reshape(-1))
