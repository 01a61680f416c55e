"""Ground table: cost, ratio to plain quadrature, and error against the number of samples.

Run as ``python -m tests.benchmarks.ground``. Everything compared is run in this process, on one
core; errors are relative to the image potential, errors of impedance are those of a half-wave
dipole with sinusoidal current.
"""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import dataclass
from functools import partial
from itertools import pairwise
from typing import Any, TypeAlias
from unittest.mock import patch

import numpy as np
from numpy.typing import NDArray
from scipy.integrate import quad
from scipy.interpolate import CubicSpline
from scipy.special import jv

from worker.engine.constants import (
    SPEED_OF_LIGHT_M_PER_S,
    VACUUM_PERMEABILITY_H_PER_M,
    VACUUM_PERMITTIVITY_F_PER_M,
)
from worker.engine.ground import GROUND_CLASSES, panels, spectrum, table, tabulate, tabulate_many
from worker.engine.ground.spectrum import reflected

RealArray: TypeAlias = NDArray[np.float64]
ComplexArray: TypeAlias = NDArray[np.complex128]

FREQUENCIES_HZ = (3.6e6, 28.5e6)
HEIGHTS = (0.011, 0.05, 0.1, 0.25, 1.0)
GROUNDS = ("very-good", "average", "city", "salt-water", "fresh-water")


@dataclass(frozen=True, slots=True)
class Case:
    """One ground, frequency and height; lengths in wavelengths unless said otherwise."""

    name: str
    frequency_hz: float
    height: float
    reach: float

    @property
    def wavelength_m(self) -> float:
        return SPEED_OF_LIGHT_M_PER_S / self.frequency_hz

    @property
    def eps(self) -> complex:
        return GROUND_CLASSES[self.name].complex_permittivity(self.frequency_hz)

    def tabulated(self) -> table.GroundTable:
        return tabulate(
            GROUND_CLASSES[self.name],
            self.frequency_hz,
            self.height * self.wavelength_m,
            self.reach * self.wavelength_m,
        )

    def exact(self, distance: RealArray) -> spectrum.Reflected:
        """Direct spectral integration at distances in wavelengths."""
        rows = np.ones(distance.size)
        return reflected(
            np.full(distance.size, self.eps),
            rows * 4.0 * np.pi * self.height,
            2.0 * np.pi * distance,
        )


def best_time_s(work: Callable[[], object], repeats: int = 5) -> float:
    """Shortest of a few runs: the one least disturbed."""
    times = []
    for _ in range(repeats):
        start = time.perf_counter()
        work()
        times.append(time.perf_counter() - start)
    return min(times)


def plain_quadrature(case: Case, distance: float) -> tuple[complex, complex]:
    """Both Sommerfeld integrals over the image potential, by adaptive quadrature.

    The plain reference: the textbook path along the real axis with a half ellipse over the
    singularities, in pieces of a few oscillations.
    """
    height, far = 2.0 * np.pi * case.height, 2.0 * np.pi * distance
    eps = case.eps
    right, depth = 1.2 * max(1.0, np.sqrt(eps).real), min(0.5, 1.0 / max(far, 1e-9))

    def integrand(lam: complex) -> tuple[complex, complex]:
        above, below = np.sqrt(lam * lam - 1.0), np.sqrt(lam * lam - eps)
        common = (
            np.exp(-2.0 * above * height)
            * complex(np.asarray(jv(0, np.asarray(lam * far))))
            * lam
            / above
        )
        electric = (above - below) / (above + below)
        return common * electric, common * ((2.0 - eps) * above - below) / (eps * above + below)

    def along_ellipse(angle: float, which: int) -> complex:
        lam = 0.5 * right * (1.0 - np.cos(angle)) + 1j * depth * np.sin(angle)
        slope = 0.5 * right * np.sin(angle) + 1j * depth * np.cos(angle)
        return complex(integrand(lam)[which] * slope)

    def along_axis(lam: float, which: int) -> complex:
        return complex(integrand(lam + 0j)[which])

    def summed(function: Callable[..., complex], low: float, high: float, which: int) -> complex:
        value, _ = quad(
            function, low, high, args=(which,), complex_func=True, epsabs=1e-8, limit=200
        )
        return complex(value)

    end = right + 30.0 / (2.0 * height)
    pieces = np.linspace(right, end, 2 + int((end - right) * far / 30.0))
    image = np.hypot(far, 2.0 * height)
    values = []
    for which in (0, 1):
        total = summed(along_ellipse, 0.0, np.pi, which)
        total += sum(summed(along_axis, low, high, which) for low, high in pairwise(pieces))
        values.append(complex(total * image * np.exp(1j * image)))
    return values[0], values[1]


