"""What-ifs: the time of one on one core, and what pictures add to a planning.

Run as ``python -m tests.benchmarks.what_if``; some seconds. Each ratio has both sides measured in
this one run. Processor time, so that others on the machine disturb it least.
"""

from __future__ import annotations

import json
import time
from typing import Any, Final

from service.contracts.what_if import WhatIfRequest, parse_what_if
from tests.benchmarks.search import TEN_BANDS, request
from worker.planning import plan
from worker.translation.pictures import pictures_of
from worker.translation.wires import Hanging
from worker.trying import Trials

FOUR_BANDS: Final = ["40m", "20m", "15m", "6m"]
REPEATS: Final = 5


def asked(names: list[str], **changes: Any) -> WhatIfRequest:  # noqa: ANN401  # a question is JSON
    fields: dict[str, Any] = {
        "bands": [{"band_list": "amateur-region-1", "names": names}],
        "length_m": 20.8,
        "conductor": {"awg": 12},
        "height_m": 11.0,
    }
    return parse_what_if(json.dumps(fields | changes))


def least_s(questions: list[WhatIfRequest]) -> float:
    """The least processor time of several questions asked in turn, in s."""
    trials, spent = Trials(), []
    trials.answer(questions[0])
    for each in questions[1:]:
        start_s = time.process_time()
        trials.answer(each)
        spent.append(time.process_time() - start_s)
    return min(spent)


def main() -> None:
    """Print the figures."""
    for names in (FOUR_BANDS, TEN_BANDS):
        steps = range(REPEATS + 1)
        longer = least_s([asked(names, length_m=20.8 + 0.01 * step) for step in steps])
        higher = least_s([asked(names, height_m=11.0 + 0.1 * step) for step in steps])
        print(
            f"{len(names)} bands: length moved {1e3 * longer:.0f} ms, height moved "
            f"{1e3 * higher:.0f} ms ({higher / longer:.1f} times, for the tables of the ground)"
        )
    whole = request()
    start_s = time.process_time()
    planned = plan(whole, lambda _part, _step: None)
    planning_s = time.process_time() - start_s
    hanging = Hanging(whole)
    wires = [hanging.wire(hanging.ways[0]).hung] * len(planned.reports)
    centres_hz = [1e6 * band.centre_mhz for band in whole.bands]
    for hz in centres_hz:  # the planning has the tables of the ground already
        if wires[0].grounds is not None:
            wires[0].grounds.at(hz)
    start_s = time.process_time()
    pictures_of(wires, [report.length_m for report in planned.reports], centres_hz)
    pictures_s = time.process_time() - start_s
    print(
        f"ten-band planning {planning_s:.2f} s, of which pictures of {len(planned.reports)} wires "
        f"{pictures_s:.2f} s: {100.0 * pictures_s / planning_s:.1f} %"
    )


if __name__ == "__main__":
    main()
