"""Reflection coefficient and standing wave ratio against textbook cases and scikit-rf."""

from __future__ import annotations

import numpy as np
import pytest
from skrf import tlineFunctions

from worker.engine.errors import OutOfRange
from worker.engine.reflection import (
    LARGEST_STANDING_WAVE_RATIO,
    reflection_coefficient,
    standing_wave_ratio,
)


@pytest.mark.parametrize(
    ("impedance_ohm", "reference_ohm", "coefficient", "ratio"),
    [
        # Pozar, "Microwave Engineering", eqs. (2.35) and (2.41), worked by hand.
        (50.0, 50.0, 0.0, 1.0),
        (100.0, 50.0, 1 / 3, 2.0),
        (25.0, 50.0, -1 / 3, 2.0),
        (75.0 + 75.0j, 75.0, 0.2 + 0.4j, (1 + np.sqrt(0.2)) / (1 - np.sqrt(0.2))),
        # 73.13 + j42.54 ohm, the classical thin half wave, on 50 ohm: |rho| 0.3717.
        (73.13 + 42.54j, 50.0, (23.13 + 42.54j) / (123.13 + 42.54j), 1.3717 / 0.6283),
    ],
)
def test_reflection_of_textbook_loads(
    impedance_ohm: complex, reference_ohm: float, coefficient: complex, ratio: float
) -> None:
    actual = complex(reflection_coefficient(impedance_ohm, reference_ohm))
    assert actual == pytest.approx(coefficient, rel=1e-12, abs=1e-15)
    assert float(standing_wave_ratio(impedance_ohm, reference_ohm)) == pytest.approx(
        ratio, rel=1e-4
    )


def test_ratio_agrees_with_scikit_rf_over_the_right_half_plane() -> None:
    resistance = np.logspace(0, 4, 12)[:, None]
    reactance = np.linspace(-3000, 3000, 13)
    load = resistance + 1j * reactance
    expected = tlineFunctions.zl_2_swr(75.0, load.ravel()).reshape(load.shape)
    np.testing.assert_allclose(standing_wave_ratio(load, 75.0), expected, rtol=1e-9)


def test_ratio_keeps_its_digits_where_nearly_all_is_reflected() -> None:
    # For a pure resistance the ratio is Z / Z0 exactly.
    assert float(standing_wave_ratio(5e7 / 1.5, 50.0)) == pytest.approx(1e6 / 1.5, rel=1e-14)


@pytest.mark.parametrize("impedance_ohm", [0.0, 100j, -40.0, 1e-9 + 30j, 1e149])
def test_total_reflection_stops_at_the_documented_ratio(impedance_ohm: complex) -> None:
    assert float(standing_wave_ratio(impedance_ohm, 50.0)) == LARGEST_STANDING_WAVE_RATIO == 1e6


def test_a_load_equal_to_a_complex_line_impedance_reflects_nothing() -> None:
    assert complex(reflection_coefficient(50 - 2j, 50 - 2j)) == 0.0
    assert float(standing_wave_ratio(50 - 2j, 50 - 2j)) == pytest.approx(1.0, abs=1e-15)


def test_arrays_broadcast() -> None:
    assert reflection_coefficient([[50.0], [75.0]], [50.0, 75.0, 600.0]).shape == (2, 3)
    assert standing_wave_ratio([[50.0], [75.0]], [50.0, 75.0, 600.0]).shape == (2, 3)


@pytest.mark.parametrize(
    ("impedance_ohm", "reference_ohm"),
    [
        (complex("nan"), 50.0),
        (float("inf"), 50.0),
        (50.0, float("nan")),
        (50.0, 0.0),
        (50.0, -75.0),
        (50.0, 50j),
        (-50.0, 50.0),
    ],
)
def test_what_is_no_impedance_is_refused(impedance_ohm: complex, reference_ohm: complex) -> None:
    with pytest.raises(OutOfRange):
        reflection_coefficient([100.0, impedance_ohm], reference_ohm)
    with pytest.raises(OutOfRange):
        standing_wave_ratio([100.0, impedance_ohm], reference_ohm)
