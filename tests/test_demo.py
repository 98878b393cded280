"""The demonstration: what it prints and draws, and that its committed files can be made again."""

from __future__ import annotations

import os
import subprocess
import sys
from importlib.resources import files
from pathlib import Path

import numpy as np
import pytest

from steelyard.demo.make_data import as_csv
from steelyard.demo.model import CHANGES, load_draws, log_likelihood
from steelyard.demo.page import CAUTIONS
from steelyard.demo.readings import load_readings
from steelyard.demo.sample import GRID, sample

PNG_SIGNATURE = b"\x89PNG\r\n\x1a\n"
LEVELS = ("sound", "strained", "refit")


@pytest.fixture(scope="module")
def run(tmp_path_factory: pytest.TempPathFactory) -> tuple[str, Path]:
    folder = tmp_path_factory.mktemp("demo")
    done = subprocess.run(
        [sys.executable, "-W", "error", "-m", "steelyard", "--picture", "rows.png"],
        cwd=folder,
        capture_output=True,
        encoding="utf-8",
        env={**os.environ, "PYTHONIOENCODING": "utf-8"},
        check=False,
    )
    assert done.returncode == 0, done.stderr
    return done.stdout, folder / "rows.png"


def _rows(page: str) -> dict[str, str]:
    """Lines of the printed table by their scenario; labels never start another line unindented."""
    rows = {}
    for label in ("base", *CHANGES):
        found = [line for line in page.splitlines() if line.startswith(f"{label}  ")]
        assert len(found) == 1, (label, found)
        rows[label] = found[0]
    return rows


def test_page_has_a_row_for_the_base_and_each_of_six_changes_at_all_three_levels(
    run: tuple[str, Path],
) -> None:
    rows = _rows(run[0])
    assert len(rows) == 7
    levels = {
        label: [level for level in LEVELS if f" {level} " in row] for label, row in rows.items()
    }
    assert all(len(found) == 1 for found in levels.values()), levels
    assert {found[0] for found in levels.values()} == set(LEVELS)
    assert levels["base"] == ["sound"]


def test_a_change_that_opens_the_support_is_called_refit_although_no_weight_moves(
    run: tuple[str, Path],
) -> None:
    page = run[0]
    assert " refit " in _rows(page)["B either way"]
    after = page.split("B either way (refit)")[1]
    assert "bias_b" in after.split("without B (refit)")[0]


def test_answers_that_are_refit_give_no_decision_and_stand_in_brackets(
    run: tuple[str, Path],
) -> None:
    for row in _rows(run[0]).values():
        assert (" refit " in row) == ("no answer" in row) == ("[" in row)


def test_page_prints_the_cautions_says_that_all_is_invented_and_keeps_its_width(
    run: tuple[str, Path],
) -> None:
    page = run[0]
    assert all(caution in page for caution in CAUTIONS)
    assert "Not a design check; applicable local codes and a licensed engineer govern." in page
    assert "Sensitivity of the fitted model only; model adequacy is not assessed." in page
    assert "invented" in page
    assert max(map(len, page.splitlines())) <= 100


def test_picture_is_written_as_png(run: tuple[str, Path]) -> None:
    picture = run[1].read_bytes()
    assert picture.startswith(PNG_SIGNATURE)
    assert len(picture) > 60_000  # bare axes on this canvas take 17 kB


def test_without_matplotlib_the_page_names_the_extra(tmp_path: Path) -> None:
    code = (
        "import sys; sys.modules['matplotlib'] = None\n"
        "from steelyard.__main__ import main\n"
        "raise SystemExit(main([]))"
    )
    done = subprocess.run(
        [sys.executable, "-c", code],
        cwd=tmp_path,
        capture_output=True,
        encoding="utf-8",
        env={**os.environ, "PYTHONIOENCODING": "utf-8"},
        check=False,
    )
    assert done.returncode == 0, done.stderr
    assert "steelyard[plot]" in done.stdout
    assert not list(tmp_path.iterdir())


def test_data_script_makes_the_committed_readings_byte_for_byte() -> None:
    committed = files("steelyard.demo").joinpath("readings.csv").read_bytes()
    assert as_csv().encode("utf-8") == committed
    assert b"Invented" in committed.splitlines()[0]


def test_sampler_makes_the_committed_draws_again() -> None:
    again, committed = sample(load_readings()), load_draws()
    assert set(again) == set(committed)
    for name, draws in again.items():
        assert draws.dtype == np.float64
        assert draws.shape[:2] == (4, 1_000)
        # Equal on one machine. Linear algebra for another processor differs in the last bits and
        # carries a few values over to the next point of the grid that draws are stored on (8 of
        # 56,000, by one step, with kernels for a processor without AVX).
        np.testing.assert_allclose(draws, committed[name], rtol=0, atol=2 * GRID)


def test_log_likelihood_equals_normal_densities_computed_one_by_one() -> None:
    stats = pytest.importorskip("scipy.stats")
    draws, readings = load_draws(), load_readings()
    terms = log_likelihood(draws, readings)
    for gauge, (name, sd) in enumerate((("gauge A", "sd_a"), ("gauge B", "sd_b"))):
        numbers = np.flatnonzero(readings.gauge == gauge)
        assert terms[name].shape == (4, 1_000, numbers.size)
        for place in (0, numbers.size // 2, numbers.size - 1):
            reading = numbers[place]
            rate = draws["rate"][2, 17, readings.quay[reading]]
            loss = rate * readings.age[reading] + gauge * draws["bias_b"][2, 17]
            expected = stats.norm.logpdf(readings.loss[reading], loss, draws[sd][2, 17])
            # A handful of roundings of numbers near 1: 1e-12 leaves a factor of a thousand.
            assert terms[name][2, 17, place] == pytest.approx(expected, abs=1e-12)
