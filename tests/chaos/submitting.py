"""Work for the chaos test: designs and batches that keep coming, whatever is down."""

from __future__ import annotations

import random
import threading
import time
from collections.abc import Iterator
from typing import Final

from service.contracts.batch import BatchRequest
from service.contracts.progress import Priority
from service.contracts.request import DesignRequest
from service.doorbell import Doorbell
from service.errors import StoreUnavailable
from service.intake import submit, submit_batch
from service.store.session import Store
from tests.chaos.record import Record
from tests.service.samples import sample_request

_LARGEST_BATCH: Final = 10
_LOOK_S: Final = 0.02
#: How often something is sent while a server is away.
_PAUSE_S: Final = 0.25


class Submitter(threading.Thread):
    """Submits so many designs, by themselves and in batches, each under a key of its own.

    And more for as long as faults go on, or a quick machine would leave the last nothing to hit.
    About so many wait at the most, so that submitting goes on through all faults; it goes on too
    while a server is away and nothing moves. What the store was away for is sent again under the
    same key, as a client does.
    """

    def __init__(
        self,
        store: Store,
        doorbell: Doorbell,
        record: Record,
        number: int,
        most_waiting: int,
        seed: int,
        job_s: float,
    ) -> None:
        super().__init__(name="submitter", daemon=True)
        self._store, self._doorbell, self._record = store, doorbell, record
        self._most_waiting = most_waiting
        self._job_s = job_s
        self._number, self._chance = number, random.Random(seed)  # noqa: S311  # no secret
        #: Set by whoever has stopped a server.
        self.server_away = threading.Event()
        #: Set once no fault follows.
        self.faults_over = threading.Event()
        #: Accepted so far: designs and batches by their keys.
        self.designs: dict[str, str] = {}
        self.batches: dict[str, str] = {}
        self.accepted = 0
        #: How often it met a store that was away.
        self.refusals = 0
        self.broke: Exception | None = None

    def run(self) -> None:
        """Submit all."""
        try:
            for requests in self._portions():
                self._pause()
                self._send(requests)
        except Exception as error:  # noqa: BLE001  # told by whoever waits for this thread
            self.broke = error

    def _pause(self) -> None:
        if self.server_away.is_set():
            time.sleep(_PAUSE_S)
        while self._enough() and not self.server_away.is_set():
            time.sleep(_LOOK_S)

    def _enough(self) -> bool:
        return self.accepted - self._record.told_stored() > self._most_waiting

    def _portions(self) -> Iterator[list[DesignRequest]]:
        sent = 0
        while sent < self._number or not self.faults_over.is_set():
            size = self._chance.choice((1, 1, 1, _LARGEST_BATCH))
            yield [self._request(sent + index) for index in range(size)]
            sent += size

    def _request(self, index: int) -> DesignRequest:
        core_s = self._job_s * self._chance.uniform(0.5, 1.5)
        return sample_request(name=f"work {core_s:.3f} #{index}")

    def _send(self, requests: list[DesignRequest]) -> None:
        key = f"chaos {requests[0].name}"
        priority: Priority = self._chance.choice(("urgent", "ordinary", "ordinary", "when-idle"))
        while True:
            try:
                if len(requests) == 1:
                    sent = submit(self._store, self._doorbell, requests[0], key, priority=priority)
                    self.designs[key] = sent.design_id
                else:
                    batch = BatchRequest(name=key, priority=priority, designs=tuple(requests))
                    self.batches[key] = submit_batch(
                        self._store, self._doorbell, batch, key
                    ).batch_id
            except StoreUnavailable:
                self.refusals += 1
            else:
                self.accepted += len(requests)
                return
