"""Every error class is raised by something a user can do, and says its four parts."""

from __future__ import annotations

import sys
from collections.abc import Callable
from typing import Any

import numpy as np
import pytest

import steelyard as sy
from steelyard import errors

X = np.random.default_rng(20_261_240).normal(size=(4, 50))


def _plain() -> sy.Fit:
    return sy.Fit({"x": X}, {"x": sy.Normal(0, 1)}, {"a": np.zeros((4, 50, 2)), "b": X})


RAISED: dict[str, Callable[[], Any]] = {
    "AmbiguousNameError": lambda: _plain().reweigh(sy.drop([0])),
    "ArgumentError": lambda: _plain().base.quantile("x", 2),
    "ArgumentTypeError": lambda: _plain().base.resample("ten"),  # type: ignore[arg-type]
    "ChangeError": lambda: sy.swap_prior(),
    "DrawsError": lambda: sy.Fit({"x": X * np.nan}),
    "LikelihoodError": lambda: sy.Fit({"x": X}).reweigh(sy.drop([0])),
    "MissingExtraError": lambda: _plain().base.mean("x").to_xarray(),
    "PriorError": lambda: sy.Fit({"x": X}, {"x": sy.HalfNormal(1)}),
    "QuantityError": lambda: _plain().base.prob("x +"),
    "RatioError": lambda: sy.weigh(X * np.nan),
    "ShapeError": lambda: _plain().base.mean(np.zeros(3)),
    "TruthValueError": lambda: bool(_plain().base.verdict),
    "UnknownNameError": lambda: _plain().base.mean("y"),
}


def test_every_error_class_of_the_contract_is_raised_by_a_case_here() -> None:
    assert {*RAISED, "SteelyardError"} == set(errors.__all__)


@pytest.mark.parametrize("name", RAISED)
def test_an_error_is_of_its_own_class_and_says_its_four_parts(
    name: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    if name == "MissingExtraError":
        monkeypatch.setitem(sys.modules, "xarray", None)
    with pytest.raises(errors.SteelyardError) as caught:
        RAISED[name]()
    told = caught.value
    assert type(told) is getattr(errors, name)
    assert told.args == (told.argument, told.expected, told.came, told.next_step)
    assert (
        str(told) == f"{told.argument}: expected {told.expected}; got {told.came}. {told.next_step}"
    )
    assert all(part for part in told.args)


def test_the_collected_classes_are_all_that_exist() -> None:
    raised = set()
    for name, act in RAISED.items():
        with pytest.MonkeyPatch.context() as patch:
            if name == "MissingExtraError":
                patch.setitem(sys.modules, "xarray", None)
            with pytest.raises(errors.SteelyardError) as caught:
                act()
            raised.add(type(caught.value))
    concrete = {getattr(errors, n) for n in errors.__all__} - {errors.SteelyardError}
    assert raised == concrete
    assert {c for c in vars(errors).values() if isinstance(c, type)} == concrete | {
        errors.SteelyardError
    }


def test_an_absent_library_is_named_with_the_way_to_install_it(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    monkeypatch.setitem(sys.modules, "xarray", None)
    with pytest.raises(errors.MissingExtraError, match=r"pip install"):
        _plain().draws.to_xarray()
    monkeypatch.setitem(sys.modules, "matplotlib.pyplot", None)
    with pytest.raises(errors.MissingExtraError, match=r"pip install"):
        _plain().base.plot()


def test_a_user_may_catch_the_builtin_kinds() -> None:
    with pytest.raises(ValueError, match="probs"):
        RAISED["ArgumentError"]()
    with pytest.raises(TypeError, match="size"):
        RAISED["ArgumentTypeError"]()
