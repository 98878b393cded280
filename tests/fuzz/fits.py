"""Sessions with fits: read draws, state changes, ask answers."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

import numpy as np

import steelyard as sy

from .arrays import METHODS, distribution, size
from .exploring import Explorer
from .signatures import arguments, public
from .texts import event
from .wild import Wild

PARAMETERS = ("mu", "tau", "rate", "quay 4", "loss")


class Scene:
    """The shapes that the parts of one fit share."""

    def __init__(self, wild: Wild) -> None:
        self.chains, self.length = wild.count(1, 4), wild.one((4, 5, 8, 20, 60))
        if wild.chance(0.1):
            self.length = wild.count(1, 3)
        self.stacked = wild.chance(0.3)
        self.names = PARAMETERS[: wild.count(1, len(PARAMETERS))]
        self.stated = [name for name in self.names if wild.chance(0.8)]
        self.terms = ("gauge A", "gauge B")[: wild.one((0, 1, 1, 2, 2, 2))]

    @property
    def lead(self) -> tuple[int, ...]:
        if self.stacked:
            return (self.chains * self.length,)
        return (self.chains, self.length)

    def draws(self, wild: Wild) -> dict[str, Any]:
        shapes = {"rate": (3,), "loss": (2, 2)}
        draws = {n: wild.values((*self.lead, *shapes.get(n, ()))) for n in self.names}
        if "tau" in draws:
            draws["tau"] = np.abs(draws["tau"]) + 1e-9
        draws = {name: wild.laid_out(values) for name, values in draws.items()}
        if wild.chance(0.05):
            draws[wild.name()] = wild.anything()
        return draws

    def loglik(self, wild: Wild, name: str) -> np.ndarray:
        shape = {"gauge A": (5,), "gauge B": () if wild.chance(0.2) else (2,)}.get(name, (1,))
        values = -np.abs(wild.values((*self.lead, *shape)))
        return wild.laid_out(wild.spoiled(values) if wild.chance(0.02) else values)


def any_prior(wild: Wild, explorer: Explorer, scene: Scene, name: str) -> Any:
    kind = wild.count(0, 9)
    if kind == 0:
        return wild.values(scene.lead)
    if kind == 1:
        return lambda draws: -np.abs(first(draws, scene))
    if kind == 2:
        return lambda draws: wild.anything()
    if kind < 6 and name != "tau":
        return sy.Normal(0.0, wild.positive())
    if kind < 6:
        return sy.HalfNormal(wild.positive())
    if kind == 6:
        return sy.Flat()
    return distribution(wild, explorer, scene.names) or sy.Flat()


def a_fit(wild: Wild, explorer: Explorer, scene: Scene) -> Any:
    prior = {name: any_prior(wild, explorer, scene, name) for name in scene.stated}
    if wild.chance(0.05):
        prior[wild.name()] = wild.anything()
    loglik: Any = {name: scene.loglik(wild, name) for name in scene.terms} or None
    chain = np.repeat(np.arange(scene.chains), scene.length) if scene.stacked else None
    options: dict[str, Callable[[], Any]] = {
        "stored_log_density": lambda: wild.values(scene.lead),
        "log_weights": lambda: wild.log_weights(scene.lead),
        "derived": lambda: {"halved": lambda draws: first(draws, scene) / 2},
        "approximation": lambda: wild.values(scene.lead),
        "ordered": lambda: wild.chance(0.5),
        "names": wild.anything,
        "predictive": wild.anything,
    }
    chosen = {name: wild.mostly(make, 0.95) for name, make in options.items() if wild.chance(0.05)}
    return explorer.call(
        "Fit",
        sy.Fit,
        wild.mostly(lambda: scene.draws(wild), 0.97),
        wild.mostly(lambda: prior, 0.98),
        wild.mostly(lambda: loglik, 0.98),
        chain=wild.mostly(lambda: chain, 0.98),
        **chosen,
    )


def a_change(wild: Wild, explorer: Explorer, scene: Scene) -> Any:
    name = wild.one(scene.stated or scene.names)
    term = wild.one(scene.terms) if scene.terms and wild.chance(0.95) else wild.name()
    call = explorer.call

    def factor() -> Any:
        return wild.mostly(lambda: wild.positive() if wild.chance(0.5) else wild.one((0, 1, 0.5)))

    def positions() -> Any:
        return [wild.count(0, 5) for _ in range(wild.count(1, 2))]

    kinds: tuple[Callable[[], Any], ...] = (
        lambda: call("swap_prior", sy.swap_prior, {name: any_prior(wild, explorer, scene, name)}),
        lambda: call("swap_prior", sy.swap_prior, {wild.name(): wild.anything()}),
        lambda: call("swap_loglik", sy.swap_loglik, {term: scene.loglik(wild, term)}),
        lambda: call("swap_loglik", sy.swap_loglik, wild.anything()),
        lambda: call("drop", sy.drop, wild.mostly(lambda: term, 0.8)),
        lambda: call("drop", sy.drop, {term: wild.mostly(positions, 0.8)}),
        lambda: call("drop", sy.drop, label=wild.anything()),
        lambda: call("add", sy.add, {wild.name(): wild.mostly(lambda: scene.loglik(wild, ""))}),
        lambda: call("weigh_data", sy.weigh_data, {term: factor()}),
        lambda: call("power", sy.power, prior=factor(), likelihood=factor()),
        lambda: call("power", sy.power, {name: factor()}, {term: factor()}),
        lambda: call("raise_noise", sy.raise_noise, term, factor(), wild.mostly(wild.positive)),
        lambda: call("log_ratio", sy.log_ratio, wild.mostly(lambda: wild.log_weights(scene.lead))),
        lambda: call("log_ratio", sy.log_ratio, lambda draws: first(draws, scene)),
    )
    change = wild.one(kinds)()
    if change is not None and wild.chance(0.4):
        other = wild.mostly(lambda: a_change(wild, explorer, scene), 0.95)
        return call("&", lambda: change & other) if isinstance(other, sy.Change) else change
    return change


def first(draws: Mapping[str, Any], scene: Scene) -> Any:
    """Some draws also where an answer holds none by name: the callable itself must not fail."""
    return next(iter(draws.values()), np.zeros(scene.chains * scene.length))


def a_quantity(wild: Wild, scene: Scene) -> Any:
    kinds: tuple[Callable[[], Any], ...] = (
        lambda: wild.one(scene.names),
        lambda: wild.one(scene.names) + wild.one(("[0]", "[1, 1]", "[7]", "[-1]", "[")),
        lambda: wild.array((*scene.lead, *((2,) if wild.chance(0.3) else ()))),
        lambda: wild.values(scene.lead),
        lambda: lambda draws: np.tanh(first(draws, scene)),
        lambda: lambda draws: wild.anything(),
        lambda: {"a": wild.one(scene.names), "b": wild.anything()},
        lambda: None,
    )
    return wild.mostly(wild.one(kinds), 0.95)


def an_event(wild: Wild, scene: Scene) -> Any:
    kinds: tuple[Callable[[], Any], ...] = (
        lambda: event(wild, scene.names),
        lambda: event(wild, scene.names),
        lambda: f"{scene.names[0]} > {wild.number()}",
        lambda: wild.values(scene.lead) > wild.number(),
        lambda: lambda draws: first(draws, scene) > 0,
        lambda: wild.anything(),
    )
    return wild.one(kinds)()


def ask(wild: Wild, explorer: Explorer, scene: Scene, answer: sy.Answer) -> None:
    """One method of an answer, on anything."""
    quantity = a_quantity(wild, scene)
    mass = wild.mostly(wild.rng.random, 0.95)
    probs = wild.mostly(lambda: wild.rng.random(wild.count(0, 3)), 0.95)
    of = wild.mostly(lambda: wild.one(("mean", "sd", ("quantile", 0.3), ("quantile", 2))), 0.95)
    kind = wild.mostly(lambda: wild.one(("central", "shortest")), 0.95)
    level = wild.mostly(lambda: wild.rng.random() if wild.chance(0.5) else None)
    rng = wild.mostly(lambda: 7, 0.95)
    method = wild.mostly(lambda: wild.one(METHODS), 0.95)
    call = explorer.call
    kinds: tuple[Callable[[], Any], ...] = (
        lambda: call("mean", answer.mean, quantity),
        lambda: call("sd", answer.sd, quantity),
        lambda: call("quantile", answer.quantile, quantity, probs),
        lambda: call("interval", answer.interval, quantity, mass, kind),
        lambda: call("prob", answer.prob, an_event(wild, scene), level),
        lambda: call("prob", answer.prob, an_event(wild, scene), level),
        lambda: call("shift", answer.shift, quantity, of),
        lambda: call("shift", answer.shift, an_event(wild, scene)),
        lambda: call("covariance", answer.covariance, quantity),
        lambda: call("distance", answer.distance, quantity),
        lambda: call("table", answer.table, quantity, probs),
        lambda: call("resample", answer.resample, size(wild), method, rng=rng),
        lambda: call("log_evidence_ratio", lambda: answer.log_evidence_ratio),
        lambda: call("divergence", lambda: answer.divergence),
        lambda: call("verdict", lambda: answer.verdict),
    )
    ask_further(explorer, wild.one(kinds)(), mass)


def ask_further(explorer: Explorer, result: Any, mass: Any) -> None:
    """What a result itself can be asked."""
    if isinstance(result, sy.Estimate):
        explorer.call("error_interval", result.error_interval, mass)
        if np.shape(result.value):
            explorer.call("verdict[…]", lambda: result.verdict[0])
    elif isinstance(result, sy.Table):
        explorer.call("to_csv", result.to_csv)


KNOWN = {"check", "reweigh"}
KNOWN_OF_ANSWERS = {
    *("mean", "sd", "quantile", "interval", "prob", "shift", "covariance", "distance"),
    *("table", "resample"),
}


def others(wild: Wild, explorer: Explorer, scene: Scene, thing: Any, known: set[str]) -> None:
    """A method that is newer than this file, on anything that some method takes."""

    def one() -> Any:
        kinds: tuple[Callable[[], Any], ...] = (
            lambda: a_quantity(wild, scene),
            lambda: an_event(wild, scene),
            lambda: a_change(wild, explorer, scene),
            lambda: wild.rng.random(),
            lambda: wild.values((3,)),
            wild.anything,
        )
        return wild.one(kinds)()

    names = public(thing, known)
    if names:
        name = wild.one(names)
        method = getattr(thing, name)
        given, named = arguments(wild, method, one)
        title = f"{type(thing).__name__}.{name} (any)"
        explorer.call(title, method, *given, **named)


def fits(wild: Wild, explorer: Explorer) -> None:
    """A fit, two changes, and questions to what comes of them."""
    scene = Scene(wild)
    fit = a_fit(wild, explorer, scene)
    if fit is None:
        return
    base = explorer.call("base", lambda: fit.base)
    explorer.call("Fit texts", lambda: (repr(fit), fit._repr_html_()))
    if wild.chance(0.2):
        explorer.call("check", fit.check)
    others(wild, explorer, scene, fit, KNOWN)
    for answer in (base, *(reweighed(wild, explorer, scene, fit) for _ in range(2))):
        if answer is not None:
            for _ in range(4):
                ask(wild, explorer, scene, answer)
            others(wild, explorer, scene, answer, KNOWN_OF_ANSWERS)


def reweighed(wild: Wild, explorer: Explorer, scene: Scene, fit: sy.Fit) -> Any:
    change = wild.mostly(lambda: a_change(wild, explorer, scene), 0.97)
    smooth = wild.mostly(lambda: wild.chance(0.7), 0.97)
    return explorer.call("reweigh", fit.reweigh, change, smooth=smooth)


def ratios(wild: Wild, explorer: Explorer) -> None:
    """An answer from bare log ratios, and questions to it."""
    scene = Scene(wild)
    ratio = wild.mostly(lambda: wild.log_weights(scene.lead))
    draws = wild.mostly(lambda: scene.draws(wild) if wild.chance(0.5) else None, 0.95)
    answer = explorer.call("weigh", sy.weigh, ratio, draws, smooth=wild.chance(0.7))
    if answer is not None:
        for _ in range(4):
            ask(wild, explorer, scene, answer)
