"""
Invent the wall-thickness readings of the demonstration.

Run ``python -m steelyard.demo.make_data`` to write ``readings.csv`` again, byte
for byte. No quay, gauge or reading exists; rates, noise and seed were chosen so
that the decision at quay 4 is a close one.
"""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path
from typing import NamedTuple

import numpy as np

SEED = 483
NOMINAL_THICKNESS = 12.5  # mm, when driven
BUILT = (1984, 1979, 1991, 2009, 1987, 1998, 1975, 2003, 1994)
RATES = (0.088, 0.112, 0.095, 0.130, 0.079, 0.118, 0.104, 0.126, 0.091)  # mm a year
SURVEYS = {2006: (2, 0), 2012: (2, 3), 2018: (1, 4), 2024: (1, 4)}  # gauge A, gauge B
YOUNG_QUAY = 3  # position of quay 4: built last and read least
YOUNG_QUAY_SURVEYS = {2012: (1, 1), 2018: (1, 2), 2024: (1, 2)}
BIAS_B = 0.05  # mm of loss that gauge B reports too much
NOISE_A, NOISE_B = 0.32, 0.40  # mm
ROUGH_SHARE, ROUGH_FACTOR = 0.10, 2.2  # gauge B on a badly cleaned spot
HEADER = """\
# Invented by make_data.py: no quay, gauge or reading here exists.
# Ultrasonic wall thickness in mm; age in years since the piles were driven.
quay,gauge,year,age,thickness
"""


class Reading(NamedTuple):
    """One invented reading, as a line of ``readings.csv``."""

    quay: str
    gauge: str
    year: int
    age: int
    thickness: float


def invent(seed: int = SEED) -> Iterator[Reading]:
    """
    Invent the readings, quay by quay and survey by survey.

    Parameters
    ----------
    seed : int
        Seed of the gauge errors.

    Yields
    ------
    Reading
        One line of ``readings.csv``.
    """
    random = np.random.default_rng(seed)
    for position, (built, rate) in enumerate(zip(BUILT, RATES, strict=True)):
        surveys = YOUNG_QUAY_SURVEYS if position == YOUNG_QUAY else SURVEYS
        for year, counts in surveys.items():
            loss = rate * (year - built)
            for gauge, count in zip("AB", counts, strict=True):
                for error in _gauge_errors(random, gauge, count):
                    thickness = round(NOMINAL_THICKNESS - loss - error, 2)
                    yield Reading(f"Quay {position + 1}", gauge, year, year - built, thickness)


def _gauge_errors(random: np.random.Generator, gauge: str, count: int) -> list[float]:
    """Errors in the loss that a gauge reports, in mm."""
    standard = random.standard_normal(count)
    rough = random.random(count) < ROUGH_SHARE
    if gauge == "A":
        return [float(error) for error in NOISE_A * standard]
    scale = NOISE_B * np.where(rough, ROUGH_FACTOR, 1.0)
    return [float(error) for error in BIAS_B + scale * standard]


def as_csv(seed: int = SEED) -> str:
    """
    Write the invented readings as text.

    Parameters
    ----------
    seed : int
        Seed of the gauge errors.

    Returns
    -------
    str
        The content of ``readings.csv``.
    """
    lines = [
        f"{reading.quay},{reading.gauge},{reading.year},{reading.age},{reading.thickness:.2f}\n"
        for reading in invent(seed)
    ]
    return HEADER + "".join(lines)


def main() -> None:
    """Write ``readings.csv`` beside this file."""
    path = Path(__file__).with_name("readings.csv")
    path.write_text(as_csv(), encoding="utf-8", newline="\n")
    print(f"wrote {path.name}: invented readings, seed {SEED}")


if __name__ == "__main__":
    main()
