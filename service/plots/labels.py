"""Room for labels: beside their marks, clear of other marks, of each other and of the edge."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Final

from service.plots.scales import Point

LETTER_PX: Final = 7.5
_LETTER_HEIGHT_PX: Final = 11.0
#: Places of a label beside its mark, the nearest first: to which side, and how far.
_SIDES: Final = ((1, 0), (-1, 0), (0, -1), (0, 1), (1, -1), (1, 1), (-1, -1), (-1, 1))
_DISTANCES_PX: Final = (11.0, 22.0, 33.0, 44.0)


def place_labels(
    marks: Mapping[str, Point],
    corner: Point,
    opposite: Point,
    obstacles: Sequence[Point] = (),
    radius: float = 4.5,
) -> dict[str, tuple[Point, bool]]:
    """For each mark the middle of its label, and whether it is so far off that it needs a leader.

    Parameters
    ----------
    marks : mapping of str to Point
        By their labels, in the order in which they choose.
    corner, opposite : Point
        Upper left and lower right of the room.
    obstacles : sequence of Point
        Other places to keep clear of.
    radius : float
        Of a mark.
    """
    blocked = [*marks.values(), *obstacles]
    placed: dict[str, tuple[Point, bool]] = {}
    for label, mark in marks.items():
        half = 0.5 * LETTER_PX * len(label)
        spots = [
            ((mark[0] + dx * (distance + half - 4.0), mark[1] + dy * distance), distance)
            for distance in _DISTANCES_PX
            for dx, dy in _SIDES
        ]
        free = [
            each
            for each in spots
            if corner[0] + half < each[0][0] < opposite[0] - half
            and corner[1] + 6.0 < each[0][1] < opposite[1] - 6.0
            and _is_off(each[0], half, blocked, radius)
            and _is_off_labels(each[0], half, placed)
        ]
        spot, distance = (free or spots)[0]
        placed[label] = (spot, distance > _DISTANCES_PX[0])
    return placed


def _is_off(spot: Point, half: float, blocked: Sequence[Point], radius: float) -> bool:
    return all(
        abs(spot[0] - each[0]) > half + radius or abs(spot[1] - each[1]) > 5.0 + radius
        for each in blocked
    )


def _is_off_labels(spot: Point, half: float, placed: Mapping[str, tuple[Point, bool]]) -> bool:
    return all(
        abs(spot[0] - other[0]) > half + 0.5 * LETTER_PX * len(label)
        or abs(spot[1] - other[1]) > _LETTER_HEIGHT_PX
        for label, (other, _) in placed.items()
    )
