"""Matching by two elements: every L-network, with lossy components and under power.

The load is the antenna side, and the line side shows the target impedance.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum
from itertools import product
from math import inf, log10, pi, sqrt
from typing import Final

from worker.engine.limits import require_magnitude_within, require_within
from worker.engine.transformer import Transformer

__all__ = ["LOSSLESS", "Component", "Form", "Kind", "LNetwork", "Transformer", "l_networks"]

LOSSLESS: Final[float] = inf
"""Quality factor of an ideal component."""

# An element whose immittance is a smaller part of its port's is left out of the network.
_NEGLIGIBLE: Final[float] = 1e-6


class Form(StrEnum):
    """Which element of an L-network lies next to the load."""

    SHUNT_AT_LOAD = "shunt-at-load"
    SERIES_AT_LOAD = "series-at-load"


class Kind(StrEnum):
    """Kind of a component."""

    INDUCTOR = "inductor"
    CAPACITOR = "capacitor"
    NONE = "none"


@dataclass(frozen=True, slots=True)
class Component:
    """One element of an L-network under power.

    Parameters
    ----------
    kind
        Inductor, capacitor, or none where the network needs none there.
    value
        Henry or farad; 0 for none.
    reactance_ohm
        Positive for an inductor, negative for a capacitor, 0 for none.
    current_rms_a, voltage_peak_v
        Current through it, which heats it, and voltage across it, which may break it down.
    dissipated_w
        Power lost in it.
    """

    kind: Kind
    value: float
    reactance_ohm: float
    current_rms_a: float
    voltage_peak_v: float
    dissipated_w: float


@dataclass(frozen=True, slots=True)
class LNetwork:
    """One L-network that matches a load to a target.

    Parameters
    ----------
    form
        Which element lies next to the load.
    series, shunt
        The two elements, at the power asked for.
    input_impedance_ohm
        Impedance at the line side with the load and all losses, as a check.
    loss_db
        Power in over power in the load.
    """

    form: Form
    series: Component
    shunt: Component
    input_impedance_ohm: complex
    loss_db: float


def l_networks(
    load_ohm: complex,
    target_ohm: complex,
    frequency_hz: float,
    power_w: float,
    inductor_q: float = LOSSLESS,
    capacitor_q: float = LOSSLESS,
) -> tuple[LNetwork, ...]:
    """All L-networks that turn a load into a target impedance.

    Parameters
    ----------
    load_ohm
        Complex impedance of the antenna side, resistance from 1e-6 ohm, at most 1e9 ohm.
    target_ohm
        Complex impedance wanted at the line side, same range.
    frequency_hz
        Frequency, 1e3 to 3e9 Hz.
    power_w
        Power into the line side, 1e-9 to 1e7 W.
    inductor_q, capacitor_q
        Quality factors, 5 to infinity: reactance over series resistance.

    Returns
    -------
    tuple of LNetwork
        Every solution, both forms, least loss first; between networks of equal loss the one
        with the lower voltage. Ideal components give two or four networks (one, without
        elements, where load and target are equal); lossy ones may drop a solution or, for a load
        of higher quality than theirs, add a wasteful one.

    Raises
    ------
    OutOfRange
        An input outside its range.

    Notes
    -----
    The element next to the load adds ``x (j + s d)`` to the load's immittance w (admittance for
    a shunt element, impedance for a series one), d being one over its quality factor and s the
    sign of x; the other adds ``y (j + t e)`` to the inverse of the sum p. With v the target's
    immittance of the second kind, ``y = Im(v) + Im(p) / |p|^2`` and::

        (Re(v) - t e Im(v)) |p|^2 - t e Im(p) - Re(p) = 0,   p = w + x (j + s d)

    a quadratic in x for each pair of signs, whose real roots with the assumed signs are all the
    solutions. Losses are thus matched exactly, not added afterwards.

    References
    ----------
    D. M. Pozar, "Microwave Engineering", 4th ed., 2012, sec. 5.1 (lossless case).
    """
    load = complex(require_magnitude_within("load_ohm", load_ohm, 1e-6, 1e9, "ohm"))
    target = complex(require_magnitude_within("target_ohm", target_ohm, 1e-6, 1e9, "ohm"))
    require_within("load_ohm (real part)", load.real, 1e-6, 1e9, "ohm")
    require_within("target_ohm (real part)", target.real, 1e-6, 1e9, "ohm")
    require_within("frequency_hz", frequency_hz, 1e3, 3e9, "Hz")
    require_within("power_w", power_w, 1e-9, 1e7, "W")
    require_within("inductor_q", inductor_q, 5.0, inf)
    require_within("capacitor_q", capacitor_q, 5.0, inf)
    quality = {Kind.INDUCTOR: inductor_q, Kind.CAPACITOR: capacitor_q}
    networks: list[LNetwork] = []
    for form in Form:
        for first, second in _elements(form, load, target, quality):
            network = _under_power(form, load, first, second, frequency_hz, power_w)
            if not any(_same(network, other) for other in networks):
                networks.append(network)
    networks.sort(key=lambda network: (round(network.loss_db, 9), _largest_voltage_v(network)))
    return tuple(networks)


def _elements(
    form: Form, load: complex, target: complex, quality: dict[Kind, float]
) -> list[tuple[complex, complex]]:
    """Immittances of the element next to the load and of the other, for every solution."""
    shunt_first = form is Form.SHUNT_AT_LOAD
    w, v = (1.0 / load, target) if shunt_first else (load, 1.0 / target)
    found: list[tuple[complex, complex]] = []
    for s, t in product((1.0, -1.0), repeat=2):
        d = 1.0 / quality[_kind(s, shunt=shunt_first)]
        e = 1.0 / quality[_kind(t, shunt=not shunt_first)]
        scale = v.real - t * e * v.imag
        roots = _real_roots(
            scale * (1.0 + d * d),
            2.0 * scale * (w.real * s * d + w.imag) - t * e - s * d,
            scale * abs(w) ** 2 - t * e * w.imag - w.real,
        )
        for root in roots:
            x = root if abs(root) > _NEGLIGIBLE * abs(w) else 0.0
            p = w + x * (1j + s * d)
            y = v.imag + p.imag / abs(p) ** 2
            if abs(y) <= _NEGLIGIBLE * abs(v):
                y = 0.0
            if s * x >= 0.0 and t * y >= 0.0:
                found.append((x * (1j + s * d), y * (1j + t * e)))
    return found


def _kind(sign: float, *, shunt: bool) -> Kind:
    """Kind of a series element by its reactance's sign, of a shunt one by its susceptance's."""
    return Kind.CAPACITOR if (sign > 0.0) is shunt else Kind.INDUCTOR


def _real_roots(a2: float, a1: float, a0: float) -> tuple[float, ...]:
    if a2 == 0.0:
        return (-a0 / a1,) if a1 != 0.0 else ()
    # A double root lost to rounding here is a simple one of the other form, with one element.
    discriminant = a1 * a1 - 4.0 * a2 * a0
    if discriminant < 0.0:
        return ()
    # The sum of equal signs loses no digits; the other root follows from the product.
    half = -0.5 * (a1 + (sqrt(discriminant) if a1 >= 0.0 else -sqrt(discriminant)))
    if half == 0.0:
        return (0.0,)
    return (half / a2, a0 / half)


def _under_power(
    form: Form,
    load: complex,
    first: complex,
    second: complex,
    frequency_hz: float,
    power_w: float,
) -> LNetwork:
    if form is Form.SHUNT_AT_LOAD:
        inner = 1.0 / (1.0 / load + first)
        input_ohm = inner + second
        line_current = sqrt(power_w / input_ohm.real)
        load_voltage = line_current * abs(inner)
        series = _component(second, line_current, frequency_hz)
        shunt = _component(_inverse(first), load_voltage * abs(first), frequency_hz)
        load_power = load_voltage**2 * (1.0 / load).real
    else:
        inner = load + first
        input_ohm = 1.0 / (1.0 / inner + second)
        line_voltage = sqrt(power_w / (1.0 / input_ohm).real)
        load_current = line_voltage / abs(inner)
        series = _component(first, load_current, frequency_hz)
        shunt = _component(_inverse(second), line_voltage * abs(second), frequency_hz)
        load_power = load_current**2 * load.real
    return LNetwork(form, series, shunt, input_ohm, 10.0 * log10(power_w / load_power))


def _inverse(admittance: complex) -> complex:
    return 1.0 / admittance if admittance != 0.0 else 0.0


def _component(impedance: complex, current_rms_a: float, frequency_hz: float) -> Component:
    reactance = impedance.imag
    omega = 2.0 * pi * frequency_hz
    if reactance == 0.0:
        return Component(Kind.NONE, 0.0, 0.0, 0.0, 0.0, 0.0)
    inductive = reactance > 0.0
    return Component(
        kind=Kind.INDUCTOR if inductive else Kind.CAPACITOR,
        value=reactance / omega if inductive else -1.0 / (omega * reactance),
        reactance_ohm=reactance,
        current_rms_a=current_rms_a,
        voltage_peak_v=sqrt(2.0) * current_rms_a * abs(impedance),
        dissipated_w=current_rms_a**2 * impedance.real,
    )


def _same(one: LNetwork, other: LNetwork) -> bool:
    """Whether two solutions are one: a double root, or both forms with an element missing."""
    both = ((one.series, other.series), (one.shunt, other.shunt))
    if any(
        abs(a.reactance_ohm - b.reactance_ohm) > 2.0 * _NEGLIGIBLE * abs(a.reactance_ohm)
        for a, b in both
    ):
        return False
    return one.form is other.form or Kind.NONE in (one.series.kind, one.shunt.kind)


def _largest_voltage_v(network: LNetwork) -> float:
    return max(network.series.voltage_peak_v, network.shunt.voltage_peak_v)
