"""Every notebook runs from top to bottom, and is stored small."""

from __future__ import annotations

from pathlib import Path

import nbformat
import pytest
from nbclient import NotebookClient

NOTEBOOKS = sorted((Path(__file__).parents[1] / "notebooks-demo").glob("*.ipynb"))


def test_there_are_notebooks() -> None:
    assert NOTEBOOKS


@pytest.mark.parametrize("path", NOTEBOOKS, ids=lambda path: path.stem)
# The kernel's own libraries warn about things that are not ours to mend.
@pytest.mark.filterwarnings("default")
def test_a_notebook_runs_from_top_to_bottom(path: Path, tmp_path: Path) -> None:
    notebook = nbformat.read(path, as_version=4)
    resources = {"metadata": {"path": str(tmp_path)}}
    NotebookClient(notebook, timeout=120, kernel_name="python3", resources=resources).execute()
    shown = [cell for cell in notebook.cells if cell.cell_type == "code" and cell.outputs]
    assert len(shown) >= 10


@pytest.mark.parametrize("path", NOTEBOOKS, ids=lambda path: path.stem)
def test_a_notebook_is_stored_small(path: Path) -> None:
    # 300 kB is what a reader on a slow line still waits for; a picture is some 40 kB.
    assert path.stat().st_size < 300_000
