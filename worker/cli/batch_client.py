"""The command line's side of batches over HTTP."""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator
from http import HTTPStatus
from typing import Final

from service.contracts.batch import Batch, BatchItem, BatchRequest
from worker.cli.client import ServiceClient, problem_of

_POLL_S: Final = 0.5
#: Thousands of requests take longer to send, to store and to read than one.
_BATCH_TIMEOUT_S: Final = 120.0
_ITEMS_AT_ONCE: Final = 500


class BatchClient(ServiceClient):
    """Talks to one running service about batches."""

    def submit_batch(self, request: BatchRequest, key: str) -> Batch:
        """Submit a batch; sent again with the same key, it is accepted once."""
        headers = {"Content-Type": "application/json", "Idempotency-Key": key}
        answer = self._call(
            "POST",
            "/v1/batches",
            content=request.model_dump_json(),
            headers=headers,
            timeout=_BATCH_TIMEOUT_S,
        )
        return Batch.model_validate(answer)

    def batch(self, batch_id: str) -> Batch:
        """One batch, and where it stands."""
        return Batch.model_validate(self._call("GET", f"/v1/batches/{batch_id}"))

    def batches(self, most: int) -> list[Batch]:
        """The newest batches."""
        page = self._call("GET", "/v1/batches", params={"limit": most})
        return [Batch.model_validate(each) for each in page["batches"]]

    def items(self, batch_id: str, state: str | None) -> Iterator[BatchItem]:
        """The designs of a batch by line, all or those in one state."""
        query: dict[str, str | int] = {"limit": _ITEMS_AT_ONCE, "after_line": 0}
        if state is not None:
            query["state"] = state
        while True:
            page = self._call("GET", f"/v1/batches/{batch_id}/designs", params=query)
            yield from map(BatchItem.model_validate, page["designs"])
            if page["next_after_line"] is None:
                return
            query["after_line"] = page["next_after_line"]

    def results(self, batch_id: str, *, as_table: bool) -> Iterator[bytes]:
        """The results of a batch as they come: lines of JSON, or one CSV table."""
        path = f"/v1/batches/{batch_id}/results{'.csv' if as_table else ''}"
        with self._reaching(), self._http.stream("GET", path, timeout=_BATCH_TIMEOUT_S) as answer:
            if answer.status_code >= HTTPStatus.BAD_REQUEST:
                answer.read()
                raise problem_of(answer)
            yield from answer.iter_bytes()

    def cancel_batch(self, batch_id: str) -> Batch:
        """Cancel what has not ended of a batch."""
        return Batch.model_validate(self._call("POST", f"/v1/batches/{batch_id}/cancel"))

    def rerun_batch(self, batch_id: str, *, everything: bool) -> Batch:
        """Run again what failed or was cancelled of a batch, or all of it as a new one."""
        query = {"part": "all" if everything else "failed"}
        path = f"/v1/batches/{batch_id}/rerun"
        answer = self._call("POST", path, params=query, timeout=_BATCH_TIMEOUT_S)
        return Batch.model_validate(answer)

    def wait_batch(self, batch_id: str, seen: Callable[[Batch], None], patience_s: float) -> Batch:
        """Wait until every design of a batch has ended, telling on the way how far it is.

        Raises
        ------
        TimeoutError
            If it has not ended in time; the batch itself goes on.
        """
        deadline_s = time.monotonic() + patience_s
        while True:
            batch = self.batch(batch_id)
            seen(batch)
            if batch.finished_at is not None:
                return batch
            if time.monotonic() > deadline_s:
                left = batch.counts.queued + batch.counts.running
                raise TimeoutError(f"{left:,} designs of batch {batch_id} have not ended")
            time.sleep(_POLL_S)
