"""Invented figures of hanging and exposure beside an invented candidate.

Made up so that every case appears; nothing here checks physics.
"""

from __future__ import annotations

import math

from service.contracts.exposure import BandExposure, ExposureDistance
from service.contracts.hanging import CutLeg, HungSpan, HungState
from service.contracts.request import DesignRequest

SHAPE_POINTS = 25
SAG_M = 0.637


def hanging(request: DesignRequest, length_m: float) -> HungSpan:
    """A span with every weather: tension rises, and sag with it, from one to the next."""
    hung, feed = request.hanging, request.feed.feed_fractions()[-1]
    height_m = max(request.site.heights_m(), default=None)
    states = tuple(
        HungState(
            weather=weather,
            temperature_c=(hung.strung_c, hung.low_c, hung.high_c)[min(index, 2)],
            wind_pa=hung.wind_pa if index > 2 else 0.0,
            ice_mm=6.5 if index > 3 else 0.0,
            wire_tension_n=round(98.7 + 211.3 * index, 1),
            rope_tension_n=round(97.4 + 208.9 * index, 1),
            sag_m=round(SAG_M + 0.111 * index, 3),
            swing_m=round(0.214 * max(0, index - 2), 3),
            lowest_m=None if height_m is None else round(height_m - 1.237 - 2.4 * index, 3),
            mean_height_m=None if height_m is None else round(height_m - 0.418 - 0.3 * index, 3),
        )
        for index, weather in enumerate(("as strung", "coldest", "hottest", "wind", "ice and wind"))
    )
    cutting = (
        CutLeg(leg="near", electrical_m=round(feed * length_m, 3), cut_m=_cut_m(feed * length_m)),
        CutLeg(
            leg="far",
            electrical_m=round((1.0 - feed) * length_m, 3),
            cut_m=_cut_m((1.0 - feed) * length_m),
        ),
    )
    return HungSpan(
        as_wanted=True,
        tail_m=round(0.5 * (request.site.span_m - length_m), 3),
        wire_breaking_n=1503.4,
        rope_breaking_n=2987.6,
        safety_factor=1.59,
        safety_factor_wanted=hung.safety_factor,
        weakest="wire, ice and wind",
        states=states,
        cutting=cutting,
        wire_total_m=round(sum(each.cut_m for each in cutting), 3),
        shape_m=_shape_m(request.site.span_m, length_m),
        strength_source="an invented handbook",
        cautions=("An invented caution of the span.",),
    )


def exposure(index: int, request: DesignRequest) -> BandExposure:
    """Distances that fall from band to band; the last of a band is in the far field."""
    distances = tuple(
        ExposureDistance(
            standard=standard,
            population="occupational" if group else "general-public",
            averaging_min=6.0 if standard == "fcc-1.1310" and group else 30.0,
            electric_v_per_m=round(61.4 + 31.7 * group + index, 3),
            magnetic_a_per_m=round(0.163 + 0.0721 * group, 5),
            power_density_w_per_m2=None if standard == "icnirp-2020" and index == 0 else 10.0125,
            not_averaged=standard == "icnirp-2020" and index == 0,
            far_field_m=round(7.01 - 0.37 * index - 1.13 * group, 2),
            near_field_m=round(5.02 - 0.37 * index + 0.91 * place, 2),
            distance_m=max(
                round(7.01 - 0.37 * index - 1.13 * group, 2),
                round(5.02 - 0.37 * index + 0.91 * place, 2),
            ),
            in_near_field=place != 1,
        )
        for place, standard in enumerate(request.exposure.standards())
        for group in range(2)
    )
    return BandExposure(
        peak_power_w=request.power_w,
        average_power_w=request.power_w * 0.01 * request.exposure.duty_percent,
        distances=distances,
    )


def ends_peak_v(index: int) -> tuple[float, float]:
    """Two voltages that no others share."""
    return round(1234.6 + 87.3 * index, 1), round(1411.8 - 95.4 * index, 1)


def _cut_m(electrical_m: float) -> float:
    return round(1.01 * electrical_m + 0.25, 3)


def _shape_m(span_m: float, length_m: float) -> tuple[tuple[float, float], ...]:
    """A parabola below the supports; ropes lead straight to it from either side."""
    start_m = 0.5 * (span_m - length_m)
    places = [start_m + length_m * step / (SHAPE_POINTS - 1) for step in range(SHAPE_POINTS)]
    half_m = 0.5 * span_m
    wire = [(x, SAG_M * (math.pow(x / half_m - 1.0, 2) - 1.0)) for x in places]
    rounded = [(round(x, 3), round(up, 3)) for x, up in wire]
    return ((0.0, 0.0), *rounded, (span_m, 0.0))


#: Figures of a weather in the order of the columns of page and print.
OF_WEATHER = (
    "temperature_c",
    "wind_pa",
    "ice_mm",
    "wire_tension_n",
    "rope_tension_n",
    "sag_m",
    "swing_m",
    "lowest_m",
    "mean_height_m",
)
