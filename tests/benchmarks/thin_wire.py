"""Thin-wire solution: unknowns against error, time against unknowns and batch, and a plain rival.

Run as ``python -m tests.benchmarks.thin_wire``. Times are the best of several runs of processor
time on one core; set OMP_NUM_THREADS=1 and OPENBLAS_NUM_THREADS=1. Errors are against this
engine's finest solution and, beside it, against a plain rooftop solution of the same wire.
"""

from __future__ import annotations

import time
import tracemalloc
from collections.abc import Callable
from contextlib import AbstractContextManager
from dataclasses import dataclass
from functools import partial
from math import pi
from unittest import mock

import numpy as np
from numpy.typing import NDArray

from tests.reference.rooftop_wire import rooftop_impedance
from worker.engine.constants import SPEED_OF_LIGHT_M_PER_S
from worker.engine.thin_wire import feed_impedance
from worker.engine.thin_wire import wire as wire_module
from worker.engine.thin_wire.mesh import Grading
from worker.engine.thin_wire.refinement import LEVELS, Level

# One metre to the wavelength, so that lengths read in wavelengths.
FREQUENCY_HZ = SPEED_OF_LIGHT_M_PER_S
FINEST = (Level(9, 13, Grading(0.1, 4.0, 0.8, 1.2, 0.7)),)
COARSER = (
    Level(2, 4, LEVELS[0].grading),
    Level(3, 5, LEVELS[0].grading),
    Level(4, 6, LEVELS[0].grading),
)


@dataclass(frozen=True)
class PerfectGround:
    """Image in a perfect conductor: the cheapest ground there is."""

    height_m: float
    frequency_hz: float = FREQUENCY_HZ

    def vector_potential(self, distance_m: NDArray[np.float64]) -> NDArray[np.complex128]:
        """Minus the wave from the image."""
        distance = np.sqrt(distance_m**2 + (2.0 * self.height_m) ** 2)
        wave: NDArray[np.complex128] = np.exp(-2j * pi * distance)
        return -wave / (4.0 * pi * distance)

    scalar_potential = vector_potential


def main() -> None:
    """Print every table."""
    convergence()
    population()
    batches()
    lengths()
    rival()
    memory()


def convergence() -> None:
    """Unknowns against error for three wires, level by level."""
    print("Unknowns against error (relative, against the finest solution)")
    print("  length  radius     unknowns: error ...")
    for length, radius in ((0.48, 1e-5), (1.0, 1e-5), (1.5, 1e-4), (2.5, 1e-6), (0.5, 5e-3)):
        with levels(FINEST):
            exact = complex(feed_impedance(length, radius, FREQUENCY_HZ).impedance_ohm)
        cells = []
        for level in (*COARSER, *LEVELS):
            with levels((level,)):
                result = feed_impedance(length, radius, FREQUENCY_HZ)
            error = abs(complex(result.impedance_ohm) / exact - 1.0)
            cells.append(f"{int(result.unknowns):4d}: {error:.0e}")
        print(f"  {length:6.2f}  {radius:.0e}  " + "  ".join(cells))


def population() -> None:
    """Error over the whole range of lengths and radii, and whether the estimate bounds it."""
    rng = np.random.default_rng(1)
    count = 150
    radius = 10.0 ** rng.uniform(-7.0, np.log10(5e-3), count)
    length = np.maximum(10.0 ** rng.uniform(np.log10(0.05), np.log10(6.0), count), 10.1 * radius)
    print(f"\nError over {count} random wires, 0.05 to 6 wavelengths, radius 1e-7 to 5e-3")
    print("  ground        median    95 %      worst     beyond estimate   levels used")
    for name, ground in (
        ("free space", None),
        ("perfect 0.20", PerfectGround(0.2)),
        ("perfect 0.05", PerfectGround(0.05)),
        ("perfect 0.01", PerfectGround(0.01)),
    ):
        thin = radius if ground is None else np.minimum(radius, ground.height_m / 4.0)
        result = feed_impedance(length, thin, FREQUENCY_HZ, reflected=ground)
        with levels(FINEST):
            exact = feed_impedance(length, thin, FREQUENCY_HZ, reflected=ground).impedance_ohm
        change = np.abs(result.impedance_ohm - exact)
        relative = change / np.abs(exact)
        first = _solved_first(length, thin, ground)
        print(
            f"  {name:12s}  {np.median(relative):.0e}     {np.quantile(relative, 0.95):.0e}"
            f"     {relative.max():.0e}     {np.mean(change > result.estimated_error_ohm):6.1%}"
            f"           {np.mean(first):.0%} first"
        )


