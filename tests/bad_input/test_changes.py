"""Changes that contradict themselves or do not fit the base."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
import xarray as xr
from scipy import stats

import steelyard as sy
from steelyard.errors import (
    AmbiguousNameError,
    ArgumentError,
    ArgumentTypeError,
    ChangeError,
    PriorError,
    RatioError,
    ShapeError,
    UnknownNameError,
)

from .telling import refused

Draws = dict[str, np.ndarray]


@pytest.mark.parametrize("change", [None, "drop", 0.5, sy.drop, [sy.drop([1])]], ids=repr)
def test_what_is_no_change_cannot_be_weighed(fit: sy.Fit, change: Any) -> None:
    told = refused(lambda: fit.reweigh(change), ArgumentTypeError, "change", type(change).__name__)
    assert "swap_prior" in told.next_step


@pytest.mark.parametrize("other", [None, 3, "drop", sy.Normal(0, 1)], ids=repr)
def test_only_changes_combine_with_changes(other: Any) -> None:
    change = sy.drop([1])
    refused(lambda: change & other, ArgumentTypeError, "change", type(other).__name__)
    refused(lambda: other & change, ArgumentTypeError, "change", type(other).__name__)


@pytest.mark.parametrize(
    "make",
    [
        lambda: sy.swap_prior(),
        lambda: sy.swap_prior({}),
        lambda: sy.swap_loglik({}),
        lambda: sy.add({}),
        lambda: sy.weigh_data({}),
        lambda: sy.drop(),
        lambda: sy.drop({}),
        lambda: sy.power(prior={}),
        lambda: sy.power(likelihood={}),
    ],
    ids=range(9),
)
def test_a_change_that_names_nothing_is_refused(make: Any) -> None:
    with pytest.raises(ChangeError) as caught:
        make()
    assert caught.value.next_step


@pytest.mark.parametrize("make", [sy.add, sy.weigh_data, sy.swap_prior], ids=lambda m: m.__name__)
@pytest.mark.parametrize("terms", [3, "gauge A", [1, 2]], ids=repr)
def test_terms_that_are_no_mapping_are_refused(make: Any, terms: Any) -> None:
    refused(lambda: make(terms), ArgumentTypeError, make.__name__, type(terms).__name__)


@pytest.mark.parametrize("key", [3, None, ("mu", 3), ()], ids=repr)
@pytest.mark.parametrize(
    "make",
    [
        lambda key: sy.swap_prior({key: sy.Normal(0, 1)}),
        lambda key: sy.power(prior={key: 0.5}),
        lambda key: sy.power(likelihood={key: 0.5}),
        lambda key: sy.weigh_data({key: 0.5}),
        lambda key: sy.add({key: np.zeros(200)}),
        lambda key: sy.swap_loglik({key: np.zeros(200)}),
    ],
    ids=["swap_prior", "power prior", "power likelihood", "weigh_data", "add", "swap_loglik"],
)
def test_terms_that_are_not_named_by_texts_are_refused(make: Any, key: Any) -> None:
    with pytest.raises(ArgumentTypeError) as caught:
        make(key)
    assert repr(key) in caught.value.came


TWICE: list[tuple[str, Any]] = [
    ("swap_prior", sy.swap_prior(mu=sy.Normal(0, 1)) & sy.swap_prior(mu=sy.Normal(0, 2))),
    ("swap_prior", sy.swap_prior(mu=sy.Normal(0, 1)) & sy.swap_prior(mu=sy.Normal(0, 1))),
    ("swap_loglik", sy.swap_loglik({"gauge A": np.zeros((4, 50, 5))})),
    ("add", sy.add({"gauge C": np.zeros((4, 50, 1))})),
    ("raise_noise", sy.raise_noise("gauge A", 1.1, 0.1)),
]


@pytest.mark.parametrize(
    ("argument", "change"), TWICE, ids=[f"{a}-{i}" for i, (a, _) in enumerate(TWICE)]
)
def test_one_term_replaced_or_added_twice_is_refused(
    fit: sy.Fit, argument: str, change: sy.Change
) -> None:
    both = change if len(change.edits) > 1 else change & change
    refused(lambda: fit.reweigh(both), ChangeError, argument)


def test_a_term_replaced_and_made_noisier_is_refused(fit: sy.Fit) -> None:
    swap = sy.swap_loglik({"gauge A": np.zeros((4, 50, 5))})
    noise = sy.raise_noise("gauge A", 1.1, 0.1)
    for both in (swap & noise, noise & swap):
        refused(lambda c=both: fit.reweigh(c), ChangeError, "gauge A")


def test_one_term_named_in_two_ways_is_refused() -> None:
    refused(
        lambda: sy.swap_prior({"mu": sy.Normal(0, 1)}, mu=sy.Normal(0, 2)),
        ChangeError,
        "swap_prior",
    )
    refused(lambda: sy.drop("gauge A", position=[1]), ChangeError, "drop", "2")
    refused(lambda: sy.drop([1], rig="B"), ChangeError, "drop", "2")


UNKNOWN: list[tuple[str, Any]] = [
    ("swap_prior", sy.swap_prior(nu=sy.Normal(0, 1))),
    ("swap_prior", sy.swap_prior({("mu", "tau"): sy.Normal(0, 1)})),
    ("power: prior", sy.power(prior={"nu": 0.5})),
    ("power: likelihood", sy.power(likelihood={"gauge C": 0.5})),
    ("weigh_data", sy.weigh_data({"gauge C": 0.5})),
    ("swap_loglik", sy.swap_loglik({"gauge C": np.zeros((4, 50))})),
    ("raise_noise", sy.raise_noise("gauge C", 1.1, 0.1)),
    ("drop", sy.drop("gauge C")),
    ("drop", sy.drop({"gauge C": [0]})),
    ("drop", sy.drop({"gauge A": [5]})),
    ("drop", sy.drop({"gauge A": [-1]})),
    ("drop", sy.drop({"gauge A": "east"})),
    ("drop", sy.drop(rig="B")),
    ("log_ratio", sy.log_ratio(np.zeros(200), predictive="y")),
]


@pytest.mark.parametrize(("argument", "change"), UNKNOWN)
def test_terms_labels_and_positions_that_are_not_there_are_refused(
    fit: sy.Fit, argument: str, change: sy.Change
) -> None:
    refused(lambda: fit.reweigh(change), UnknownNameError, argument)


def test_a_term_close_to_a_stated_one_is_offered(fit: sy.Fit) -> None:
    told = refused(lambda: fit.reweigh(sy.drop("gage B")), UnknownNameError, "drop", "'gage B'")
    assert "'gauge B'" in told.next_step


def test_positions_without_their_term_are_refused_where_there_are_several(fit: sy.Fit) -> None:
    refused(lambda: fit.reweigh(sy.drop([0])), AmbiguousNameError, "drop", "gauge A", "gauge B")
    refused(lambda: fit.reweigh(sy.swap_loglik(np.zeros((4, 50)))), ChangeError, "swap_loglik")


@pytest.mark.parametrize("what", [1.5, [1.5], [], [[1, 2]], True, None, object()], ids=repr)
def test_positions_that_are_no_integers_are_refused(fit: sy.Fit, what: Any) -> None:
    refused(lambda: fit.reweigh(sy.drop({"gauge A": what})), ArgumentTypeError, "drop['gauge A']")


def test_a_position_named_twice_is_refused(fit: sy.Fit) -> None:
    refused(lambda: fit.reweigh(sy.drop({"gauge A": [1, 1]})), ChangeError, "drop['gauge A']")


@pytest.mark.parametrize("number", [-0.5, np.nan, np.inf, -np.inf])
def test_powers_and_factors_that_are_negative_or_not_finite_are_refused(number: float) -> None:
    shown = f"{number:g}"
    refused(lambda: sy.power(number), ArgumentError, "power: prior", shown)
    refused(lambda: sy.power(likelihood=number), ArgumentError, "power: likelihood", shown)
    refused(lambda: sy.power(prior={"mu": number}), ArgumentError, "power: prior['mu']", shown)
    refused(lambda: sy.weigh_data({"a": number}), ArgumentError, "weigh_data['a']", shown)
    refused(lambda: sy.weigh_data({"a": [1.0, number]}), ArgumentError, "weigh_data['a']", shown)
    refused(lambda: sy.raise_noise("a", number, 1), ArgumentError, "raise_noise: factor", shown)


def test_a_noise_factor_of_zero_is_refused() -> None:
    refused(lambda: sy.raise_noise("a", 0, 1), ArgumentError, "raise_noise: factor", "0")


@pytest.mark.parametrize("number", [None, "half", True, 1j, object()], ids=repr)
def test_powers_and_factors_that_are_no_numbers_are_refused(number: Any) -> None:
    refused(lambda: sy.power(number), ArgumentTypeError, "power: prior")
    refused(lambda: sy.power(likelihood=number), ArgumentTypeError, "power: likelihood")
    refused(lambda: sy.weigh_data({"a": number}), ArgumentTypeError, "weigh_data['a']")
    refused(lambda: sy.raise_noise("a", number, 1), ArgumentTypeError, "raise_noise: factor")


def test_one_power_for_each_observation_is_refused() -> None:
    refused(lambda: sy.power(prior=[1.0, 2.0]), ArgumentTypeError, "power: prior", "(2,)")


def test_factors_of_another_shape_than_the_observations_are_refused(fit: sy.Fit) -> None:
    change = sy.weigh_data({"gauge A": [1.0, 0.5]})
    refused(lambda: fit.reweigh(change), ShapeError, "weigh_data['gauge A']", "(2,)", "(5,)")


def test_a_replacement_with_other_observations_is_refused(fit: sy.Fit) -> None:
    change = sy.swap_loglik({"gauge A": np.zeros((4, 50, 4))})
    refused(lambda: fit.reweigh(change), ShapeError, "swap_loglik['gauge A']", "(4,)", "(5,)")


def test_data_added_under_a_name_that_is_taken_is_refused(fit: sy.Fit) -> None:
    refused(lambda: fit.reweigh(sy.add({"gauge A": np.zeros(200)})), ChangeError, "add['gauge A']")


def test_a_prior_that_is_not_stated_cannot_be_changed(draws: Draws) -> None:
    for prior in (None, {}):
        for change in (sy.swap_prior(mu=sy.Normal(0, 1)), sy.power(prior=0.5)):
            told = refused(lambda p=prior, c=change: sy.Fit(draws, p).reweigh(c), PriorError, "")
            assert "sy.Flat()" in told.next_step


@pytest.mark.parametrize(
    ("old", "change"),
    [
        (sy.Flat(), sy.swap_prior(mu=sy.Normal(0, 1))),
        (sy.Normal(0, 1), sy.swap_prior(mu=sy.Flat())),
        (sy.Normal(0, 1), sy.swap_prior(mu=sy.Flat(lower=-9))),
        (sy.Normal(0, 1), sy.power(prior=0.5)),
    ],
    ids=["improper base", "improper target", "half-improper target", "power"],
)
def test_an_evidence_ratio_under_an_improper_or_powered_prior_is_refused(
    draws: Draws, old: Any, change: sy.Change
) -> None:
    answer = sy.Fit(draws, {"mu": old}).reweigh(change)
    refused(lambda: answer.log_evidence_ratio, PriorError, "log_evidence_ratio", "'mu'")
    assert np.isfinite(answer.mean("mu").value)


def test_an_improper_prior_that_is_not_changed_does_not_disturb_an_evidence_ratio(
    draws: Draws,
) -> None:
    fit = sy.Fit(draws, {"mu": sy.Normal(0, 1), "tau": sy.Flat(0)})
    answer = fit.reweigh(sy.swap_prior(mu=sy.Normal(0, 2)))
    assert np.isfinite(answer.log_evidence_ratio.value)


@pytest.mark.parametrize("term", [None, 3, "normal"], ids=repr)
def test_a_new_prior_of_a_wrong_type_is_refused(fit: sy.Fit, term: Any) -> None:
    refused(lambda: fit.reweigh(sy.swap_prior(mu=term)), ArgumentTypeError, "swap_prior")


def test_a_new_prior_that_excludes_every_draw_is_refused(fit: sy.Fit) -> None:
    for term in (sy.Flat(5, 6), stats.uniform(5, 1)):
        change = sy.swap_prior(mu=term)
        refused(lambda c=change: fit.reweigh(c), RatioError, "mu", "−inf for every draw")


LABELLED = xr.DataArray(
    np.zeros((4, 50, 3, 2)),
    dims=("chain", "draw", "year", "rig"),
    coords={"year": [2019, 2021, 2024], "rig": ["A", "B"]},
)


def test_bare_integers_are_refused_where_labels_differ_from_positions(draws: Draws) -> None:
    one = sy.Fit(draws, loglik=LABELLED.isel(rig=0))
    told = refused(lambda: one.reweigh(sy.drop([1])), AmbiguousNameError, "drop", "year", "2019")
    assert "label=" in told.next_step
    assert "position=" in told.next_step
    for change in (sy.drop(position=[1]), sy.drop(label=2021), sy.drop(year=2021)):
        assert one.reweigh(change).verdict.level == "sound"


def test_integer_labels_that_are_positions_are_no_doubt(draws: Draws) -> None:
    plain = LABELLED.isel(rig=0).assign_coords(year=[0, 1, 2])
    assert sy.Fit(draws, loglik=plain).reweigh(sy.drop([1])).verdict.level == "sound"


@pytest.mark.parametrize(
    ("change", "error"),
    [
        (sy.drop(label=[2020]), UnknownNameError),
        (sy.drop(year=1), UnknownNameError),
        (sy.drop(position=[2019]), UnknownNameError),
        (sy.drop(position="2019"), ArgumentTypeError),
        (sy.drop(month=3), UnknownNameError),
    ],
    ids=["label", "dimension", "position", "text position", "unknown dimension"],
)
def test_labels_and_positions_are_not_mixed_up(draws: Draws, change: sy.Change, error: Any) -> None:
    fit = sy.Fit(draws, loglik=LABELLED.isel(rig=0))
    refused(lambda: fit.reweigh(change), error, "drop")


def test_a_text_that_is_both_a_term_and_a_label_is_refused(draws: Draws) -> None:
    fit = sy.Fit(draws, loglik={"A": LABELLED, "rest": np.zeros((4, 50, 2))})
    refused(lambda: fit.reweigh(sy.drop("A")), AmbiguousNameError, "drop", "'A'")
    assert fit.reweigh(sy.drop(rig="A")).verdict.level == "sound"


def test_positions_on_several_axes_are_refused(draws: Draws) -> None:
    fit = sy.Fit(draws, loglik=LABELLED)
    refused(lambda: fit.reweigh(sy.drop(position=[1])), ChangeError, "drop", "(3, 2)")
