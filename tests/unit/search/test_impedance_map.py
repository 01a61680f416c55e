"""Maps of impedance, on an open-ended line whose input impedance is known in closed form."""

import numpy as np
import pytest

from tests.unit.search.open_line import OffCentreLine, OpenLine, goal, resonant_m
from worker.engine.errors import NotConverged
from worker.search.impedance_map import (
    TOLERANCE_OHM,
    TOLERANCE_RELATIVE,
    map_band,
    map_band_together,
    map_over_frequency,
    map_over_length,
)
from worker.search.resonances import lengths_in_resonance, resonances_of
from worker.search.space import ComplexArray, FloatArray


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


@pytest.mark.parametrize("noise", [0.05, 0.01, 3e-3])
def test_a_solver_too_rough_to_map_is_reported_and_not_smoothed_over(noise: float) -> None:
    # Nor warned of by the library underneath: here a warning is an error of another type.
    with pytest.raises(NotConverged, match="impedance map"):
        map_over_length(OpenLine(noise=noise), 14.0e6, 5.0, 40.0)


@pytest.mark.parametrize("longest_m", [50.0, 60.0, 80.0, 110.0])
def test_roughness_as_large_as_the_tolerance_does_not_pass_by_few_lucky_checks(
    longest_m: float,
) -> None:
    # The first few checks are within the tolerance; between them it is missed two to four times.
    with pytest.raises(NotConverged, match="impedance map"):
        map_over_length(OpenLine(noise=7e-4), 14.0e6, 5.0, longest_m)


@pytest.mark.parametrize("noise", [0.0, 1e-5, 1e-4])
def test_a_map_agrees_with_fresh_solves_to_the_tolerance_asked(noise: float) -> None:
    line = OpenLine(noise=noise)
    mapped = map_over_length(line, 14.0e6, 5.0, 80.0)
    lengths_m = np.linspace(5.0, 80.0, 2003)
    exact = line.solve(lengths_m, np.full(lengths_m.shape, 14.0e6)).impedance_ohm
    allowed = np.maximum(TOLERANCE_OHM, TOLERANCE_RELATIVE * np.abs(exact))
    assert np.all(np.abs(mapped.impedance_ohm(lengths_m) - exact) <= allowed)


def test_a_map_states_a_miss_that_grows_with_the_roughness() -> None:
    misses = [
        map_over_length(OpenLine(noise=noise), 14.0e6, 5.0, 80.0).largest_miss
        for noise in (0.0, 1e-5, 1e-4)
    ]
    assert misses[0] < misses[1] < misses[2]
    assert 2e-5 < misses[2] < 5e-4


def test_a_wire_too_short_for_the_model_serves_nothing_rather_than_fails() -> None:
    mapped = map_band(OpenLine(), 7.0e6, 7.2e6, 1.0, 10.0)
    (impedance,) = mapped.impedance_ohm(np.array([1.0]), np.array([7.0e6])).ravel()
    assert abs(impedance) > 1e4
    assert impedance.real < 1.0


def test_resonances_alternate_between_series_and_parallel_and_none_is_missed() -> None:
    found = resonances_of(map_over_frequency(OpenLine(), 20.5, 3.0e6, 45.0e6), 20.5)
    assert [each.order for each in found] == [1, 2, 3, 4, 5, 6]
    assert [each.kind for each in found] == ["series", "parallel"] * 3


def test_a_lines_resonances_lie_where_its_electrical_length_says() -> None:
    found = resonances_of(map_over_frequency(OpenLine(), 20.5, 3.0e6, 45.0e6), 20.5)
    quarter_hz = resonant_m(1, 1.0) / 20.5
    for each in found:
        assert each.frequency_hz == pytest.approx(each.order * quarter_hz, rel=1e-6)


def test_fed_off_its_centre_a_line_is_in_resonance_on_whole_numbers_of_half_waves() -> None:
    mapped = map_over_frequency(OffCentreLine(), 20.5, 5.0e6, 40.0e6)
    found = resonances_of(mapped, 20.5, centred=False)
    series = [each for each in found if each.kind == "series"]
    # Of the third the feed is at a node.
    assert [each.order for each in series] == [1, 2, 4, 5]
    half_wave_hz = resonant_m(1, 1.0) / 20.5
    for each in series:
        assert each.frequency_hz == pytest.approx(each.order * half_wave_hz, rel=0.02)


def test_a_resistance_read_from_a_map_is_never_negative() -> None:
    # Of hardly any loss, and rough: interpolated between frequencies it would be, in places.
    line = OpenLine(loss=1e-5, noise=1e-4)
    band = map_band(line, 14.0e6, 14.35e6, 5.0, 80.0)
    hertz, lengths_m = np.array([14.05e6, 14.2e6]), np.linspace(5.0, 80.0, 5003)
    assert np.min(band.impedance_ohm(lengths_m, hertz).real) > 0.0
    even_m = 5.0 * np.exp(5e-4 * np.arange(5500))
    assert np.min(band.over_even_ratios(even_m, hertz).real) > 0.0


def test_a_length_is_moved_onto_the_centre_of_a_band() -> None:
    band = goal("15m", 21.0, 21.4)
    wanted_m = resonant_m(3, 21.2e6)
    mapped = map_band(OpenLine(), 21.0e6, 21.4e6, 15.0, 30.0)
    length_m, exponent = lengths_in_resonance(mapped, 1.02 * wanted_m, band)
    assert length_m == pytest.approx(wanted_m, rel=1e-4)
    # On a line frequency and length go as one over the other.
    assert exponent == pytest.approx(-1.0, abs=1e-3)


def test_no_length_is_claimed_where_the_reactance_has_no_rising_zero() -> None:
    mapped = map_band(OpenLine(), 21.0e6, 21.4e6, 10.0, 30.0)
    antiresonant_m = resonant_m(2, 21.2e6)
    assert lengths_in_resonance(mapped, antiresonant_m, goal("15m", 21.0, 21.4)) == (None, None)


def test_wires_mapped_together_are_mapped_as_each_alone() -> None:
    lines = [OpenLine(surge_ohm=700.0), OpenLine(surge_ohm=1100.0)]

    def survey(length_m_hz: FloatArray, frequency_hz: FloatArray) -> ComplexArray:
        length_m = length_m_hz / frequency_hz[:, None]
        at_hz = np.broadcast_to(frequency_hz[:, None], length_m.shape)
        return np.array([line.solve(length_m, at_hz).impedance_ohm for line in lines])

    together = map_band_together(survey, 0.05, 14.0e6, 14.35e6, (5.0, 40.0))
    lengths_m, frequency_hz = np.linspace(5.0, 40.0, 201), np.array([14.1e6])
    for line, mapped in zip(lines, together, strict=True):
        alone = map_band(line, 14.0e6, 14.35e6, 5.0, 40.0)
        assert mapped.impedance_ohm(lengths_m, frequency_hz) == pytest.approx(
            alone.impedance_ohm(lengths_m, frequency_hz), rel=1e-12
        )
