"""What a listener is told from the store at once, before the feed goes on: all, or what changed."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

from service.api.event_wire import Event, Topic, of_batch, of_design
from service.contracts.batch import Batch
from service.contracts.events import Snapshot
from service.errors import DesignNotFound
from service.store import batches, changes
from service.store.changes import OVERLAP_US, Change
from service.store.reading import is_identifier
from service.store.session import Store

#: Designs told at the start of a stream, those that changed last.
MOST_AT_START: Final = 100
#: Designs told one by one of what changed meanwhile; more than these are a start anew.
_MOST_MISSED: Final = 1000


@dataclass(frozen=True, slots=True)
class Start:
    """What is told of a topic to begin with."""

    store: Store
    owner: str
    topic: Topic

    def standing(self) -> list[Event]:
        """Where things stand now, the snapshot first.

        Raises
        ------
        DesignNotFound, BatchNotFound
        """
        batch = self._batch()
        found = self._latest(MOST_AT_START + 1)
        told = found[-MOST_AT_START:]
        newest_us = told[-1].changed_us if told else 0
        begin = Snapshot(states=len(told), complete=len(told) == len(found))
        events = [Event("snapshot", "", newest_us, begin.model_dump_json()), *map(of_design, told)]
        return events if batch is None else [*events, of_batch(batch, newest_us)]

    def since(self, heard_us: int) -> list[Event] | None:
        """What changed since an event was heard; None where that was the end.

        Raises
        ------
        DesignNotFound, BatchNotFound
        """
        batch = self._batch()
        newest = self._latest(1)
        if not newest or heard_us > newest[0].changed_us + OVERLAP_US:
            # Heard from another database, or from this one before it was put back.
            return self.standing()
        last = newest[0]
        whole = of_design(last) if batch is None else of_batch(batch, last.changed_us)
        if whole.ends(self.topic) and last.changed_us <= heard_us:
            return None
        missed = changes.since(
            self.store,
            owner=self.owner,
            batch_id=self._named("batch"),
            design_id=self._named("design"),
            after_us=heard_us,
            limit=_MOST_MISSED + 1,
        )
        if len(missed) > _MOST_MISSED:
            return self.standing()
        events = list(map(of_design, missed))
        return events if batch is None else [*events, whole]

    def _batch(self) -> Batch | None:
        if self.topic.kind != "batch":
            return None
        return batches.get(self.store, self.topic.name, self.owner)

    def _latest(self, limit: int) -> list[Change]:
        design_id = self._named("design")
        if design_id is not None and not is_identifier(design_id):
            raise DesignNotFound(design_id)
        found = changes.latest(
            self.store,
            owner=self.owner,
            batch_id=self._named("batch"),
            design_id=design_id,
            limit=limit,
        )
        if design_id is not None and not found:
            raise DesignNotFound(design_id)
        return found

    def _named(self, kind: str) -> str | None:
        return self.topic.name if self.topic.kind == kind else None
