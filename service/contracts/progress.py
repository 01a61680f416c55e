"""Where a design stands: its state, its place in the order, its progress and its times."""

from __future__ import annotations

from datetime import datetime
from typing import Annotated, Final, Literal

from pydantic import Field

from service.contracts.candidate import DesignResult
from service.contracts.quantities import Contract
from service.contracts.request import DesignRequest

State = Literal["queued", "running", "done", "failed", "cancelled"]

#: How soon a design is wanted: urgent before ordinary, and when-idle after all others.
Priority = Literal["urgent", "ordinary", "when-idle"]

#: Whose work it is where nobody said who he is.
LOCAL_OWNER: Final = "local"


class Progress(Contract):
    """How far a job has come: a fraction from 0 to 1 and the step it is at, in words."""

    fraction: Annotated[float, Field(ge=0.0, le=1.0)]
    step: Annotated[str, Field(max_length=200)]


class DesignSummary(Contract):
    """One line in the list of designs.

    ``queued_at`` is when it last began to wait. ``batch_line`` is its place in its batch,
    from 1. ``answered_by`` names the design of the same request whose stored result answers
    this one too.
    """

    id: str
    name: str
    state: State
    priority: Priority = "ordinary"
    progress: Progress
    attempts: int
    failure: str | None
    created_at: datetime
    queued_at: datetime
    started_at: datetime | None
    finished_at: datetime | None
    batch_id: str | None = None
    batch_line: int | None = None
    answered_by: str | None = None
    bands: tuple[str, ...]


class Design(DesignSummary):
    """A design with its request and, once done, its result."""

    request: DesignRequest
    result: DesignResult | None
