"""How the thin-wire calls behave: shapes, symmetry, limits, estimates and refusals."""

from __future__ import annotations

from dataclasses import dataclass
from math import pi

import numpy as np
import pytest
from numpy.typing import NDArray

from worker.engine.constants import SPEED_OF_LIGHT_M_PER_S
from worker.engine.errors import OutOfRange
from worker.engine.thin_wire import MODEL, current, feed_impedance
from worker.engine.thin_wire import refinement as refinement_module
from worker.engine.thin_wire import wire as wire_module
from worker.engine.thin_wire.batch import SHORTEST_LENGTH_RADII
from worker.engine.thin_wire.mesh import Grading
from worker.engine.thin_wire.refinement import LEVELS, Level

FREQUENCY_HZ = 14.1e6
WAVELENGTH_M = SPEED_OF_LIGHT_M_PER_S / FREQUENCY_HZ
RADIUS_M = 8e-4
LENGTH_M = 10.2


@dataclass(frozen=True)
class Mirror:
    """Perfect ground as an image."""

    height_m: float
    frequency_hz: float = FREQUENCY_HZ

    def vector_potential(self, distance_m: NDArray[np.float64]) -> NDArray[np.complex128]:
        distance = np.sqrt(distance_m**2 + (2.0 * self.height_m) ** 2)
        wave: NDArray[np.complex128] = np.exp(-2j * pi / WAVELENGTH_M * distance)
        return -wave / (4.0 * pi * distance)

    scalar_potential = vector_potential


def test_length_radius_and_frequency_broadcast_together() -> None:
    lengths = np.array([8.0, 10.0, 30.0])[:, None]
    frequencies = np.array([7.0e6, 14.1e6])
    result = feed_impedance(lengths, RADIUS_M, frequencies)
    assert result.impedance_ohm.shape == (3, 2)
    assert result.unknowns.shape == (3, 2)


def test_a_batch_gives_what_single_calls_give() -> None:
    lengths = np.linspace(5.0, 40.0, 23)
    batch = feed_impedance(lengths, RADIUS_M, FREQUENCY_HZ).impedance_ohm
    single = [complex(feed_impedance(x, RADIUS_M, FREQUENCY_HZ).impedance_ohm) for x in lengths]
    assert batch == pytest.approx(np.array(single), rel=1e-10)


def test_cutting_a_batch_into_chunks_changes_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    lengths = np.linspace(5.0, 40.0, 23)
    whole = feed_impedance(lengths, RADIUS_M, FREQUENCY_HZ).impedance_ohm
    monkeypatch.setattr(refinement_module, "_CHUNK_ENTRIES", 1)
    pieces = feed_impedance(lengths, RADIUS_M, FREQUENCY_HZ).impedance_ohm
    assert pieces == pytest.approx(whole, rel=1e-10)


def test_a_scalar_call_gives_arrays_of_no_dimension() -> None:
    assert feed_impedance(LENGTH_M, RADIUS_M, FREQUENCY_HZ).impedance_ohm.shape == ()


def test_an_empty_batch_gives_an_empty_result() -> None:
    assert feed_impedance(np.zeros(0), RADIUS_M, FREQUENCY_HZ).impedance_ohm.shape == (0,)


def test_the_result_names_its_model_and_gap() -> None:
    result = feed_impedance(LENGTH_M, RADIUS_M, FREQUENCY_HZ)
    assert result.model == MODEL
    assert float(result.gap_m) == RADIUS_M


def test_impedance_depends_on_sizes_in_wavelengths_only() -> None:
    low = feed_impedance(LENGTH_M, RADIUS_M, FREQUENCY_HZ).impedance_ohm
    high = feed_impedance(LENGTH_M / 7.0, RADIUS_M / 7.0, FREQUENCY_HZ * 7.0).impedance_ohm
    assert complex(high) == pytest.approx(complex(low), rel=1e-9)


