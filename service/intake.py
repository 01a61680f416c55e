"""Intake: the one way a request becomes an accepted design, for API, pages and command line."""

from __future__ import annotations

from service.contracts.request import DesignRequest
from service.doorbell import Doorbell
from service.store import designs
from service.store.designs import Submitted
from service.store.session import Store

__all__ = ["Submitted", "submit"]


def submit(
    store: Store, doorbell: Doorbell, request: DesignRequest, idempotency_key: str | None
) -> Submitted:
    """Accept a request and tell the workers.

    Once this returns the design is stored; whatever happens to the bell, it will be planned.

    Raises
    ------
    KeyReused
        If the key belongs to a different request.
    StoreUnavailable
        If the database stays away; with a key it is safe to send again.
    """
    submitted = designs.submit(store, request, idempotency_key=idempotency_key)
    if submitted.created:
        doorbell.ring()
    return submitted
