"""A sweep of one wire: a request in, its points and resonances out."""

from __future__ import annotations

import numpy as np

from service.contracts.sweep import Sweep, SweepCrossing, SweepPoint, SweepRequest
from worker.engine.feed_line import terminate
from worker.engine.line_catalogue import FEED_LINES
from worker.engine.reflection import reflection_coefficient, standing_wave_ratio
from worker.engine.resonance import reactance_zeros
from worker.engine.thin_wire import MODEL
from worker.search.impedance_map import ImpedanceMap, map_over_frequency, map_over_length
from worker.search.resonances import half_waves_in
from worker.search.space import FloatArray
from worker.translation.provenance import ground_and_height_in_words
from worker.translation.wires import StockWire, swept_wire
from worker.translation.wording import NOT_MODELLED

_SAMPLES_PER_HALF_WAVE = 60


def sweep(request: SweepRequest) -> Sweep:
    """Solve one wire at every point of a sweep, and find its resonances between them.

    Raises
    ------
    EngineError
        If a point lies outside what the models cover.
    """
    wire = swept_wire(request)
    swept = np.linspace(request.low, request.high, request.points)
    if request.along == "frequency":
        frequency_hz, length_m = 1e6 * swept, np.full(swept.shape, request.length_m)
    else:
        frequency_hz, length_m = np.full(swept.shape, 1e6 * (request.frequency_mhz or 0.0)), swept
    return Sweep(
        request=request,
        points=_points(request, wire, length_m, frequency_hz),
        crossings=_crossings(request, wire, length_m, frequency_hz),
        model=MODEL,
        source_gap_mm=0.5 * request.conductor.bare_diameter_mm,
        ground=ground_and_height_in_words(request.ground, request.height_m),
        not_modelled=NOT_MODELLED,
    )


def _points(
    request: SweepRequest, wire: StockWire, length_m: FloatArray, frequency_hz: FloatArray
) -> tuple[SweepPoint, ...]:
    solved = wire.solve(length_m, frequency_hz)
    behind = solved.impedance_ohm / request.transformer_ratio
    reflection = np.abs(reflection_coefficient(behind, request.reference_ohm))
    swr = standing_wave_ratio(behind, request.reference_ohm)
    transmitter_swr, loss_db = [None] * len(swr), [None] * len(swr)
    if request.feed_line is not None:
        state = terminate(
            FEED_LINES[request.feed_line.line], request.feed_line.length_m, frequency_hz, behind
        )
        at_input = standing_wave_ratio(state.input_impedance_ohm, request.reference_ohm)
        transmitter_swr, loss_db = at_input.tolist(), state.total_loss_db.tolist()
    return tuple(
        SweepPoint(
            frequency_mhz=float(frequency_hz[index]) / 1e6,
            length_m=float(length_m[index]),
            resistance_ohm=float(solved.impedance_ohm[index].real),
            reactance_ohm=float(solved.impedance_ohm[index].imag),
            error_ohm=float(solved.error_ohm[index]),
            reflection=float(reflection[index]),
            swr=float(swr[index]),
            transmitter_swr=transmitter_swr[index],
            line_loss_db=loss_db[index],
        )
        for index in range(len(swr))
    )


def _crossings(
    request: SweepRequest, wire: StockWire, length_m: FloatArray, frequency_hz: FloatArray
) -> tuple[SweepCrossing, ...]:
    """Zeros of the reactance over the whole range, also between the points."""
    low, high = float(length_m[0] * frequency_hz[0]), float(length_m[-1] * frequency_hz[-1])
    samples = max(16, int(np.ceil(half_waves_in(1.0, high - low) * _SAMPLES_PER_HALF_WAVE)))
    mapped, unit = _mapped(request, wire, length_m, frequency_hz)
    zeros = reactance_zeros(mapped.impedance_ohm, mapped.low, mapped.high, samples)
    return tuple(
        SweepCrossing(
            kind="series" if rising else "parallel",
            at=float(position) / unit,
            resistance_ohm=float(resistance_ohm),
        )
        for position, rising, resistance_ohm in zip(
            zeros.position, zeros.rising, zeros.resistance_ohm, strict=True
        )
    )


def _mapped(
    request: SweepRequest, wire: StockWire, length_m: FloatArray, frequency_hz: FloatArray
) -> tuple[ImpedanceMap, float]:
    """The map over what is swept, and how much of its unit makes one of the request's."""
    if request.along == "frequency":
        low_hz, high_hz = float(frequency_hz[0]), float(frequency_hz[-1])
        return map_over_frequency(wire, float(length_m[0]), low_hz, high_hz), 1e6
    low_m, high_m = float(length_m[0]), float(length_m[-1])
    return map_over_length(wire, float(frequency_hz[0]), low_m, high_m), 1.0
