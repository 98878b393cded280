"""How long hypothesis searches: the same short search every day, a long one when it is asked."""

from __future__ import annotations

import os

from hypothesis import HealthCheck, settings

CALLS = int(os.environ.get("STEELYARD_FUZZ_CALLS", "0"))

FIXED = settings(
    # A short run says the same thing every time; a long one looks elsewhere each time.
    derandomize=not CALLS,
    max_examples=max(40, CALLS // 500),
    deadline=None,
    database=None,
    suppress_health_check=[HealthCheck.too_slow],
)
