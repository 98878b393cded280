"""Sessions with functions on arrays: the bindings, `steelyard.weights`, and densities."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np

import steelyard as sy
from steelyard import _core, weights

from .exploring import OF_BINDINGS, Explorer
from .signatures import arguments
from .wild import Wild

METHODS = ("systematic", "stratified", "residual", "multinomial", "without_replacement", "other")


class Shapes:
    """Arguments that share the numbers of rows and columns of one call, and are mostly right."""

    def __init__(self, wild: Wild) -> None:
        self.wild = wild
        self.n, self.k, self.m = wild.count(0, 60), wild.count(0, 9), wild.count(0, 4)

    def laid_out(self, make: Callable[[], np.ndarray], share: float = 0.95) -> Any:
        return self.wild.mostly(lambda: self.wild.laid_out(make()), share)

    def matrix(self, columns: int | None = None) -> Any:
        values = self.wild.values((self.n, self.k if columns is None else columns))
        return self.laid_out(lambda: self.wild.spoiled(values) if self.wild.chance(0.2) else values)

    def logs(self) -> Any:
        return self.laid_out(lambda: self.wild.log_weights((self.n, self.k)))

    def vector(self, size: int) -> Any:
        return self.laid_out(lambda: np.abs(self.wild.values((size,))))

    def draws(self) -> Any:
        return self.vector(self.n)

    def out(self) -> Any:
        return self.laid_out(lambda: np.empty((self.n, self.k)))

    def efficiency(self) -> Any:
        return self.wild.mostly(lambda: self.wild.rng.random(self.k))

    def share(self) -> Any:
        return self.wild.mostly(self.wild.rng.random)

    def flag(self) -> Any:
        return self.wild.mostly(lambda: self.wild.chance(0.5))

    def density(self) -> tuple[Any, ...]:
        """A family, where to evaluate it, its hyperparameters, how often each counts, and room."""
        family = self.wild.one(("normal", "half_normal", "student_t", "gamma", "flat", "?"))
        count = {"half_normal": 1, "student_t": 3}.get(family, 2)
        hyper = [np.abs(self.wild.values((self.m + 1,))) for _ in range(count)]
        x = self.wild.mostly(lambda: self.wild.values((self.n,)))
        repeat = self.wild.mostly(lambda: self.wild.count(0, 4))
        return family, x, self.wild.mostly(lambda: hyper), repeat, np.empty(self.n)

    def starts(self) -> Any:
        cuts = self.wild.rng.integers(-1, self.n + 2, size=self.wild.count(0, 5))
        good = np.unique([0, self.n, *np.clip(cuts, 0, self.n)]).astype(np.int64)
        return self.wild.mostly(lambda: good if self.wild.chance(0.9) else np.append(cuts, self.n))

    def probs(self) -> Any:
        return self.wild.mostly(lambda: self.wild.rng.uniform(-0.1, 1.1, size=(self.m, self.k)))

    def weights(self) -> Any:
        return self.laid_out(lambda: np.abs(self.wild.values((self.n, self.m))))

    def narrow(self, x: Any) -> Any:
        if not isinstance(x, np.ndarray) or self.wild.chance(0.8):
            return x
        with np.errstate(all="ignore"):
            return np.nan_to_num(x.astype(np.float64)).astype(np.float32) if x.dtype == "f8" else x

    def ordered(self) -> tuple[Any, Any]:
        """Values, and the order of their columns: none, the right one, or another."""
        x = self.narrow(self.matrix())
        try:
            right = _core.sort_order(x)
        except OF_BINDINGS:
            right = None
        if self.wild.chance(0.2):
            right = self.wild.rng.integers(-1, self.n + 1, size=(self.n, self.k)).astype(np.int32)
        return x, None if self.wild.chance(0.5) else self.wild.mostly(lambda: right)


def bindings(wild: Wild, explorer: Explorer) -> None:
    """Every binding once, on arrays of one shape."""
    of = Shapes(wild)
    x, order = of.ordered()
    threads = wild.one((0, -1, 1, 2, 3, 1025, 2**70, "two", 1.5, None))
    given: dict[str, tuple[Any, ...]] = {
        "log_sum_exp": (of.narrow(of.logs()),),
        "normalise": (of.narrow(of.logs()), of.out()),
        "effective_size": (of.logs(), of.flag()),
        "largest_share": (of.logs(),),
        "describe": (of.narrow(of.logs()),),
        "smooth": (of.logs(), of.efficiency(), of.out()),
        "tail_shape": (of.logs(), of.efficiency()),
        "signed_tail_shape": (of.matrix(), of.efficiency()),
        "pareto_fit": (of.draws(),),
        "long_run_variance": (of.matrix(), of.starts(), of.flag()),
        "mean_square": (of.matrix(),),
        "weighted_mean": (of.matrix(), of.draws()),
        "sort_order": (x,),
        "quantile": (x, of.draws(), of.probs(), order),
        "quantile_many": (x, of.weights(), of.vector(of.m), order),
        "shortest_interval": (x, of.draws(), of.share(), order),
        "resample": (of.draws(), size(wild), method(wild), key(wild)),
        "influence": (of.logs(), of.matrix(of.m)),
        "f_tail": (of.draws(), wild.mostly(wild.positive), of.draws()),
        "normal_cdf": (of.draws(),),
        "normal_quantile": (of.draws(),),
        "weighted_moments": (of.matrix(), of.draws()),
        "weighted_covariance": (of.matrix(), of.draws()),
        "log_density": of.density(),
        "set_threads": (threads,),
    }
    for name, some in given.items():
        explorer.call(f"_core.{name}", getattr(_core, name), *some, refusals=OF_BINDINGS)
    newer(of, explorer, set(given))


def newer(of: Shapes, explorer: Explorer, known: set[str]) -> None:
    """The bindings that the list above does not know."""
    for name in sorted(set(_core.__all__) - known):
        function = getattr(_core, name)
        some, named = arguments(of.wild, function, lambda: of.wild.one((of.matrix, of.draws))())
        explorer.call(f"_core.{name} (any)", function, *some, refusals=OF_BINDINGS, **named)


def size(wild: Wild) -> Any:
    # Between these sizes a result fits into memory on some machines only.
    return wild.mostly(lambda: wild.count(0, 80) if wild.chance(0.95) else 2**60)


def method(wild: Wild) -> Any:
    return wild.mostly(lambda: wild.one(METHODS), 0.95)


def key(wild: Wild) -> Any:
    return wild.mostly(lambda: wild.rng.bytes(32), 0.95)


def functions(wild: Wild, explorer: Explorer) -> None:
    """Every function of `steelyard.weights` once."""
    shape = tuple(wild.count(1, 12) for _ in range(wild.count(1, 3)))
    if wild.chance(0.3):
        shape = (wild.count(25, 80), *shape[1:])
    axis: Any = wild.one((0, 0, 0, -1, None, (0, 1), (0,), len(shape) - 1, 9, (0, 0)))
    if len(shape) == 1 and wild.chance(0.5):
        axis = None

    def logs(of: tuple[int, ...] = shape) -> Any:
        return wild.mostly(lambda: wild.laid_out(wild.log_weights(of)))

    def out() -> Any:
        return wild.mostly(lambda: wild.laid_out(np.empty(shape)) if wild.chance(0.3) else None)

    def efficiency() -> Any:
        return wild.mostly(lambda: 1.0 if wild.chance(0.7) else wild.rng.random(shape[1:]))

    n = shape[0]
    rng = wild.mostly(lambda: wild.count(0, 9), 0.95)
    kind = wild.mostly(lambda: wild.one(("variance", "entropy")), 0.95)
    probs = wild.mostly(lambda: wild.rng.random(wild.count(0, 3)))
    values = wild.mostly(lambda: wild.laid_out(wild.values(shape)))
    call = explorer.call
    call("weights.log_sum_exp", weights.log_sum_exp, logs(), axis)
    call("weights.normalise", weights.normalise, logs(), axis, out())
    call("weights.effective_size", weights.effective_size, logs(), axis, kind)
    call("weights.largest_share", weights.largest_share, logs(), axis)
    call("weights.smooth", weights.smooth, logs(), axis, efficiency(), out())
    call("weights.tail_shape", weights.tail_shape, logs(), axis, efficiency())
    call("weights.resample", weights.resample, logs((n,)), size(wild), method(wild), rng=rng)
    call("weights.quantile", weights.quantile, values, logs((n,)), probs)
    call("weights.influence", weights.influence, logs(), wild.values((n, wild.count(1, 3))))


# Each distribution with the kinds of its arguments: any real number, or a positive one.
DISTRIBUTIONS: tuple[tuple[Callable[..., Any], str], ...] = (
    (sy.Normal, "rp"),
    (sy.StudentT, "prp"),
    (sy.HalfNormal, "p"),
    (sy.HalfCauchy, "p"),
    (sy.Gamma, "pp"),
    (sy.Beta, "pp"),
    (sy.Flat, "rr"),
)


def distribution(wild: Wild, explorer: Explorer, names: tuple[str, ...] = ()) -> Any:
    """A distribution, or None where its arguments are refused."""
    maker, kinds = wild.one(DISTRIBUTIONS)

    def argument(kind: str) -> Any:
        if names and wild.chance(0.2):
            return wild.one(names)
        number = wild.number if kind == "r" and wild.chance(0.3) else wild.positive
        return wild.mostly(number, 0.97)

    arguments = [argument(kind) for kind in kinds]
    if maker is sy.Flat and wild.chance(0.8):
        arguments = sorted(wild.number() for _ in kinds)
    return explorer.call(getattr(maker, "__name__", "distribution"), maker, *arguments)


def densities(wild: Wild, explorer: Explorer) -> None:
    """A distribution, its log density anywhere, and its support."""
    made = distribution(wild, explorer)
    if made is None:
        return
    shape = tuple(wild.count(0, 6) for _ in range(wild.count(0, 2)))
    where = wild.spoiled(wild.values(shape))
    explorer.call("log_density", made.log_density, where)
    explorer.call("support", made.support, shape)
    explorer.call("hash and text", lambda: (hash(made), str(made), made == made))
