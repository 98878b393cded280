"""Plain arrays, DLPack, memory maps and lists: the same answers, or an error."""

from __future__ import annotations

import subprocess
import sys
from importlib.util import find_spec
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
    ShapeError,
    SteelyardError,
)

from .scenario import (
    CHAIN,
    LOGLIK,
    MU,
    OTHER_DATA,
    PRIOR,
    RATE,
    Array,
    assert_same_answers,
    plain_columns,
    plain_draws,
    refused,
)


class Tensor:
    """An array of another library, with nothing but DLPack: numpy's own export, renamed."""

    def __init__(self, array: Array, device: int = 1) -> None:
        self._array = array
        self._device = device
        self.shape = array.shape
        self.dtype = "tensor.float64"  # like many, no dtype that numpy knows

    def __dlpack__(self, **options: Any) -> object:
        if self._device != 1:
            raise BufferError("the array is not in the memory of the CPU")
        return self._array.__dlpack__(**options)

    def __dlpack_device__(self) -> tuple[int, int]:
        return self._device, 0


class _Gradient(Tensor):
    """An array that takes part in automatic differentiation and refuses to be exported."""

    def __dlpack__(self, **options: Any) -> object:
        raise BufferError("requires gradient: detach it")


def plain_fit() -> sy.Fit:
    return sy.Fit(plain_draws(), prior=PRIOR, loglik=LOGLIK)


def test_arrays_of_another_library_come_through_dlpack_without_a_copy() -> None:
    draws = {k: Tensor(v) for k, v in plain_draws().items()}
    fit = sy.Fit(draws, prior=PRIOR, loglik=LOGLIK)
    assert_same_answers(fit, plain_fit(), OTHER_DATA)
    assert np.shares_memory(fit.draws["rate"], RATE)


def test_a_log_likelihood_comes_through_dlpack() -> None:
    for loglik in (Tensor(LOGLIK), {"likelihood": Tensor(LOGLIK)}):
        assert_same_answers(
            sy.Fit(plain_draws(), prior=PRIOR, loglik=loglik), plain_fit(), OTHER_DATA
        )


def test_a_table_with_names_comes_through_dlpack() -> None:
    stacked = np.stack(list(plain_columns().values()), axis=-1)
    names = list(plain_columns())
    expected = sy.Fit(plain_columns(), prior=PRIOR)
    assert_same_answers(sy.Fit(Tensor(stacked), prior=PRIOR, names=names), expected)
    flat = Tensor(stacked.reshape(-1, len(names)))
    assert_same_answers(sy.Fit(flat, prior=PRIOR, names=names, chain=CHAIN), expected)


@pytest.mark.parametrize("argument", ["draws", "loglik"])
def test_an_array_on_another_device_is_refused_with_the_way_to_the_cpu(argument: str) -> None:
    inputs: dict[str, Any] = {"draws": plain_draws(), "loglik": LOGLIK}
    inputs[argument] = {"mu": Tensor(MU, device=2)}
    with refused(ArgumentTypeError, f"{argument}['mu']", "memory of the CPU", "Copy it"):
        sy.Fit(**inputs)


def test_an_array_that_refuses_to_be_exported_is_refused_with_its_reason() -> None:
    with refused(ArgumentTypeError, "draws['mu']", "requires gradient: detach it"):
        sy.Fit({"mu": _Gradient(MU)})


_WITH_JAX = """
import jax, numpy as np, steelyard as sy
jax.config.update("jax_enable_x64", True)
mu = np.random.default_rng(3).normal(size=(4, 250))
loglik = -0.5 * (mu[..., None] - np.arange(3.0)) ** 2
change = sy.swap_prior(mu=sy.Normal(0.5, 1)) & sy.drop([1])
fits = [
    sy.Fit({"mu": make(mu)}, prior={"mu": sy.Normal(0, 2)}, loglik=make(loglik))
    for make in (np.asarray, jax.numpy.asarray)
]
plain, ours = (fit.reweigh(change).mean("mu") for fit in fits)
assert plain.value == ours.value, (plain.value, ours.value)
assert plain.error == ours.error, (plain.error, ours.error)
try:
    sy.Fit({"mu": jax.numpy.asarray(mu, jax.numpy.bfloat16)})
except sy.errors.ArgumentTypeError as error:
    print(error)
"""


@pytest.mark.skipif(find_spec("jax") is None, reason="jax is not installed")
def test_jax_arrays_on_the_cpu_are_read_and_their_short_floats_refused() -> None:
    # In a process of its own: jax starts threads and from then on warns of every fork.
    done = subprocess.run(
        [sys.executable, "-c", _WITH_JAX], capture_output=True, text=True, timeout=120, check=False
    )
    assert done.returncode == 0, done.stderr
    assert "draws['mu']" in done.stdout


