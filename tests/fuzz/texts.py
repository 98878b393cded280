"""Event texts from a seed: well formed, and with a few characters changed."""

from __future__ import annotations

from .wild import Wild

SIGNS = ("<", "<=", ">", ">=", "==", "!=")
NUMBERS = ("0", "0.12", "1e999", "1e-999", ".5", "3.", "12e", "007", "1_000", "٣", "1e5")
CHARACTERS = " ()[]<>=!+-*/'\".,:;&|~@#0e_µ∞\t\n\x00\ud800"


def event(wild: Wild, names: tuple[str, ...], depth: int = 3) -> str:
    text = _event(wild, names, depth)
    return _mangled(wild, text) if wild.chance(0.3) else text


def _event(wild: Wild, names: tuple[str, ...], depth: int) -> str:
    kind = wild.count(0, 6) if depth else 6
    if kind == 0:
        return f"not {_event(wild, names, depth - 1)}"
    if kind == 1:
        return f"({_event(wild, names, depth - 1)})"
    if kind in (2, 3):
        parts = [_event(wild, names, depth - 1) for _ in range(2)]
        return f"{parts[0]} {wild.one(('and', 'or'))} {parts[1]}"
    parts = [_sum(wild, names, depth) for _ in range(3 if wild.chance(0.1) else 2)]
    text = parts[0]
    for part in parts[1:]:
        text += f" {wild.one(SIGNS)} {part}"
    return text


def _sum(wild: Wild, names: tuple[str, ...], depth: int) -> str:
    kind = wild.count(0, 5) if depth else 5
    if kind == 0:
        return f"({_sum(wild, names, depth - 1)})"
    if kind == 1:
        return f"-{_sum(wild, names, depth - 1)}"
    if kind == 2:
        sign = wild.one(("+", "-", "*", "/", "**"))
        return f"{_sum(wild, names, depth - 1)} {sign} {_sum(wild, names, depth - 1)}"
    return wild.one(NUMBERS) if wild.chance(0.3) else _name(wild, names)


def _name(wild: Wild, names: tuple[str, ...]) -> str:
    name = wild.one(names) if wild.chance(0.95) else wild.name()
    if wild.chance(0.2):
        name += wild.one(("[0]", "[1]", "[-1]", "[0, 1]", "[]", "['A']", "[99]", "[0][1]"))
    return f'"{name}"' if wild.chance(0.1) else name


def _mangled(wild: Wild, text: str) -> str:
    for _ in range(wild.count(1, 3)):
        at = wild.count(0, len(text))
        kind = wild.count(0, 2)
        more = "" if kind == 0 else wild.one(CHARACTERS)
        text = text[:at] + more + text[at + (kind < 2) :]
    return text
