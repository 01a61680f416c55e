"""The bench: its process, its turns and its limits."""

from __future__ import annotations

import os
import threading
import time
from collections.abc import Iterator
from contextlib import closing

import pytest

from service.bench import Bench
from service.contracts.what_if import WhatIf, WhatIfRequest
from service.errors import BenchBusy, BenchTooSlow, RequestRefused
from tests.unit.test_trying import asked
from worker.bench import MOST_WAITING, ProcessBench
from worker.engine.errors import OutOfRange


class Invented:
    """Answers by the length asked about: at once, late, never, or not at all."""

    def answer(self, asked: WhatIfRequest) -> WhatIf:
        if asked.length_m == 1.0:
            raise OutOfRange("height in radii", 1.0, 2.0, 3.0)
        if asked.length_m == 2.0:
            time.sleep(30.0)
        if asked.length_m == 3.0:
            os._exit(3)
        if asked.length_m == 4.0:
            time.sleep(0.5)
        if asked.length_m == 5.0:
            raise ValueError("an invented fault")
        return WhatIf(engine_version=str(os.getpid()), request=asked, bands=())


@pytest.fixture
def bench() -> Iterator[ProcessBench]:
    with closing(ProcessBench(Invented, limit_s=5.0)) as opened:
        opened.start()
        yield opened


def process_of(bench: Bench) -> int:
    return int(bench.try_wire(asked()).engine_version)


def test_a_bench_answers_from_one_process_that_is_not_this_one(bench: ProcessBench) -> None:
    first = process_of(bench)
    assert first != os.getpid()
    assert process_of(bench) == first


def test_the_real_bench_answers_with_numerics() -> None:
    with closing(ProcessBench()) as real:
        answer = real.try_wire(asked())
    assert [band.name for band in answer.bands] == ["80m", "40m", "17m", "6m"]


def test_what_the_models_do_not_cover_is_refused_by_the_field_that_is_moved(
    bench: ProcessBench,
) -> None:
    with pytest.raises(RequestRefused) as refused:
        bench.try_wire(asked(length_m=1.0))
    assert [(fault.field, fault.code) for fault in refused.value.faults] == [
        ("height_m", "wire-not-covered")
    ]
    assert process_of(bench) > 0


def test_an_answer_that_takes_too_long_is_given_up_and_its_process_replaced() -> None:
    with closing(ProcessBench(Invented, limit_s=5.0)) as bench:
        before = process_of(bench)
        bench._limit_s = 0.2
        with pytest.raises(BenchTooSlow):
            bench.try_wire(asked(length_m=2.0))
        bench._limit_s = 5.0
        assert process_of(bench) != before
        with pytest.raises(ProcessLookupError):
            os.kill(before, 0)


def test_a_process_that_dies_is_started_again_for_the_next_question(bench: ProcessBench) -> None:
    before = process_of(bench)
    with pytest.raises(BenchBusy):
        bench.try_wire(asked(length_m=3.0))
    assert process_of(bench) != before


def test_a_fault_within_the_process_is_told_and_leaves_it_running(bench: ProcessBench) -> None:
    before = process_of(bench)
    with pytest.raises(RuntimeError, match="an invented fault"):
        bench.try_wire(asked(length_m=5.0))
    assert process_of(bench) == before


def test_no_more_may_wait_than_there_is_room_for() -> None:
    bench = ProcessBench(Invented, limit_s=5.0, patience_s=30.0)
    process_of(bench)
    results: list[str] = []

    def ask() -> None:
        try:
            bench.try_wire(asked(length_m=4.0))
        except BenchBusy:
            results.append("busy")
        else:
            results.append("answered")

    threads = [threading.Thread(target=ask) for _ in range(MOST_WAITING + 4)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert results.count("answered") == 1 + MOST_WAITING
    assert results.count("busy") == 3
    bench.close()


def test_none_waits_longer_than_its_patience() -> None:
    with closing(ProcessBench(Invented, limit_s=5.0, patience_s=0.05)) as bench:
        bench.start()
        process_of(bench)
        slow = threading.Thread(target=bench.try_wire, args=(asked(length_m=4.0),))
        slow.start()
        while not bench._turn.locked():
            time.sleep(0.001)
        with pytest.raises(BenchBusy):
            bench.try_wire(asked())
        slow.join()


def test_a_bench_that_is_closed_leaves_no_process() -> None:
    bench = ProcessBench(Invented)
    process = process_of(bench)
    bench.close()
    with pytest.raises(ProcessLookupError):
        os.kill(process, 0)