def test_stacked_draws_lists_float32_and_memory_maps_answer_as_plain_arrays_do(
    tmp_path: Path,
) -> None:
    np.save(tmp_path / "rate.npy", RATE)
    mapped = np.load(tmp_path / "rate.npy", mmap_mode="r")
    forms: list[tuple[dict[str, Any], Any]] = [
        ({"mu": MU.reshape(-1), "rate": RATE.reshape(-1, 3)}, CHAIN),
        ({"mu": MU.tolist(), "rate": RATE.tolist()}, None),
        ({"mu": MU, "rate": mapped}, None),
        ({"mu": np.asfortranarray(MU), "rate": RATE[:, :, ::-1][:, :, ::-1]}, None),
        ({"mu": MU.astype(">f8"), "rate": np.ma.masked_array(RATE)}, None),
    ]
    for draws, chain in forms:
        fit = sy.Fit(draws, prior=PRIOR, loglik=LOGLIK, chain=chain)
        assert_same_answers(fit, plain_fit(), OTHER_DATA)
    short = {k: v.astype(np.float32) for k, v in plain_draws().items()}
    wide = {k: v.astype(np.float64) for k, v in short.items()}
    assert_same_answers(sy.Fit(short, prior=PRIOR), sy.Fit(wide, prior=PRIOR))


def test_draws_of_a_fit_are_taken_as_they_are_and_contradictions_refused() -> None:
    draws = plain_fit().draws
    assert sy.Fit(draws).draws is draws
    with refused(ArgumentError, "chain", "Draws"):
        sy.Fit(draws, chain=CHAIN)
    with refused(ArgumentError, "names", "Draws"):
        sy.Fit(draws, names=["mu"])
    with refused(ArgumentError, "names", "dict"):
        sy.Fit(plain_draws(), names=["mu"])


def test_an_entry_of_a_mapping_may_hold_the_chains_and_is_not_guessed_to() -> None:
    draws = {"mu": MU.reshape(-1), "rate": RATE.reshape(-1, 3), "chain": CHAIN}
    assert_same_answers(
        sy.Fit(draws, prior=PRIOR, chain="chain"), sy.Fit(plain_draws(), prior=PRIOR)
    )
    with refused(AmbiguousNameError, "'chain' of draws", 'chain="chain"'):
        sy.Fit(draws)
    with refused(DrawsError, "chain", "'chian'", "'chain'"):
        sy.Fit(draws, chain="chian")


def test_chains_beside_draws_that_have_a_chain_axis_are_refused() -> None:
    with refused(DrawsError, "chain axis", "(1000,)"):
        sy.Fit(np.ones((4, 250, 1)), names=["mu"], chain=CHAIN)


@pytest.mark.parametrize(
    ("draws", "kind", "words"),
    [
        ({"mu": np.ma.masked_less(MU, 0.1)}, SteelyardError, ("'mu'", "masked")),
        ({"mu": MU.astype(complex)}, ArgumentTypeError, ("'mu'", "complex128")),
        ({"mu": [[1.0, 2.0], [3.0]]}, ShapeError, ("'mu'", "ragged", "chain=")),
        ({"mu": np.where(MU > 0.15, np.nan, MU)}, DrawsError, ("'mu'", "NaN", "first at draw")),
        ({"mu": MU, "rate": RATE[:, :200]}, ShapeError, ("'rate'", "(4, 250)")),
        ({"mu": MU.T}, DrawsError, ("250 chains of 4 draws", "swap")),
        ({"mu": 0.1}, DrawsError, ("'mu'", "single number")),
        ({"": MU}, ArgumentTypeError, ("names", "''")),
        ({3: MU}, ArgumentTypeError, ("names", "3")),
        ({}, DrawsError, ("draws", "at least one parameter")),
        (MU, ArgumentError, ("names", "(4, 250)")),
        ("quay.csv", ArgumentTypeError, ("'quay.csv'", "sy.read")),
        (Path("quay.csv"), ArgumentTypeError, ("quay.csv", "sy.read")),
        (None, ArgumentTypeError, ("draws", "object")),
    ],
)
def test_what_cannot_be_read_without_dropping_or_guessing_is_refused(
    draws: Any, kind: type[SteelyardError], words: tuple[str, ...]
) -> None:
    with refused(kind, *words):
        sy.Fit(draws)


def test_chains_with_holes_are_refused() -> None:
    chain = CHAIN.astype(float)
    chain[7] = np.nan
    with refused(DrawsError, "chain", "1 missing", "draw 7"):
        sy.Fit({"mu": MU.reshape(-1)}, chain=chain)
    with refused(DrawsError, "chain", "2 missing", "draw 1"):
        sy.Fit({"mu": [1.0, 2.0, 3.0]}, chain=np.array(["north", None, None], dtype=object))
