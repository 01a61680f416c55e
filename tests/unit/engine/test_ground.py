"""What a table of reflected potentials promises besides its physics."""

from __future__ import annotations

import pickle

import numpy as np
import pytest
from numpy.typing import NDArray

from worker.engine.constants import SPEED_OF_LIGHT_M_PER_S
from worker.engine.errors import NotConverged, OutOfRange
from worker.engine.ground import (
    GROUND_CLASSES,
    PERFECT_GROUND,
    Ground,
    GroundTable,
    panels,
    tabulate,
    tabulate_many,
    water,
)
from worker.engine.ground.spectrum import reflected

FREQUENCY_HZ = 7.1e6
WAVELENGTH_M = SPEED_OF_LIGHT_M_PER_S / FREQUENCY_HZ


def scatter(table: GroundTable, count: int = 300) -> NDArray[np.float64]:
    """Distances of all sizes, none of them a node of the table."""
    random = np.random.default_rng(7)
    return table.reach_m * random.random(count) ** 3


def true_error(table: GroundTable) -> float:
    """Error of a table's interpolation relative to the image potential."""
    wavenumber = 2.0 * np.pi * table.frequency_hz / SPEED_OF_LIGHT_M_PER_S
    distance = scatter(table)
    size = distance.size
    exact = reflected(
        np.full(size, table.ground.complex_permittivity(table.frequency_hz)),
        np.full(size, 2.0 * wavenumber * table.height_m),
        wavenumber * distance,
    )
    image_m = np.hypot(distance, 2.0 * table.height_m)
    over = 4.0 * np.pi * image_m * np.exp(1j * wavenumber * image_m)
    return float(
        max(
            np.max(np.abs(over * table.vector_potential(distance) - exact.vector)),
            np.max(np.abs(over * table.scalar_potential(distance) - exact.scalar)),
        )
    )


@pytest.mark.parametrize("name", ["average", "salt-water", "industrial", "itu-fresh-water"])
@pytest.mark.parametrize("height", [0.01, 0.05, 0.3, 2.0])
def test_error_of_interpolation_stays_below_the_error_stated(name: str, height: float) -> None:
    reach = 6.0 * WAVELENGTH_M
    table = tabulate(GROUND_CLASSES[name], FREQUENCY_HZ, height * WAVELENGTH_M, reach)
    assert table.interpolation_error <= 1e-6
    assert true_error(table) <= table.relative_error