def impedance_ohm(case: Case, vector: ComplexArray, scalar: ComplexArray) -> complex:
    """Change of a half-wave dipole's impedance from potentials over the image, on HALF_WAVE."""
    wavelength = case.wavelength_m
    omega, wavenumber = 2.0 * np.pi * case.frequency_hz, 2.0 * np.pi / wavelength
    image = np.hypot(DISTANCES, 2.0 * case.height) * wavelength
    primary = np.exp(-1j * wavenumber * image) / (4.0 * np.pi * image)

    def over(ratio: ComplexArray) -> ComplexArray:
        return np.asarray(primary * ratio.reshape(DISTANCES.shape))

    current = WEIGHTS * wavelength * np.cos(2.0 * np.pi * POSITIONS)
    slope = WEIGHTS * wavelength * wavenumber * np.sin(2.0 * np.pi * POSITIONS)
    return complex(
        1j * omega * VACUUM_PERMEABILITY_H_PER_M * (current @ over(vector) @ current)
        + slope @ over(scalar) @ slope / (1j * omega * VACUUM_PERMITTIVITY_F_PER_M)
    )


_X, _W = np.polynomial.legendre.leggauss(24)
POSITIONS = np.concatenate([(_X - 1.0) / 8.0, (_X + 1.0) / 8.0])
WEIGHTS = np.tile(_W / 8.0, 2)
DISTANCES = np.abs(POSITIONS[:, None] - POSITIONS)


def over_image(
    case: Case, made: table.GroundTable, distance: RealArray
) -> tuple[ComplexArray, ComplexArray]:
    """Table values over the image potential at distances in wavelengths."""
    image = np.hypot(distance, 2.0 * case.height) * case.wavelength_m
    scale = 4.0 * np.pi * image * np.exp(2j * np.pi / case.wavelength_m * image)
    at = distance * case.wavelength_m
    return scale * made.vector_potential(at), scale * made.scalar_potential(at)


def largest_difference(one: tuple[ComplexArray, ComplexArray], other: spectrum.Reflected) -> float:
    return float(max(np.max(np.abs(one[0] - other.vector)), np.max(np.abs(one[1] - other.scalar))))


def print_table_costs() -> None:
    print("Table of both potentials, out to 1.6 and to 6 wavelengths")
    print("ground        MHz    h/wl  reach  samples     ms  stated err   true err")
    random = np.random.default_rng(3)
    for name in GROUNDS:
        for frequency in FREQUENCIES_HZ:
            for height in HEIGHTS:
                for reach in (1.6, 6.0):
                    case = Case(name, frequency, height, reach)
                    made = case.tabulated()
                    distance = reach * random.random(300) ** 3
                    error = largest_difference(
                        over_image(case, made, distance), case.exact(distance)
                    )
                    print(
                        f"{name:12s} {frequency / 1e6:5.1f} {height:7.3f} {reach:6.1f} "
                        f"{made.samples:8d} {1e3 * best_time_s(case.tabulated, 3):6.1f} "
                        f"{made.relative_error:11.1e} {error:10.1e}"
                    )


def print_ratio_to_plain_quadrature() -> None:
    print("\nBoth Sommerfeld integrals at one distance: contours of the engine, plain quadrature")
    print("ground        h/wl  rho/wl  engine us  plain us   ratio  difference")
    for name in ("average", "salt-water"):
        for height, distance in ((0.05, 0.02), (0.05, 0.5), (0.05, 3.0), (0.25, 0.5), (0.25, 3.0)):
            case = Case(name, 7.1e6, height, 6.0)
            many = np.full(100, distance)
            engine = best_time_s(partial(case.exact, many)) / many.size
            plain = best_time_s(partial(plain_quadrature, case, distance), 2)
            found = case.exact(many[:1])
            by_quad = plain_quadrature(case, distance)
            difference = max(abs(found.vector[0] - by_quad[0]), abs(found.scalar[0] - by_quad[1]))
            print(
                f"{name:12s} {height:5.2f} {distance:7.2f} {1e6 * engine:10.1f} "
                f"{1e6 * plain:9.0f} {plain / engine:7.0f} {difference:11.1e}"
            )


