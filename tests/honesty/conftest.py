"""The battery lives in benches/honesty; its short form is measured once for all tests here."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Any

import pytest

sys.path.insert(0, str(Path(__file__).parents[2] / "benches" / "honesty"))

SEED = 20_261_223


@pytest.fixture(scope="session")
def cells() -> list[Any]:
    """Every problem with few data sets."""
    from battery.collection import all_problems
    from battery.measure import measure
    from run import SHORT_REPEATS

    return measure(SEED, SHORT_REPEATS, range(len(all_problems())), workers=1)
