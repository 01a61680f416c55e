"""What is searched: the bands as goals, the wires on offer, and the lengths between limits."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from typing import Final, Protocol

import numpy as np
from numpy.typing import NDArray

from worker.engine.constants import SPEED_OF_LIGHT_M_PER_S
from worker.engine.errors import OutOfRange
from worker.search.feeding import Feeding

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]

#: The scan compares about so many (wire, ratio, length), in steps of length between these
#: two ratios: 2 mm to 4 cm on a 20 m wire.
COMBINATIONS: Final = 1_000_000
FINEST_STEP: Final = 1e-4
COARSEST_STEP: Final = 2e-3

#: Frequencies per band at which the scan judges a wire: at least so many, and no further apart
#: than this part of their frequency, half the width of a wire's resonance at SWR 2.
POINTS_PER_BAND: Final = 7
_FURTHEST_APART: Final = 0.02

#: Steps of frequency to a ripple that a line makes, and how many steps it is followed with.
_POINTS_PER_RIPPLE: Final = 16
_MOST_FOR_RIPPLES: Final = 40

#: Impedances held at a time while one wire is compared: 64 MB of them.
_MOST_HELD: Final = 4_000_000

#: A wire may turn out longer than planned by this ratio at the most.
LONGEST_DEPARTURE: Final = 1.05

#: The scan starts at this many wavelengths at the highest frequency asked for; see
#: ``SHORTEST_RESONANCE_WAVELENGTHS`` of the request contract, which refuses shorter spans.
SHORTEST_WAVELENGTHS: Final = 0.40

#: Part of a length that one length alone is searched around.
_ONE_LENGTH: Final = 1e-6


@dataclass(frozen=True, slots=True)
class Solved:
    """Direct solutions: impedance at the feed point and its estimated error, both in Ω."""

    impedance_ohm: ComplexArray
    error_ohm: FloatArray


class WireModel(Protocol):
    """A wire of one conductor as hung on the site, of any length, at any frequency."""

    @property
    def shortest_wavelengths(self) -> float:
        """Length in wavelengths from which the model holds."""
        ...

    @property
    def longest_wavelengths(self) -> float:
        """Length in wavelengths up to which the model holds."""
        ...

    @property
    def lowest_hz(self) -> float:
        """Frequency from which the model holds, whatever the length."""
        ...

    def solve(self, length_m: FloatArray, frequency_hz: FloatArray) -> Solved:
        """Solve every pair of length (m) and frequency (Hz)."""
        ...


@dataclass(frozen=True, slots=True)
class WireOffer:
    """One way to hang one conductor: its model, its price per metre, and whether fed centrally."""

    model: WireModel
    price_per_m: float | None = None
    centred: bool = True


@dataclass(frozen=True, slots=True)
class BandGoal:
    """One band to be served; frequencies in Hz."""

    name: str
    low_hz: float
    high_hz: float
    required: bool
    weight: float
    swr_limit: float

    @property
    def centre_hz(self) -> float:
        """Middle of the band in Hz."""
        return 0.5 * (self.low_hz + self.high_hz)

    def grid_hz(self, points: int = POINTS_PER_BAND) -> FloatArray:
        """Evenly spaced frequencies from edge to edge, in Hz; shape (points,)."""
        return np.linspace(self.low_hz, self.high_hz, points)


def points_of(
    band: BandGoal, feeding: Feeding, furthest_apart: float, least: int = POINTS_PER_BAND
) -> int:
    """How many frequencies a band is to be judged at: an odd number.

    Parameters
    ----------
    band : BandGoal
    feeding : Feeding
    furthest_apart : float
        Largest step, as a part of the frequency.
    least : int
        An odd number.
    """
    steps = np.log(band.high_hz / band.low_hz) / furthest_apart
    # A long line makes ripples of a mismatch, over frequency, that are to be followed too.
    ripples = _POINTS_PER_RIPPLE * (band.high_hz - band.low_hz) / feeding.ripple_hz
    wanted = 2 * int(np.ceil(0.5 * max(steps, min(ripples, _MOST_FOR_RIPPLES)))) + 1
    return max(least, wanted)


@dataclass(frozen=True, slots=True)
class SearchSpace:
    """Everything the search may vary, and what it is judged by.

    Attributes
    ----------
    bands : tuple of BandGoal
    wires : tuple of WireOffer
        One for each conductor, height and place of the feed on offer.
    site_longest_m : float
        The longest wire the site can take, in m.
    ratios : tuple of float
        Permitted impedance ratios of the transformer, antenna side to line side.
    feeding : Feeding
        What lies between the wire and the point where the limits apply.
    survey : callable, optional
        Impedances of all the wires, shape (k, f, n), for n electrical lengths, as length times
        frequency in m Hz, at f frequencies in Hz, solved together, more carefully where the
        third argument says so; without it each wire's own model is asked in turn.
    together : callable, optional
        Direct solutions of some of the wires, each of its own length at its own frequency, no
        closer than a survey where the last argument says so; without it each is asked in turn.
    asked_m : (float, float), optional
        Limits of length in m that are asked for; equal ones leave one length.
    shortest_m, longest_m : float
        Limits of the search in m: from below the first resonance on the highest band to the
        longest wire that fits the site and, on the highest band, the models.
    """

    bands: tuple[BandGoal, ...]
    wires: tuple[WireOffer, ...]
    site_longest_m: float
    ratios: tuple[float, ...]
    feeding: Feeding
    survey: Callable[[FloatArray, FloatArray, bool], ComplexArray] | None = None
    together: Callable[[Sequence[int], FloatArray, FloatArray, bool], Solved] | None = None
    asked_m: tuple[float, float] | None = None
    shortest_m: float = field(init=False)
    longest_m: float = field(init=False)

    def __post_init__(self) -> None:
        """Derive the limits of the search."""
        top_wavelength_m = SPEED_OF_LIGHT_M_PER_S / max(band.high_hz for band in self.bands)
        # Maps reach beyond the longest wire by the relative width of a band, and departures by
        # what a wire may be cut too long.
        widest = max(band.high_hz / band.low_hz for band in self.bands)
        modelled_m = top_wavelength_m * min(wire.model.longest_wavelengths for wire in self.wires)
        longest_m = min(self.site_longest_m, modelled_m / (widest * LONGEST_DEPARTURE))
        shortest_m = min(SHORTEST_WAVELENGTHS * top_wavelength_m, longest_m)
        if self.asked_m is not None:
            # Even one length alone is searched as two, closer together than any wire is cut.
            low_m, high_m = self.asked_m[0] * (1.0 - _ONE_LENGTH), self.asked_m[1]
            if low_m > longest_m or high_m < shortest_m:
                raise OutOfRange("length_m", self.asked_m[0], shortest_m, longest_m, "m")
            shortest_m, longest_m = max(shortest_m, low_m), min(longest_m, high_m)
        object.__setattr__(self, "longest_m", longest_m)
        object.__setattr__(self, "shortest_m", shortest_m)

    @property
    def points(self) -> int:
        """Frequencies per band, an odd number so that the centre is among them."""
        return max(points_of(band, self.feeding, _FURTHEST_APART) for band in self.bands)

    def surveyed(
        self, length_m_hz: FloatArray, frequency_hz: FloatArray, *, careful: bool
    ) -> ComplexArray:
        """Impedances in Ω of all k wires, (k, f, n), for n lengths in m Hz at f frequencies."""
        if self.survey is not None:
            return self.survey(length_m_hz, frequency_hz, careful)
        length_m = length_m_hz / frequency_hz[:, None]
        at_hz = np.broadcast_to(frequency_hz[:, None], length_m.shape)
        return np.array([each.model.solve(length_m, at_hz).impedance_ohm for each in self.wires])

    def solved_together(
        self,
        wires: Sequence[int],
        length_m: FloatArray,
        frequency_hz: FloatArray,
        *,
        survey: bool = False,
    ) -> Solved:
        """Direct solutions of n wires, each of its own length in m at its own frequency in Hz."""
        if self.together is not None:
            return self.together(wires, length_m, frequency_hz, survey)
        parts = [
            self.wires[wire].model.solve(length_m[row : row + 1], frequency_hz[row : row + 1])
            for row, wire in enumerate(wires)
        ]
        return Solved(
            np.concatenate([part.impedance_ohm for part in parts]),
            np.concatenate([part.error_ohm for part in parts]),
        )

    def lengths_m(self) -> FloatArray:
        """Lengths of the scan in m, evenly spaced in logarithm; shape (n,)."""
        span = float(np.log(self.longest_m / self.shortest_m))
        # A line or networks cost several times as much to look through as a bare feed point.
        simple = self.feeding.line is None and not self.feeding.matched
        combinations = COMBINATIONS if simple else COMBINATIONS // 4
        each = combinations / (len(self.wires) * len(self.ratios))
        each = min(each, _MOST_HELD / (len(self.bands) * self.points))
        step = min(max(span / each, FINEST_STEP), COARSEST_STEP)
        count = max(2, int(np.ceil(span / step)) + 1)
        lengths_m: FloatArray = np.geomspace(self.shortest_m, self.longest_m, count)
        return lengths_m
