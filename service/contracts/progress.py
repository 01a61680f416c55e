"""Where a design stands: its state, its progress and its times."""

from __future__ import annotations

from datetime import datetime
from typing import Annotated, Literal

from pydantic import Field

from service.contracts.candidate import DesignResult
from service.contracts.quantities import Contract
from service.contracts.request import DesignRequest

State = Literal["queued", "running", "done", "failed", "cancelled"]


class Progress(Contract):
    """How far a job has come: a fraction from 0 to 1 and the step it is at, in words."""

    fraction: Annotated[float, Field(ge=0.0, le=1.0)]
    step: Annotated[str, Field(max_length=200)]


class DesignSummary(Contract):
    """One line in the list of designs."""

    id: str
    name: str
    state: State
    progress: Progress
    attempts: int
    failure: str | None
    created_at: datetime
    started_at: datetime | None
    finished_at: datetime | None
    bands: tuple[str, ...]


class Design(DesignSummary):
    """A design with its request and, once done, its result."""

    request: DesignRequest
    result: DesignResult | None
