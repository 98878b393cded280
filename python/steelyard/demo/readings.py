"""Read the invented wall-thickness readings back."""

from __future__ import annotations

import csv
from dataclasses import dataclass
from importlib.resources import files

import numpy as np
import numpy.typing as npt

from steelyard.demo.make_data import NOMINAL_THICKNESS

QUAYS = tuple(f"Quay {number}" for number in range(1, 10))
GAUGES = ("A", "B")


@dataclass(frozen=True)
class Readings:
    """
    Invented readings in file order, ``N`` of them.

    Attributes
    ----------
    quay : (N,) int array
        Position of the quay, from 0: quay 4 is position 3.
    gauge : (N,) int array
        0 for gauge A, 1 for gauge B.
    year : (N,) int array
        Year of the survey.
    age : (N,) float array
        Years since the piles were driven.
    loss : (N,) float array
        Nominal thickness less thickness read, in mm.
    """

    quay: npt.NDArray[np.int64]
    gauge: npt.NDArray[np.int64]
    year: npt.NDArray[np.int64]
    age: npt.NDArray[np.float64]
    loss: npt.NDArray[np.float64]


def load_readings() -> Readings:
    """
    Read the readings of ``readings.csv``, all of them invented.

    Returns
    -------
    Readings
        One entry a reading.
    """
    text = files("steelyard.demo").joinpath("readings.csv").read_text(encoding="utf-8")
    lines = [line for line in text.splitlines() if not line.startswith("#")]
    rows = list(csv.DictReader(lines))
    return Readings(
        quay=np.array([QUAYS.index(row["quay"]) for row in rows]),
        gauge=np.array([GAUGES.index(row["gauge"]) for row in rows]),
        year=np.array([int(row["year"]) for row in rows]),
        age=np.array([float(row["age"]) for row in rows]),
        loss=np.array([NOMINAL_THICKNESS - float(row["thickness"]) for row in rows]),
    )
