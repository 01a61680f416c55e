"""Whether the process lives, and whether it can serve."""

from __future__ import annotations

from http import HTTPStatus
from importlib.metadata import version
from typing import Literal

from fastapi import APIRouter

from service.api.dependencies import StoreHere
from service.api.problems import responses
from service.contracts.quantities import Contract

router = APIRouter(prefix="/health", tags=["health"])


class Health(Contract):
    """The state of this process."""

    status: Literal["live", "ready"]
    version: str


@router.get("/live", responses=responses())
def live() -> Health:
    """Say that the process answers; it touches nothing else."""
    return Health(status="live", version=version("spanwright"))


@router.get("/ready", responses=responses(HTTPStatus.SERVICE_UNAVAILABLE))
def ready(store: StoreHere) -> Health:
    """Say that the store answers too, or soon that it does not.

    Workers are none of its business: without any, designs are accepted all the same. They are
    among the figures of the queue.
    """
    store.ping()
    return Health(status="ready", version=version("spanwright"))
