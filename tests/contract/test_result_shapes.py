"""Shapes and order of results for numbers, vectors and matrices."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

import steelyard as sy

SHAPES = {"mu": (), "rate": (9,), "loss": (2, 3), "rate[4]": (), "loss[1]": (3,), "loss[1, 2]": ()}
QUANTITY = pytest.mark.parametrize("name", SHAPES)
FIELDS = ("value", "error", "tail_shape", "effective_draws")


def _hold(estimate: sy.Estimate, shape: tuple[int, ...]) -> None:
    for field in FIELDS:
        found = getattr(estimate, field)
        assert np.shape(found) == shape, field
        if not shape:
            assert isinstance(found, float), field
    assert np.shape(estimate.verdict.level) == shape
    assert np.shape(estimate.verdict.is_sound) == shape


@QUANTITY
@pytest.mark.parametrize("method", ["mean", "sd", "shift"])
def test_an_estimate_has_the_shape_of_its_quantity(
    answer: sy.Answer, name: str, method: str
) -> None:
    _hold(getattr(answer, method)(name), SHAPES[name])


@QUANTITY
@pytest.mark.parametrize("of", ["sd", ("quantile", 0.9)])
def test_any_shift_has_the_shape_of_its_quantity(answer: sy.Answer, name: str, of: Any) -> None:
    _hold(answer.shift(name, of), SHAPES[name])


@QUANTITY
@pytest.mark.parametrize(
    ("probs", "lead"),
    [(0.5, ()), ([0.1], (1,)), ((0.1, 0.5), (2,)), ([[0.1, 0.5], [0.9, 1]], (2, 2))],
)
def test_axes_of_probabilities_come_first(
    answer: sy.Answer, name: str, probs: Any, lead: tuple[int, ...]
) -> None:
    _hold(answer.quantile(name, probs), (*lead, *SHAPES[name]))


@QUANTITY
@pytest.mark.parametrize("kind", ["central", "shortest"])
def test_limits_of_an_interval_come_first(answer: sy.Answer, name: str, kind: Any) -> None:
    interval = answer.interval(name, 0.8, kind)
    assert np.shape(interval.value) == (2, *SHAPES[name])
    assert np.shape(interval.error) == (2, *SHAPES[name])
    assert np.all(interval.value[0] < interval.value[1])


@QUANTITY
def test_a_probability_has_the_shape_of_its_event(answer: sy.Answer, name: str) -> None:
    _hold(answer.prob(f"{name} > 0.1"), SHAPES[name])
    limit = answer.prob(f"{name} > 0.1", level=0.5).decision
    assert limit is not None
    assert np.shape(limit.above) == np.shape(limit.right) == SHAPES[name]


def test_elements_are_the_elements_of_the_whole(answer: sy.Answer) -> None:
    for method in ("mean", "sd", "shift", "quantile", "interval"):
        whole = getattr(answer, method)("loss")
        part = getattr(answer, method)("loss[1, 2]")
        assert np.array_equal(whole.value[..., 1, 2], part.value)
        assert np.array_equal(whole.error[..., 1, 2], part.error)


def test_vectors_wider_than_a_block_are_the_same_as_their_columns() -> None:
    # Columns are worked on 64 at a time.
    x = np.random.default_rng(1).normal(size=(2, 50, 150))
    answer = sy.Fit({"x": x}).reweigh(sy.log_ratio(lambda d: 0.2 * d["x"][:, 0]))
    for method in ("mean", "sd", "shift", "quantile"):
        whole = getattr(answer, method)("x")
        for column in (0, 63, 64, 149):
            one = getattr(answer, method)(f"x[{column}]")
            assert np.array_equal(np.asarray(whole.value)[..., column], one.value)
            assert np.array_equal(np.asarray(whole.error)[..., column], one.error)


def test_without_an_argument_all_parameters_come_in_their_order(answer: sy.Answer) -> None:
    for method in ("mean", "sd", "quantile", "interval", "shift", "distance"):
        assert list(getattr(answer, method)()) == ["rate", "mu", "tau", "loss"]


def test_a_mapping_of_quantities_gives_a_mapping_of_estimates(answer: sy.Answer) -> None:
    asked = {"far": lambda d: d["rate"].max(axis=1), "mu": "mu", "own": np.zeros((4, 100, 5))}
    found = answer.mean(asked)
    assert list(found) == ["far", "mu", "own"]
    assert [np.shape(e.value) for e in found.values()] == [(), (), (5,)]
    assert [e.label for e in found.values()] == ["far", "mu", "own"]


@pytest.mark.parametrize("shape", [(4, 100), (400,)])
def test_arrays_shaped_like_the_draws_are_quantities(
    answer: sy.Answer, fit: sy.Fit, shape: tuple[int, ...]
) -> None:
    own = fit.draws["mu"].reshape(shape)
    assert answer.mean(own).value == answer.mean("mu").value
    assert answer.mean(own.tolist()).value == answer.mean("mu").value
    assert answer.mean(own.astype(np.float32)).value == pytest.approx(
        answer.mean("mu").value, rel=1e-6
    )


def test_a_callable_may_give_draws_stacked_or_by_chain(answer: sy.Answer) -> None:
    stacked = answer.mean(lambda d: d["rate"])
    chained = answer.mean(lambda d: d["rate"].reshape(4, 100, 9))
    assert np.array_equal(stacked.value, answer.mean("rate").value)
    assert np.array_equal(chained.value, stacked.value)


def test_weights_have_the_shape_of_the_draws(answer: sy.Answer) -> None:
    assert answer.weights.shape == answer.log_weights.shape == (4, 100)
    assert answer.weights.sum() == pytest.approx(1, abs=1e-12)
    # Logarithms of about ten lose ten units in the last place of what they stand for.
    np.testing.assert_allclose(np.exp(answer.log_weights), answer.weights, rtol=1e-14)
    for term in answer.terms.values():
        assert term.shape == (4, 100)


def test_figures_of_the_weights_are_plain_numbers(answer: sy.Answer) -> None:
    for name in ("effective_size", "entropy_size", "largest_share", "tail_shape"):
        assert isinstance(getattr(answer, name), float)
    _hold(answer.log_evidence_ratio, ())


def test_a_covariance_is_one_matrix_of_all_elements(answer: sy.Answer) -> None:
    covariance = answer.covariance(["mu", "rate"])
    assert np.shape(covariance.value) == np.shape(covariance.error) == (10, 10)
    names = covariance.labels["element"].tolist()
    assert names[0] == "mu"
    assert len(set(names)) == 10
    # 1e-12: the same sum of squares.
    assert np.diag(covariance.value)[1:] == pytest.approx(answer.sd("rate").value ** 2, abs=1e-12)


def test_distances_have_the_shape_of_their_quantity(answer: sy.Answer) -> None:
    for name, shape in SHAPES.items():
        distance = answer.distance(name)
        for one in (distance.wasserstein, distance.largest_gap, distance.jensen_shannon):
            assert np.shape(one.value) == np.shape(one.error) == shape
