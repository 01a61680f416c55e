"""Intake: the one way a request becomes an accepted design, for API, pages and command line."""

from __future__ import annotations

import logging
from typing import Final

from service.contracts.batch import BatchRequest
from service.contracts.progress import LOCAL_OWNER, Priority
from service.contracts.request import DesignRequest
from service.doorbell import Doorbell
from service.store import batches, designs
from service.store.designs import Submitted
from service.store.session import Store

__all__ = ["Submitted", "rerun_batch", "submit", "submit_batch"]

_log = logging.getLogger(__name__)

#: Rings for one batch: enough to wake the idle, who ring on while work waits.
_MOST_RINGS: Final = 16


def submit(
    store: Store,
    doorbell: Doorbell,
    request: DesignRequest,
    idempotency_key: str | None,
    *,
    owner: str = LOCAL_OWNER,
    priority: Priority = "ordinary",
    recompute: bool = False,
) -> Submitted:
    """Accept a request and tell the workers.

    Once this returns the design is stored; whatever happens to the bell, it will be planned.

    Raises
    ------
    KeyReused
        If the key belongs to a different request of the owner.
    StoreUnavailable
        If the database stays away; with a key it is safe to send again.
    """
    submitted = designs.submit(
        store,
        request,
        idempotency_key=idempotency_key,
        owner=owner,
        priority=priority,
        recompute=recompute,
    )
    if submitted.created:
        told = {"design": submitted.design_id}
        _log.info("design %s: accepted", submitted.design_id, extra=told)
        doorbell.ring()
    return submitted


def submit_batch(
    store: Store,
    doorbell: Doorbell,
    request: BatchRequest,
    idempotency_key: str | None,
    *,
    owner: str = LOCAL_OWNER,
) -> batches.Submitted:
    """Accept a batch whole and tell the workers; what `submit` says holds for all of it.

    Raises
    ------
    KeyReused
        If the key belongs to a different batch of the owner.
    StoreUnavailable
        If the database stays away; with a key it is safe to send again.
    """
    submitted = batches.submit(store, request, idempotency_key=idempotency_key, owner=owner)
    if submitted.created:
        told = {"batch": submitted.batch_id, "size": len(request.designs)}
        _log.info("batch %s: accepted", submitted.batch_id, extra=told)
        _ring(doorbell, len(request.designs))
    return submitted


def rerun_batch(
    store: Store,
    doorbell: Doorbell,
    batch_id: str,
    *,
    everything: bool = False,
    idempotency_key: str | None = None,
) -> str:
    """Run a batch again and tell the workers; returns the identifier of the batch that runs.

    What failed or was cancelled waits again in the batch itself. With ``everything`` all of it
    is planned anew as a new batch, of which the key makes one however often it is sent.

    Raises
    ------
    BatchNotFound
    KeyReused
        If the owner used the key for a different batch.
    StoreUnavailable
    """
    if not everything:
        _ring(doorbell, batches.rerun_failed(store, batch_id))
        return batch_id
    submitted = batches.rerun_all(store, batch_id, idempotency_key=idempotency_key)
    if submitted.created:
        _ring(doorbell, _MOST_RINGS)
    return submitted.batch_id


def _ring(doorbell: Doorbell, designs_waiting: int) -> None:
    for _ in range(min(designs_waiting, _MOST_RINGS)):
        doorbell.ring()
