"""All checks of a base, strongest first."""

from __future__ import annotations

from steelyard.base import Base
from steelyard.base.priors import callable_or_array
from steelyard.checking.findings import Finding, Findings, not_testable
from steelyard.checking.normaliser import check_normaliser
from steelyard.checking.rows import check_rows
from steelyard.checking.series import check_series
from steelyard.checking.stein import check_hyperpriors
from steelyard.checking.stored import check_stored

__all__ = ["check"]


def check(base: Base) -> Findings:
    """Is the claimed base the one that the draws came from? See ``Fit.check``."""
    return Findings(
        (
            check_rows(base),
            check_stored(base),
            check_hyperpriors(base),
            check_normaliser(base),
            _check_supports(base),
            *check_series(base),
        )
    )


def _check_supports(base: Base) -> Finding:
    """Draws outside a stated support are refused when the fit is read; say what was tested."""
    name = "supports"
    known = [t for t in (base.prior or {}).values() if not callable_or_array(t.density)]
    if not known:
        return not_testable(name, "No prior term states its support.")
    labels = ", ".join(t.label for t in known)
    sentence = f"All draws lie inside the stated supports of {labels}."
    return Finding(name, "nothing found", 0.0, 0.0, sentence)
