"""Signatures, without annotations: names, order, defaults, and what is keyword-only."""

from __future__ import annotations

import inspect
from typing import Any

import pytest

import steelyard as sy

SIGNATURES = {
    "Fit": "(draws, prior=None, loglik=None, *, stored_log_density=None, log_weights=None, "
    "names=None, chain=None, derived=(), predictive=None, approximation=None, "
    "ordered=True, sampled='posterior')",
    "Fit.reweigh": "(self, change, *, smooth=True)",
    "Fit.local": "(self, quantities=None, *, of='mean')",
    "Fit.pull": "(self, quantities=None)",
    "Fit.sweep": "(self, family, grid, quantities=None)",
    "Fit.tipping_point": "(self, family, event, level, between, start=None)",
    "Fit.worst_case": "(self, quantity, *, divergence=None, ratio=None)",
    "Fit.least_perturbation": "(self, quantity, target, *, prior_of=None)",
    "Fit.resistance": "(self, event, level)",
    "Fit.least_data": "(self, event, level, contrary, *, most=100.0)",
    "Fit.state": "(self, stated)",
    "Fit.bayes_factors": "(self, priors, *, against=None)",
    "Fit.triage": "(self, scenarios, quantities=None, event=None, level=None)",
    "Answer.attribute": "(self, quantity=None, *, groups=None, blocks=None)",
    "read_plan": "(source)",
    "weigh": "(log_ratio, draws=None, *, smooth=True)",
    "read": "(path, group=None, *, chain=None, kind=None)",
    "threads": "(n)",
    "swap_prior": "(mapping=None, /, **terms)",
    "swap_loglik": "(terms)",
    "drop": "(what=None, /, *, label=None, position=None, **dims)",
    "add": "(terms)",
    "weigh_data": "(terms)",
    "power": "(prior=1, likelihood=1)",
    "raise_noise": "(term, factor, sd)",
    "log_ratio": "(source, *, predictive=None)",
    "Answer.mean": "(self, quantity=None)",
    "Answer.sd": "(self, quantity=None)",
    "Answer.quantile": "(self, quantity=None, probs=(0.05, 0.5, 0.95))",
    "Answer.interval": "(self, quantity=None, mass=0.95, kind='central')",
    "Answer.prob": "(self, event, level=None)",
    "Answer.covariance": "(self, quantity=None)",
    "Answer.shift": "(self, quantity=None, of='mean')",
    "Answer.distance": "(self, quantity=None)",
    "Answer.table": "(self, quantities=None, probs=(0.05, 0.5, 0.95))",
    "Answer.resample": "(self, size, method='systematic', *, rng=None)",
    "Estimate.error_interval": "(self, level=0.95)",
    "Estimate.to_xarray": "(self)",
    "Table.to_frame": "(self, backend=None)",
    "Table.to_csv": "(self, path=None)",
    "Draws.to_xarray": "(self)",
    "weights.log_sum_exp": "(x, axis=None)",
    "weights.normalise": "(log_ratio, axis=None, out=None)",
    "weights.effective_size": "(log_weights, axis=None, kind='variance')",
    "weights.largest_share": "(log_weights, axis=None)",
    "weights.smooth": "(log_ratio, axis=None, relative_efficiency=1.0, out=None)",
    "weights.tail_shape": "(log_ratio, axis=None, relative_efficiency=1.0)",
    "weights.resample": "(log_weights, size, method='systematic', *, rng=None)",
    "weights.quantile": "(x, log_weights, probs)",
    "weights.influence": "(loglik, quantities)",
    "temper": "(start, source, target, *, start_log_weights=None, source_gradient=None, "
    "target_gradient=None, efficiency=0.9, scheme='systematic', move='mixed', "
    "waste_free=False, islands=20, size=None, names=None, most_evaluations=None, rng=None, "
    "progress=None)",
    "Normal": "(mean, sd)",
    "StudentT": "(df, location, scale)",
    "HalfNormal": "(scale)",
    "HalfCauchy": "(scale)",
    "Gamma": "(shape, rate)",
    "Beta": "(a, b)",
    "Flat": "(lower=-inf, upper=inf)",
}


def _bare(target: Any) -> str:
    signature = inspect.signature(target)
    plain = [p.replace(annotation=inspect.Parameter.empty) for p in signature.parameters.values()]
    return str(inspect.Signature(plain))


@pytest.mark.parametrize("name", SIGNATURES)
def test_a_signature_is_the_one_of_the_contract(name: str) -> None:
    target: Any = sy
    for part in name.split("."):
        target = getattr(target, part)
    assert _bare(target) == SIGNATURES[name]


def test_hyperparameters_bear_the_names_of_their_domains_in_order() -> None:
    for name, family in vars(sy).items():
        if inspect.isclass(family) and hasattr(family, "domains"):
            assert list(family.domains) == list(inspect.signature(family).parameters), name


def test_smoothed_is_a_named_pair() -> None:
    assert sy.weights.Smoothed._fields == ("log_weights", "tail_shape")
