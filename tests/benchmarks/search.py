"""The search: its time on one core, beside a loop of direct solves over the same grid.

Run as ``python -m tests.benchmarks.search``; about two minutes. Each ratio has both sides
measured in this one run. The loop is measured on a sample of the grid and scaled up: the whole
of it would take a day.
"""

from __future__ import annotations

import json
import resource
import time
from dataclasses import dataclass
from typing import Any, Final

import numpy as np

from service.contracts.candidate import PlannedDesign
from service.contracts.request import DesignRequest, parse_request
from worker.planning import plan
from worker.translation.wires import Hanging

TEN_BANDS: Final = ["160m", "80m", "60m", "40m", "30m", "20m", "17m", "15m", "12m", "10m"]
FIVE_CONDUCTORS: Final = [
    {"awg": 14},
    {"awg": 12},
    {"diameter_mm": 2.0, "material": "copper-clad-steel-40"},
    {"diameter_mm": 2.5},
    {"diameter_mm": 3.0, "material": "aluminium-6061-t6"},
]
EIGHT_RATIOS: Final = [1.0, 1.5, 2.0, 2.5, 3.0, 4.0, 6.0, 9.0]
SAMPLE: Final = 40


def request(**changes: Any) -> DesignRequest:  # noqa: ANN401  # a request is JSON
    fields: dict[str, Any] = {
        "name": "benchmark",
        "bands": [{"band_list": "amateur-region-1", "names": TEN_BANDS}],
        "site": {"span_m": 90.0, "height_m": 15.0, "ground": "average"},
        "stock": {"conductors": FIVE_CONDUCTORS},
        "feed": {"transformer_ratios": EIGHT_RATIOS},
        "tolerances": None,
    }
    return parse_request(json.dumps(fields | changes))


@dataclass(frozen=True)
class Timed:
    """A plan and what it took, in s.

    ``search_s`` is the processor time until all is ranked and the leaders are refined,
    ``whole_s`` that with the reports: currents, patterns, hanging and exposure.
    """

    planned: PlannedDesign
    search_s: float
    whole_s: float
    silence_s: float


def timed(asked: DesignRequest) -> Timed:
    """Plan and measure: processor times, and the longest silence between words of progress."""
    spoken = [time.perf_counter()]
    drawing: list[float] = []
    start_s = time.process_time()

    def hear(_part: float, step: str) -> None:
        spoken.append(time.perf_counter())
        if step.startswith("drawing"):
            drawing.append(time.process_time())

    planned = plan(asked, hear)
    whole_s = time.process_time() - start_s
    return Timed(planned, drawing[0] - start_s, whole_s, float(np.max(np.diff(spoken))))


def direct_solve_s(asked: DesignRequest) -> float:
    """Processor time in s of one direct solve, each by itself, over a sample of the same grid."""
    space = Hanging(asked).space()
    generator = np.random.default_rng(20261201)
    lengths_m = space.lengths_m()
    picks = [
        (
            space.wires[generator.integers(len(space.wires))].model,
            generator.choice(lengths_m[lengths_m > 10.0]),
            band.grid_hz()[generator.integers(7)],
        )
        for band in space.bands
        for _ in range(SAMPLE // len(space.bands))
    ]
    for (
        model,
        length_m,
        frequency_hz,
    ) in picks:  # tables of the ground first, as the search has them
        model.solve(np.array([length_m]), np.array([frequency_hz]))
    start_s = time.process_time()
    for model, length_m, frequency_hz in picks:
        model.solve(np.array([length_m]), np.array([frequency_hz]))
    return (time.process_time() - start_s) / len(picks)


def main() -> None:
    asked = request()
    timed(request(bands=[{"band_list": "amateur-region-1", "names": ["40m"]}]))  # warm up
    found = timed(asked)
    result = found.planned.result
    space = Hanging(asked).space()
    one_s = direct_solve_s(asked)
    solves = len(space.lengths_m()) * len(space.wires) * sum(len(b.grid_hz()) for b in space.bands)
    print("ten bands (160 to 10 m), average ground, one height, five conductors, eight ratios")
    print(f"  combinations ranked            {result.combinations:>12,}")
    print(f"  ranked and leaders refined     {found.search_s:>12.2f} s of one core")
    print(f"  with all reports               {found.whole_s:>12.2f} s of one core")
    print(f"  direct solves spent            {result.solves:>12,}")
    print(f"  largest miss of the maps       {result.map_error_percent:>12.4f} %")
    print(f"  longest silence                {found.silence_s:>12.2f} s")
    print(f"  one direct solve in a loop     {1e3 * one_s:>12.2f} ms (mean of {SAMPLE})")
    print(f"  the loop over the same grid    {solves * one_s:>12,.0f} s ({solves:,} solves)")
    print(
        f"  search against loop            {solves * one_s / found.search_s:>12,.0f} times faster"
    )
    largest = request(
        site={"span_m": 90.0, "height_m": {"low_m": 8.0, "high_m": 20.0}, "ground": "average"},
        bands=[{"band_list": "amateur-region-1", "names": [*TEN_BANDS, "6m"]}],
        feed={
            "transformer_ratios": [*EIGHT_RATIOS, 5.0, 8.0, 12.0, 16.0],
            "feed_line": {"line": "rg-213", "length_m": 30.0},
            "matching": "per-band",
        },
        candidates=15,
        largest_set=4,
        rank_by="worst-case",
        tolerances={},
    )
    found = timed(largest)
    memory_mib = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024.0
    print("largest request: eleven bands, five conductors at three heights, twelve ratios, line,")
    print("networks, worst case, fifteen candidates, sets of four")
    print(f"  with all reports               {found.whole_s:>12.1f} s of one core")
    print(f"  longest silence                {found.silence_s:>12.2f} s")
    print(f"  largest memory of this process {memory_mib:>12.0f} MiB")


if __name__ == "__main__":
    main()