@pytest.mark.parametrize("fraction", [0.5, 0.3, 0.05])
def test_both_halves_of_the_wire_are_alike(fraction: float) -> None:
    left, right = (
        feed_impedance(LENGTH_M, RADIUS_M, FREQUENCY_HZ, feed_fraction=p).impedance_ohm
        for p in (fraction, 1.0 - fraction)
    )
    assert complex(left) == pytest.approx(complex(right), rel=1e-9)


def test_impedance_is_smooth_as_the_feed_leaves_the_centre() -> None:
    centre, aside = feed_impedance(
        LENGTH_M, RADIUS_M, FREQUENCY_HZ, feed_fraction=np.array([0.5, 0.5 + 1e-7])
    ).impedance_ohm
    assert aside == pytest.approx(centre, rel=1e-6)


def test_a_load_at_the_feed_is_in_series_with_it() -> None:
    load = 12.0 - 34.0j
    bare = feed_impedance(LENGTH_M, RADIUS_M, FREQUENCY_HZ, feed_fraction=0.4).impedance_ohm
    loaded = feed_impedance(
        LENGTH_M, RADIUS_M, FREQUENCY_HZ, feed_fraction=0.4, loads=[(0.4, load)]
    ).impedance_ohm
    assert complex(loaded) - complex(bare) == pytest.approx(load, rel=1e-9)


def test_loads_in_one_place_add_up() -> None:
    one = feed_impedance(LENGTH_M, RADIUS_M, FREQUENCY_HZ, loads=[(0.7, 60j)]).impedance_ohm
    two = feed_impedance(
        LENGTH_M, RADIUS_M, FREQUENCY_HZ, loads=[(0.7, 20j), (0.7, 40j)]
    ).impedance_ohm
    assert complex(two) == pytest.approx(complex(one), rel=1e-12)


def test_a_load_of_no_ohms_changes_nothing() -> None:
    bare = feed_impedance(LENGTH_M, RADIUS_M, FREQUENCY_HZ)
    loaded = feed_impedance(LENGTH_M, RADIUS_M, FREQUENCY_HZ, loads=[(0.71, 0.0)])
    change = abs(complex(loaded.impedance_ohm) - complex(bare.impedance_ohm))
    assert change < float(bare.estimated_error_ohm)


def test_an_open_gap_leaves_the_wire_inside_it() -> None:
    # A very high impedance in the middle of an arm is not far from cutting the wire there: the
    # rest couples weakly, so the reactance is close to that of the shorter wire.
    cut = feed_impedance(
        LENGTH_M, RADIUS_M, FREQUENCY_HZ, loads=[(0.25, 1e9), (0.75, 1e9)]
    ).impedance_ohm
    short = feed_impedance(LENGTH_M / 2.0, RADIUS_M, FREQUENCY_HZ).impedance_ohm
    assert complex(cut).imag == pytest.approx(complex(short).imag, rel=0.1)


def test_many_small_loads_act_like_a_distributed_impedance() -> None:
    per_metre, count = 4.0 + 9.0j, 24
    spread = feed_impedance(
        LENGTH_M, RADIUS_M, FREQUENCY_HZ, wire_impedance_ohm_per_m=per_metre
    ).impedance_ohm
    places = (np.arange(count) + 0.5) / count
    lumped = feed_impedance(
        LENGTH_M,
        RADIUS_M,
        FREQUENCY_HZ,
        loads=[(float(x), per_metre * LENGTH_M / count) for x in places],
    ).impedance_ohm
    bare = complex(feed_impedance(LENGTH_M, RADIUS_M, FREQUENCY_HZ).impedance_ohm)
    assert complex(lumped) - bare == pytest.approx(complex(spread) - bare, rel=0.01)


def test_small_wire_resistance_costs_its_mean_square_current() -> None:
    # First-order change of a stationary impedance: sum of r |I/I0|^2 for a nearly real I.
    bare = current(LENGTH_M, RADIUS_M, FREQUENCY_HZ)
    relative = bare.current_a_per_v * bare.impedance_ohm
    per_metre = 1e-3
    expected = per_metre * np.sum(bare.weight_m * relative**2)
    lossy = feed_impedance(
        LENGTH_M, RADIUS_M, FREQUENCY_HZ, wire_impedance_ohm_per_m=per_metre
    ).impedance_ohm
    assert complex(lossy) - bare.impedance_ohm == pytest.approx(complex(expected), rel=1e-3)


