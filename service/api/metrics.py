"""Figures for those who watch over the service, in the formats that Prometheus reads.

What is told of the queue comes from the store at each asking, so that every process tells the
same; what is told of requests and streams is this process's own.
"""

from __future__ import annotations

import collections
from collections.abc import Iterator, Mapping
from typing import Final, get_args

from fastapi import APIRouter, Request, Response
from prometheus_client import CollectorRegistry, Counter, Histogram, ProcessCollector
from prometheus_client.core import (
    CounterMetricFamily,
    GaugeMetricFamily,
    HistogramMetricFamily,
    Metric,
)
from prometheus_client.exposition import choose_encoder
from prometheus_client.registry import Collector

from service.api.change_feed import ChangeFeed
from service.api.dependencies import StoreHere
from service.api.ended_totals import EndedTotals, Spread
from service.api.problems import responses
from service.contracts.progress import Priority, State
from service.errors import StoreUnavailable
from service.store import figures, workers
from service.store.figures import Depth
from service.store.session import Store

router = APIRouter(tags=["health"])

_PLAIN: Final = "text/plain"
_WAITING_OR_RUNNING: Final[tuple[State, ...]] = ("queued", "running")


class RequestFigures:
    """What one process has answered."""

    def __init__(self) -> None:
        self.answered = Counter(
            "spanwright_http_requests",
            "Requests answered by this process",
            ("method", "route", "status"),
            registry=None,
        )
        self.began_s = Histogram(
            "spanwright_http_request_duration_seconds",
            "Time from a request to the start of its answer, in this process",
            ("method", "route"),
            registry=None,
        )


@router.get(
    "/metrics",
    response_class=Response,
    responses=responses()
    | {
        200: {
            "description": "Depth of the queue, waits, runs, attempts, losses, workers, requests",
            "content": {_PLAIN: {"schema": {"type": "string"}}},
        }
    },
)
def tell_metrics(request: Request, store: StoreHere) -> Response:
    """Tell the figures of the queue and of this process, as Prometheus reads them."""
    state = request.app.state
    registry = CollectorRegistry()
    registry.register(_Queue(store, state.ended_totals))
    registry.register(_Streams(state.change_feed))
    registry.register(state.request_figures.answered)
    registry.register(state.request_figures.began_s)
    registry.register(ProcessCollector(registry=None))
    encode, media_type = choose_encoder(request.headers.get("accept", ""))
    return Response(encode(registry), headers={"Content-Type": media_type})


class _Streams(Collector):
    def __init__(self, feed: ChangeFeed) -> None:
        self._feed = feed

    def collect(self) -> Iterator[Metric]:
        yield GaugeMetricFamily(
            "spanwright_event_streams",
            "Streams of events open in this process",
            value=self._feed.open_streams,
        )


class _Queue(Collector):
    """The queue at one moment, and all that has ended in it."""

    def __init__(self, store: Store, totals: EndedTotals) -> None:
        self._store, self._totals = store, totals

    def describe(self) -> list[Metric]:
        """Nothing: a registry would otherwise collect once more to find the names."""
        return []

    def collect(self) -> Iterator[Metric]:
        try:
            # First, for it does not wait long; the figures of this process must not wait either.
            self._store.ping()
            depth = figures.depth(self._store)
            expiries = figures.lease_expiries(self._store)
            alive = collections.Counter(each.carrier for each in workers.alive(self._store))
            self._totals.read_on(self._store)
        except StoreUnavailable:
            yield _store_up(0)
            return
        yield _store_up(1)
        yield from _depth(depth)
        carriers = GaugeMetricFamily(
            "spanwright_workers", "Processes that claim jobs and are there", labels=("carrier",)
        )
        for carrier in get_args(workers.Carrier):
            carriers.add_metric((carrier,), alive[carrier])
        yield carriers
        yield CounterMetricFamily(
            "spanwright_lease_expiries",
            "Leases that ran out before their worker was heard of",
            value=expiries,
        )
        yield from _totals(self._totals)


def _store_up(value: int) -> Metric:
    return GaugeMetricFamily(
        "spanwright_store_up", "Whether the store answers; nothing of the queue if not", value=value
    )


def _depth(depth: Depth) -> Iterator[Metric]:
    jobs = GaugeMetricFamily(
        "spanwright_jobs", "Jobs that wait and run", labels=("state", "priority")
    )
    # None is told as none: what is missing is not known to be nothing.
    for state in _WAITING_OR_RUNNING:
        for priority in get_args(Priority):
            jobs.add_metric((state, priority), depth.by_state.get((state, priority), 0))
    yield jobs
    yield GaugeMetricFamily(
        "spanwright_jobs_claimable",
        "Jobs that wait for a worker and not for an identical design",
        value=depth.claimable,
    )
    yield GaugeMetricFamily(
        "spanwright_oldest_wait_seconds",
        "How long the claimable job has waited that has waited longest",
        value=depth.oldest_wait_s,
    )


def _totals(totals: EndedTotals) -> Iterator[Metric]:
    ended = CounterMetricFamily(
        "spanwright_jobs_ended", "Jobs that ended", labels=("state", "priority")
    )
    for (state, priority), number in sorted(totals.ended.items()):
        ended.add_metric((state, priority), number)
    yield ended
    yield CounterMetricFamily(
        "spanwright_jobs_answered",
        "Jobs that the stored result of the same request answered",
        value=totals.answered,
    )
    yield CounterMetricFamily(
        "spanwright_jobs_set_aside",
        "Jobs that lost their worker so often that they were set aside",
        value=totals.set_aside,
    )
    yield _by_priority("spanwright_job_wait_seconds", "From the queue to a worker", totals.wait_s)
    yield _by_priority("spanwright_job_run_seconds", "From a worker to the end", totals.run_s)
    yield _alone("spanwright_job_attempts", "Times a job was taken up", totals.attempts)
    yield _alone(
        "spanwright_map_error_percent",
        "Largest miss of the search's maps, of each result",
        totals.map_error_percent,
    )


def _by_priority(name: str, what: str, spreads: Mapping[Priority, Spread]) -> Metric:
    family = HistogramMetricFamily(name, what, labels=("priority",))
    for priority, spread in sorted(spreads.items()):
        family.add_metric((priority,), spread.up_to(), spread.total)
    return family


def _alone(name: str, what: str, spread: Spread) -> Metric:
    return HistogramMetricFamily(name, what, buckets=spread.up_to(), sum_value=spread.total)
