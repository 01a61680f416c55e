"""Changes of designs and batches, read once for every open stream of this process.

One reader looks into the store while any stream is open, and lays what changed into the streams
that follow it. Changes take effect in another order than that of their moments, so it looks
again at the last few seconds and passes over what it has told. A stream whose reader is slow
keeps the newest state of each design; if these become too many, it starts from what is stored.
"""

from __future__ import annotations

import asyncio
import logging
import time
from collections import defaultdict
from collections.abc import AsyncIterator, Iterable
from contextlib import asynccontextmanager
from dataclasses import dataclass, field
from functools import partial
from typing import Final, Self

from anyio import to_thread

from service.api.event_wire import Event, Topic, of_batch, of_design
from service.api.problems import TooManyStreams
from service.contracts.batch import Batch
from service.errors import BatchNotFound, StoreUnavailable
from service.store import batches, changes
from service.store.changes import OVERLAP_US, Change
from service.store.session import Store

_log = logging.getLogger(__name__)

#: How often the store is looked into while streams are open.
POLL_S: Final = 0.5
#: Changes read in one reading.
_PAGE: Final = 1000
#: Events that wait in a stream; a design or batch has one at the most.
MOST_PENDING: Final = 1000


@dataclass(eq=False, slots=True)
class Stream:
    """What waits to be told to one listener: the newest of each design or batch."""

    topic: Topic
    #: Too much has changed to tell it one by one; start from what is stored.
    overrun: bool = False
    closed: bool = False
    _pending: dict[str, Event] = field(default_factory=dict)
    _told: dict[str, str] = field(default_factory=dict)
    _woken: asyncio.Event = field(default_factory=asyncio.Event)

    def has_told(self, events: Iterable[Event]) -> None:
        """Note what was told past this stream, so that it is not told twice."""
        self._told = {event.about: event.data for event in events}
        waiting, self._pending = self._pending, {}
        for event in waiting.values():
            self.put(event)

    def begin_again(self) -> None:
        """Take events once more after too many came; to be done before the store is read."""
        self.overrun = False

    def put(self, event: Event) -> None:
        """Lay an event in, over an earlier one about the same."""
        if self.overrun or self._told.get(event.about) == event.data:
            return
        self._pending.pop(event.about, None)
        self._pending[event.about] = event
        if len(self._pending) > MOST_PENDING:
            self._pending.clear()
            self.overrun = True
        self._woken.set()

    def close(self) -> None:
        """End the stream, whatever waits in it."""
        self.closed = True
        self._woken.set()

    async def take(self, within_s: float) -> list[Event]:
        """Take out all that waits, or nothing if nothing comes in time."""
        try:
            await asyncio.wait_for(self._woken.wait(), within_s)
        except TimeoutError:
            return []
        self._woken.clear()
        taken = list(self._pending.values())
        self._pending.clear()
        return taken