@pytest.mark.parametrize(
    ("length", "radius", "gap_radii"), [(0.48, 4e-5, 3.0), (1.0, 5e-3, 1.0), (0.9, 1e-3, 0.3)]
)
def test_mean_current_in_the_gap_is_the_admittance(
    length: float, radius: float, gap_radii: float
) -> None:
    length_m, radius_m = length * WAVELENGTH_M, radius * WAVELENGTH_M
    gap_m = gap_radii * radius_m
    result = current(length_m, radius_m, FREQUENCY_HZ, gap_m=gap_m, feed_fraction=0.4)
    inside = np.abs(result.position_m + 0.1 * length_m) < gap_m / 2.0
    assert np.sum(result.weight_m[inside]) == pytest.approx(gap_m, rel=1e-9)
    mean = np.sum((result.weight_m * result.current_a_per_v)[inside]) / gap_m
    # The impedance is stationary in the current, so the current itself is the coarser of the two.
    assert complex(mean) == pytest.approx(1.0 / result.impedance_ohm, rel=3e-4)


def test_current_positions_integrate_the_whole_wire() -> None:
    result = current(LENGTH_M, RADIUS_M, FREQUENCY_HZ, feed_fraction=0.3)
    assert np.all(np.diff(result.position_m) > 0.0)
    assert np.sum(result.weight_m) == pytest.approx(LENGTH_M, rel=1e-12)
    assert np.sum(result.weight_m * result.position_m**2) == pytest.approx(
        LENGTH_M**3 / 12.0, rel=1e-9
    )


def test_current_and_feed_impedance_agree() -> None:
    ground = Mirror(3.0)
    along, batch = (
        call(
            LENGTH_M,
            RADIUS_M,
            FREQUENCY_HZ,
            feed_fraction=0.35,
            wire_impedance_ohm_per_m=1.0 + 2.0j,
            loads=[(0.8, 30j)],
            reflected=ground,
        )
        for call in (current, feed_impedance)
    )
    assert along.impedance_ohm == pytest.approx(complex(batch.impedance_ohm), rel=1e-12)


def test_current_vanishes_at_the_ends() -> None:
    result = current(LENGTH_M, RADIUS_M, FREQUENCY_HZ)
    ends = np.abs(result.current_a_per_v[[0, -1]])
    assert np.max(ends) < 1e-4 * np.max(np.abs(result.current_a_per_v))


