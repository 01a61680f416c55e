"""Series and parallel resonances of a straight wire, none missed.

At a series resonance the reactance rises through zero, near an odd number of half waves on a
centre-fed wire; at a parallel one it falls through zero at a high resistance. Between samples the
search follows the reflection coefficient against a resistance in the middle of the range, which
is bounded and smooth where the impedance has poles, and whose imaginary part has the sign of the
reactance.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Final, Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from worker.engine.constants import SPEED_OF_LIGHT_M_PER_S
from worker.engine.errors import NotConverged, OutOfRange
from worker.engine.thin_wire import (
    LENGTH_RANGE_WAVELENGTHS,
    RADIUS_RANGE_WAVELENGTHS,
    SHORTEST_LENGTH_RADII,
    ReflectedPotentials,
    feed_impedance,
)

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]
Kind = Literal["series", "parallel"]

HIGHEST_ORDER: Final = 11

# Samples per half wave on the wire; the sharpest feature, the first anti-resonance of a thin
# wire, spans several.
_SAMPLES_PER_HALF_WAVE = 25
# A resonance of order n lies below n + this many half waves, even on the thickest wire.
_MARGIN_HALF_WAVES = 0.4
# No reactance rises through zero on a wire shorter than this many half waves.
_FIRST_ZERO_HALF_WAVES = 0.5
# A sampled extreme of the reflection coefficient's imaginary part this close to zero is sampled
# more closely, in case two zeros hide beside it.
_GRAZING = 0.02
_CLOSER_SAMPLES = 16
# Polishing ends when a zero moves by less than this fraction of itself.
_STEP_TOLERANCE = 1e-7
_POLISHING_ROUNDS = 30
_SLOPE_STEP = 1e-3


@dataclass(frozen=True, slots=True)
class Resonance:
    """One resonance of a wire.

    Attributes
    ----------
    order
        Half waves on the wire. For a centre feed the nearest odd number at a series resonance,
        the nearest even one at a parallel; for another feed the nearest number at a series
        resonance, the next above at a parallel.
    kind
        "series" where the reactance rises through zero, "parallel" where it falls.
    frequency_hz, length_m
        Where it lies.
    resistance_ohm
        Feed resistance there.
    slope_ohm_per_hz
        Change of reactance with frequency at fixed length.
    """

    order: int
    kind: Kind
    frequency_hz: float
    length_m: float
    resistance_ohm: float
    slope_ohm_per_hz: float


@dataclass(frozen=True, slots=True)
class ReactanceZeros:
    """Zeros of a reactance, ascending: position, whether it rises there, resistance; (n,)."""

    position: FloatArray
    rising: NDArray[np.bool_]
    resistance_ohm: FloatArray


def resonant_frequencies(
    length_m: float,
    radius_m: float,
    *,
    highest_order: int = 5,
    feed_fraction: float = 0.5,
    gap_m: float | None = None,
    wire_impedance_ohm_per_m: Callable[[FloatArray], ArrayLike] | complex = 0.0,
    loads: Sequence[tuple[float, ArrayLike]] = (),
) -> tuple[Resonance, ...]:
    """Resonances of one wire in free space, lowest frequency first.

    Parameters
    ----------
    length_m, radius_m
        The wire.
    highest_order
        Highest order to report, 1 to 11.
    feed_fraction, gap_m, loads
        As in `thin_wire.feed_impedance`.
    wire_impedance_ohm_per_m
        Series impedance per unit length, or a function that gives it for frequencies (Hz).

    Returns
    -------
    tuple of Resonance
        All series and parallel resonances up to the highest order.

    Raises
    ------
    OutOfRange
        The order is out of range, or the wire too thick or too thin for the thin-wire solution
        over the frequencies searched.
    NotConverged
        A zero of the reactance could not be located.
    """
    half_wave_hz = SPEED_OF_LIGHT_M_PER_S / (2.0 * length_m)
    low, high = _half_wave_range(highest_order)
    slenderness = length_m / radius_m
    thinnest, thickest = (2.0 * limit * slenderness for limit in RADIUS_RANGE_WAVELENGTHS)
    if not (thickest >= highest_order and thinnest <= _FIRST_ZERO_HALF_WAVES):
        bounds = (highest_order / 2.0, _FIRST_ZERO_HALF_WAVES / 2.0)
        low, high = (b / r for b, r in zip(bounds, RADIUS_RANGE_WAVELENGTHS[::-1], strict=True))
        raise OutOfRange("length over radius", slenderness, low, high)
    low, high = max(low, thinnest), min(high, thickest)

    def impedance(half_waves: FloatArray) -> ComplexArray:
        frequency = half_waves * half_wave_hz
        series = wire_impedance_ohm_per_m
        return feed_impedance(
            length_m,
            radius_m,
            frequency,
            feed_fraction=feed_fraction,
            gap_m=gap_m,
            wire_impedance_ohm_per_m=series(frequency) if callable(series) else series,
            loads=loads,
        ).impedance_ohm

    zeros = reactance_zeros(impedance, low, high, round((high - low) * _SAMPLES_PER_HALF_WAVE))
    above = impedance(zeros.position * (1.0 + _SLOPE_STEP)).imag
    below = impedance(zeros.position * (1.0 - _SLOPE_STEP)).imag
    frequency = zeros.position * half_wave_hz
    slope = (above - below) / (2.0 * _SLOPE_STEP * frequency)
    length = np.full(frequency.shape, length_m)
    return _resonances(zeros, frequency, length, slope, feed_fraction, highest_order)


def resonant_lengths(
    frequency_hz: float,
    radius_m: float,
    *,
    highest_order: int = 5,
    feed_fraction: float = 0.5,
    gap_m: float | None = None,
    wire_impedance_ohm_per_m: complex = 0.0,
    loads: Sequence[tuple[float, ArrayLike]] = (),
    reflected: ReflectedPotentials | None = None,
) -> tuple[Resonance, ...]:
    """Resonant lengths of wire of one radius at one frequency, shortest first.

    Parameters
    ----------
    frequency_hz, radius_m
        Frequency and wire radius.
    highest_order
        Highest order to report, 1 to 11.
    feed_fraction, gap_m, wire_impedance_ohm_per_m, loads, reflected
        As in `thin_wire.feed_impedance`.

    Returns
    -------
    tuple of Resonance
        All series and parallel resonances up to the highest order. Their slope with frequency
        comes from scaling the wire instead of the wavelength: exact in free space; over ground it
        leaves out that the height in wavelengths and the ground's constants change too.

    Raises
    ------
    OutOfRange
        The order or the radius in wavelengths is out of range.
    NotConverged
        A zero of the reactance could not be located.
    """
    half_wave = SPEED_OF_LIGHT_M_PER_S / frequency_hz / 2.0
    low, high = _half_wave_range(highest_order)
    low = max(low, 1.001 * SHORTEST_LENGTH_RADII * radius_m / half_wave)
    gap = radius_m if gap_m is None else gap_m

    def impedance(half_waves: FloatArray, scale: float = 1.0) -> ComplexArray:
        return feed_impedance(
            half_waves * half_wave * scale,
            radius_m * scale,
            frequency_hz,
            feed_fraction=feed_fraction,
            gap_m=gap * scale,
            wire_impedance_ohm_per_m=wire_impedance_ohm_per_m / scale,
            loads=loads,
            reflected=reflected,
        ).impedance_ohm

    zeros = reactance_zeros(impedance, low, high, round((high - low) * _SAMPLES_PER_HALF_WAVE))
    above = impedance(zeros.position, 1.0 + _SLOPE_STEP).imag
    below = impedance(zeros.position, 1.0 - _SLOPE_STEP).imag
    slope = (above - below) / (2.0 * _SLOPE_STEP * frequency_hz)
    length = zeros.position * half_wave
    frequency = np.full(length.shape, frequency_hz)
    return _resonances(zeros, frequency, length, slope, feed_fraction, highest_order)


def reactance_zeros(
    impedance: Callable[[FloatArray], ComplexArray], low: float, high: float, samples: int
) -> ReactanceZeros:
    r"""Every zero of a feed reactance between two values of a variable.

    Parameters
    ----------
    impedance
        Impedance (ohm) for an array (n,) of the variable, such as a frequency or a length.
    low, high
        Range of the variable.
    samples
        Samples to begin with; the impedance's features must span several steps.

    Returns
    -------
    ReactanceZeros
        Zeros in ascending order.

    Raises
    ------
    NotConverged
        A zero could not be located.

    Notes
    -----
    With :math:`\Gamma = (Z - R_0)/(Z + R_0)`, sign(Im Gamma) = sign(X). Sign changes between
    samples bracket zeros; where samples turn back close to zero without crossing it, they are
    made denser before. Each bracket is narrowed by the Illinois form of false position on
    Im Gamma, all brackets at once.
    """
    grid = np.linspace(low, high, max(samples, 4) + 1)
    values = impedance(grid)
    reference = float(np.exp(np.mean(np.log(np.abs(values)))))

    def turn(z: ComplexArray) -> FloatArray:
        """Imaginary part of the reflection coefficient."""
        coefficient: FloatArray = ((z - reference) / (z + reference)).imag
        return coefficient

    height = turn(values)
    closer = _grazing_samples(grid, height)
    if closer.size:
        grid = np.concatenate([grid, closer])
        height = np.concatenate([height, turn(impedance(closer))])
        order = np.argsort(grid)
        grid, height = grid[order], height[order]
    start = np.nonzero((height[:-1] < 0.0) != (height[1:] < 0.0))[0]
    if not start.size:
        empty = np.zeros(0)
        return ReactanceZeros(empty, empty.astype(bool), empty)
    left, right = grid[start], grid[start + 1]
    left_height, right_height = height[start], height[start + 1]
    rising = right_height > left_height
    position, moved = left, np.zeros(start.size)
    for _ in range(_POLISHING_ROUNDS):
        previous = position
        position = (left * right_height - right * left_height) / (right_height - left_height)
        z = impedance(position)
        middle = turn(z)
        # Illinois: when one end moves twice running, the value kept at the other is halved.
        side = np.where((middle < 0.0) == (left_height < 0.0), 1.0, -1.0)
        kept = np.where(side == moved, 0.5, 1.0)
        left_height = np.where(side > 0.0, middle, kept * left_height)
        right_height = np.where(side > 0.0, kept * right_height, middle)
        left = np.where(side > 0.0, position, left)
        right = np.where(side > 0.0, right, position)
        moved = side
        step = float(np.max(np.abs(position - previous) / position))
        if step < _STEP_TOLERANCE:
            return ReactanceZeros(position, rising, z.real)
    raise NotConverged("zero of the reactance", step, _STEP_TOLERANCE)


def _grazing_samples(grid: FloatArray, height: FloatArray) -> FloatArray:
    """Further samples where sampled values turn back from zero without crossing it."""
    size = np.abs(height)
    inner = np.arange(1, grid.size - 1)
    turning = (size[inner] <= size[inner - 1]) & (size[inner] <= size[inner + 1])
    same_sign = (height[inner - 1] < 0.0) == (height[inner + 1] < 0.0)
    suspects = inner[turning & same_sign & (size[inner] < _GRAZING)]
    fractions = np.arange(1, _CLOSER_SAMPLES) / _CLOSER_SAMPLES
    intervals = np.unique(np.concatenate([suspects - 1, suspects]))
    start, stop = grid[intervals], grid[intervals + 1]
    samples: FloatArray = (start[:, None] + (stop - start)[:, None] * fractions).ravel()
    return samples


def _half_wave_range(highest_order: int) -> tuple[float, float]:
    """Range of the wire's length in half waves that holds all orders up to the highest."""
    if not 1 <= highest_order <= HIGHEST_ORDER:
        raise OutOfRange("highest_order", highest_order, 1, HIGHEST_ORDER)
    return 2.0 * LENGTH_RANGE_WAVELENGTHS[0] * 1.01, highest_order + _MARGIN_HALF_WAVES


def _resonances(
    zeros: ReactanceZeros,
    frequency_hz: FloatArray,
    length_m: FloatArray,
    slope_ohm_per_hz: FloatArray,
    feed_fraction: float,
    highest_order: int,
) -> tuple[Resonance, ...]:
    centred = abs(feed_fraction - 0.5) < 1e-9
    resonances = []
    for i, half_waves in enumerate(zeros.position):
        rising = bool(zeros.rising[i])
        order = _order(float(half_waves), rising=rising, centred=centred)
        if order <= highest_order:
            resonances.append(
                Resonance(
                    order=order,
                    kind="series" if rising else "parallel",
                    frequency_hz=float(frequency_hz[i]),
                    length_m=float(length_m[i]),
                    resistance_ohm=float(zeros.resistance_ohm[i]),
                    slope_ohm_per_hz=float(slope_ohm_per_hz[i]),
                )
            )
    return tuple(resonances)


def _order(half_waves: float, *, rising: bool, centred: bool) -> int:
    if centred:
        nearest = 2 * round((half_waves - 1.0) / 2.0) + 1 if rising else 2 * round(half_waves / 2.0)
        return max(nearest, 1 if rising else 2)
    return max(round(half_waves), 1) if rising else int(half_waves) + 1