class ChangeFeed:
    """The open streams of one process, and the reader that fills them.

    Parameters
    ----------
    store : Store
    most_streams : int
        Streams that may be open at a time.
    """

    def __init__(self, store: Store, most_streams: int) -> None:
        self._store = store
        self._most_streams = most_streams
        self._streams: defaultdict[Topic, set[Stream]] = defaultdict(set)
        self._opening = asyncio.Lock()
        self._open = 0
        self._reader: asyncio.Task[None] | None = None
        self._seen = _Seen(0)

    @property
    def open_streams(self) -> int:
        """How many streams are open."""
        return self._open

    @asynccontextmanager
    async def follow(self, topic: Topic) -> AsyncIterator[Stream]:
        """A stream that gets every change of its topic from now on.

        Raises
        ------
        TooManyStreams
            If no more streams may be open.
        StoreUnavailable
            If the store stays away.
        """
        if self._open >= self._most_streams:
            raise TooManyStreams(self._most_streams)
        stream = Stream(topic)
        self._open += 1
        self._streams[topic].add(stream)
        try:
            await self._begin()
            yield stream
        finally:
            self._streams[topic].discard(stream)
            if not self._streams[topic]:
                del self._streams[topic]
            self._open -= 1

    def close(self) -> None:
        """End every stream, so that whoever serves them need not wait."""
        for stream in set().union(*self._streams.values()):
            stream.close()
        if self._reader is not None:
            self._reader.cancel()
            self._reader = None

    async def _begin(self) -> None:
        """Have the reader running, from the last change on."""
        async with self._opening:
            if self._reader is None or self._reader.done():
                self._seen = await _in_thread(partial(_Seen.up_to_now, self._store))
                self._reader = asyncio.create_task(self._read_on(), name="change feed")

    async def _read_on(self) -> None:
        touched: set[tuple[str, str]] = set()
        away = False
        while self._open:
            try:
                touched = await self._read(touched)
                away = False
            except StoreUnavailable:
                if not away:
                    _log.warning("no events, the store is away")
                away = True
            except Exception:  # noqa: BLE001  # a reader that stopped in silence would leave every stream without events
                _log.exception("no events")
            await asyncio.sleep(POLL_S)

    async def _read(self, touched: set[tuple[str, str]]) -> set[tuple[str, str]]:
        """Tell what has changed; gives the batches to tell of next time, with their owners.

        A batch is read before the changes that are told before it, so that on a stream that
        ends with the batch every one of its designs has been told.
        """
        standing, told = await _in_thread(partial(self._look, touched))
        touched = set()
        for change, event in told:
            for topic in _topics(change):
                for stream in self._streams.get(topic, ()):
                    stream.put(event)
            if change.batch_id is not None and Topic("batch", change.batch_id) in self._streams:
                touched.add((change.batch_id, change.owner))
        for batch in standing:
            event = of_batch(batch, self._seen.newest_us)
            for stream in self._streams.get(Topic("batch", batch.id), ()):
                stream.put(event)
        return touched

    def _look(
        self, touched: Iterable[tuple[str, str]]
    ) -> tuple[list[Batch], list[tuple[Change, Event]]]:
        standing = []
        for batch_id, owner in touched:
            try:
                standing.append(batches.get(self._store, batch_id, owner))
            except BatchNotFound:
                _log.warning("batch %s has gone while it was followed", batch_id)
        return standing, [(each, of_design(each)) for each in self._seen.look(self._store)]


class _Seen:
    """What the reader has seen of the last few seconds."""

    def __init__(self, newest_us: int) -> None:
        self.newest_us = newest_us
        self._at_s = time.monotonic()
        self._lately: dict[str, Change] = {}

    @classmethod
    def up_to_now(cls, store: Store) -> Self:
        """As if all that is stored had been seen; whoever starts reads it there."""
        seen = cls(changes.newest(store))
        seen.look(store)
        return seen

    def look(self, store: Store) -> list[Change]:
        """What has changed since the last look, or changed earlier and took effect since."""
        # What takes effect now was changed a few seconds ago at the most, so that after a
        # while of quiet there is nothing left to look at again.
        quiet_us = int(1e6 * (time.monotonic() - self._at_s))
        overlap_us = max(0, OVERLAP_US - quiet_us)
        began_s = time.monotonic()
        found = changes.since(
            store, owner=None, after_us=self.newest_us, overlap_us=overlap_us, limit=_PAGE
        )
        page = found
        while len(page) == _PAGE:
            last = page[-1]
            page = changes.since(
                store, owner=None, after_us=last.changed_us, after_id=last.id, limit=_PAGE
            )
            found = found + page
        # Compared as a whole, for two changes may fall on one tick of a clock.
        fresh = [each for each in found if self._lately.get(each.id) != each]
        self._lately = {each.id: each for each in found}
        if fresh:
            self.newest_us = max(self.newest_us, found[-1].changed_us)
            self._at_s = began_s
        return fresh


def _topics(change: Change) -> Iterable[Topic]:
    yield Topic("design", change.id)
    yield Topic("owner", change.owner)
    if change.batch_id is not None:
        yield Topic("batch", change.batch_id)


_in_thread = partial(to_thread.run_sync, abandon_on_cancel=True)
