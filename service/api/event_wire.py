"""Server-sent events (WHATWG HTML, section 9.2): what they tell, and how it looks on the wire."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final, Literal, NamedTuple

from service.contracts.batch import Batch
from service.store.changes import Change

MEDIA_TYPE: Final = "text/event-stream"
#: A browser that lost its stream comes back after so long.
_RETRY_MS: Final = 2000
_FINAL: Final = ("done", "failed", "cancelled")

#: First on every stream.
RETRY: Final = f"retry: {_RETRY_MS}\n\n".encode()
#: A comment, which listeners pass over.
STILL_HERE: Final = b": still here\n\n"


class Topic(NamedTuple):
    """What a stream follows: one design, one batch, or all of an owner's work."""

    kind: Literal["design", "batch", "owner"]
    name: str


@dataclass(frozen=True, slots=True)
class Event:
    """Something to tell: its name, what it is about, its moment, its data in JSON."""

    name: Literal["state", "batch", "snapshot"]
    about: str
    moment_us: int
    data: str
    #: Whether nothing will come after it on a stream of what it is about.
    final: bool = False

    def ends(self, topic: Topic) -> bool:
        """Whether a stream of a topic is at its end with this."""
        return self.final and topic == (_KINDS[self.name], self.about)

    def encoded(self) -> bytes:
        """It as it goes out; JSON has no bare line ends that would need lines of their own."""
        return f"id: {self.moment_us}\nevent: {self.name}\ndata: {self.data}\n\n".encode()


_KINDS: Final = {"state": "design", "batch": "batch", "snapshot": ""}


def of_design(change: Change) -> Event:
    """The event that tells where a design stands."""
    final = change.state in _FINAL
    return Event("state", change.id, change.changed_us, change.model_dump_json(), final)


def of_batch(batch: Batch, moment_us: int) -> Event:
    """The event that tells where a batch stands."""
    final = batch.finished_at is not None
    return Event("batch", batch.id, moment_us, batch.model_dump_json(), final)
