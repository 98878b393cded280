"""
Draw from the posterior of the invented corrosion rates.

Run ``python -m steelyard.demo.sample`` to write ``draws.npz`` again, value for
value: four chains of 1,000 kept draws.

Notes
-----
Loss of wall thickness in mm, reading ``i`` at quay ``q`` by gauge ``g``::

    loss_i ~ Normal(rate_q age_i + bias_b [g = B], sd_g)
    rate_q ~ Normal(mu, tau)        mm a year, nine quays
    mu     ~ Normal(0.1, 0.1)
    tau    ~ HalfNormal(0.05)
    bias_b ~ HalfNormal(0.15)       the maker says gauge B never reads thick
    sd_a, sd_b ~ Gamma(4, 10)       shape and rate

A sweep has two steps. Given the three scales, (rate, bias_b, mu) is normal, cut
off at bias_b = 0: the uncut normal is the proposal of an independence Metropolis
step whose ratio is 1 inside the cut and 0 outside. Given (rate, bias_b, mu), the
three scales are independent of each other: each makes random-walk Metropolis
steps of its logarithm.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import numpy.typing as npt

from steelyard.demo.readings import QUAYS, Readings, load_readings

Array = npt.NDArray[np.float64]

SEED = 4
CHAINS, KEPT, WARM_UP, THIN = 4, 1_000, 500, 5
RANDOM_WALK_STEPS = 3  # a sweep; tau, with nine rates to learn from, needs them most
MEAN_PRIOR = (0.1, 0.1)
BIAS_PRIOR_SCALE = 0.15
SPREAD_PRIOR_SCALE = 0.05
NOISE_PRIOR = (4.0, 10.0)
# Draws are stored to this grid, about 1e-12: another machine's last-bit rounding
# stays invisible, and the zero bits it leaves shrink the file by a third.
GRID = 2.0**-40


class _Model:
    """
    The normal block as one weighted regression, and the scales' densities.

    The unknowns are ``u = (rate_1 .. rate_Q, bias_b, mu)``. Readings and prior
    terms alike are rows ``design @ u ~ Normal(response, sd)``: first the ``N``
    readings, then one row a rate, then the rows of bias_b and mu.
    """

    def __init__(self, readings: Readings) -> None:
        count, quays = readings.loss.size, len(QUAYS)
        self.quays = quays
        self.is_b = readings.gauge == 1
        self.design = np.zeros((count + quays + 2, quays + 2))
        self.design[np.arange(count), readings.quay] = readings.age
        self.design[:count, quays] = self.is_b
        self.design[count:, :] = np.eye(quays + 2)
        self.design[count : count + quays, quays + 1] = -1.0
        self.response = np.concatenate([readings.loss, np.zeros(quays + 1), MEAN_PRIOR[:1]])
        rows_per_scale = [(~self.is_b).sum(), self.is_b.sum(), quays]
        self.rows_per_scale = np.array(rows_per_scale, dtype=np.float64)

    def propose_block(self, scales: Array, random: np.random.Generator) -> Array:
        """Draw ``u`` of every chain from its uncut normal conditional, ``(C, Q + 2)``."""
        chains = scales.shape[0]
        sd = np.empty((chains, self.response.size))
        sd[:, : self.is_b.size] = scales[:, self.is_b.astype(int)]
        sd[:, self.is_b.size : -2] = scales[:, 2:]
        sd[:, -2:] = BIAS_PRIOR_SCALE, MEAN_PRIOR[1]
        rows = self.design / sd[:, :, None]
        transposed = rows.transpose(0, 2, 1)
        factor = np.linalg.cholesky(transposed @ rows)
        # precision = F Fᵀ, so F⁻ᵀ (F⁻¹ Xᵀy + z) is mean plus noise in one solve
        projected = np.linalg.solve(factor, transposed @ (self.response / sd)[:, :, None])
        noise = random.standard_normal(projected.shape)
        solved = np.linalg.solve(factor.transpose(0, 2, 1), projected + noise)
        return np.asarray(solved[:, :, 0])

    def squares_per_scale(self, block: Array) -> Array:
        """Sums of squared residuals that belong to sd_a, sd_b and tau, ``(C, 3)``."""
        squares = (self.response - block @ self.design.T) ** 2
        of_readings = squares[:, : self.is_b.size]
        return np.stack(
            [
                of_readings[:, ~self.is_b].sum(axis=1),
                of_readings[:, self.is_b].sum(axis=1),
                squares[:, self.is_b.size : -2].sum(axis=1),
            ],
            axis=1,
        )

    def log_density_of_log_scales(self, log_scales: Array, squares: Array) -> Array:
        """Conditional log densities of log sd_a, log sd_b, log tau, up to constants."""
        scales = np.exp(log_scales)
        density: Array = log_scales * (1 - self.rows_per_scale) - 0.5 * squares / scales**2
        shape, rate = NOISE_PRIOR
        density[:, :2] += (shape - 1) * log_scales[:, :2] - rate * scales[:, :2]
        density[:, 2] -= 0.5 * (scales[:, 2] / SPREAD_PRIOR_SCALE) ** 2
        return density

    def move_scales(self, scales: Array, block: Array, random: np.random.Generator) -> Array:
        """Random-walk Metropolis steps of the three log scales of every chain."""
        squares = self.squares_per_scale(block)
        # 2.4 conditional standard deviations: the usual choice in one dimension
        step = 2.4 / np.sqrt(2 * self.rows_per_scale)
        current = np.log(scales)
        density = self.log_density_of_log_scales(current, squares)
        for _ in range(RANDOM_WALK_STEPS):
            proposal = current + step * random.standard_normal(current.shape)
            proposed = self.log_density_of_log_scales(proposal, squares)
            accept = np.log1p(-random.random(current.shape)) < proposed - density
            current = np.where(accept, proposal, current)
            density = np.where(accept, proposed, density)
        return np.asarray(np.exp(current))

    def start(self, chains: int, random: np.random.Generator) -> tuple[Array, Array]:
        """Starts spread much wider than the posterior: scales and block."""
        scales = np.exp(np.log([0.4, 0.4, 0.03]) + 0.8 * random.standard_normal((chains, 3)))
        block = 0.1 + 0.1 * random.standard_normal((chains, self.quays + 2))
        block[:, self.quays] = np.abs(block[:, self.quays])
        return scales, block


def sample(readings: Readings, kept: int = KEPT, seed: int = SEED) -> dict[str, Array]:
    """
    Run the chains; every array is ``(chain, draw, *shape)``.

    Parameters
    ----------
    readings : Readings
        The invented readings.
    kept : int
        Kept draws of each chain. The first draws do not depend on it.
    seed : int
        Seed of all random numbers.

    Returns
    -------
    dict
        ``rate`` (with nine quays as its last axis), ``mu``, ``tau``, ``sd_a``,
        ``sd_b`` and ``bias_b``.
    """
    random = np.random.default_rng(seed)
    model = _Model(readings)
    quays = model.quays
    scales, block = model.start(CHAINS, random)
    draws = np.empty((CHAINS, kept, quays + 5))
    for sweep in range(-WARM_UP, kept * THIN):
        proposal = model.propose_block(scales, random)
        block = np.where(proposal[:, quays : quays + 1] >= 0, proposal, block)
        scales = model.move_scales(scales, block, random)
        if sweep >= 0 and sweep % THIN == THIN - 1:
            draws[:, sweep // THIN] = np.concatenate([block, scales], axis=1)
    draws = np.round(draws / GRID) * GRID
    names = ("bias_b", "mu", "sd_a", "sd_b", "tau")
    scalars = {name: draws[:, :, quays + offset] for offset, name in enumerate(names)}
    order = ("mu", "tau", "sd_a", "sd_b", "bias_b")
    return {"rate": draws[:, :, :quays]} | {name: scalars[name] for name in order}


def main() -> None:
    """Write ``draws.npz`` beside this file."""
    draws = sample(load_readings())
    path = Path(__file__).with_name("draws.npz")
    np.savez_compressed(path, allow_pickle=False, **draws)
    print(f"wrote {path.name}: {CHAINS} chains of {KEPT} draws, seed {SEED}")


if __name__ == "__main__":
    main()
