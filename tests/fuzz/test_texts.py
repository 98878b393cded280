"""Event texts, by hypothesis: whatever is written, a probability or a refusal that points at it."""

from __future__ import annotations

import re

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

import steelyard as sy
from steelyard.errors import SteelyardError

from .profile import FIXED

RNG = np.random.default_rng(20_261_250)
DRAWS = {
    "mu": RNG.normal(size=(2, 30)),
    "rate": RNG.normal(size=(2, 30, 3)),
    "quay 4": RNG.integers(0, 3, size=(2, 30)).astype(float),
}
BASE = sy.Fit(DRAWS).base

NAMES = ["mu", "rate", "rate[0]", "rate[2]", "'quay 4'", '"quay 4"', "rate[3]", "nu", "mu[0]"]
NUMBERS = ["0", "1", "0.12", ".5", "2e-3", "1e999", "3."]
WORDS = [*NAMES, *NUMBERS, *"+-*/()", "**", "<", "<=", ">", ">=", "==", "!=", "and", "or", "not"]

atoms = st.sampled_from(NAMES[:6] + NUMBERS)
sums = st.recursive(
    atoms,
    lambda inner: st.one_of(
        st.tuples(inner, st.sampled_from(["+", "-", "*", "/", "**"]), inner).map(" ".join),
        inner.map("-{}".format),
        inner.map("({})".format),
    ),
    max_leaves=5,
)
comparisons = st.tuples(sums, st.sampled_from(["<", "<=", ">", ">=", "==", "!="]), sums).map(
    " ".join
)
events = st.recursive(
    comparisons,
    lambda inner: st.one_of(
        st.tuples(inner, st.sampled_from(["and", "or"]), inner).map(" ".join),
        inner.map("not {}".format),
        inner.map("({})".format),
    ),
    max_leaves=4,
)


def refusal_of(text: str) -> SteelyardError | None:
    """The refusal of an event, or nothing where it is answered as events are."""
    try:
        estimate = BASE.prob(text)
    except SteelyardError as refusal:
        return refusal
    value = np.asarray(estimate.value)
    assert np.all(np.isnan(value) | ((value > 0) & (value < 1)))
    assert value.shape in ((), (3,))
    return None


def hold_to_its_words(refusal: SteelyardError | None) -> None:
    if refusal is not None:
        assert "event" in refusal.argument
        assert re.search(r"position \d+|comparison|NaN|draws", str(refusal)), refusal


def test_well_formed_events_agree_with_python_element_by_element() -> None:
    answered = 0

    @settings(FIXED)
    @given(events)
    def search(text: str) -> None:
        nonlocal answered
        if (refusal := refusal_of(text)) is not None:
            hold_to_its_words(refusal)
            return
        answered += 1
        share = by_python(text).mean(axis=1)
        settled = (share > 0) & (share < 1)
        found = np.broadcast_to(np.asarray(BASE.prob(text).value), (3,))
        # 1e-12: a mean of 60 zeros and ones.
        np.testing.assert_allclose(found[settled], share[settled], atol=1e-12)
        assert np.isnan(found[~settled]).all()

    search()
    assert answered, "always refused, so that nothing was learnt"


def by_python(text: str) -> np.ndarray:
    """The text as Python itself reads it, `(3, 60)`: one element of `rate` and one draw a time."""
    text = text.replace("1e999", "inf").replace("'quay 4'", "quay").replace('"quay 4"', "quay")
    # Whole numbers would be Python's own, whose powers and quotients raise.
    text = re.sub(r"(?<![\w.\[])(\d+\.?\d*(?:e-?\d+)?|\.\d+)", r"float64(\1)", text)
    mu, rate, quay = (values.reshape(60, *values.shape[2:]) for values in DRAWS.values())
    truth = np.empty((3, 60), dtype=bool)
    with np.errstate(all="ignore"):
        for place, draw in np.ndindex(3, 60):
            row = rate[draw]
            scope = {"mu": mu[draw], "quay": quay[draw], "rate": row[place], "row": row}
            code = text.replace("rate[", "row[")
            truth[place, draw] = eval(
                code, {"float64": np.float64, "inf": np.float64(np.inf)}, scope
            )
    return truth


@settings(FIXED)
@given(st.lists(st.sampled_from(WORDS), max_size=12).map(" ".join))
def test_words_in_any_order_are_answered_or_refused(text: str) -> None:
    hold_to_its_words(refusal_of(text))


@settings(FIXED)
@given(st.text(max_size=40))
def test_any_text_is_answered_or_refused(text: str) -> None:
    hold_to_its_words(refusal_of(text))
