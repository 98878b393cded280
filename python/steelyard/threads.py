"""How many threads the kernels use; results do not depend on it."""

from __future__ import annotations

from types import TracebackType

import numpy as np

from steelyard import _core
from steelyard.errors import ArgumentError, ArgumentTypeError

__all__ = ["threads"]


class threads:  # noqa: N801
    """
    Set the number of threads that the kernels use.

    ``sy.threads(2)`` sets it from now on; ``with sy.threads(2):`` for a block. Without a call it
    is the environment variable ``STEELYARD_THREADS``, else the number of processors. Results are
    bit-identical for any number.

    Parameters
    ----------
    n : int
        Number of threads, at least 1.

    Raises
    ------
    ArgumentTypeError, ArgumentError
        For anything but a positive integer.

    Examples
    --------
    >>> import steelyard as sy
    >>> with sy.threads(1):
    ...     one = sy.weigh([0.0, 0.1, 0.2]).effective_size
    """

    def __init__(self, n: int) -> None:
        if isinstance(n, bool) or not isinstance(n, int | np.integer):
            raise ArgumentTypeError("threads", "an integer", repr(n), "Say how many threads.")
        if not 1 <= n <= 1024:
            raise ArgumentError("threads", "from 1 to 1024", str(n), "Say how many threads.")
        self._before = _core.threads()
        _core.set_threads(int(n))

    def __enter__(self) -> threads:
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        value: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        _core.set_threads(self._before)
