"""Wires surveyed together are the wires that direct solutions tell of."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from worker.engine.errors import OutOfRange
from worker.engine.ground import GROUND_CLASSES
from worker.engine.hung_wire import GroundTables, HungWire
from worker.engine.insulation import Sleeve
from worker.engine.material import MATERIALS
from worker.engine.survey import survey_impedances
from worker.engine.thin_wire import Rescaled, feed_impedance, feed_impedance_under

COPPER = MATERIALS["hard-drawn-copper"]
STEEL = MATERIALS["copper-clad-steel-40"]
HERTZ = np.array([14.0e6, 14.35e6])
LENGTH_M_HZ = 299.8e6 * np.array([0.3, 0.48, 0.95, 1.1, 1.47, 2.3])


def grounds(height_m: float) -> GroundTables:
    return GroundTables(GROUND_CLASSES["average"], height_m, 60.0)


def largest_error(wires: list[HungWire], *, careful: bool = False) -> float:
    """Largest departure from direct solutions, in parts of what a map allows."""
    surveyed = survey_impedances(wires, LENGTH_M_HZ, HERTZ, careful=careful)
    length_m = LENGTH_M_HZ / HERTZ[:, None]
    at_hz = np.broadcast_to(HERTZ[:, None], length_m.shape)
    direct = np.array([wire.feed_impedance(length_m, at_hz).impedance_ohm for wire in wires])
    allowed = np.maximum(0.1, 1e-3 * np.abs(direct))
    return float(np.max(np.abs(surveyed - direct) / allowed))


def several(radii_mm: list[float], heights_m: list[float]) -> list[HungWire]:
    below = [grounds(height_m) for height_m in heights_m]
    return [
        HungWire(1e-3 * radius_mm, COPPER if radius_mm < 1.2 else STEEL, grounds=each)
        for each in below
        for radius_mm in radii_mm
    ]


@pytest.mark.parametrize(
    ("radii_mm", "heights_m"),
    [
        ([0.8, 1.0, 1.25, 1.5, 2.0], [12.0]),
        ([0.8, 0.9], [4.0, 12.0, 25.0]),
        ([0.5, 1.0, 2.0], [3.0, 15.0]),
        ([1.0], [10.0]),
    ],
)
def test_bare_wires_told_from_few_radii_are_as_solved_directly(
    radii_mm: list[float], heights_m: list[float]
) -> None:
    assert largest_error(several(radii_mm, heights_m)) < 0.7


def test_wires_in_free_space_and_over_ground_are_kept_apart() -> None:
    over, free = several([0.8, 1.0, 1.3], [5.0]), [HungWire(1e-3 * r, COPPER) for r in (0.7, 0.9)]
    assert largest_error([*over[:2], *free, over[2]]) < 0.7


def test_wires_fed_off_their_centre_are_told_too() -> None:
    below = grounds(8.0)
    wires = [HungWire(1e-3 * r, COPPER, grounds=below, feed_fraction=0.3) for r in (0.8, 1.0, 1.4)]
    assert largest_error(wires) < 0.7


def test_an_insulated_wire_and_one_of_other_metal_are_solved_by_themselves() -> None:
    below = grounds(8.0)
    bare = several([0.8, 1.0, 1.4], [8.0])
    insulated = HungWire(1e-3, COPPER, Sleeve(1.8e-3, 2.3, 1e-3), below)
    resistive = HungWire(1e-3, MATERIALS["stainless-steel-304"], grounds=below)
    assert largest_error([*bare, insulated, resistive]) < 0.7


def test_with_care_every_wire_is_solved_closely() -> None:
    assert largest_error(several([0.8, 1.5], [6.0]), careful=True) < 1e-4


def test_a_wire_and_its_ground_look_the_same_where_every_length_goes_as_the_wavelength() -> None:
    # Free of any model: Maxwell's equations over a ground of one complex permittivity.
    table = grounds(10.0).at(14.0e6)
    own = feed_impedance(20.0, 1e-3, 14.0e6, reflected=table).impedance_ohm
    scaled = feed_impedance(
        40.0, 2e-3, 7.0e6, gap_m=2e-3, reflected=Rescaled(table, 0.5)
    ).impedance_ohm
    assert complex(scaled) == pytest.approx(complex(own), rel=1e-9)


def test_each_condition_is_answered_as_if_it_were_the_only_one() -> None:
    low, high = grounds(3.0).at(14.0e6), grounds(20.0).at(14.0e6)
    length_m = np.array([10.2, 21.0, 31.5])
    conditions = [(high, 0.0), (None, 0.02 + 0.1j), (low, 0.05 + 0.05j)]
    together = feed_impedance_under(length_m, 1e-3, 14.0e6, conditions=conditions)
    for (ground, series), found in zip(conditions, together, strict=True):
        alone = feed_impedance(
            length_m, 1e-3, 14.0e6, reflected=ground, wire_impedance_ohm_per_m=series
        )
        close = np.abs(found.impedance_ohm - alone.impedance_ohm) <= (
            found.estimated_error_ohm + alone.estimated_error_ohm
        )
        assert close.all()


def test_the_lowest_ground_decides_how_finely_a_wire_is_solved() -> None:
    # A full wave of thick wire near the ground needs more than a survey's first solution, and one
    # on high does not.
    wavelength_m = 299_792_458.0 / 14.0e6
    low = GroundTables(GROUND_CLASSES["average"], 0.05 * wavelength_m, 60.0).at(14.0e6)
    high = grounds(20.0).at(14.0e6)
    length_m = wavelength_m * np.array([0.48, 1.0])
    alone = feed_impedance(length_m, 0.02, 14.0e6, reflected=low, survey=True)
    assert alone.unknowns[1] > 1.5 * alone.unknowns[0]
    found = feed_impedance_under(
        length_m, 0.02, 14.0e6, conditions=[(high, 0.0), (low, 0.0)], survey=True
    )
    assert found[1].unknowns.tolist() == alone.unknowns.tolist()


def test_a_thinly_insulated_wire_is_not_taken_for_a_bare_one() -> None:
    below = grounds(8.0)
    bare = several([0.8, 1.0, 1.4], [8.0])
    enamelled = HungWire(1e-3, MATERIALS["stainless-steel-304"], Sleeve(1.04e-3, 3.5, 0.0), below)
    resistive = [
        replace(each, material=MATERIALS["stainless-steel-304"], grounds=below) for each in bare
    ]
    assert largest_error([*resistive, enamelled]) < 0.7


def test_tables_of_two_heights_are_refused_for_one_wire() -> None:
    tables = (grounds(10.0).at(14.0e6), grounds(11.0).at(14.1e6))
    with pytest.raises(OutOfRange, match="height_m"):
        feed_impedance(20.0, 1e-3, np.array([14.0e6, 14.1e6]), reflected=tables)


def test_a_wire_is_solved_on_until_it_is_solved_under_every_condition() -> None:
    # Near its anti-resonance the wire is settled early near the ground, and not so on high.
    wavelength_m = 299_792_458.0 / 14.0e6
    low = GroundTables(GROUND_CLASSES["average"], 0.02 * wavelength_m, 60.0).at(14.0e6)
    length_m = 1.85 * wavelength_m
    early = feed_impedance(length_m, 5e-3, 14.0e6, reflected=low, survey=True)
    found = feed_impedance_under(
        length_m,
        5e-3,
        14.0e6,
        conditions=[(low, 0.0), (grounds(20.0).at(14.0e6), 0.0)],
        survey=True,
    )
    assert int(found[0].unknowns) > int(early.unknowns)
    assert all(bool(each.converged) for each in found)
