"""Crossings of a level along a path: where trust ends, roots, and confidence sets by inversion."""

from __future__ import annotations

import math
from dataclasses import dataclass
from itertools import pairwise

from steelyard.sensitivity.path import Path, Place

__all__ = ["Crossing", "confidence_set", "find_crossing", "flips", "inside", "trusted_region"]

_TRUST_STEPS = 4
_ROOT_STEPS = 7
_EDGE_STEPS = 3
# Half-width of a 95 % interval in errors.
_Z = 1.959963984540054


@dataclass(frozen=True)
class Crossing:
    """A value at which the decision flips, and the Monte Carlo error of that value."""

    at: float
    error: float


def trusted_region(path: Path, origin: float) -> tuple[float, float, bool, bool]:
    """Limits of the sound region about the start, and whether they cut the search short."""
    visited = sorted(path.places.values(), key=lambda p: p.at)
    at = next(i for i, p in enumerate(visited) if p.at == origin)
    if not visited[at].is_sound:
        return origin, origin, True, True
    ends = []
    for direction in (-1, 1):
        i = at
        while 0 <= i + direction < len(visited) and visited[i + direction].is_sound:
            i += direction
        beyond = i + direction
        if not 0 <= beyond < len(visited):
            ends.append((visited[i].at, False))
            continue
        good, bad = visited[i].at, visited[beyond].at
        for _ in range(_TRUST_STEPS):
            middle = path.value((path.step(good) + path.step(bad)) / 2)
            good, bad = (middle, bad) if path.visit([middle])[0].is_sound else (good, middle)
        ends.append((good, True))
    return ends[0][0], ends[1][0], ends[0][1], ends[1][1]


def inside(path: Path, low: float, high: float) -> list[Place]:
    found = [p for p in path.places.values() if low <= p.at <= high and p.is_sound]
    return sorted(found, key=lambda p: p.at)


def flips(one: Place, other: Place) -> bool:
    return (one.gap > 0) != (other.gap > 0)


def find_crossing(path: Path, one: Place, other: Place) -> Crossing:
    """Regula falsi (Illinois) on the same draws; stops at a hundredth of the Monte Carlo error."""
    a, b, fa, fb = one, other, one.gap, other.gap
    best = min(one, other, key=lambda p: abs(p.gap))
    for _ in range(_ROOT_STEPS):
        if abs(best.gap) <= 0.01 * best.error or path.left <= 0:
            break
        x, y = path.step(a.at), path.step(b.at)
        middle = path.visit([path.value(x - fa * (y - x) / (fb - fa))])[0]
        best = min(best, middle, key=lambda p: abs(p.gap))
        if (middle.gap > 0) == (fb > 0):
            b, fb, fa = middle, middle.gap, fa / 2
        else:
            a, fa, fb = middle, middle.gap, fb / 2
    slope = path.slope(best.at, one, other)
    error = best.error / abs(slope) if slope else math.inf
    if abs(best.gap) > best.error:
        # The reweighings ran out: a straight line, and a part of what it spans as error.
        x, y = path.step(a.at), path.step(b.at)
        at = path.value(x - a.gap * (y - x) / (b.gap - a.gap))
        return Crossing(at, math.hypot(error, abs(b.at - a.at) / 4))
    # What is left of the gap is removed by the slope.
    at = best.at - best.gap / slope if slope else best.at
    at = at if min(one.at, other.at) <= at <= max(one.at, other.at) else best.at
    return Crossing(at, error)


def confidence_set(path: Path, low: float, high: float) -> tuple[tuple[float, float], ...]:
    """``{λ: |P(λ) − γ| ≤ 1.96 error}`` inside the trusted region (inversion)."""
    for a, b in pairwise(inside(path, low, high)):
        if _held(a) != _held(b):
            _narrow(path, a, b)
        elif flips(a, b) and not _held(a):
            # A steep crossing between two nodes that are both sure: its own neighbourhood.
            middle = find_crossing(path, a, b)
            for sign in (-1.0, 1.0):
                edge = middle.at + sign * _Z * middle.error
                if a.at < edge < b.at and path.left > 0:
                    path.visit([edge])
            if path.left > -2:
                path.visit([middle.at])
    places = inside(path, low, high)
    out: list[list[float]] = []
    for i, place in enumerate(places):
        if not _held(place):
            continue
        left = _edge(path, places[i - 1], place) if i else -math.inf
        right = _edge(path, place, places[i + 1]) if i + 1 < len(places) else math.inf
        if out and i and _held(places[i - 1]):
            out[-1][1] = right
        else:
            out.append([left, right])
    return tuple((a, b) for a, b in out)


def _held(place: Place) -> bool:
    return abs(place.deviation) <= _Z


def _narrow(path: Path, a: Place, b: Place) -> None:
    for _ in range(_EDGE_STEPS):
        if path.left <= 0:
            return
        middle = path.visit([_edge(path, a, b)])[0]
        a, b = (middle, b) if _held(middle) == _held(a) else (a, middle)
        if abs(abs(middle.deviation) - _Z) < 0.02:
            return


def _edge(path: Path, a: Place, b: Place) -> float:
    """Where the deviation reaches 1.96 between two places, on a straight line."""
    if _held(a) == _held(b):
        return b.at
    out = a if not _held(a) else b
    goal = math.copysign(_Z, out.deviation)
    da, db = a.deviation - goal, b.deviation - goal
    share = da / (da - db) if math.isfinite(da - db) and da != db else 0.5
    share = min(max(share, 0.02), 0.98)
    x, y = path.step(a.at), path.step(b.at)
    return path.value(x + share * (y - x))
