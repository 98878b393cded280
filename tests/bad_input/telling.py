"""One way to hold an error to what DESIGN asks of it."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import pytest

from steelyard.errors import SteelyardError


def refused(
    act: Callable[[], Any], error: type[SteelyardError], argument: str, *came: object
) -> SteelyardError:
    """
    Hold that `act` is refused by exactly this class of error, and tellingly.

    The message names the argument, shows each of `came` (shape, number or text) in what came or
    what was expected, and ends with a next step.
    """
    with pytest.raises(SteelyardError) as caught:
        act()
    told = caught.value
    assert type(told) is error, f"{type(told).__name__}: {told}"
    assert issubclass(error, ValueError | TypeError | ImportError)
    assert argument in told.argument, f"{argument!r} is not named in {told.argument!r}"
    for part in came:
        shown = f"{told.expected} | {told.came}"
        assert str(part) in shown, f"{part!s} is not shown in {shown!r}"
    assert told.next_step.strip().endswith((".", "?")), f"no next step: {told.next_step!r}"
    for text in (told.argument, told.expected, told.came, told.next_step):
        assert text in str(told)
    assert len(str(told)) < 1500, "a message that nobody reads"
    return told
