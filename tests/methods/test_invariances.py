"""What must not matter does not: units, origins, names of chains, duplicates against weights."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

import steelyard as sy
from steelyard.errors import QuantityError

RNG = np.random.default_rng(20_261_218)
X = RNG.normal(size=(4, 300))
RATIO = 0.4 * RNG.normal(size=(4, 300)) + 0.3 * X


def _estimates(x: np.ndarray, ratio: np.ndarray = RATIO) -> dict[str, sy.Estimate]:
    answer = sy.weigh(ratio)
    return {
        "mean": answer.mean(x),
        "sd": answer.sd(x),
        "shift": answer.shift(x),
        "shift of the sd": answer.shift(x, "sd"),
        "quantile": answer.quantile(x, 0.3),
        "shift of the quantile": answer.shift(x, ("quantile", 0.3)),
        "interval": answer.interval(x, 0.7, "shortest"),
    }


@pytest.mark.parametrize("unit", [1e-290, 1e-160, 1e-100, 1e-8, 7.0, 1e70, 1e160, 1e300])
def test_estimates_and_errors_are_in_the_unit_of_the_quantity(unit: float) -> None:
    plain, scaled = _estimates(X), _estimates(unit * X)
    for name in plain:
        # 1e-12 relative: a handful of roundings.
        np.testing.assert_allclose(scaled[name].value, unit * plain[name].value, rtol=1e-12)
        np.testing.assert_allclose(scaled[name].error, unit * plain[name].error, rtol=1e-12)
        np.testing.assert_allclose(scaled[name].tail_shape, plain[name].tail_shape, atol=1e-12)
        assert np.array_equal(scaled[name].verdict.level, plain[name].verdict.level)


@pytest.mark.parametrize("unit", [1e-160, 1e70, 1e160, 1e300])
def test_further_answers_are_in_the_unit_of_the_quantity(unit: float) -> None:
    fit = sy.Fit({"mu": X}, {"mu": sy.Normal(0, 1)}, loglik=-0.1 * (X[..., None] - 1) ** 2)
    answer = fit.reweigh(sy.power(likelihood=0.8))
    plain, scaled = fit.local(X), fit.local(unit * X)
    for name, slope in plain.derivative["mu"].items():
        found = scaled.derivative["mu"][name]
        # 1e-12 relative: a handful of roundings.
        np.testing.assert_allclose(found.value, unit * slope.value, rtol=1e-12)
        np.testing.assert_allclose(found.error, unit * slope.error, rtol=1e-12)
    one, other = answer.attribute(X), answer.attribute(unit * X)
    for name, part in one.terms.items():
        np.testing.assert_allclose(other.terms[name].value, unit * part.value, rtol=1e-12)
        np.testing.assert_allclose(other.terms[name].error, unit * part.error, rtol=1e-12)
    # 1e-9: what is measured in base sd rests on differences of nearly equal numbers.
    np.testing.assert_allclose(
        fit.pull(unit * X).prior.value, fit.pull(X).prior.value, rtol=1e-9, atol=1e-12
    )
    for name in ("wasserstein", "largest_gap", "jensen_shannon"):
        before, after = (getattr(answer.distance(q), name) for q in (X, unit * X))
        np.testing.assert_allclose(after.value, before.value, rtol=1e-9)
        np.testing.assert_allclose(after.error, before.error, rtol=1e-9)
    one_row, other_row = (answer.table({"q": q}).columns for q in (X, unit * X))
    for name in ("mean", "error", "low", "high", "sd", "q0.5"):
        # 1e-10: limits close to 0 are differences of larger numbers.
        np.testing.assert_allclose(other_row[name], unit * np.array(one_row[name]), rtol=1e-10)
    influence = sy.weights.influence(X.reshape(-1, 1), X.reshape(-1, 1))
    np.testing.assert_allclose(
        sy.weights.influence(X.reshape(-1, 1), unit * X.reshape(-1, 1)), influence, rtol=1e-12
    )


@pytest.mark.parametrize(("one", "other"), [(1e78, 1e78), (1e140, 1e-150), (1e-150, 1e-150)])
def test_covariances_are_in_the_units_of_both_quantities(one: float, other: float) -> None:
    answer, y = sy.weigh(RATIO), X + RNG.normal(size=X.shape)
    plain = answer.covariance({"x": X, "y": y})
    scaled = answer.covariance({"x": one * X, "y": other * y})
    units = np.outer([one, other], [one, other])
    # 1e-11 relative: products of two roundings each.
    np.testing.assert_allclose(scaled.value, units * plain.value, rtol=1e-11)
    np.testing.assert_allclose(scaled.error, units * plain.error, rtol=1e-11)


@pytest.mark.parametrize("unit", [1e200, 1e-200])
def test_a_covariance_beyond_what_a_float_holds_is_refused(unit: float) -> None:
    with pytest.raises(QuantityError, match="another unit"):
        sy.weigh(RATIO).covariance(unit * X)


def test_one_huge_value_leaves_quantiles_and_their_shifts_alone() -> None:
    y = X.copy()
    y.reshape(-1)[X.argmax()] = 1.7e308
    answer = sy.weigh(RATIO)
    for of in (lambda q: answer.quantile(q, 0.4), lambda q: answer.shift(q, ("quantile", 0.4))):
        assert (of(y).value, of(y).error) == (of(X).value, of(X).error)


@pytest.mark.parametrize("origin", [-3.0, 1e3, 1e6])
def test_an_origin_moves_the_value_and_leaves_the_error(origin: float) -> None:
    # 1e-9: sixteen digits of 1e6 leave ten for the spread of one.
    plain, moved = _estimates(X), _estimates(X + origin)
    for name in plain:
        shift = 0.0 if name == "sd" or name.startswith("shift") else origin
        np.testing.assert_allclose(moved[name].value, plain[name].value + shift, atol=1e-8)
        np.testing.assert_allclose(moved[name].error, plain[name].error, rtol=1e-8)


def test_a_mirrored_quantity_has_mirrored_estimates() -> None:
    plain, mirrored = sy.weigh(RATIO), sy.weigh(RATIO)
    # 1e-12: the same sums with the other sign.
    for p in (0.1, 0.5, 0.73):
        one, other = plain.quantile(X, p), mirrored.quantile(-X, 1 - p)
        assert other.value == pytest.approx(-one.value, abs=1e-12)
        assert other.error == pytest.approx(one.error, rel=1e-9)
    assert mirrored.mean(-X).value == pytest.approx(-plain.mean(X).value, abs=1e-12)
    assert mirrored.mean(-X).error == pytest.approx(plain.mean(X).error, rel=1e-12)
    distances = plain.distance(X), mirrored.distance(-X)
    for name in ("wasserstein", "largest_gap", "jensen_shannon"):
        one, other = (getattr(d, name) for d in distances)
        assert other.value == pytest.approx(one.value, rel=1e-9)


def test_the_order_of_the_chains_does_not_matter() -> None:
    order = [2, 0, 3, 1]
    plain, turned = _estimates(X), _estimates(X[order], RATIO[order])
    for name in plain:
        if name == "interval":  # its errors come from a bootstrap with a fixed stream
            continue
        # 1e-9 relative: the same sums in another order.
        np.testing.assert_allclose(turned[name].value, plain[name].value, rtol=1e-9)
        np.testing.assert_allclose(turned[name].error, plain[name].error, rtol=1e-9)
    assert sy.weigh(RATIO[order]).tail_shape == pytest.approx(sy.weigh(RATIO).tail_shape, abs=1e-9)


def test_the_order_of_draws_without_order_does_not_matter() -> None:
    order = RNG.permutation(1200)
    x, own = X.ravel(), RATIO.ravel()
    answers = [
        sy.Fit({"x": a}, ordered=False).reweigh(sy.log_ratio(b))
        for a, b in ((x, own), (x[order], own[order]))
    ]
    for ask in (lambda a: a.mean("x"), lambda a: a.quantile("x", 0.3), lambda a: a.shift("x")):
        one, other = map(ask, answers)
        # 1e-9 relative: the same sums in another order.
        assert other.value == pytest.approx(one.value, rel=1e-9)
        assert other.error == pytest.approx(one.error, rel=1e-9)


def test_a_constant_in_the_ratio_does_not_matter_but_for_the_evidence() -> None:
    plain, moved = _estimates(X), _estimates(X, RATIO + 50)
    for name in plain:
        # 1e-10 relative: sixteen digits of 50 in the ratio.
        np.testing.assert_allclose(moved[name].value, plain[name].value, rtol=1e-10)
        np.testing.assert_allclose(moved[name].error, plain[name].error, rtol=1e-9)
    gap = sy.weigh(RATIO + 50).log_evidence_ratio.value - sy.weigh(RATIO).log_evidence_ratio.value
    assert gap == pytest.approx(50, abs=1e-12)


def test_whole_weights_are_duplicates() -> None:
    # METHODS 2: duplicates are ties; a draw of weight three is a draw seen three times.
    count = RNG.integers(0, 4, size=200)
    x = RNG.normal(size=200)
    with np.errstate(divide="ignore"):
        own = np.log(count)
    weighted = sy.Fit({"x": x}, log_weights=own, ordered=False).base
    repeated = sy.Fit({"x": np.repeat(x, count)}, ordered=False).base
    asked: list[Any] = [
        lambda a: a.mean("x"),
        lambda a: a.sd("x"),
        lambda a: a.quantile("x", (0.1, 0.5, 0.9)),
        lambda a: a.prob("x > 0.3"),
        lambda a: a.interval("x", 0.8, "shortest"),
    ]
    for ask in asked:
        # 1e-12: the same sums, once with weights and once term by term.
        np.testing.assert_allclose(ask(weighted).value, ask(repeated).value, atol=1e-12)
    assert weighted.mean("x").error == pytest.approx(repeated.mean("x").error, rel=1e-9)


def test_a_change_in_two_steps_is_the_change_in_one() -> None:
    # Reweighing to q and from there to r, with the first weights as base weights.
    x, first, second = X, RATIO, 0.2 * X - 0.1 * X**2
    one = sy.weigh(first + second, smooth=False)
    middle = sy.weigh(first, smooth=False)
    two = sy.Fit({"x": x}, log_weights=middle.log_weights).reweigh(
        sy.log_ratio(second), smooth=False
    )
    # 1e-12: one more normalisation.
    np.testing.assert_allclose(two.log_weights, one.log_weights, atol=1e-12)
    assert two.mean("x").value == pytest.approx(one.mean(x).value, abs=1e-12)
    assert two.mean("x").error == pytest.approx(one.mean(x).error, rel=1e-9)
    sum_of_ratios = middle.log_evidence_ratio.value + two.log_evidence_ratio.value
    assert sum_of_ratios == pytest.approx(one.log_evidence_ratio.value, abs=1e-12)


def test_the_way_there_and_back_is_the_base() -> None:
    there = sy.weigh(RATIO, smooth=False)
    back = sy.Fit({"x": X}, log_weights=there.log_weights).reweigh(
        sy.log_ratio(-RATIO), smooth=False
    )
    # 1e-12: logs that cancel.
    np.testing.assert_allclose(back.weights, np.full(X.shape, 1 / X.size), rtol=1e-12)
    assert back.mean("x").value == pytest.approx(X.mean(), abs=1e-12)
