"""Every kind of draws gives the same stack of named arrays, referenced and never changed."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
import polars as pl
import pyarrow as pa
import pytest
import xarray as xr

import steelyard as sy

CHAINS, DRAWS = 4, 60
RNG = np.random.default_rng(20_261_232)
MU = RNG.normal(size=(CHAINS, DRAWS))
TAU = RNG.gamma(2, size=(CHAINS, DRAWS))
CHAIN = np.repeat(np.arange(CHAINS), DRAWS)
COLUMNS = {"mu": MU.ravel(), "tau": TAU.ravel()}


class Exporter:
    """An array that speaks DLPack and nothing else."""

    def __init__(self, array: np.ndarray) -> None:
        self._array = array

    def __dlpack__(self, **options: Any) -> Any:
        return self._array.__dlpack__(**options)

    def __dlpack_device__(self) -> Any:
        return self._array.__dlpack_device__()


def _dataset(*dims: str) -> xr.Dataset:
    data = xr.Dataset({"mu": (("chain", "draw"), MU), "tau": (("chain", "draw"), TAU)})
    return data.transpose(*dims) if dims else data


SOURCES: dict[str, tuple[Any, dict[str, Any]]] = {
    "mapping with chains": ({"mu": MU, "tau": TAU}, {}),
    "mapping of lists": ({"mu": MU.tolist(), "tau": TAU.tolist()}, {}),
    "mapping stacked": (COLUMNS, {"chain": CHAIN}),
    "mapping with its chain": ({**COLUMNS, "chain": CHAIN}, {"chain": "chain"}),
    "mapping of DLPack exporters": ({"mu": Exporter(MU), "tau": Exporter(TAU)}, {}),
    "mapping of DataArrays": (dict(_dataset("draw", "chain").data_vars), {}),
    "array of chains": (np.stack([MU, TAU], axis=2), {"names": ["mu", "tau"]}),
    "array stacked": (
        np.stack([MU.ravel(), TAU.ravel()], 1),
        {"names": ("mu", "tau"), "chain": CHAIN},
    ),
    "dataset": (_dataset(), {}),
    "dataset turned round": (_dataset("draw", "chain"), {}),
    "dataset in dask chunks": (_dataset().chunk({"draw": 7}), {}),
    "pandas": (pd.DataFrame({**COLUMNS, "chain": CHAIN}), {"chain": "chain"}),
    "pandas with chains beside it": (pd.DataFrame(COLUMNS), {"chain": CHAIN}),
    "polars": (pl.DataFrame({**COLUMNS, "chain": CHAIN}), {"chain": "chain"}),
    "pyarrow": (pa.table({**COLUMNS, "chain": CHAIN}), {"chain": "chain"}),
    "chains named by texts": (
        pd.DataFrame({**COLUMNS, "rig": np.array(list("abcd"))[CHAIN]}),
        {"chain": "rig"},
    ),
    "other draws": (sy.Fit({"mu": MU, "tau": TAU}).draws, {}),
}


@pytest.mark.parametrize("kind", SOURCES)
def test_every_source_of_draws_gives_the_same_stack(kind: str) -> None:
    source, options = SOURCES[kind]
    read = sy.Fit(source, **options).draws
    assert list(read) == ["mu", "tau"]
    assert (read.size, read.chains) == (CHAINS * DRAWS, CHAINS)
    assert read.starts.tolist() == [0, 60, 120, 180, 240]
    assert np.array_equal(read.chain, CHAIN)
    for name, want in COLUMNS.items():
        assert read[name].dtype == np.float64
        assert np.array_equal(read[name], want)


@pytest.mark.parametrize("kind", SOURCES)
def test_every_source_of_draws_gives_the_same_answer_to_the_bit(kind: str) -> None:
    source, options = SOURCES[kind]
    change = sy.log_ratio(lambda draws: 0.4 * draws["mu"])
    answer = sy.Fit(source, **options).reweigh(change)
    plain = sy.Fit({"mu": MU, "tau": TAU}).reweigh(change)
    assert answer.log_weights.tobytes() == plain.log_weights.tobytes()
    assert answer.table().to_csv() == plain.table().to_csv()


CHAINED = {
    "mapping with chains",
    "mapping of lists",
    "mapping of DLPack exporters",
    "other draws",
    "mapping of DataArrays",
    "array of chains",
    "dataset",
    "dataset turned round",
    "dataset in dask chunks",
}


@pytest.mark.parametrize("kind", SOURCES)
def test_results_have_a_chain_axis_where_the_input_had_one(kind: str) -> None:
    source, options = SOURCES[kind]
    base = sy.Fit(source, **options).base
    shape = (CHAINS, DRAWS) if kind in CHAINED else (CHAINS * DRAWS,)
    assert base.weights.shape == base.log_weights.shape == shape


def test_one_chain_is_one_axis() -> None:
    fit = sy.Fit(COLUMNS)
    assert (fit.draws.chains, fit.base.weights.shape) == (1, (240,))


def test_an_array_of_one_axis_takes_one_name() -> None:
    assert np.array_equal(sy.Fit(MU.ravel(), names=["mu"]).draws["mu"], MU.ravel())
    assert np.array_equal(sy.Fit(MU.ravel(), names="mu").draws["mu"], MU.ravel())


def test_chains_of_unequal_length_give_results_of_one_axis() -> None:
    chain = np.repeat([7, 3, 9], [100, 40, 100])
    fit = sy.Fit(COLUMNS, chain=chain)
    assert fit.draws.starts.tolist() == [0, 100, 140, 240]
    assert fit.draws.chain_names == (7, 3, 9)
    assert fit.base.weights.shape == (240,)


def test_trailing_axes_belong_to_the_parameter() -> None:
    rng = np.random.default_rng(1)
    fit = sy.Fit({"mu": MU, "loss": rng.normal(size=(CHAINS, DRAWS, 2, 3))})
    assert fit.draws["loss"].shape == (240, 2, 3)
    stacked = sy.Fit({"mu": MU.ravel(), "loss": rng.normal(size=(240, 2, 3))})
    assert stacked.draws["loss"].shape == (240, 2, 3)
    assert stacked.draws.chains == 1


def test_exact_names_win_over_brackets_and_columns_are_never_gathered() -> None:
    frame = pd.DataFrame({"rate[0]": MU.ravel(), "rate[1]": TAU.ravel()})
    fit = sy.Fit(frame, prior={"rate[0]": sy.Normal(0, 1)})
    assert list(fit.draws) == ["rate[0]", "rate[1]"]
    assert np.array_equal(fit.draws["rate[1]"], TAU.ravel())
    assert fit.base.mean("rate[0]").value == pytest.approx(MU.mean())
    with pytest.raises(sy.errors.UnknownNameError):
        fit.base.mean("rate")


def test_labels_and_dimension_names_of_a_dataset_are_kept() -> None:
    rate = np.random.default_rng(2).normal(size=(CHAINS, DRAWS, 3))
    data = xr.Dataset(
        {"rate": (("chain", "draw", "quay"), rate)}, coords={"quay": ["east", "north", "west"]}
    )
    fit = sy.Fit(data.transpose("quay", "draw", "chain"))
    assert fit.draws.dims == {"rate": ("quay",)}
    assert fit.draws.labels["quay"].tolist() == ["east", "north", "west"]
    assert np.array_equal(fit.draws["rate[north]"], rate[..., 1].reshape(-1))
    estimate = fit.base.mean("rate")
    assert estimate.dims == ("quay",)
    assert estimate.labels["quay"].tolist() == ["east", "north", "west"]
    assert fit.base.table()["quay"] == ("east", "north", "west")


def test_draws_that_fit_are_referenced_not_copied() -> None:
    for source in ({"mu": MU, "tau": TAU}, _dataset()):
        read = sy.Fit(source).draws
        assert np.shares_memory(read["mu"], MU)
    assert np.shares_memory(sy.Fit({"mu": Exporter(MU)}).draws["mu"], MU)
    assert np.shares_memory(sy.Fit({"mu": MU.ravel()}, chain=CHAIN).draws["mu"], MU)


def test_draws_that_share_memory_with_the_user_cannot_be_written_through_the_fit() -> None:
    fit = sy.Fit({"mu": MU})
    with pytest.raises(ValueError, match="read-only"):
        fit.draws["mu"][0] = 1
    with pytest.raises(ValueError, match="read-only"):
        fit.draws["mu"] += 1  # type: ignore[index]
    assert MU.flags.writeable


def test_derived_names_are_no_parameters() -> None:
    fit = sy.Fit({"mu": MU, "tau": TAU}, derived=["tau"])
    assert list(fit.base.mean()) == ["mu"]
    assert fit.base.mean("tau").value == pytest.approx(TAU.mean())


def test_derived_quantities_are_computed_from_the_draws() -> None:
    fit = sy.Fit({"mu": MU, "tau": TAU}, derived={"ratio": lambda d: d["mu"] / d["tau"]})
    assert list(fit.base.mean()) == ["mu", "tau"]
    assert np.array_equal(fit.draws["ratio"], (MU / TAU).ravel())
    assert not fit.draws["ratio"].flags.writeable


def test_draws_are_a_read_only_mapping() -> None:
    read = sy.Fit({"mu": MU, "tau": TAU}).draws
    assert dict(read).keys() == {"mu", "tau"}
    assert "mu" in read
    assert "nu" not in read
    assert read.get("nu") is None
    assert read.get("nu", 3) == 3
    assert len(read) == 2
    with pytest.raises(TypeError):
        read["mu"] = MU  # type: ignore[index]
    with pytest.raises(TypeError):
        read.values_by_name["mu"] = MU  # type: ignore[index]
    with pytest.raises(AttributeError):
        read.starts = np.array([0])  # type: ignore[misc]
    with pytest.raises(ValueError, match="read-only"):
        read.starts[0] = 1


def test_nothing_is_thinned_dropped_or_reordered() -> None:
    x = np.arange(240.0)[::-1]
    assert np.array_equal(sy.Fit({"mu": x}).draws["mu"], x)
