"""A plan file answered from files of draws: what the command line does."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from steelyard.base.files import read
from steelyard.base.record import read_base
from steelyard.errors import ArgumentError, LikelihoodError
from steelyard.planning.plan_files import read_plan
from steelyard.planning.triage import Triage, triage

__all__ = ["answer_plan"]


def answer_plan(
    plan: str | Path,
    draws: str | Path,
    loglik: str | Path | None = None,
    *,
    chain: Any = None,
    group: str | None = None,
) -> Triage:
    """
    Answer a plan file from files.

    Parameters
    ----------
    plan : str or Path
        A plan in TOML, with the prior that was fitted under ``[prior]`` where priors change.
    draws : str or Path
        Draws, in any form that :func:`steelyard.read` takes.
    loglik : str or Path, optional
        The log likelihood, in any such form; needed where data or powers of them change.
    chain, group : optional
        As for :func:`steelyard.read`, of the draws.

    Returns
    -------
    Triage
        The table, with a row for every scenario.

    Raises
    ------
    ArgumentError
        Where there is no such plan file.
    SteelyardError
        Where plan, draws or likelihood cannot be read; the message says what and why.
    """
    if not Path(plan).is_file():
        raise ArgumentError("plan", "a TOML file", f"no file at {plan}", "Look at the path.")
    stated = read_plan(Path(plan))
    read_draws = read(draws, group, chain=chain, kind="draws")
    likelihood = None if loglik is None else read(loglik, chain=chain, kind="loglik")
    base = read_base(read_draws, _keyed(stated.prior, read_draws), likelihood)
    if loglik is not None and not base.loglik:
        raise LikelihoodError(str(loglik), "a log likelihood", "none", "Look at the file.")
    return triage(base, stated.plan)


def _keyed(prior: Any, draws: Any) -> dict[Any, Any] | None:
    """Keys with a comma name several parameters at once, unless one is called so."""

    def read_key(key: str) -> Any:
        if key in draws or "," not in key:
            return key
        return tuple(part.strip() for part in key.split(","))

    return {read_key(key): term for key, term in prior.items()} or None
