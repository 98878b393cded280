"""Moves: how particles are shaken within one temperature; one family a file."""

from steelyard.repair.moves.cloud import Cloud, cloud_of
from steelyard.repair.moves.family import Family
from steelyard.repair.moves.independence import Independence
from steelyard.repair.moves.langevin import Langevin
from steelyard.repair.moves.random_walk import RandomWalk

__all__ = ["MOVES", "Cloud", "Family", "cloud_of"]

MOVES: dict[str, tuple[Family, ...]] = {
    "random walk": (RandomWalk(),),
    "independence": (Independence(),),
    "langevin": (Langevin(),),
    "mixed": (Independence(), RandomWalk()),
}
