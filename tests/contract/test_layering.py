"""The house: imports run one way, and heavy libraries wait until they are asked for."""

from __future__ import annotations

import ast
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

import steelyard

ROOT = Path(steelyard.__file__).parent
# From the ground up: each knows those before it and none of those after it.
GROUND = ["_core", "errors", "digits", "levels", "rules", "arrays", "verdicts", "table", "threads"]
FOLDERS = [
    "densities",
    "base",
    "changes",
    "checking",
    "weighing",
    "weights",
    "answers",
    "leaving_out",
    "sensitivity",
    "repair",
    "planning",
    "show",
    "fit",
    "demo",
    "__main__",
]
ORDER = [*GROUND, *FOLDERS]
HEAVY = ("pandas", "polars", "xarray", "matplotlib", "dask", "scipy", "pyarrow", "zarr", "h5netcdf")
LIGHT = {"numpy", "narwhals", "steelyard", "__future__", *sys.stdlib_module_names}


def _modules() -> list[Path]:
    return sorted(p for p in ROOT.rglob("*.py") if "__pycache__" not in p.parts)


def _name(path: Path) -> str:
    return str(path.relative_to(ROOT))


def _part(path: Path) -> str:
    """The part of the house that a file belongs to."""
    first = path.relative_to(ROOT).parts[0]
    return first.removesuffix(".py")


class _Imports(ast.NodeVisitor):
    """Imported modules, with whether they are inside a function or under TYPE_CHECKING."""

    def __init__(self) -> None:
        self.found: list[tuple[str, str, int]] = []
        self._where: list[str] = []

    def visit_FunctionDef(self, node: ast.FunctionDef) -> None:
        self._inside(f"def {node.name}", node)

    def visit_AsyncFunctionDef(self, node: ast.AsyncFunctionDef) -> None:
        self._inside(f"def {node.name}", node)

    def visit_If(self, node: ast.If) -> None:
        guarded = isinstance(node.test, ast.Name) and node.test.id == "TYPE_CHECKING"
        if guarded:
            self._inside("TYPE_CHECKING", node)
        else:
            self.generic_visit(node)

    def _inside(self, where: str, node: ast.AST) -> None:
        self._where.append(where)
        self.generic_visit(node)
        self._where.pop()

    def visit_Import(self, node: ast.Import) -> None:
        for alias in node.names:
            self._add(alias.name, node.lineno)

    def visit_ImportFrom(self, node: ast.ImportFrom) -> None:
        assert node.level == 0, "relative imports hide the folder"
        if node.module == "steelyard":
            for alias in node.names:
                self._add(f"steelyard.{alias.name}", node.lineno)
        else:
            self._add(node.module or "", node.lineno)

    def _add(self, module: str, line: int) -> None:
        self.found.append((module, self._where[-1] if self._where else "", line))


# Results whose `plot` imports from show/ inside the method.
PLOTTED = {"answers", "leaving_out", "sensitivity", "planning", "repair"}
PLACES = ("def plot", "TYPE_CHECKING")


def _imports(path: Path) -> list[tuple[str, str, int]]:
    visitor = _Imports()
    visitor.visit(ast.parse(path.read_text(encoding="utf-8")))
    return visitor.found


def _between_parts(path: Path) -> Iterator[tuple[str, str, int]]:
    """Imports of another part of the house: part, where in the file, line."""
    for module, where, line in _imports(path):
        steps = module.split(".")
        if steps[0] == "steelyard" and len(steps) > 1 and steps[1] != _part(path):
            yield steps[1], where, line


def test_every_file_belongs_to_a_part_of_the_house() -> None:
    assert {_part(p) for p in _modules()} <= {*ORDER, "__init__"}


@pytest.mark.parametrize("path", _modules(), ids=_name)
def test_a_file_imports_only_what_stands_above_it_in_the_house(path: Path) -> None:
    part = _part(path)
    if part == "__init__":
        return
    wrong = []
    for other, where, line in _between_parts(path):
        excepted = part in PLOTTED and other == "show" and where in PLACES
        if ORDER.index(other) >= ORDER.index(part) and not excepted:
            wrong.append(f"line {line} imports steelyard.{other}")
    assert wrong == []


def test_the_one_exception_is_used_and_stays_one() -> None:
    upwards = [
        (_name(path), other, where)
        for path in _modules()
        if _part(path) != "__init__"
        for other, where, _ in _between_parts(path)
        if ORDER.index(other) >= ORDER.index(_part(path))
    ]
    assert {other for _, other, _ in upwards} == {"show"}
    assert {name.split("/")[0] for name, _, _ in upwards} <= PLOTTED
    assert {where for _, _, where in upwards} <= set(PLACES)


@pytest.mark.parametrize("path", _modules(), ids=_name)
def test_heavy_libraries_are_never_imported_at_module_level(path: Path) -> None:
    top = [(m.split(".")[0], line) for m, where, line in _imports(path) if not where]
    assert [(m, line) for m, line in top if m in HEAVY] == []
    # The demonstration may ask for matplotlib; nothing asks for a library that is not declared.
    assert [(m, line) for m, line in top if m not in LIGHT] == []


def test_importing_the_package_loads_no_heavy_library() -> None:
    code = (
        "import sys, steelyard\n"
        f"print(sorted(m for m in {HEAVY!r} if m in sys.modules))\n"
        "print(sorted(m for m in sys.modules if m.startswith('steelyard.show')))\n"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.split("\n")[:2] == ["[]", "[]"]


def test_answering_needs_no_heavy_library() -> None:
    code = (
        "import sys\n"
        f"for heavy in {HEAVY!r}: sys.modules[heavy] = None\n"
        "import numpy as np, steelyard as sy\n"
        "x = np.random.default_rng(1).normal(size=(4, 100))\n"
        "fit = sy.Fit({'x': x}, {'x': sy.Normal(0, 2)}, x[..., None] * np.ones(3))\n"
        "answer = fit.reweigh(sy.swap_prior(x=sy.StudentT(4, 0, 2)) & sy.drop([1]))\n"
        "answer.table().to_csv(); str(answer); answer.prob('x > 0', 0.5); answer.distance()\n"
        "answer.resample(50, rng=1); answer.covariance(); answer.interval(kind='shortest')\n"
        "print('done')\n"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False)
    assert done.stdout.strip() == "done", done.stderr


def test_only_the_demonstration_prints() -> None:
    for path in _modules():
        if _part(path) in ("__main__", "demo"):
            continue
        calls = [
            n
            for n in ast.walk(ast.parse(path.read_text(encoding="utf-8")))
            if isinstance(n, ast.Call)
        ]
        printed = [c.lineno for c in calls if isinstance(c.func, ast.Name) and c.func.id == "print"]
        assert printed == [], _name(path)
