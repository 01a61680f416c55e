"""Scales: from a quantity to a place on paper, and the round values to mark on the way."""

from __future__ import annotations

import itertools
import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final, Protocol

#: Round values of one decade, from sparse to dense.
_DECADES: Final[tuple[tuple[float, ...], ...]] = (
    (1.0,),
    (1.0, 3.0),
    (1.0, 2.0, 5.0),
    (1.0, 2.0, 3.0, 5.0, 7.0),
    (1.0, 1.5, 2.0, 3.0, 4.0, 5.0, 7.0),
    (1.0, 1.5, 2.0, 2.5, 3.0, 4.0, 5.0, 6.0, 7.0, 8.0, 9.0),
)


class Scale(Protocol):
    """Maps a value to a coordinate in the drawing."""

    def __call__(self, value: float) -> float:
        """The coordinate of a value."""


@dataclass(frozen=True, slots=True)
class LinearScale:
    """Even steps of the value are even steps on paper."""

    low: float
    high: float
    start: float
    end: float

    def noted(self) -> str:
        """The scale in a few words, for a script that reads places back."""
        return f"linear {self.low:.9g} {self.high:.9g} {self.start:g} {self.end:g}"

    def __call__(self, value: float) -> float:
        """The coordinate of a value."""
        return _between(self.start, self.end, (value - self.low) / (self.high - self.low))


@dataclass(frozen=True, slots=True)
class LogScale:
    """Even ratios of the value are even steps on paper; for frequencies."""

    low: float
    high: float
    start: float
    end: float

    def noted(self) -> str:
        """The scale in a few words, for a script that reads places back."""
        return f"log {self.low:.9g} {self.high:.9g} {self.start:g} {self.end:g}"

    def __call__(self, value: float) -> float:
        """The coordinate of a value."""
        part = math.log(value / self.low) / math.log(self.high / self.low)
        return _between(self.start, self.end, part)


@dataclass(frozen=True, slots=True)
class CompressedScale:
    """Linear below ``knee``, logarithmic far above it, either sign; for R and X.

    Notes
    -----
    The coordinate goes as asinh(value / knee), so a resonance (tens of ohms) and an
    anti-resonance (thousands) can both be read in one drawing.
    """

    knee: float
    low: float
    high: float
    start: float
    end: float

    def __call__(self, value: float) -> float:
        """The coordinate of a value."""
        bottom, top = math.asinh(self.low / self.knee), math.asinh(self.high / self.knee)
        part = (math.asinh(value / self.knee) - bottom) / (top - bottom)
        return _between(self.start, self.end, part)


def _between(start: float, end: float, part: float) -> float:
    return start + part * (end - start)


def log_ticks(low: float, high: float, most: int) -> tuple[float, ...]:
    """As many round values between two limits as fit in ``most``, for a logarithmic scale."""
    decades = range(math.floor(math.log10(low)), math.ceil(math.log10(high)) + 1)
    best: tuple[float, ...] = ()
    for mantissas in _DECADES:
        values = (mantissa * 10.0**decade for decade in decades for mantissa in mantissas)
        inside = tuple(value for value in values if low <= value <= high)
        if len(inside) <= most:
            best = inside
    return best if len(best) > 1 else linear_ticks(low, high, most)


def linear_ticks(low: float, high: float, most: int) -> tuple[float, ...]:
    """At most ``most`` round values between two limits, in even steps of 1, 2 or 5."""
    step = _round_step((high - low) / most)
    first, last = math.ceil(low / step - 1e-9), math.floor(high / step + 1e-9)
    if last - first + 1 > most:
        step = _round_step(step * 1.01)
        first, last = math.ceil(low / step - 1e-9), math.floor(high / step + 1e-9)
    return tuple(index * step for index in range(first, last + 1))


def compressed_ticks(low: float, high: float, smallest: float) -> tuple[float, ...]:
    """Zero and the values 1, 2, 5 of each decade from ``smallest`` on, on either side."""
    reach = max(abs(low), abs(high))
    steps: list[float] = []
    value = smallest
    while value <= reach:
        steps.append(value)
        value = next_round(value * 1.01)
    signed = [-step for step in reversed(steps)] + [0.0] + steps
    return tuple(value for value in signed if low <= value <= high)


def next_round(value: float) -> float:
    """The smallest of 1, 2, 5, 10, 20, … not below a positive value."""
    return _round_step(value)


def _round_step(value: float) -> float:
    decade = 10.0 ** math.floor(math.log10(value))
    for mantissa in (1.0, 2.0, 5.0):
        if value <= mantissa * decade * (1.0 + 1e-9):
            return mantissa * decade
    return 10.0 * decade


Point = tuple[float, float]


def clipped_runs(points: Sequence[Point], low: float, high: float) -> list[list[Point]]:
    """The parts of a line that lie between two heights, cut where the line crosses them.

    Parameters
    ----------
    points : sequence of (x, y)
        The line's corners in order.
    low, high : float
        The heights, in the unit of y.
    """
    runs: list[list[Point]] = []
    for start, end in itertools.pairwise(points):
        piece = _clipped_piece(start, end, low, high)
        if piece is None:
            continue
        if runs and runs[-1][-1] == piece[0]:
            runs[-1].append(piece[1])
        else:
            runs.append(list(piece))
    return runs


def _clipped_piece(start: Point, end: Point, low: float, high: float) -> tuple[Point, Point] | None:
    rise = end[1] - start[1]
    if rise == 0.0:
        return (start, end) if low <= start[1] <= high else None
    crossings = sorted(((low - start[1]) / rise, (high - start[1]) / rise))
    first, last = max(0.0, crossings[0]), min(1.0, crossings[1])
    if first >= last:
        return None
    return _along(start, end, first), _along(start, end, last)


def _along(start: Point, end: Point, part: float) -> Point:
    # The ends themselves are returned as they are, so that pieces join.
    if part == 0.0:
        return start
    if part == 1.0:
        return end
    return (
        start[0] + part * (end[0] - start[0]),
        start[1] + part * (end[1] - start[1]),
    )
