"""Stranded wire: the fitted equivalent radius and resistance factor against their generator.

The generator is an independent solution of the plane potential problem: multipoles about every
outer strand, matched to a constant potential on the outline by least squares. It is itself
checked against the closed form for two touching wires.
"""

from __future__ import annotations

from math import pi, sin

import numpy as np
import pytest

from worker.engine.conductor import MATERIALS, internal_impedance_ohm_per_m, resistance_ohm_per_m
from worker.engine.errors import OutOfRange
from worker.engine.stranded import stranded_impedance_ohm_per_m, stranded_wire

COPPER = MATERIALS["annealed-copper"]


def capacity_of_ring(strands: int, pitch_radius: float) -> tuple[float, float]:
    """Logarithmic capacity of a ring of unit-radius discs, and its resistance factor.

    The factor is the integral of the squared surface field over the outline, against that of a
    circle of the same capacity and the same total charge.
    """
    centres = pitch_radius * np.exp(2j * pi * np.arange(strands) / strands)
    turn = np.exp(2j * pi * np.arange(strands) / strands)[:, None]
    touching = abs(pitch_radius * sin(pi / strands) - 1) < 1e-12
    outline = pi / 2 + pi / strands if touching else pi
    angle = (np.arange(4000) + 0.5) / 4000 * outline
    normal = np.exp(1j * angle)
    offset = pitch_radius + normal - centres[:, None]
    orders = np.arange(1, 60)[:, None, None]
    potentials = ((turn / offset) ** orders).real.sum(axis=1)
    monopole = np.log(np.abs(offset)).mean(axis=0)
    system = np.vstack([potentials, -np.ones_like(angle)]).T
    solution = np.linalg.lstsq(system, -monopole, rcond=1e-13)[0]
    assert np.abs(system @ solution + monopole).max() < 1e-8
    gradients = (-orders * turn**orders / offset ** (orders + 1)).sum(axis=1)
    field = ((1 / offset).mean(axis=0) + solution[:-1] @ gradients) * normal
    capacity = float(np.exp(solution[-1]))
    squared = 2 * strands * float(np.sum(field.real**2)) * outline / 4000
    return capacity, squared * capacity / (2 * pi)


def test_the_generator_gives_the_closed_form_for_two_touching_wires() -> None:
    # Inversion maps the outside of two touching unit circles to a strip, the tangent the strip
    # to a disc: the capacity is pi / 2 (Pólya and Szegő, 1951, conformal outer radius).
    assert capacity_of_ring(2, 1.0)[0] == pytest.approx(pi / 2, rel=1e-9)


@pytest.mark.parametrize(("strand_count", "layers"), [(7, 1), (19, 2), (37, 3), (61, 4)])
def test_equivalent_radius_and_resistance_agree_with_the_plane_potential_solution(
    strand_count: int, layers: int
) -> None:
    capacity, resistance_factor = capacity_of_ring(6 * layers, 2.0 * layers)
    wire = stranded_wire(strand_count, 2.0e-3)
    assert wire.outer_radius_m == pytest.approx((2 * layers + 1) * 1e-3, rel=1e-12)
    assert wire.equivalent_radius_m == pytest.approx(capacity * 1e-3, rel=1e-4)
    assert wire.resistance_factor == pytest.approx(resistance_factor, rel=1e-4)


def test_a_stranded_wire_lies_between_its_metal_and_its_outer_circle() -> None:
    for strand_count in (7, 12, 19, 50, 1000):
        wire = stranded_wire(strand_count, 0.3e-3)
        assert np.sqrt(wire.metal_area_m2 / pi) < wire.equivalent_radius_m < wire.outer_radius_m


def test_a_bundle_fills_three_quarters_of_its_circle() -> None:
    # Common practice for bunched wire: a filling of about 0.75.
    wire = stranded_wire(1000, 0.1e-3)
    assert wire.metal_area_m2 / (pi * wire.outer_radius_m**2) == pytest.approx(0.75, abs=0.01)


def test_stranded_copper_resists_more_than_smooth_wire_of_the_same_outer_radius() -> None:
    wire = stranded_wire(7, 0.6e-3)
    smooth = internal_impedance_ohm_per_m(wire.outer_radius_m, 14e6, COPPER).real
    ratio = float(stranded_impedance_ohm_per_m(wire, 14e6, COPPER).real / smooth)
    # 1.0677 / 0.9388 = 1.137 in the limit of a thin skin.
    assert ratio == pytest.approx(1.137, abs=0.005)


def test_direct_current_limit_stays_near_the_metal_in_the_section() -> None:
    wire = stranded_wire(7, 0.6e-3)
    by_section = float(resistance_ohm_per_m(0.3e-3, COPPER)) / 7
    assert float(stranded_impedance_ohm_per_m(wire, 0.0, COPPER).real) == pytest.approx(
        by_section, rel=0.06
    )


def test_strands_of_thick_copper_over_steel_resist_like_strands_of_that_copper() -> None:
    wire = stranded_wire(7, 0.6e-3)
    clad = stranded_impedance_ohm_per_m(wire, 28e6, MATERIALS["copper-clad-steel-40"]).real
    solid = stranded_impedance_ohm_per_m(wire, 28e6, COPPER).real
    # Drawn copper resists by sqrt(58 / 56.3) more.
    assert float(clad / solid) == pytest.approx(np.sqrt(58 / 56.3), rel=0.03)


def test_fewer_strands_than_a_full_layer_are_refused() -> None:
    with pytest.raises(OutOfRange, match="strand_count"):
        stranded_wire(6, 1e-3)
