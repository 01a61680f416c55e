"""Wires whose impedance is known in closed form, so that the search is tested without a solver.

Zin = Z0 coth(γ L/2) is the textbook input impedance of an open-ended lossy line (D. M.
Pozar, Microwave Engineering, 4th ed., 2012, sec. 2.7); it resonates and anti-resonates as a
dipole does.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from worker.search.feeding import Feeding
from worker.search.space import BandGoal, FloatArray, SearchSpace, Solved, WireOffer

C_M_PER_S = 299_792_458.0

#: The line's wave is this much shorter than that of free space.
SLOWING = 1.03


@dataclass
class OpenLine:
    """An open-ended line of slowly falling loss; counts its solves."""

    noise: float = 0.0
    surge_ohm: float = 1000.0
    slowing: float = SLOWING
    loss: float = 0.1
    shortest_wavelengths: float = 0.05
    longest_wavelengths: float = 6.0
    lowest_hz: float = 0.0
    solves: int = 0

    def solve(self, length_m: FloatArray, frequency_hz: FloatArray) -> Solved:
        self.solves += length_m.size
        k = 2.0 * np.pi * frequency_hz / C_M_PER_S
        gamma = self.loss * np.log1p(k * length_m) / length_m + self.slowing * 1j * k
        impedance = self.surge_ohm / np.tanh(0.5 * gamma * length_m)
        impedance *= 1.0 + self.noise * np.sin(1e5 * length_m + 4e-3 * (frequency_hz - 14.0e6))
        return Solved(impedance.astype(np.complex128), np.zeros(length_m.shape))


@dataclass
class OffCentreLine(OpenLine):
    """Two open-ended lines in series, fed where they meet, a third of the way along.

    Its reactance vanishes wherever the whole is a number of half waves, but for every third,
    where the feed lies at a node of the current.
    """

    def solve(self, length_m: FloatArray, frequency_hz: FloatArray) -> Solved:
        whole = OpenLine(surge_ohm=0.5 * self.surge_ohm, slowing=self.slowing)
        arms = [
            whole.solve(2.0 * part * length_m, frequency_hz).impedance_ohm
            for part in (1.0 / 3.0, 2.0 / 3.0)
        ]
        return Solved(arms[0] + arms[1], np.zeros(length_m.shape))


def resonant_m(order: int, frequency_hz: float) -> float:
    """The length of a line in resonance: that many quarter waves of the line on each side."""
    return order * C_M_PER_S / (2.0 * SLOWING * frequency_hz)


def goal(
    name: str = "40m",
    low_mhz: float = 7.0,
    high_mhz: float = 7.2,
    *,
    required: bool = True,
    weight: float = 1.0,
    swr_limit: float = 2.0,
) -> BandGoal:
    return BandGoal(name, low_mhz * 1e6, high_mhz * 1e6, required, weight, swr_limit)


def space_of(
    *goals: BandGoal,
    wires: tuple[WireOffer, ...] | None = None,
    site_longest_m: float = 25.0,
    ratios: tuple[float, ...] = (1.0, 2.0),
    feeding: Feeding | None = None,
) -> SearchSpace:
    return SearchSpace(
        bands=goals or (goal(), goal("15m", 21.0, 21.45)),
        wires=wires or (WireOffer(OpenLine()),),
        site_longest_m=site_longest_m,
        ratios=ratios,
        feeding=feeding or Feeding(50.0),
    )
