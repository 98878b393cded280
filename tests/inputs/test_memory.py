"""A log likelihood on disk is read by block: it may be larger than the memory."""

from __future__ import annotations

import os
import shutil
import subprocess
import sys
import warnings
from collections.abc import Callable, Iterator
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

CHAINS, DRAWS, READINGS = 4, 1000, 6250
VALUES = CHAINS * DRAWS * READINGS
assert VALUES * 8 == 200_000_000

# What the process may take beyond what it holds when all is imported. The limit is on private
# memory (RLIMIT_DATA), which copies of the values need and pages of a mapped file do not. The whole
# is 200 MB; by block there were, measured, 3 MB in use for .npy, 25 MB for NetCDF, and for Zarr
# 31 MB, whichever the number of readings: blocks of 8 MB, and the chunks that they lie in. To these
# come the stacks of Zarr's threads and what allocators keep; both are held small below.
_SPARE = 120_000_000

_WITHIN_LIMIT = """
import resource, sys, threading
threading.stack_size(1 << 20)
import numpy as np, steelyard as sy
sy.Fit({{"mu": np.zeros((4, 8))}}, prior={{"mu": sy.Normal(0, 1)}}).reweigh(
    sy.swap_prior(mu=sy.Normal(0, 2)))  # starts the kernels' threads
{imports}
path = sys.argv[1]
in_use = int(open("/proc/self/status").read().split("VmData:")[1].split()[0]) * 1024
limit = in_use + {spare}
resource.setrlimit(resource.RLIMIT_DATA, (limit, limit))
mu = np.linspace(-1, 1, {draws}).reshape({shape})
{work}
"""
_BY_BLOCK = """
loglik = sy.read(path, kind="loglik")
fit = sy.Fit({"mu": mu}, prior={"mu": sy.Normal(0, 1)}, loglik=loglik)
answer = fit.reweigh(sy.drop(position=[3, 1000]) & sy.swap_prior(mu=sy.Normal(0.1, 1)))
print(float(answer.mean("mu").value))
"""


def _run(path: Path, work: str, imports: str = "") -> subprocess.CompletedProcess[str]:
    code = _WITHIN_LIMIT.format(
        imports=imports, spare=_SPARE, draws=CHAINS * DRAWS, shape=(CHAINS, DRAWS), work=work
    )
    return subprocess.run(
        [sys.executable, "-c", code, str(path)],
        capture_output=True,
        text=True,
        timeout=120,
        check=False,
        # One heap for all threads; else glibc keeps one a thread, each as large as it ever was.
        env={**os.environ, "MALLOC_ARENA_MAX": "1"},
    )


def _npy(path: Path) -> Path:
    out = np.lib.format.open_memmap(
        path.with_suffix(".npy"), "w+", np.float64, (CHAINS, DRAWS, READINGS)
    )
    for chain in range(CHAINS):
        out[chain] = _values(chain)
    out.flush()
    return path.with_suffix(".npy")


def _values(chain: int) -> np.ndarray:
    reading = np.linspace(-2, 2, READINGS)
    mu = np.linspace(-1, 1, CHAINS * DRAWS).reshape(CHAINS, DRAWS)[chain]
    return -0.5 * (reading - mu[:, None]) ** 2


def _dataset() -> xr.Dataset:
    values = np.stack([_values(chain) for chain in range(CHAINS)])
    return xr.Dataset({"readings": (("chain", "draw", "reading"), values)})


def _netcdf(path: Path) -> Path:
    _dataset().to_netcdf(path.with_suffix(".nc"), engine="h5netcdf")
    return path.with_suffix(".nc")


def _zarr(path: Path) -> Path:
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # zarr's, on consolidated metadata
        chunks = {"chunks": (1, 50, READINGS), "compressors": None}
        _dataset().to_zarr(path.with_suffix(".zarr"), encoding={"readings": chunks})
    return path.with_suffix(".zarr")


_IMPORTS = {_npy: "", _netcdf: "import xarray, h5netcdf, h5py", _zarr: "import xarray, zarr"}

pytestmark = pytest.mark.skipif(
    not Path("/proc/self/status").exists(), reason="limits of private memory are Linux's"
)


@pytest.fixture
def folder(tmp_path: Path) -> Iterator[Path]:
    """A folder that is emptied at once: pytest keeps its own for three runs."""
    yield tmp_path
    shutil.rmtree(tmp_path)


@pytest.mark.parametrize("write", _IMPORTS, ids=["npy", "netcdf", "zarr"])
def test_a_log_likelihood_on_disk_is_never_held_whole(
    write: Callable[[Path], Path], folder: Path
) -> None:
    done = _run(write(folder / "readings"), _BY_BLOCK, _IMPORTS[write])
    assert done.returncode == 0, done.stderr
    assert abs(float(done.stdout)) < 1


def test_the_limit_of_this_test_stops_whoever_holds_the_values_whole(folder: Path) -> None:
    path = _npy(folder / "readings")
    done = _run(path, "np.array(sy.read(path))")
    assert done.returncode != 0
    assert "Unable to allocate" in done.stderr
    assert "MemoryError" in done.stderr