def test_estimated_error_bounds_the_change_to_a_much_finer_solution(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    rng = np.random.default_rng(20)
    radius = WAVELENGTH_M * 10.0 ** rng.uniform(-7.0, np.log10(5e-3), 60)
    length = WAVELENGTH_M * 10.0 ** rng.uniform(np.log10(0.006), np.log10(9.9), 60)
    length = np.maximum(length, 1.1 * SHORTEST_LENGTH_RADII * radius)
    result = feed_impedance(length, radius, FREQUENCY_HZ)
    fine = (Level(8, 12, Grading(0.12, 5.0, 0.9, 1.2, 0.7)),)
    monkeypatch.setattr(wire_module, "LEVELS", fine)
    finer = feed_impedance(length, radius, FREQUENCY_HZ).impedance_ohm
    assert np.all(np.abs(result.impedance_ohm - finer) < result.estimated_error_ohm)


def test_unknowns_are_chosen_by_the_estimate(monkeypatch: pytest.MonkeyPatch) -> None:
    easy = feed_impedance(LENGTH_M, RADIUS_M, FREQUENCY_HZ)
    monkeypatch.setattr(wire_module, "TOLERANCE_RAD", 2.01e-5)
    hard = feed_impedance(LENGTH_M, RADIUS_M, FREQUENCY_HZ)
    assert int(hard.unknowns) > int(easy.unknowns)


def test_an_unreachable_tolerance_is_reported(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(wire_module, "TOLERANCE_RAD", 1e-9)
    assert not feed_impedance(LENGTH_M, RADIUS_M, FREQUENCY_HZ).converged


def test_ordinary_wires_converge_at_the_first_level() -> None:
    lengths = np.linspace(0.3, 1.6, 40) * WAVELENGTH_M
    result = feed_impedance(lengths, RADIUS_M, FREQUENCY_HZ)
    assert np.all(result.converged)
    assert np.max(result.unknowns) <= 20 * LEVELS[0].degree


def test_a_wire_near_perfect_ground_hardly_radiates() -> None:
    low = feed_impedance(LENGTH_M, RADIUS_M, FREQUENCY_HZ, reflected=Mirror(0.25)).impedance_ohm
    assert complex(low).real < 1.0


@pytest.mark.parametrize(
    ("length", "radius", "quantity"),
    [
        (0.004, 1e-5, "length in wavelengths"),
        (10.1, 1e-5, "length in wavelengths"),
        (0.5, 0.9e-7, "radius in wavelengths"),
        (0.5, 5.1e-3, "radius in wavelengths"),
        (np.nan, 1e-5, "length in wavelengths"),
        (0.5, np.nan, "radius in wavelengths"),
    ],
)
def test_wire_outside_the_range_is_refused(length: float, radius: float, quantity: str) -> None:
    with pytest.raises(OutOfRange, match=quantity):
        feed_impedance(length * WAVELENGTH_M, radius * WAVELENGTH_M, FREQUENCY_HZ)


def test_a_refusal_names_value_and_range() -> None:
    with pytest.raises(OutOfRange) as refusal:
        feed_impedance(11.0 * WAVELENGTH_M, RADIUS_M, FREQUENCY_HZ)
    assert refusal.value.value == pytest.approx(11.0)
    assert (refusal.value.low, refusal.value.high) == (0.005, 10.0)


@pytest.mark.parametrize("fraction", [0.0, 1e-4, 1.0, 1.2, np.nan])
def test_a_feed_at_or_beyond_the_end_is_refused(fraction: float) -> None:
    with pytest.raises(OutOfRange, match="distance of a feed"):
        feed_impedance(LENGTH_M, RADIUS_M, FREQUENCY_HZ, feed_fraction=fraction)


def test_loads_that_almost_touch_are_refused() -> None:
    with pytest.raises(OutOfRange, match="distance of a feed"):
        feed_impedance(LENGTH_M, RADIUS_M, FREQUENCY_HZ, loads=[(0.5 + 1e-5, 10.0)])


def test_a_gap_wider_than_an_arm_is_refused() -> None:
    with pytest.raises(OutOfRange):
        feed_impedance(LENGTH_M, RADIUS_M, FREQUENCY_HZ, gap_m=0.6 * LENGTH_M)


def test_a_ground_of_another_frequency_is_refused() -> None:
    with pytest.raises(OutOfRange, match="frequency_hz"):
        feed_impedance(LENGTH_M, RADIUS_M, 7.1e6, reflected=Mirror(10.0))


def test_a_wire_lying_on_the_ground_is_refused() -> None:
    with pytest.raises(OutOfRange, match="height in radii"):
        feed_impedance(LENGTH_M, RADIUS_M, FREQUENCY_HZ, reflected=Mirror(1e-3))


def test_a_wire_that_gains_power_is_refused() -> None:
    with pytest.raises(OutOfRange, match="resistance of the wire"):
        feed_impedance(LENGTH_M, RADIUS_M, FREQUENCY_HZ, wire_impedance_ohm_per_m=-1.0)


def test_a_load_that_is_no_number_is_refused() -> None:
    with pytest.raises(OutOfRange, match="load impedance"):
        feed_impedance(LENGTH_M, RADIUS_M, FREQUENCY_HZ, loads=[(0.7, complex(np.nan, 0.0))])
