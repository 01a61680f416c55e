"""Whether the process lives, and whether it can serve."""

from __future__ import annotations

from http import HTTPStatus
from importlib.metadata import version
from typing import Literal

from fastapi import APIRouter

from service.api.dependencies import StoreHere
from service.api.problems import responses
from service.contracts.quantities import Contract
from service.store import designs

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
    """Say that the store answers too."""
    designs.page(store, limit=1, before=None)
    return Health(status="ready", version=version("spanwright"))
