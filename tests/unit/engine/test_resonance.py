"""The search for zeros of a reactance, on impedances whose zeros are known."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest
from numpy.typing import NDArray

from worker.engine import resonance as resonance_module
from worker.engine.errors import NotConverged, OutOfRange
from worker.engine.resonance import reactance_zeros, resonant_frequencies, resonant_lengths

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]


def _lossy_line(x: FloatArray) -> ComplexArray:
    """Open line of 600 ohm with a little loss: series zeros at odd, parallel at even numbers."""
    return np.asarray(600.0 / np.tanh((0.06 + 0.5j * np.pi) * x), dtype=complex)


def _reactive(
    reactance: Callable[[FloatArray], FloatArray],
) -> Callable[[FloatArray], ComplexArray]:
    """One ohm in series with a reactance."""
    return lambda x: np.asarray(1.0 + 1j * reactance(x), dtype=complex)


def test_zeros_of_a_lossy_line_are_all_found() -> None:
    zeros = reactance_zeros(_lossy_line, 0.2, 9.5, 120)
    assert np.round(zeros.position).tolist() == [1, 2, 3, 4, 5, 6, 7, 8, 9]
    assert zeros.rising.tolist() == [True, False] * 4 + [True]


def test_reactance_is_zero_at_the_zeros() -> None:
    zeros = reactance_zeros(_lossy_line, 0.2, 9.5, 120)
    z = _lossy_line(zeros.position)
    assert np.max(np.abs(z.imag / np.abs(z))) < 1e-6
    assert zeros.resistance_ohm == pytest.approx(z.real, rel=1e-9)


@pytest.mark.parametrize("low", [0.96, 0.94])
def test_a_pair_of_zeros_between_two_samples_is_found(low: float) -> None:
    # X = (x - 1.5)^2 - 1e-3 dips below zero over 0.063, less than a sample's step of 0.1.
    zeros = reactance_zeros(_reactive(lambda x: (x - 1.5) ** 2 - 1e-3), low, low + 1.1, 11)
    assert zeros.position == pytest.approx(1.5 + np.array([-1.0, 1.0]) * np.sqrt(1e-3), abs=1e-6)
    assert zeros.rising.tolist() == [False, True]


def test_a_reactance_that_never_crosses_has_no_zeros() -> None:
    zeros = reactance_zeros(_reactive(lambda x: 1.0 + x), 0.0, 1.0, 10)
    assert zeros.position.size == 0


def test_a_jump_is_no_failure_to_bracket() -> None:
    # A reactance that jumps through zero is located where it jumps.
    zeros = reactance_zeros(_reactive(lambda x: np.where(x < 0.37, -1.0, 2.0)), 0.0, 1.0, 10)
    assert zeros.position == pytest.approx([0.37], abs=1e-5)


def test_a_zero_that_is_not_located_in_time_is_reported(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(resonance_module, "_POLISHING_ROUNDS", 1)
    with pytest.raises(NotConverged):
        reactance_zeros(_lossy_line, 0.2, 9.5, 120)


@pytest.mark.parametrize("order", [0, 12])
def test_an_order_beyond_the_solution_is_refused(order: int) -> None:
    with pytest.raises(OutOfRange, match="highest_order"):
        resonant_lengths(14.1e6, 8e-4, highest_order=order)


def test_wire_too_thick_for_its_order_is_refused() -> None:
    with pytest.raises(OutOfRange, match="length over radius"):
        resonant_frequencies(10.0, 0.1, highest_order=5)


def test_off_centre_feed_meets_the_even_orders_too() -> None:
    found = resonant_lengths(14.1e6, 8e-4, highest_order=2, feed_fraction=0.35)
    assert [(r.order, r.kind) for r in found] == [(1, "series"), (2, "parallel"), (2, "series")]


def test_wire_impedance_may_depend_on_frequency() -> None:
    plain = resonant_frequencies(10.0, 8e-4, highest_order=1)[0]
    lossy = resonant_frequencies(
        10.0,
        8e-4,
        highest_order=1,
        wire_impedance_ohm_per_m=lambda f: (1.0 + 1.0j) * np.sqrt(f / 14e6),
    )[0]
    assert lossy.resistance_ohm > plain.resistance_ohm + 3.0
    assert lossy.frequency_hz < plain.frequency_hz
