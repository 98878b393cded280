"""Is the log density that the sampler stored the sum of the claimed terms?"""

from __future__ import annotations

from itertools import combinations

import numpy as np

from steelyard.arrays import in_unit
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.checking.findings import Finding, not_testable
from steelyard.checking.totals import likelihood_totals, parameter_columns, prior_totals
from steelyard.digits import short

__all__ = ["check_stored"]

_NAME = "stored density"
# Share of the stored values' size that rounding (also to float32) explains; ours.
_ROUNDING = 2e-6
_DRAWS = 400
_MOST_TERMS = 3


def check_stored(base: Base) -> Finding:
    """
    Stored minus claimed log density must be the same constant at every draw.

    Where it is not, the fewest terms are sought (prior and likelihood terms, and logs of positive
    parameters, which Jacobians and dropped normalisers consist of) that explain it to rounding.
    """
    if base.stored_log_density is None:
        return not_testable(
            _NAME,
            "The sampler's stored log density was not given.",
            "Pass stored_log_density= to Fit: it is the strongest check there is.",
        )
    terms = {f"the prior of {k}": v for k, v in prior_totals(base).items()}
    terms |= {f"the likelihood of {k}": v for k, v in likelihood_totals(base).items()}
    if not terms:
        return not_testable(_NAME, "Neither prior nor log likelihood is stated.")
    with np.errstate(over="ignore", invalid="ignore"):
        rest = base.stored_log_density - np.sum(list(terms.values()), axis=0)
    if not np.isfinite(rest).all():
        return not_testable(_NAME, "Some densities are not finite.")
    limit = _ROUNDING * max(1.0, float(np.abs(base.stored_log_density).max()))
    spread = _sd(rest)
    if spread <= limit:
        sentence = f"Stored and claimed log density differ by a constant, to {short(spread)}."
        return Finding(_NAME, "nothing found", spread, limit, sentence)
    explanation = _explain(rest, {**terms, **_logs(base)}, limit)
    return Finding(
        _NAME,
        "found",
        spread,
        limit,
        f"Stored minus claimed log density varies by {short(spread)}. {explanation}",
        "Mend the claim, or see that the stored density is the one of these draws.",
    )


def _logs(base: Base) -> dict[str, Array]:
    names, columns = parameter_columns(base)
    positive = np.asarray((columns > 0).all(axis=0))
    logs = {f"log {n}": np.log(columns[:, i]) for i, n in enumerate(names) if positive[i]}
    share = np.asarray(positive & (columns < 1).all(axis=0))
    logs |= {f"log(1 − {n})": np.log1p(-columns[:, i]) for i, n in enumerate(names) if share[i]}
    # Long vectors bring more candidates than a search over triples should see.
    return logs if len(logs) <= 20 else {}


def _explain(rest: Array, candidates: dict[str, Array], limit: float) -> str:
    """The fewest terms whose combination is the residual, to rounding."""
    rows = np.linspace(0, len(rest) - 1, min(_DRAWS, len(rest))).astype(int)
    y = rest[rows] - rest[rows].mean()
    columns = {
        name: values[rows] - values[rows].mean()
        for name, values in candidates.items()
        if np.isfinite(values).all() and np.ptp(values[rows]) > 0
    }
    # One unit for all of them: least squares would square numbers beyond 1e154.
    unit = max(float(np.abs(f).max()) for f in (y, *columns.values()))
    if unit > 0:
        y, limit = y / unit, limit / unit
        columns = {name: f / unit for name, f in columns.items()}
    best: tuple[float, tuple[str, ...]] = (_sd(y), ())
    for size in range(1, min(_MOST_TERMS, len(columns)) + 1):
        for names in combinations(columns, size):
            design = np.stack([columns[n] for n in names], axis=1)
            coefficients, *_ = np.linalg.lstsq(design, y, rcond=None)
            left = _sd(y - design @ coefficients)
            if left <= 4 * limit:
                return " ".join(
                    _sentence(n, float(c)) for n, c in zip(names, coefficients, strict=True)
                )
            best = min(best, (left, names))
    if best[1] and best[0] < 0.2 * _sd(y):
        return f"Most of it, not all, goes with {' and '.join(best[1])}."
    return "No term of the claim, doubled or left out, explains it."


def _sd(values: Array) -> float:
    scaled, unit = in_unit(values[:, None])
    return float(scaled.std() * unit[0])


def _sentence(name: str, coefficient: float) -> str:
    whole = round(coefficient)
    if abs(coefficient - whole) > 1e-3 or whole == 0:
        return f"It holds {short(coefficient)} times {name}."
    if name.startswith("log"):
        times = "" if abs(whole) == 1 else f"{abs(whole)} times "
        sign = "plus" if whole > 0 else "minus"
        return f"It is {sign} {times}{name}: a Jacobian, or a normaliser that one side dropped."
    if whole > 0:
        again = "once more" if whole == 1 else f"{whole} times more"
        return f"The stored density counts {name} {again} than the claim."
    return f"The claim counts {name}, the stored density {'does not' if whole == -1 else 'less'}."
