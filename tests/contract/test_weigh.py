"""`sy.weigh`: an answer from log ratios alone, with or without draws."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
import xarray as xr

import steelyard as sy

RNG = np.random.default_rng(20_261_239)
X = RNG.normal(size=(4, 120))
RATIO = 0.4 * X


def test_with_draws_it_is_the_answer_of_a_fit_with_that_ratio() -> None:
    one = sy.weigh(RATIO, {"x": X})
    other = sy.Fit({"x": X}).reweigh(sy.log_ratio(RATIO))
    assert one.log_weights.tobytes() == other.log_weights.tobytes()
    assert one.table().to_csv() == other.table().to_csv()
    assert one.log_evidence_ratio.value == other.log_evidence_ratio.value


def test_without_draws_quantities_are_arrays() -> None:
    one, other = sy.weigh(RATIO), sy.weigh(RATIO, {"x": X})
    for method in ("mean", "sd", "shift", "interval"):
        bare, named = getattr(one, method)(X), getattr(other, method)("x")
        assert np.array_equal(bare.value, named.value)
        assert np.array_equal(bare.error, named.error)
    assert one.prob(X > 1).value == other.prob("x > 1").value


@pytest.mark.parametrize("shape", [(480,), (4, 120), (2, 240)])
def test_weights_have_the_shape_of_the_ratios(shape: tuple[int, ...]) -> None:
    answer = sy.weigh(RATIO.reshape(shape))
    assert answer.weights.shape == shape
    assert answer.draws.chains == (1 if len(shape) == 1 else shape[0])


@pytest.mark.parametrize(
    "ratio",
    [
        RATIO,
        RATIO.tolist(),
        RATIO.astype(np.float32).astype(np.float64),
        xr.DataArray(RATIO, dims=("chain", "draw")),
        xr.DataArray(RATIO, dims=("chain", "draw")).transpose("draw", "chain"),
    ],
    ids=["array", "list", "rounded", "DataArray", "DataArray turned round"],
)
def test_ratios_of_any_kind_are_read(ratio: object) -> None:
    want = sy.weigh(np.asarray(RATIO)).weights
    for answer in (sy.weigh(ratio), sy.weigh(ratio, {"x": X})):
        # 1e-6: one case was rounded to 24 bits.
        np.testing.assert_allclose(answer.weights, want, rtol=1e-6)


def test_draws_of_any_kind_are_read() -> None:
    frame = pd.DataFrame({"x": X.ravel()})
    assert (
        sy.weigh(RATIO.ravel(), frame).mean("x").value
        == sy.weigh(RATIO.ravel()).mean(X.ravel()).value
    )
    data = xr.Dataset({"x": (("chain", "draw"), X)})
    assert sy.weigh(RATIO, data).mean("x").value == sy.weigh(RATIO, {"x": X}).mean("x").value


def test_it_says_that_supports_cannot_be_judged() -> None:
    codes = {r.code for r in sy.weigh(RATIO).verdict.reasons}
    assert "support_unknown" in codes
    assert sy.weigh(RATIO).verdict.is_sound


def test_smoothing_may_be_left_out() -> None:
    raw = np.exp(RATIO) / np.exp(RATIO).sum()
    # 1e-12 relative: an exponential and a sum.
    np.testing.assert_allclose(sy.weigh(RATIO, smooth=False).weights, raw, rtol=1e-12)
    heavy = 2.5 * np.abs(X)
    assert sy.weigh(heavy).largest_share < sy.weigh(heavy, smooth=False).largest_share
    assert sy.weigh(heavy).tail_shape == sy.weigh(heavy, smooth=False).tail_shape


def test_ratios_are_neither_changed_nor_frozen() -> None:
    ratio = RATIO.copy()
    sy.weigh(ratio, {"x": X}).table()
    assert np.array_equal(ratio, RATIO)
    assert ratio.flags.writeable


def test_ratios_are_read_once() -> None:
    ratio = RATIO.copy()
    answer = sy.weigh(ratio)
    before = answer.log_weights.tobytes()
    ratio[...] = 0
    assert answer.log_weights.tobytes() == before


def test_offsets_of_any_size_do_no_harm() -> None:
    # 1e-9: sixteen digits of 1e5 leave eleven.
    for offset in (1e5, -1e5):
        np.testing.assert_allclose(
            sy.weigh(RATIO + offset).weights, sy.weigh(RATIO).weights, rtol=1e-9
        )


def test_a_range_beyond_the_exponential_does_no_harm() -> None:
    answer = sy.weigh(1e5 * X)
    assert answer.weights.sum() == pytest.approx(1, abs=1e-12)
    assert answer.verdict.level == "refit"
    assert np.isfinite(answer.mean(X).value)
