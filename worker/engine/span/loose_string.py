"""A string of several pieces between two points: the elastic catenary, in space.

Pieces may differ in weight, wind and stretch, and a weight may hang where two of them meet. Nothing
is taken as shallow, so a taut wire and a slack one are one solution.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import asinh, hypot
from typing import Final

import numpy as np
from numpy.typing import ArrayLike, NDArray

from worker.engine.errors import NotConverged, OutOfRange
from worker.engine.limits import require_within

FloatArray = NDArray[np.float64]

_MOST_STEPS: Final = 200
#: The far end is met within this part of the distance between the ends.
_CLOSURE: Final = 1e-11
#: And no further off than this where rounding allows no better.
_ROUNDED: Final = 1e-7
_HALVINGS: Final = 60
#: Parts of the energy that are more than its rounding.
_TELLING: Final = 1e-9
#: Where the upper triangle that `_run` gives after the end belongs.
_SYMMETRIC: Final = np.array([[3, 4, 5], [4, 6, 7], [5, 7, 8]])
_RANGES: Final = (
    ("length_m", 1e-6, 1e5, "m"),
    ("weight_n_per_m", 1e-6, 1e6, "N/m"),
    ("wind_n_per_m", -1e6, 1e6, "N/m"),
    ("stiffness_n", 1e-3, 1e12, "N"),
    ("end_weight_n", 0.0, 1e9, "N"),
    ("end_wind_n", -1e9, 1e9, "N"),
)


@dataclass(frozen=True, slots=True)
class Piece:
    """One uniform piece of a string.

    Attributes
    ----------
    length_m : float
        Unstretched length, above zero.
    weight_n_per_m, wind_n_per_m : float
        Load downwards (above zero) and sideways, each per unstretched metre.
    stiffness_n : float
        Modulus times section: the pull that would double its length.
    end_weight_n, end_wind_n : float
        What else hangs, and is blown at, where the piece ends.
    """

    length_m: float
    weight_n_per_m: float
    wind_n_per_m: float
    stiffness_n: float
    end_weight_n: float = 0.0
    end_wind_n: float = 0.0

    def __post_init__(self) -> None:
        """Refuse what the closed form has no answer for."""
        for quantity, low, high, unit in _RANGES:
            value = getattr(self, quantity)
            # Compared here, as an array's worth of checking a piece is a third of hanging it.
            if not low <= value <= high:
                raise OutOfRange(quantity, value, low, high, unit)

    @property
    def load_n_per_m(self) -> FloatArray:
        """Load as a vector: along, across, up."""
        return np.array([0.0, self.wind_n_per_m, -self.weight_n_per_m])

    @property
    def end_load_n(self) -> FloatArray:
        """Load where it ends, as a vector."""
        return np.array([0.0, self.end_wind_n, -self.end_weight_n])


@dataclass(frozen=True, slots=True, eq=False)
class LooseString:
    """A string as it hangs.

    Attributes
    ----------
    pieces : tuple of Piece
    start_pull_n : numpy.ndarray, shape (k, 3)
        Force in the string at the start of each piece, in N: along, across, up.
    start_m : numpy.ndarray, shape (k + 1, 3)
        Where each piece starts, in m from the near end, and the far end.
    """

    pieces: tuple[Piece, ...]
    start_pull_n: FloatArray
    start_m: FloatArray

    @property
    def horizontal_pull_n(self) -> float:
        """Pull along the line between the ends in plan, the same all along, in N."""
        return float(self.start_pull_n[0, 0])

    def pull_n(self, index: int, from_start_m: ArrayLike) -> FloatArray:
        """Force vectors, shape (n, 3) in N, at unstretched places (n,) along one piece."""
        place = np.atleast_1d(np.asarray(from_start_m, dtype=np.float64))
        pull = self.start_pull_n[index] - place[:, None] * self.pieces[index].load_n_per_m
        return np.asarray(pull)

    def largest_tension_n(self, index: int) -> float:
        """The largest tension in one piece: it is at one of its ends."""
        ends = self.pull_n(index, [0.0, self.pieces[index].length_m])
        return float(np.max(np.linalg.norm(ends, axis=1)))

    def place_m(self, index: int, from_start_m: ArrayLike) -> FloatArray:
        """Positions, shape (n, 3) in m, at unstretched places (n,) along one piece."""
        places = np.atleast_1d(np.asarray(from_start_m, dtype=np.float64))
        x, y, z = self.start_pull_n[index].tolist()
        piece = self.pieces[index]
        runs = [
            _run(piece, (x, y, z), each)[0] if each > 0.0 else (0.0, 0.0, 0.0)
            for each in places.tolist()
        ]
        return np.asarray(self.start_m[index] + np.array(runs))

    def where_slope_is(self, index: int, slope: float) -> float:
        """Unstretched place in one piece where it rises by so much a metre, or its nearest end."""
        pull, piece = self.start_pull_n[index], self.pieces[index]
        place = (slope * pull[0] - pull[2]) / piece.weight_n_per_m
        return float(np.clip(place, 0.0, piece.length_m))

    def where_swung_most(self, index: int) -> float:
        """Unstretched place in one piece where it runs level sideways, or its nearest end."""
        pull, piece = self.start_pull_n[index], self.pieces[index]
        if piece.wind_n_per_m == 0.0:
            return 0.0
        return float(np.clip(pull[1] / piece.wind_n_per_m, 0.0, piece.length_m))


def hang(pieces: Sequence[Piece], distance_m: float, rise_m: float = 0.0) -> LooseString:
    """Hang a string between two points.

    Parameters
    ----------
    pieces
        In order from the near end.
    distance_m
        Distance between the ends in plan, above zero, in m.
    rise_m
        How much higher the far end is, in m.

    Raises
    ------
    OutOfRange
        No pieces, or a distance or rise outside its range.
    NotConverged
        The far end was not met.

    Notes
    -----
    With F the force in the string, w the load and s the unstretched length, ``F' = -w`` and
    ``r' = F / |F| + F / EA`` integrate in closed form over each piece. The far end's place is the
    gradient, by the force at the near end, of the string's complementary energy, which is strictly
    convex: Newton's method with steps halved until that energy falls always arrives.

    References
    ----------
    H. M. Irvine, "Cable Structures", 1981, sec. 1.3 and 2.3 (the elastic catenary).
    """
    if not pieces:
        raise OutOfRange("number of pieces", 0, 1, np.inf)
    require_within("distance_m", distance_m, 1e-3, 1e5, "m")
    require_within("rise_m", rise_m, -1e5, 1e5, "m")
    target = np.array([distance_m, 0.0, rise_m])
    span = float(np.linalg.norm(target))
    pull = _first_guess(pieces, target)
    for _ in range(_MOST_STEPS):
        end, compliance, energy = _end_of(pieces, pull)
        miss = end - target
        if float(np.linalg.norm(miss)) <= _CLOSURE * span:
            break
        step = np.linalg.solve(compliance, -miss)
        tried = _damped(pieces, target, pull, step, energy - float(pull @ target), miss)
        if tried is None:
            break
        pull = tried
    end, _, _ = _end_of(pieces, pull)
    error_m = float(np.linalg.norm(end - target))
    # Rounding keeps the last digits from a very taut string, or one with a far greater load on
    # one piece than on another; no rigger could tell them.
    if error_m > _ROUNDED * span:
        raise NotConverged("far end of the string", error_m, _ROUNDED * span, "m")
    return _hung(tuple(pieces), pull)


def _first_guess(pieces: Sequence[Piece], target: FloatArray) -> FloatArray:
    """Force at the near end if the string were a parabola."""
    load = np.sum([each.length_m * each.load_n_per_m + each.end_load_n for each in pieces], axis=0)
    span, length = float(np.linalg.norm(target)), sum(each.length_m for each in pieces)
    weight = float(np.linalg.norm(load))
    slack = max(length / span - 1.0, 1e-6)
    # Length over span is 1 + (W / H)^2 / 24; a slack string pulls no less than this.
    along = max(weight / np.sqrt(24.0 * slack), 0.05 * weight)
    start: FloatArray = along * target / span + 0.5 * load
    return start


def _damped(
    pieces: Sequence[Piece],
    target: FloatArray,
    pull: FloatArray,
    step: FloatArray,
    energy: float,
    miss: FloatArray,
) -> FloatArray | None:
    """The force after as much of a step as brings it nearer; None where nothing does."""
    slope, missed_m = float(miss @ step), float(np.linalg.norm(miss))
    part = 1.0
    for _ in range(_HALVINGS):
        tried: FloatArray = pull + part * step
        if tried[0] > 0.0:
            end, _, reached = _end_of(pieces, tried)
            # Near the answer the energy falls by less than its rounding, but the miss still tells.
            if -part * slope > _TELLING * abs(energy):
                better = reached - float(tried @ target) <= energy + 1e-4 * part * slope
            else:
                better = float(np.linalg.norm(end - target)) < missed_m
            if better:
                return tried
        part *= 0.5
    return None


def _end_of(pieces: Sequence[Piece], pull: FloatArray) -> tuple[FloatArray, FloatArray, float]:
    """Far end (3,), its change with the force (3, 3), and the complementary energy."""
    x, y, z = pull.tolist()
    runs, energy = [], 0.0
    for piece in pieces:
        run, change, own = _run(piece, (x, y, z), piece.length_m)
        runs.append((*run, *change))
        energy += own
        # The energy is a function of the force at the near end: loads between only shift it.
        y -= piece.length_m * piece.wind_n_per_m + piece.end_wind_n
        z += piece.length_m * piece.weight_n_per_m + piece.end_weight_n
    total = np.sum(runs, axis=0)
    return total[:3], total[_SYMMETRIC], energy


def _run(
    piece: Piece, pull: tuple[float, float, float], length_m: float
) -> tuple[tuple[float, ...], tuple[float, ...], float]:
    """What a piece adds up to, over so much of its length: end, compliance and energy.

    Along, across, up; of the compliance the upper triangle by rows. In plain numbers, as it is
    called some hundred times a span and arrays of three take ten times as long.
    """
    px, py, pz = pull
    size = hypot(piece.wind_n_per_m, piece.weight_n_per_m)
    # Along the load, and what of the force stands across it.
    dy, dz = piece.wind_n_per_m / size, -piece.weight_n_per_m / size
    first = py * dy + pz * dz
    last = first - size * length_m
    ax, ay, az = px, py - first * dy, pz - first * dz
    least = hypot(ax, ay, az)
    tension_first, tension_last = hypot(first, least), hypot(last, least)
    # Integrals over the length of 1/T, u/T, T, 1/T^3, u/T^3 and u^2/T^3, u the part along the load.
    inverse = (asinh(first / least) - asinh(last / least)) / size
    along = (tension_first - tension_last) / size
    whole = 0.5 * ((first * tension_first - last * tension_last) / size + least * least * inverse)
    cubed = (first / tension_first - last / tension_last) / (size * least * least)
    along_cubed = (1.0 / tension_last - 1.0 / tension_first) / size
    square_cubed = inverse - least * least * cubed
    stretch = length_m / piece.stiffness_n
    half = 0.5 * length_m
    my, mz = py - half * piece.wind_n_per_m, pz + half * piece.weight_n_per_m
    end = (
        ax * inverse + px * stretch,
        ay * inverse + dy * along + my * stretch,
        az * inverse + dz * along + mz * stretch,
    )
    own = inverse + stretch
    compliance = (
        own - ax * ax * cubed,
        -(ax * ay * cubed + ax * dy * along_cubed),
        -(ax * az * cubed + ax * dz * along_cubed),
        own - (ay * ay * cubed + dy * dy * square_cubed + 2.0 * ay * dy * along_cubed),
        -(ay * az * cubed + dy * dz * square_cubed + (ay * dz + az * dy) * along_cubed),
        own - (az * az * cubed + dz * dz * square_cubed + 2.0 * az * dz * along_cubed),
    )
    # Integral of T^2 by Simpson's rule, exact for a parabola.
    middle_squared = px * px + my * my + mz * mz
    squares = length_m / 6.0 * (tension_first**2 + 4.0 * middle_squared + tension_last**2)
    return end, compliance, whole + 0.5 * squares / piece.stiffness_n


def _hung(pieces: tuple[Piece, ...], pull: FloatArray) -> LooseString:
    pulls, places = [], [np.zeros(3)]
    for piece in pieces:
        pulls.append(pull)
        x, y, z = pull.tolist()
        places.append(places[-1] + _run(piece, (x, y, z), piece.length_m)[0])
        pull = pull - piece.length_m * piece.load_n_per_m - piece.end_load_n
    return LooseString(pieces, np.array(pulls), np.array(places))