def print_sampling_against_error() -> None:
    print("\nSampling against error, average ground, 7.1 MHz, out to half a wavelength")
    print("h/wl  rule                     samples  potential err  impedance err ohm")
    for height in (0.011, 0.05, 0.25):
        case = Case("average", 7.1e6, height, 0.5)
        exact = case.exact(DISTANCES.ravel())
        true = impedance_ohm(case, exact.vector, exact.scalar)

        def show(
            rule: str, samples: int, vector: ComplexArray, scalar: ComplexArray, at: Case = case
        ) -> None:
            error = largest_difference((vector, scalar), exact)  # noqa: B023 - used at once
            off = abs(impedance_ohm(at, vector, scalar) - true)  # noqa: B023 - used at once
            print(f"{at.height:5.3f} {rule:24s} {samples:7d} {error:14.1e} {off:18.1e}")

        for nodes in (4, 6, 8, 10, 12):
            with patch.object(panels, "NODES", nodes):
                matrices = panels._chebyshev_matrices()
            names = ("_POINTS", "_TO_CHEBYSHEV", "_TO_POWERS")
            rule: dict[str, Any] = dict(zip(names, matrices, strict=True))
            # At a tolerance of 1 the panels are taken as they come.
            with (
                patch.multiple(panels, NODES=nodes, **rule),
                patch.object(table, "INTERPOLATION_TOLERANCE", 1.0),
            ):
                made = case.tabulated()
            values = over_image(case, made, DISTANCES.ravel())
            show(f"panels of {nodes} nodes", made.samples, *values)
        for spacing in (1.0, 0.5, 0.25, 0.125):
            knots = np.linspace(0.0, 0.5, 1 + int(np.ceil(0.5 / min(0.1, spacing * height))))
            sampled = case.exact(knots)
            vector, scalar = (
                np.asarray(CubicSpline(knots, part)(DISTANCES.ravel()))
                for part in (sampled.vector, sampled.scalar)
            )
            show(f"cubic spline, {spacing:g} h apart", knots.size, vector, scalar)


def print_error_unseen_by_the_image() -> None:
    print("\nRules of the engine against rules of about twice the nodes, all named grounds")
    finer: dict[str, Any] = {
        "_NEAR_NODES": (40,) * 5,
        "_RISE_NODES": (40,),
        "_RAY_NODES": (40,) * 5,
        "_SMOOTH_NODES": (40,) * 5,
        "_DECAY": 37.0,
        "_ROWS_AT_ONCE": 64,
    }
    largest = unseen = 0.0
    for name, ground in GROUND_CLASSES.items():
        if ground.is_perfect:
            continue
        for frequency in (1.8e6, 7.1e6, 50e6):
            for height in (0.01, 0.03, 0.1, 0.3, 1.0, 3.0):
                case = Case(name, frequency, height, 6.0)
                distance = np.concatenate(
                    [np.linspace(0.0, 6.0 * height, 19), np.geomspace(0.05, 12.0, 25)]
                )
                normal = case.exact(distance)
                with patch.multiple(spectrum, **finer):
                    fine = case.exact(distance)
                error = np.maximum(
                    np.abs(normal.vector - fine.vector), np.abs(normal.scalar - fine.scalar)
                ).max()
                largest = max(largest, float(error))
                unseen = max(unseen, float(error - normal.quadrature_error.max()))
    print(f"largest difference {largest:.1e}, beyond the error of the perfect image {unseen:.1e}")


def print_batch() -> None:
    print("\nMany tables at once, average ground, 40 frequencies of 3.5 to 4 MHz, 10 m high")
    frequencies = np.linspace(3.5e6, 4.0e6, 40)
    ground = GROUND_CLASSES["average"]
    together = best_time_s(lambda: tabulate_many(ground, frequencies, 10.0, 45.0), 3)
    one_by_one = best_time_s(lambda: [tabulate(ground, f, 10.0, 45.0) for f in frequencies], 3)
    print(
        f"together {1e3 * together / 40:.2f} ms a table, "
        f"one by one {1e3 * one_by_one / 40:.2f} ms, ratio {one_by_one / together:.2f}"
    )
    made = tabulate(ground, 3.6e6, 10.0, 45.0)
    distance = np.linspace(0.0, 45.0, 1000)
    lookup = best_time_s(lambda: made.vector_potential(distance))
    print(f"looking up 1,000 distances of one potential: {1e6 * lookup:.0f} us")


def main() -> None:
    print_table_costs()
    print_ratio_to_plain_quadrature()
    print_sampling_against_error()
    print_error_unseen_by_the_image()
    print_batch()


if __name__ == "__main__":
    main()
