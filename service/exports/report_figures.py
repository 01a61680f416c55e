"""Figures of a report that belong to no one frequency: hanging, voltages and exposure."""

from __future__ import annotations

from collections.abc import Iterator
from typing import NamedTuple

from service.contracts.exposure import ExposureDistance
from service.contracts.hanging import HungSpan, HungState
from service.contracts.report import BandReport, FeedReport


class Figure(NamedTuple):
    """One figure, with the band and the place that it belongs to, empty where to none.

    The value has the digits that are stored, but for what a request gives, which has one decimal.
    """

    band: str
    place: str
    figure: str
    value: str
    unit: str = ""


def figures_of(report: FeedReport) -> Iterator[Figure]:
    """Whatever the report holds of voltages and exposure, band by band, and then of hanging."""
    for band in report.bands:
        yield from _voltages(band)
        yield from _exposure(band)
    if report.hanging is not None:
        yield from _hanging(report.hanging)


def _voltages(band: BandReport) -> Iterator[Figure]:
    stress = band.stress
    if stress is None or stress.ends_peak_v is None:
        return
    near_v, far_v = stress.ends_peak_v
    for place, volts in (
        ("near end", near_v),
        ("feed point", stress.voltage_peak_v),
        ("far end", far_v),
    ):
        yield Figure(band.name, place, "peak voltage", f"{volts:.1f}", "V")


def _exposure(band: BandReport) -> Iterator[Figure]:
    found = band.exposure
    if found is None:
        return
    yield Figure(band.name, "", "power while transmitting", f"{found.peak_power_w:.3f}", "W")
    yield Figure(band.name, "", "average power", f"{found.average_power_w:.3f}", "W")
    yield Figure(band.name, "", "duty", f"{found.duty_percent:.1f}", "%")
    for each in found.distances:
        yield from _distance(band.name, each)


def _distance(band: str, each: ExposureDistance) -> Iterator[Figure]:
    place = f"{each.standard} {each.population}"
    for figure, value, unit in (
        ("exposure distance", f"{each.distance_m:.2f}", "m"),
        ("distance by the far-field formula", f"{each.far_field_m:.2f}", "m"),
        ("distance by the field of the current", f"{each.near_field_m:.2f}", "m"),
        ("in the near field", _yes(each.in_near_field), ""),
        ("averaging time", f"{each.averaging_min:.1f}", "min"),
        ("a limit allows no pauses", _yes(each.not_averaged), ""),
        ("limit of electric field", f"{each.electric_v_per_m:.3f}", "V/m"),
        ("limit of magnetic field", f"{each.magnetic_a_per_m:.5f}", "A/m"),
    ):
        yield Figure(band, place, figure, value, unit)
    if each.power_density_w_per_m2 is not None:
        density = f"{each.power_density_w_per_m2:.4f}"
        yield Figure(band, place, "limit of power density", density, "W/m²")


def _hanging(span: HungSpan) -> Iterator[Figure]:
    yield Figure("", "", "tension or sag as asked for", _yes(span.as_wanted))
    yield Figure("", span.weakest, "safety factor", f"{span.safety_factor:.2f}")
    yield Figure("", "", "safety factor asked for", f"{span.safety_factor_wanted:.2f}")
    yield Figure("", "wire", "breaking load", f"{span.wire_breaking_n:.1f}", "N")
    yield Figure("", "rope", "breaking load", f"{span.rope_breaking_n:.1f}", "N")
    yield Figure("", "each end", "rope to the support", f"{span.tail_m:.3f}", "m")
    for state in span.states:
        yield from _weather(state)
    for leg in span.cutting:
        yield Figure("", f"{leg.leg} leg", "length as planned", f"{leg.electrical_m:.3f}", "m")
        yield Figure("", f"{leg.leg} leg", "length to cut", f"{leg.cut_m:.3f}", "m")
    yield Figure("", "both legs", "length to cut", f"{span.wire_total_m:.3f}", "m")


def _weather(state: HungState) -> Iterator[Figure]:
    for figure, value, unit in (
        ("temperature", f"{state.temperature_c:.1f}", "°C"),
        ("wind pressure", f"{state.wind_pa:.1f}", "Pa"),
        ("thickness of ice", f"{state.ice_mm:.3f}", "mm"),
        ("tension of the wire", f"{state.wire_tension_n:.1f}", "N"),
        ("tension of the rope", f"{state.rope_tension_n:.1f}", "N"),
        ("sag", f"{state.sag_m:.3f}", "m"),
        ("swing", f"{state.swing_m:.3f}", "m"),
    ):
        yield Figure("", state.weather, figure, value, unit)
    if state.lowest_m is not None and state.mean_height_m is not None:
        yield Figure("", state.weather, "lowest height", f"{state.lowest_m:.3f}", "m")
        yield Figure("", state.weather, "mean height", f"{state.mean_height_m:.3f}", "m")


def _yes(flag: bool) -> str:
    return "yes" if flag else "no"