def test_panels_too_long_are_halved_until_resolved(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(panels, "_starting_edges", lambda *case: np.array([0.0, case[2]]))
    table = tabulate(
        GROUND_CLASSES["average"], FREQUENCY_HZ, 0.05 * WAVELENGTH_M, 6.0 * WAVELENGTH_M
    )
    assert table.samples > panels.NODES
    assert true_error(table) <= table.relative_error <= 1.2e-6


def test_panels_that_stay_unresolved_are_an_error(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(panels, "_starting_edges", lambda *case: np.array([0.0, case[2]]))
    monkeypatch.setattr(panels, "_MOST_HALVINGS", 0)
    with pytest.raises(NotConverged):
        tabulate(GROUND_CLASSES["average"], FREQUENCY_HZ, 0.05 * WAVELENGTH_M, 6.0 * WAVELENGTH_M)


def test_quadrature_error_is_far_below_the_interpolation_tolerance() -> None:
    for name in ("good", "average", "salt-water", "industrial"):
        for height in (0.01, 0.1, 1.0):
            table = tabulate(
                GROUND_CLASSES[name], FREQUENCY_HZ, height * WAVELENGTH_M, 12.0 * WAVELENGTH_M
            )
            assert 0.0 < table.quadrature_error < 5e-8


def test_potentials_do_not_depend_on_how_far_the_table_reaches() -> None:
    short, long = (
        tabulate(GROUND_CLASSES["average"], FREQUENCY_HZ, 6.0, reach) for reach in (20.0, 200.0)
    )
    distance = np.linspace(0.0, 20.0, 60)
    assert np.allclose(
        short.scalar_potential(distance), long.scalar_potential(distance), rtol=2e-6, atol=0.0
    )


def test_tables_made_together_equal_tables_made_one_by_one() -> None:
    ground = GROUND_CLASSES["good"]
    frequencies, heights, reaches = [3.6e6, 7.1e6, 28.5e6], [8.0, 8.0, 12.0], [90.0, 40.0, 60.0]
    together = tabulate_many(ground, frequencies, heights, reaches)
    for table, frequency, height, reach in zip(
        together, frequencies, heights, reaches, strict=True
    ):
        alone = tabulate(ground, frequency, height, reach)
        distance = np.linspace(0.0, reach, 40)
        assert np.array_equal(table.vector_potential(distance), alone.vector_potential(distance))
        assert np.array_equal(table.scalar_potential(distance), alone.scalar_potential(distance))
        assert table.evaluations == alone.evaluations


def test_shape_of_the_distances_is_kept() -> None:
    table = tabulate(GROUND_CLASSES["average"], FREQUENCY_HZ, 10.0, 40.0)
    assert table.vector_potential(np.zeros((3, 2))).shape == (3, 2)
    assert table.scalar_potential(1.0).shape == ()


def test_table_survives_a_process_border() -> None:
    table = tabulate(GROUND_CLASSES["average"], FREQUENCY_HZ, 10.0, 40.0)
    copy = pickle.loads(pickle.dumps(table))  # noqa: S301 - written two calls ago
    assert copy.vector_potential(3.0) == table.vector_potential(3.0)


def test_perfect_ground_costs_no_integral() -> None:
    table = tabulate(PERFECT_GROUND, FREQUENCY_HZ, 10.0, 40.0)
    assert (table.samples, table.evaluations, table.relative_error) == (0, 0, 0.0)


@pytest.mark.parametrize(
    ("frequency", "height", "reach", "quantity"),
    [
        (0.0, 10.0, 40.0, "frequency_hz"),
        (float("nan"), 10.0, 40.0, "frequency_hz"),
        (7e6, 0.4, 40.0, "height_m"),
        (7e6, float("nan"), 40.0, "height_m"),
        (7e6, 1e5, 40.0, "height_m"),
        (7e6, 10.0, 0.0, "reach_m"),
        (7e6, 10.0, 1e3, "reach_m"),
    ],
)
def test_geometry_out_of_range_is_refused_by_name(
    frequency: float, height: float, reach: float, quantity: str
) -> None:
    with pytest.raises(OutOfRange) as refused:
        tabulate(GROUND_CLASSES["average"], frequency, height, reach)
    assert refused.value.quantity == quantity


@pytest.mark.parametrize("distance", [-1.0, 1e4, float("nan")])
def test_distance_off_the_table_is_refused(distance: float) -> None:
    table = tabulate(GROUND_CLASSES["average"], FREQUENCY_HZ, 10.0, 40.0)
    for potential in (table.vector_potential, table.scalar_potential):
        with pytest.raises(OutOfRange, match="distance_m"):
            potential([1.0, distance])


@pytest.mark.parametrize(
    ("permittivity", "conductivity", "quantity"),
    [
        (0.9, 0.01, "relative_permittivity"),
        (float("nan"), 0.01, "relative_permittivity"),
        (1e4, 0.01, "relative_permittivity"),
        (10.0, -1e-9, "conductivity_s_per_m"),
        (10.0, float("nan"), "conductivity_s_per_m"),
    ],
)
def test_impossible_ground_is_refused_by_name(
    permittivity: float, conductivity: float, quantity: str
) -> None:
    with pytest.raises(OutOfRange) as refused:
        Ground(permittivity, conductivity)
    assert refused.value.quantity == quantity


@pytest.mark.parametrize(
    ("temperature", "salinity", "quantity"),
    [
        (-5.0, 35.0, "temperature_c"),
        (41.0, 35.0, "temperature_c"),
        (15.0, 50.0, "salinity_g_per_kg"),
    ],
)
def test_water_outside_the_recommendation_is_refused(
    temperature: float, salinity: float, quantity: str
) -> None:
    with pytest.raises(OutOfRange) as refused:
        water(7e6, temperature, salinity)
    assert refused.value.quantity == quantity


def test_every_named_ground_says_where_its_figures_come_from() -> None:
    for ground in GROUND_CLASSES.values():
        assert ground.name
        assert ground.source.startswith(("common practice", "ITU-R P.527", "limit of"))


def test_extreme_grounds_and_heights_are_tabulated_without_warning() -> None:
    for ground in (Ground(1.0, 1e12), Ground(1e3, 0.0), Ground(1.0, 1e-7), Ground(1.0 + 1e-9, 0.0)):
        for height in (0.01, 100.0):
            table = tabulate(ground, FREQUENCY_HZ, height * WAVELENGTH_M, 0.5 * WAVELENGTH_M)
            distance = np.linspace(0.0, 0.5 * WAVELENGTH_M, 30)
            assert np.all(np.isfinite(table.vector_potential(distance)))
            assert np.all(np.isfinite(table.scalar_potential(distance)))
