"""Ground under a horizontal wire: what it is made of and what it reflects."""

from worker.engine.ground.medium import GROUND_CLASSES, PERFECT_GROUND, Ground
from worker.engine.ground.natural_water import water
from worker.engine.ground.table import GroundTable, tabulate, tabulate_many

__all__ = [
    "GROUND_CLASSES",
    "PERFECT_GROUND",
    "Ground",
    "GroundTable",
    "tabulate",
    "tabulate_many",
    "water",
]
