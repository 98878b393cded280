"""How far a long pass is, told to whoever asked."""

from __future__ import annotations

import sys
from collections.abc import Callable
from typing import Any

from steelyard.errors import ArgumentTypeError

__all__ = ["Teller", "teller"]

Teller = Callable[[int], None]


def teller(progress: Any, total: int, what: str = "groups") -> Teller:
    """
    A function that is told how many are done.

    With True it writes one line to standard error, rewritten as the pass goes on; a callable gets
    ``(done, total)``; with None or False nothing happens.
    """
    if progress is None or progress is False:
        return lambda done: None
    if progress is True:

        def write(done: int) -> None:
            end = "\n" if done >= total else ""
            sys.stderr.write(f"\r{done:,} of {total:,} {what} left out{end}")
            sys.stderr.flush()

        return write
    if callable(progress):
        return lambda done: progress(done, total)
    raise ArgumentTypeError(
        "progress", "True, or a callable of (done, total)", repr(progress), "Leave it out for none."
    )
