"""Internal impedance of round wire: the vectorised engine beside plain loops, in one run.

python -m tests.benchmarks.conductor
"""

from __future__ import annotations

from collections.abc import Callable
from functools import partial
from time import perf_counter

import mpmath
import numpy as np
from scipy.special import iv

from worker.engine.conductor import MATERIALS, internal_impedance_ohm_per_m
from worker.engine.constants import VACUUM_PERMEABILITY_H_PER_M

COPPER = MATERIALS["annealed-copper"]
CLAD = MATERIALS["copper-clad-steel-40"]
SIGMA = COPPER.surface.conductivity_s_per_m


def loop_of_mpmath(radius_m: np.ndarray, frequency_hz: np.ndarray) -> np.ndarray:
    """The textbook formula, one wire at a time, with mpmath's Bessel functions."""
    answers = []
    for radius, frequency in zip(radius_m.tolist(), frequency_hz.tolist(), strict=True):
        omega = 2 * mpmath.pi * frequency
        gamma = mpmath.sqrt(1j * omega * VACUUM_PERMEABILITY_H_PER_M * SIGMA)
        z = gamma * radius
        ratio = mpmath.besseli(0, z) / mpmath.besseli(1, z)
        answers.append(complex(gamma / SIGMA * ratio / (2 * mpmath.pi * radius)))
    return np.array(answers)


def loop_of_scalars(radius_m: np.ndarray, frequency_hz: np.ndarray) -> np.ndarray:
    """The same with scipy's unscaled Bessel functions; it overflows beyond |z| of 700."""
    answers = []
    for radius, frequency in zip(radius_m.tolist(), frequency_hz.tolist(), strict=True):
        omega = 2 * np.pi * frequency
        gamma = (1 + 1j) * (omega * VACUUM_PERMEABILITY_H_PER_M * SIGMA / 2) ** 0.5
        z = gamma * radius
        answers.append(gamma / SIGMA * iv(0, z) / iv(1, z) / (2 * np.pi * radius))
    return np.array(answers)


def seconds(run: Callable[[], object]) -> float:
    """Best of three runs."""
    best = float("inf")
    for _ in range(3):
        start = perf_counter()
        run()
        best = min(best, perf_counter() - start)
    return best


def wires(count: int) -> tuple[np.ndarray, np.ndarray]:
    """Wires of 0.1 to 2.5 mm radius at 1.8 to 54 MHz."""
    random = np.random.default_rng(1)
    return random.uniform(1e-4, 2.5e-3, count), random.uniform(1.8e6, 54e6, count)


def main() -> None:
    """Print time per wire, ratios, and growth with the size of the batch."""
    radius_m, frequency_hz = wires(2000)

    def engine() -> np.ndarray:
        return internal_impedance_ohm_per_m(radius_m, frequency_hz, COPPER)

    exact = loop_of_mpmath(radius_m, frequency_hz)
    error = float(np.max(np.abs(engine() / exact - 1)))
    ours = seconds(engine)
    rows = [
        ("engine, vectorised", ours),
        ("loop, scipy scalars", seconds(lambda: loop_of_scalars(radius_m, frequency_hz))),
        ("loop, mpmath", seconds(lambda: loop_of_mpmath(radius_m, frequency_hz))),
    ]
    print(f"{radius_m.size} copper wires; largest relative difference from mpmath {error:.1e}")
    for name, time in rows:
        print(f"  {name:20s} {time / radius_m.size * 1e6:9.3f} us a wire   x {time / ours:8.1f}")
    print("growth with the batch, us a wire      solid     clad")
    for count in (1, 10, 100, 1_000, 10_000, 100_000):
        solid = seconds(partial(internal_impedance_ohm_per_m, *wires(count), COPPER))
        clad = seconds(partial(internal_impedance_ohm_per_m, *wires(count), CLAD))
        print(
            f"  {count:8d}                    {solid / count * 1e6:9.3f}{clad / count * 1e6:9.3f}"
        )


if __name__ == "__main__":
    main()
