"""The command line's side of the HTTP service."""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from http import HTTPStatus
from types import TracebackType
from typing import Any, Final, Self

import httpx

from service.contracts.progress import Design, DesignSummary, Progress
from service.contracts.report import FeedReport
from service.contracts.request import DesignRequest
from service.errors import Fault, RequestRefused, SpanwrightError

_POLL_S: Final = 0.3
_TIMEOUT_S: Final = 15.0
#: Where a service on this machine answers.
HERE: Final = "http://127.0.0.1:8757"
ENDED: Final = ("done", "failed", "cancelled")


class ServiceUnreachable(SpanwrightError):
    """No service answers at the address given."""

    code = "service-unreachable"
    title = "The service does not answer"


class ServiceClient:
    """Talks to one running service.

    Parameters
    ----------
    address : str
        Base URL, ``http://127.0.0.1:8757``.
    """

    def __init__(self, address: str) -> None:
        self._address = address
        self._http = httpx.Client(base_url=address, timeout=_TIMEOUT_S)

    def __enter__(self) -> Self:
        """Use as a context, so that the connection is closed."""
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        """Close the connection."""
        self._http.close()

    def submit(
        self,
        request: DesignRequest,
        key: str | None,
        *,
        priority: str = "ordinary",
        recompute: bool = False,
    ) -> Design:
        """Submit a request; with a key, sending it again gives the same design."""
        headers = {"Content-Type": "application/json"}
        if key is not None:
            headers["Idempotency-Key"] = key
        answer = self._call(
            "POST",
            "/v1/designs",
            params={"priority": priority, "recompute": recompute},
            content=request.canonical_json(),
            headers=headers,
        )
        return self.design(answer["id"])

    def design(self, design_id: str) -> Design:
        """One design, with its result once done."""
        return Design.model_validate(self._call("GET", f"/v1/designs/{design_id}"), strict=False)

    def designs(self, most: int) -> list[DesignSummary]:
        """The newest designs."""
        page = self._call("GET", "/v1/designs", params={"limit": most})
        return [DesignSummary.model_validate(each) for each in page["designs"]]

    def report(self, design_id: str, rank: int) -> FeedReport:
        """The feed-impedance report of one candidate."""
        path = f"/v1/designs/{design_id}/candidates/{rank}/report"
        return FeedReport.model_validate(self._call("GET", path))

    def wait(self, design_id: str, seen: Callable[[Progress], None], patience_s: float) -> Design:
        """Wait until a design has ended, telling its progress on the way.

        Raises
        ------
        TimeoutError
            If it has not ended in time; the design itself goes on.
        """
        deadline_s = time.monotonic() + patience_s
        while True:
            design = self.design(design_id)
            seen(design.progress)
            if design.state in ENDED:
                return design
            if time.monotonic() > deadline_s:
                raise TimeoutError(f"design {design_id} is still {design.state}")
            time.sleep(_POLL_S)

    def _call(self, method: str, path: str, **how: Any) -> Any:  # noqa: ANN401  # JSON is whatever the service sent; the contracts check it
        with self._reaching():
            answer = self._http.request(method, path, **how)
        if answer.status_code >= HTTPStatus.BAD_REQUEST:
            raise problem_of(answer)
        return answer.json()

    @contextmanager
    def _reaching(self) -> Iterator[None]:
        try:
            yield
        except httpx.TransportError as error:
            raise ServiceUnreachable(
                f"Nothing answers at {self._address}: {error}. Start it with 'spanwright serve', "
                "or name its address with --service."
            ) from error


def problem_of(answer: httpx.Response) -> SpanwrightError:
    """The error a problem document (RFC 9457) tells of: a refusal where the sender is at fault."""
    try:
        problem = answer.json()
    except ValueError:
        problem = {}
    faults = [Fault(**fault) for fault in problem.get("faults", ())]
    refused = answer.status_code < HTTPStatus.INTERNAL_SERVER_ERROR
    error = RequestRefused(faults) if refused else SpanwrightError("", faults)
    error.detail = problem.get("detail", f"HTTP status {answer.status_code}")
    error.title = problem.get("title", error.title)
    return error
