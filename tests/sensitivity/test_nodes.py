"""Nodes: every rule as a single answer holds it, and the kernel against plain array code."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import pytest

import steelyard as sy
from steelyard.answers.bands import batch_edges
from steelyard.sensitivity import plain_nodes, sweep
from steelyard.sensitivity.nodes import Columns, Study, own_weights

SEED = 20_261_207


def _noise(*shape: int) -> Any:
    return np.random.default_rng(SEED).normal(size=shape)


def _normal(scale: float = 1.0, chains: int = 4, **given: Any) -> sy.Fit:
    x = scale * _noise(chains, 500)
    prior = {"x": sy.Normal(0, 2), "y": sy.Normal(0, 3)}
    return sy.Fit({"x": x, "y": x**2 + _noise(chains, 500)}, prior, **given)


def _slow() -> sy.Fit:
    x = np.cumsum(0.1 * _noise(4, 400), axis=1)
    return sy.Fit({"x": x, "y": x**3}, {"x": sy.Normal(0, 2), "y": sy.Normal(0, 9)})


def _apart() -> sy.Fit:
    x = 0.3 * _noise(4, 300)
    x[3] += 0.4
    return sy.Fit({"x": x, "y": x**2}, {"x": sy.Normal(0, 2), "y": sy.Normal(0, 9)})


def _repeated() -> sy.Fit:
    x = np.repeat(_noise(400), 3)
    return sy.Fit({"x": x, "y": -x}, {"x": sy.Normal(0, 2), "y": sy.Normal(0, 9)}, ordered=False)


def _unordered() -> sy.Fit:
    x = _noise(1500)
    return sy.Fit({"x": x, "y": -x}, {"x": sy.Normal(0, 2), "y": sy.Normal(0, 9)}, ordered=False)


def _weighted() -> sy.Fit:
    x = _noise(3, 400)
    prior = {"x": sy.Normal(0, 2), "y": sy.Normal(0, 9)}
    return sy.Fit({"x": x, "y": x**2}, prior, log_weights=0.4 * x - 0.1 * x**2)


def _many_short() -> sy.Fit:
    x = _noise(30, 40) + 0.3 * _noise(30, 1)
    return sy.Fit({"x": x, "y": x**2}, {"x": sy.Normal(0, 2), "y": sy.Normal(0, 9)})


def _pooled() -> sy.Fit:
    """The exact posterior of five readings with mean 1 and sd 1 under two priors."""
    fits = []
    for number, scale in enumerate((0.5, 1.0)):
        precision = 5 + scale**-2
        x = 5 / precision + precision**-0.5 * np.random.default_rng(SEED + number).normal(
            size=(4, 500)
        )
        loglik = {"readings": -2.5 * (x - 1) ** 2}
        prior = {"x": sy.Normal(0, scale), "y": sy.Normal(0, 9)}
        fits.append(sy.Fit({"x": x, "y": x**2}, prior, loglik=loglik))
    return sy.pool(fits, data="same", common="readings")


def _bounded() -> sy.Fit:
    x = np.random.default_rng(SEED).beta(2, 5, size=(4, 300))
    return sy.Fit({"x": x, "y": 1e150 * x}, {"x": sy.Beta(2, 5), "y": sy.Flat()})


def _sd(scale: float) -> sy.Change:
    return sy.swap_prior(x=sy.Normal(0, scale))


def _both(scale: float) -> sy.Change:
    return sy.swap_prior(x=sy.StudentT(4, 0.3, scale), y=sy.Normal(0.5, 3 * scale))


# Bases, families and grids that between them let every rule of weights and quantities speak.
CASES: dict[str, tuple[Callable[[], sy.Fit], Any, list[float]]] = {
    "plain": (_normal, _sd, [0.3, 1.0, 2.0, 5.0]),
    "two priors": (_normal, _both, [0.5, 1.0, 4.0]),
    "far": (_normal, lambda m: sy.swap_prior(x=sy.Normal(m, 0.4)), [0.0, 1.5, 3.0, 4.5]),
    "slow chains": (_slow, _sd, [0.2, 1.0, 3.0]),
    "a chain apart": (_apart, _sd, [0.1, 0.3, 1.0]),
    "one chain": (lambda: _normal(chains=1), _sd, [0.5, 1.5]),
    "repeated draws": (_repeated, _sd, [0.3, 1.5, 2.0]),
    "unordered": (_unordered, _sd, [0.3, 1.5, 2.0]),
    "weighted": (_weighted, _sd, [0.5, 1.5, 2.0]),
    "many short chains": (_many_short, _sd, [0.5, 1.5]),
    "pooled": (_pooled, _sd, [0.4, 1.0, 3.0, 30.0]),
    "widened beyond": (lambda: _normal(1.9), _sd, [1.5, 4.0, 50.0]),
    "supports": (_bounded, lambda t: sy.swap_prior(x=sy.Flat(0, t)), [0.4, 1.0, 1.5]),
    "betas": (_bounded, lambda a: sy.swap_prior(x=sy.Beta(a, 5)), [0.5, 2.0, 6.0]),
    "given ratio": (_normal, lambda t: sy.log_ratio(lambda d: t * d["x"]), [0.0, 0.5, 4.0]),
    "mixtures": (
        _normal,
        lambda w: sy.swap_prior(
            x=sy.Mixture([1 - w, w], [sy.Normal(0, 2), sy.StudentT(3, 0, 1.0)])
        ),
        [0.1, 0.9],
    ),
}
QUANTITIES = {"x": "x", "y": "y", "high": "x > 0.8"}


@pytest.mark.parametrize("name", CASES)
def test_a_node_is_a_single_answer_in_everything(name: str) -> None:
    make, family, grid = CASES[name]
    fit = make()
    swept = sweep(fit._record, family, grid, QUANTITIES)
    for place, node in enumerate(grid):
        answer = fit.reweigh(family(node))
        for label, asked in QUANTITIES.items():
            single = answer.prob(asked) if label == "high" else answer.mean(asked)
            estimate = swept.estimates[label]
            assert str(estimate.verdict.level[place]) == str(single.verdict.level), (node, label)
            np.testing.assert_allclose(estimate.value[place], single.value, rtol=1e-9, atol=1e-12)
            if not 1e-12 < single.value < 1 - 1e-12 and label == "high":
                continue  # what rounding left of a series has no figures
            for figure in ("value", "error", "tail_shape", "effective_draws", "degrees"):
                many, one = (getattr(e, figure) for e in (estimate, single))
                # Another order of summation; a skewness near none is a difference of rounding.
                tolerance = 1e-5 if figure == "degrees" else 1e-7
                np.testing.assert_allclose(
                    many[place], one, rtol=tolerance, atol=1e-11, err_msg=f"{node} {label} {figure}"
                )
            told = {(r.code, str(r.level)) for r in single.verdict.reasons if r.level < "sound"}
            many_told = estimate.verdict[place].reasons
            assert {(r.code, str(r.level)) for r in many_told if r.level < "sound"} == told
            np.testing.assert_allclose(
                _widened(estimate.verdict[place]), _widened(single.verdict), rtol=1e-9
            )


def _widened(verdict: Any) -> list[float]:
    """What algebra says of widened priors, figure by figure."""
    found = [f for f in verdict.findings if f.code == "prior_widened"]
    figures = [float(np.max(f.figure)) for f in found]
    return sorted(figure for figure in figures if not np.isnan(figure))


def test_the_cases_let_the_rules_speak() -> None:
    codes: set[str] = set()
    for make, family, grid in CASES.values():
        swept = sweep(make()._record, family, grid, QUANTITIES)
        for estimate in swept.estimates.values():
            codes |= {r.code for r in estimate.verdict.reasons if r.level < "sound"}
    assert codes >= {
        "support_gap",
        "prior_widened",
        "weight_shape",
        "quantity_shape",
        "few_contributions",
        "few_effective",
        "few_effective_draws",
        "few_carry",
        "chains_disagree",
        "event_draws",
        "saturated_divergence",
        "autocorrelated_tail",
    }


@pytest.mark.parametrize("name", CASES)
@pytest.mark.parametrize("shift", [False, True])
def test_the_kernel_is_the_plain_code(name: str, shift: bool) -> None:
    make, family, grid = CASES[name]
    base = make()._record
    own = own_weights(base)
    asked = list(_asked(base).values())
    columns = Columns.of(asked, base, own)
    study = Study(base, own, columns, batch_edges(base.draws), shift=shift, keep=True)
    ratios = np.stack([make().reweigh(family(node))._target.log_ratio for node in grid])
    total = ratios if base.log_weights is None else ratios + base.log_weights
    kept = np.empty_like(total)
    plain = plain_nodes.study(study, total, kept)
    found, weights = study._studied(np.ascontiguousarray(total))
    assert weights is not None
    np.testing.assert_allclose(weights, kept, rtol=1e-12, atol=1e-300)
    np.testing.assert_allclose(found[:, : plain_nodes.ABOUT], plain[:, : plain_nodes.ABOUT], 1e-8)
    series = [a[:, plain_nodes.ABOUT :].reshape(len(grid), 3, -1) for a in (found, plain)]
    for node, column in np.ndindex(len(grid), 3):
        for start in (0, 9) if shift else (0,):
            ours, plainly = (a[node, column, start : start + 9] for a in series)
            if min(plainly[1], series[1][node, column, 1]) < 1e-15:
                continue  # what rounding left of a series has no figures
            if not np.isfinite(ours[5]) or not np.isfinite(plainly[5]):
                # An event's shift has tied values, whose rounding says whether they are constant.
                ours, plainly = np.delete(ours, 5), np.delete(plainly, 5)
            # 1e-6: of a skewness.
            np.testing.assert_allclose(ours, plainly, rtol=1e-6, atol=1e-8)


def _asked(base: Any) -> dict[str, Any]:
    from steelyard.answers.quantities import asked_for

    return asked_for(QUANTITIES, base)


def test_nodes_do_not_depend_on_threads_or_blocks() -> None:
    fit = _normal()
    grid = np.linspace(0.5, 3, 600)
    one = sweep(fit._record, _sd, grid, QUANTITIES)
    with sy.threads(1):
        other = sweep(fit._record, _sd, grid, QUANTITIES)
    few = sweep(fit._record, _sd, grid[::100], QUANTITIES)
    for label in QUANTITIES:
        np.testing.assert_array_equal(one.value[label], other.value[label])
        np.testing.assert_array_equal(one.error[label], other.error[label])
        np.testing.assert_array_equal(one.value[label][::100], few.value[label])


def test_a_target_without_any_draw_is_refused_with_its_node() -> None:
    fit = _normal()
    with pytest.raises(sy.errors.RatioError, match="family at top = 50"):
        sweep(fit._record, lambda top: sy.swap_prior(x=sy.Flat(top, top + 1)), [0.0, 50.0], "x")
