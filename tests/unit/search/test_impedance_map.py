"""Maps of impedance, on an open-ended line whose input impedance is known in closed form.

Zin = Z0 coth(γ L/2) is the textbook input impedance of an open-ended lossy line (D. M.
Pozar, Microwave Engineering, lossy-line input impedance); it resonates and anti-resonates
as a dipole does and so tests the map without the wire's solver.
"""

from dataclasses import dataclass, field

import numpy as np
import pytest

from worker.engine.errors import NotConverged
from worker.search.impedance_map import map_band, map_over_frequency, map_over_length
from worker.search.resonances import length_in_resonance_m, resonances_of
from worker.search.space import FloatArray, Solved

C_M_PER_S = 299_792_458.0


@dataclass
class OpenLine:
    """An open-ended line of slowly falling loss; counts its solves."""

    noise: float = 0.0
    solves: int = 0
    shortest_wavelengths: float = 0.05
    longest_wavelengths: float = 6.0
    asked: list[float] = field(default_factory=list)

    def solve(self, length_m: FloatArray, frequency_hz: FloatArray) -> Solved:
        self.solves += length_m.size
        k = 2.0 * np.pi * frequency_hz / C_M_PER_S
        gamma = 0.1 * np.log1p(k * length_m) / length_m + 1.03j * k
        impedance = 1000.0 / np.tanh(0.5 * gamma * length_m)
        impedance *= 1.0 + self.noise * np.sin(1e5 * length_m)
        return Solved(impedance.astype(np.complex128), np.zeros(length_m.shape))


def test_a_map_over_length_agrees_with_the_line_between_its_solves() -> None:
    line = OpenLine()
    mapped = map_over_length(line, 14.0e6, 5.0, 80.0)
    lengths_m = np.linspace(5.0, 80.0, 997)
    exact = line.solve(lengths_m, np.full(lengths_m.shape, 14.0e6)).impedance_ohm
    assert np.max(np.abs(mapped.impedance_ohm(lengths_m) / exact - 1.0)) < 1e-3


def test_a_map_over_frequency_agrees_with_the_line_between_its_solves() -> None:
    line = OpenLine()
    mapped = map_over_frequency(line, 20.5, 3.0e6, 30.0e6)
    frequency_hz = np.linspace(3.0e6, 30.0e6, 997)
    exact = line.solve(np.full(frequency_hz.shape, 20.5), frequency_hz).impedance_ohm
    assert np.max(np.abs(mapped.impedance_ohm(frequency_hz) / exact - 1.0)) < 1e-3


def test_a_band_map_agrees_with_the_line_at_every_frequency_of_the_band() -> None:
    line = OpenLine()
    mapped = map_band(line, 28.0e6, 29.7e6, 5.0, 30.0)
    lengths_m, frequency_hz = np.linspace(5.0, 30.0, 401), np.linspace(28.0e6, 29.7e6, 9)
    grid_hz, grid_m = np.meshgrid(frequency_hz, lengths_m, indexing="ij")
    exact = line.solve(grid_m, grid_hz).impedance_ohm
    assert np.max(np.abs(mapped.impedance_ohm(lengths_m, frequency_hz) / exact - 1.0)) < 2e-3


def test_a_map_spends_few_solves_and_counts_them() -> None:
    line = OpenLine()
    mapped = map_over_length(line, 14.0e6, 5.0, 40.0)
    assert mapped.solves == line.solves <= 40


def test_a_solver_too_rough_to_map_is_reported_and_not_smoothed_over() -> None:
    with pytest.raises(NotConverged, match="impedance map"):
        map_over_length(OpenLine(noise=0.05), 14.0e6, 5.0, 40.0)


def test_resonances_alternate_between_series_and_parallel_and_none_is_missed() -> None:
    found = resonances_of(map_over_frequency(OpenLine(), 20.5, 3.0e6, 45.0e6), 20.5)
    assert [each.order for each in found] == [1, 2, 3, 4, 5, 6]
    assert [each.kind for each in found] == ["series", "parallel"] * 3


def test_a_lines_resonances_lie_where_its_electrical_length_says() -> None:
    found = resonances_of(map_over_frequency(OpenLine(), 20.5, 3.0e6, 45.0e6), 20.5)
    quarter_hz = C_M_PER_S / (2.0 * 1.03 * 20.5)
    for each in found:
        assert each.frequency_hz == pytest.approx(each.order * quarter_hz, rel=1e-6)


def test_a_length_is_moved_onto_a_frequency() -> None:
    wanted_m = 3.0 * C_M_PER_S / (2.0 * 1.03 * 21.2e6)
    assert length_in_resonance_m(OpenLine(), 1.02 * wanted_m, 21.2e6) == pytest.approx(
        wanted_m, rel=1e-4
    )


def test_no_length_is_claimed_where_the_reactance_has_no_rising_zero() -> None:
    antiresonant_m = 2.0 * C_M_PER_S / (2.0 * 1.03 * 21.2e6)
    assert length_in_resonance_m(OpenLine(), antiresonant_m, 21.2e6) is None
