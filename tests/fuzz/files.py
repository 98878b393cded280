"""Sessions with files: whole ones, ones with some bytes changed, and ones cut short."""

from __future__ import annotations

import io
import tempfile
from pathlib import Path
from typing import Any

import numpy as np

import steelyard as sy

from .exploring import Explorer
from .wild import Wild

CELLS = ("", " ", "nan", "inf", "1e999", "1_0", "x", '"', "٣", "0x1", "-", "1.5 ", "#", "\ufeff")


def files(wild: Wild, explorer: Explorer) -> None:
    """Read a file of any kind and any state."""
    ending = wild.one((".csv", ".npz", ".npy", ".parquet", ".txt"))
    content = table(wild) if ending == ".csv" else binary(wild, ending)
    if wild.chance(0.3):
        content = damaged(wild, content)
    chain = wild.mostly(lambda: wild.one((None, None, "chain")), 0.95)
    kind = wild.mostly(lambda: wild.one((None, "draws", "loglik")), 0.95)
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / f"draws{ending}"
        path.write_bytes(content)
        where = wild.mostly(lambda: path, 0.97)
        result = explorer.call("read", sy.read, where, chain=chain, kind=kind)
        if isinstance(result, sy.Draws):
            explorer.call("Fit", sy.Fit, result)


def table(wild: Wild) -> bytes:
    names = [wild.name() for _ in range(wild.count(1, 4))]
    if wild.chance(0.8):
        names = list(dict.fromkeys(["chain", *names]))
    lines = [",".join(names)]
    for row in range(wild.count(0, 12)):
        cells = [repr(wild.number()) for _ in names]
        if names[0] == "chain":
            cells[0] = str(row // 4)
        if wild.chance(0.05):
            cells[wild.count(0, len(cells) - 1)] = wild.one(CELLS)
        if wild.chance(0.03):
            cells = cells[1:]
        lines.append(",".join(cells))
    if wild.chance(0.2):
        lines.insert(0, "# invented")
    return (
        wild.one(("\n", "\n", "\r\n", "\r"))
        .join(lines)
        .encode("utf-16" if wild.chance(0.05) else "utf-8")
    )


def binary(wild: Wild, ending: str) -> bytes:
    shape = (wild.count(1, 3), wild.count(3, 9))
    stream = io.BytesIO()
    values: Any = wild.values(shape) if wild.chance(0.7) else wild.array(shape)
    if ending == ".npz":
        np.savez(stream, mu=values, tau=np.abs(wild.values(shape)))
    elif ending == ".npy":
        np.save(stream, values)
    else:
        stream.write(b"PAR1" + wild.rng.bytes(wild.count(0, 60)) + b"PAR1")
    return stream.getvalue()


def damaged(wild: Wild, content: bytes) -> bytes:
    changed = bytearray(content)
    for _ in range(wild.count(0, 3)):
        if changed:
            changed[wild.count(0, len(changed) - 1)] = wild.count(0, 255)
    cut = wild.count(0, len(changed)) if wild.chance(0.3) else len(changed)
    return bytes(changed[:cut])