def _solved_first(
    length: NDArray[np.float64], radius: NDArray[np.float64], ground: PerfectGround | None
) -> NDArray[np.bool_]:
    with levels(LEVELS[:1]):
        return feed_impedance(length, radius, FREQUENCY_HZ, reflected=ground).converged


def batches() -> None:
    """Time of one solve against the size of the batch."""
    print("\nTime of a solve (ms) against batch size: half wave, radius 1e-5")
    print("  batch    free space    perfect ground at 0.15")
    ground = PerfectGround(0.15)
    for size in (1, 4, 16, 64, 256, 1024):
        length = np.full(size, 0.48) * (1.0 + 1e-7 * np.arange(size))
        repeats = max(2, 64 // size)
        free = best_ms(partial(feed_impedance, length, 1e-5, FREQUENCY_HZ), repeats) / size
        over = best_ms(
            partial(feed_impedance, length, 1e-5, FREQUENCY_HZ, reflected=ground), repeats
        )
        print(f"  {size:5d}    {free:10.3f}    {over / size:10.3f}")


def lengths() -> None:
    """Time of one solve against unknowns: longer wires in batches of 200."""
    print("\nTime of a solve (ms) against unknowns: batch of 200, radius 1e-5")
    print("  length   unknowns   centre-fed   fed at 0.3")
    for length in (0.25, 0.5, 1.0, 1.5, 2.5, 4.0, 6.0):
        batch = length * (1.0 - 1e-7 * np.arange(200))
        unknowns = int(np.median(feed_impedance(batch, 1e-5, FREQUENCY_HZ).unknowns))
        centre = best_ms(partial(feed_impedance, batch, 1e-5, FREQUENCY_HZ), 3) / 200
        aside = best_ms(partial(feed_impedance, batch, 1e-5, FREQUENCY_HZ, feed_fraction=0.3), 3)
        print(f"  {length:6.2f}   {unknowns:8d}   {centre:10.3f}   {aside / 200:10.3f}")
    scan = np.linspace(0.3, 1.6, 400)
    mean = best_ms(partial(feed_impedance, scan, 1e-5, FREQUENCY_HZ), 5) / 400
    print(f"  0.3 to 1.6, 400 lengths in one batch: {mean:.3f} ms a solve")


def rival() -> None:
    """A plain rooftop solution in the same run: its error and time beside the engine's."""
    length, radius, gap = 0.48, 1e-3, 0.02
    with levels(FINEST):
        exact = complex(feed_impedance(length, radius, FREQUENCY_HZ, gap_m=gap).impedance_ohm)
    batch = np.full(200, length)
    ours = best_ms(partial(feed_impedance, batch, radius, FREQUENCY_HZ, gap_m=gap), 3) / 200
    result = feed_impedance(length, radius, FREQUENCY_HZ, gap_m=gap)
    error = abs(complex(result.impedance_ohm) / exact - 1.0)
    print("\nAgainst plain uniform rooftops: half wave, radius 1e-3, gap 0.02")
    print(f"  engine    {int(result.unknowns):5d} unknowns  error {error:.0e}  {ours:9.3f} ms")
    for segments in (50, 100, 200, 400, 800):
        plain = rooftop_impedance(length, radius, FREQUENCY_HZ, segments=segments, gap_m=gap)
        taken = best_ms(
            partial(rooftop_impedance, length, radius, FREQUENCY_HZ, segments=segments, gap_m=gap),
            1,
        )
        print(
            f"  rooftops  {segments - 1:5d} unknowns  error {abs(plain / exact - 1.0):.0e}"
            f"  {taken:9.3f} ms  {taken / ours:7.0f} times the engine's time"
        )


def memory() -> None:
    """Peak of allocated memory, the result included, for batches of growing size."""
    print("\nPeak memory allocated (MiB), lengths 0.3 to 0.7")
    for size in (100, 1_000, 10_000):
        lengths_m = np.linspace(0.3, 0.7, size)
        tracemalloc.start()
        feed_impedance(lengths_m, 1e-5, FREQUENCY_HZ)
        peak = tracemalloc.get_traced_memory()[1] / 2**20
        tracemalloc.stop()
        print(f"  {size:6d} solves   {peak:7.1f}")


def levels(chosen: tuple[Level, ...]) -> AbstractContextManager[object]:
    """Let `feed_impedance` try these levels only."""
    return mock.patch.object(wire_module, "LEVELS", chosen)


def best_ms(call: Callable[[], object], repeats: int) -> float:
    """Best processor time of several runs, after one to warm up."""
    call()
    times = []
    for _ in range(repeats):
        start = time.process_time()
        call()
        times.append(time.process_time() - start)
    return 1e3 * min(times)


if __name__ == "__main__":
    main()
