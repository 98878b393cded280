"""What is exported, under which names, and that all of it is documented."""

from __future__ import annotations

import dataclasses
import inspect
import re
from typing import Any

import pytest

import steelyard as sy
from steelyard import densities, errors, weights

EXPORTED = [
    "Answer",
    "Beta",
    "Binomial",
    "Calibration",
    "Cauchy",
    "Change",
    "Combination",
    "Contrast",
    "Decision",
    "Dirichlet",
    "Distance",
    "Draws",
    "Estimate",
    "Exponential",
    "Finding",
    "Findings",
    "Fit",
    "Flat",
    "Flip",
    "Gamma",
    "Gumbel",
    "HalfCauchy",
    "HalfNormal",
    "HalfStudentT",
    "InverseGamma",
    "LKJCorrelation",
    "Laplace",
    "LeaveOut",
    "LogNormal",
    "Logistic",
    "LookAhead",
    "Mixture",
    "MultivariateNormal",
    "NegativeBinomial",
    "Normal",
    "Pareto",
    "Plan",
    "Poisson",
    "Pool",
    "Reason",
    "Scenario",
    "SkewNormal",
    "StudentT",
    "Table",
    "Truncated",
    "Uniform",
    "Verdict",
    "Weibull",
    "add",
    "by_observation",
    "combine",
    "deletion_mixture",
    "drop",
    "errors",
    "log_ratio",
    "pool",
    "power",
    "raise_noise",
    "read",
    "read_plan",
    "swap_loglik",
    "swap_prior",
    "threads",
    "weigh",
    "weigh_data",
    "weights",
]
WEIGHTS = [
    "Smoothed",
    "effective_size",
    "influence",
    "largest_share",
    "log_sum_exp",
    "normalise",
    "quantile",
    "resample",
    "smooth",
    "tail_shape",
]
ERRORS = {
    "AmbiguousNameError": ValueError,
    "ArgumentError": ValueError,
    "ArgumentTypeError": TypeError,
    "ChangeError": ValueError,
    "DrawsError": ValueError,
    "LikelihoodError": ValueError,
    "MissingExtraError": ImportError,
    "PriorError": ValueError,
    "QuantityError": ValueError,
    "RatioError": ValueError,
    "ShapeError": ValueError,
    "SteelyardError": Exception,
    "TruthValueError": TypeError,
    "UnknownNameError": ValueError,
}
METHODS = {
    sy.Fit: ["reweigh"],
    sy.Answer: [
        "covariance",
        "distance",
        "interval",
        "mean",
        "prob",
        "quantile",
        "resample",
        "sd",
        "shift",
        "table",
    ],
    sy.Estimate: ["error_interval", "to_xarray"],
    sy.Draws: ["to_xarray"],
    sy.Table: ["to_csv", "to_frame"],
}
PROPERTIES = {
    sy.Fit: ["base", "draws"],
    sy.Answer: [
        "change",
        "divergence",
        "draws",
        "effective_size",
        "entropy_size",
        "largest_share",
        "log_evidence_ratio",
        "log_weights",
        "plot",
        "tail_shape",
        "terms",
        "verdict",
        "weights",
    ],
    sy.Verdict: ["is_sound", "level", "reasons"],
}


def test_exported_names_are_the_ones_of_the_contract() -> None:
    assert sy.__all__ == EXPORTED
    assert weights.__all__ == WEIGHTS


def test_every_exported_name_is_there_and_nothing_else_is_public() -> None:
    public = {name for name in dir(sy) if not name.startswith("_")} - {"Any", "TYPE_CHECKING"}
    public -= {"import_module"}
    modules = {name for name in public if inspect.ismodule(getattr(sy, name))}
    assert set(EXPORTED) <= public
    assert public - modules <= set(EXPORTED)


def test_every_distribution_is_exported() -> None:
    assert set(densities.__all__) - {"Distribution"} <= set(EXPORTED)


def test_errors_are_the_ones_of_the_contract_and_of_the_builtin_kinds() -> None:
    assert errors.__all__ == sorted(ERRORS)
    for name, builtin in ERRORS.items():
        found = getattr(errors, name)
        assert issubclass(found, builtin)
        assert issubclass(found, errors.SteelyardError)


def test_answers_and_fits_have_the_methods_of_the_contract() -> None:
    for owner, names in METHODS.items():
        for name in names:
            assert callable(getattr(owner, name)), (owner, name)
    for owner, names in PROPERTIES.items():
        for name in names:
            assert hasattr(owner, name), (owner, name)
            assert not inspect.isfunction(getattr(owner, name)), (owner, name)


def _sections(doc: str) -> dict[str, str]:
    parts = re.split(r"^[ ]*([A-Z][A-Za-z ]+)\n[ ]*-{3,}\n", inspect.cleandoc(doc), flags=re.M)
    return dict(zip(parts[1::2], parts[2::2], strict=True)) | {"": parts[0]}


def _listed(section: str) -> set[str]:
    heads = re.findall(r"^(\S[^\n]*?)(?: :|$)", section, flags=re.M)
    return {name.strip().lstrip("*") for head in heads for name in head.split(",")}


def _parameters(target: Any) -> set[str]:
    signature = inspect.signature(target)
    return {p for p in signature.parameters if p != "self" and not p.startswith("_")}


FUNCTIONS = [
    *(getattr(sy, name) for name in EXPORTED if inspect.isfunction(getattr(sy, name))),
    *(getattr(weights, name) for name in WEIGHTS if inspect.isfunction(getattr(weights, name))),
    *(getattr(owner, name) for owner, names in METHODS.items() for name in names),
]
CLASSES = [getattr(sy, name) for name in EXPORTED if inspect.isclass(getattr(sy, name))]


@pytest.mark.parametrize("function", FUNCTIONS, ids=lambda f: f.__qualname__)
def test_a_function_documents_each_parameter_its_result_and_its_errors(function: Any) -> None:
    sections = _sections(function.__doc__)
    assert re.match(r"\S[^\n]*\.$", sections[""].strip().splitlines()[0])
    parameters = _parameters(function)
    assert parameters <= _listed(sections.get("Parameters", "")), parameters
    assert sections["Returns"].strip()
    if "Raises" in sections:
        named = set(re.findall(r"\b[A-Z]\w*Error\b", sections["Raises"]))
        assert named <= set(ERRORS), named


@pytest.mark.parametrize("owner", CLASSES, ids=lambda c: c.__name__)
def test_a_class_documents_what_it_holds(owner: Any) -> None:
    sections = _sections(owner.__doc__)
    assert re.match(r"\S[^\n]*\.$", sections[""].strip().splitlines()[0])
    listed = _listed(sections.get("Parameters", "")) | _listed(sections.get("Attributes", ""))
    assert listed
    held = {f.name for f in dataclasses.fields(owner)} if dataclasses.is_dataclass(owner) else set()
    held |= set(PROPERTIES.get(owner, [])) if owner is sy.Verdict else set()
    assert {name for name in held if not name.startswith("_")} <= listed


@pytest.mark.parametrize("owner", [sy.Fit, sy.Answer, sy.Verdict], ids=lambda c: c.__name__)
def test_every_public_property_has_a_docstring(owner: Any) -> None:
    for name in PROPERTIES[owner]:
        if name != "change":
            assert (getattr(owner, name).__doc__ or "").strip().split("\n")[0].endswith(".")


def test_every_function_that_checks_its_input_says_what_it_raises() -> None:
    silent = [
        f.__qualname__
        for f in FUNCTIONS
        if "Raises" not in _sections(f.__doc__) and _parameters(f) - {"path"}
    ]
    assert silent == [], silent
