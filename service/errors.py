"""Every refusal the service can give, and nothing about how it is carried.

::

    SpanwrightError
    ├── RequestRefused        one or more faults in what was sent
    ├── DesignNotFound        no design has that identifier
    ├── BatchNotFound         no batch of this owner has that identifier
    ├── CandidateNotFound     the design has no candidate of that rank
    ├── ResultNotReady        the design is not done, or ended without a result
    ├── BenchBusy             others wait for a what-if already
    ├── BenchTooSlow          a what-if took longer than allowed
    ├── BenchMissing          what-ifs are not answered here
    ├── KeyReused             one idempotency key, two different requests
    ├── StoreUnavailable      the database did not answer in time
    └── SchemaMismatch        the database is of another release

Each error knows its ``code``, and the faults in it know their ``field``, ``value`` and
``remedy``, so the API, the page and the command line print the same words.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Fault:
    """One thing wrong with one field.

    Attributes
    ----------
    field : str
        Path of the field in the request, ``bands[1].low_mhz``.
    value : str
        What was given, shortened to a readable length.
    reason : str
        What is wrong with it, as a sentence.
    remedy : str
        What the planner can do about it, as a sentence.
    code : str
        Stable short name of the rule, ``edges-swapped``.
    """

    field: str
    value: str
    reason: str
    remedy: str
    code: str

    def __str__(self) -> str:
        """The fault as one line of text."""
        given = f" (given: {self.value})" if self.value else ""
        return f"{self.field}: {self.reason}{given} {self.remedy}"


class SpanwrightError(Exception):
    """Root of every error this project raises on purpose."""

    code = "error"
    title = "The request could not be carried out"

    def __init__(self, detail: str, faults: Sequence[Fault] = ()) -> None:
        super().__init__(detail)
        self.detail = detail
        self.faults = tuple(faults)


class RequestRefused(SpanwrightError):
    """The request breaks the contract; each fault names field, value and remedy."""

    code = "request-refused"
    title = "The request was refused"

    def __init__(self, faults: Sequence[Fault], untold: int = 0) -> None:
        count = len(faults) + untold
        plural = "s" if count > 1 else ""
        more = f"; and {untold} more, which are not told one by one" if untold else ""
        told = "; ".join(map(str, faults))
        super().__init__(f"{count} fault{plural}: {told}{more}", faults)
        self.untold = untold


class DesignNotFound(SpanwrightError):
    """No stored design has that identifier."""

    code = "design-not-found"
    title = "No such design"

    def __init__(self, design_id: str) -> None:
        fault = Fault(
            "design_id",
            design_id[:64],
            "no design has this identifier.",
            "Look it up in the list of designs.",
            self.code,
        )
        super().__init__(f"No design has the identifier {design_id[:64]!r}.", (fault,))


class BatchNotFound(SpanwrightError):
    """No stored batch of this owner has that identifier."""

    code = "batch-not-found"
    title = "No such batch"

    def __init__(self, batch_id: str) -> None:
        fault = Fault(
            "batch_id",
            batch_id[:64],
            "no batch has this identifier.",
            "Look it up in the list of batches.",
            self.code,
        )
        super().__init__(f"No batch has the identifier {batch_id[:64]!r}.", (fault,))


class CandidateNotFound(SpanwrightError):
    """The design has no candidate of that rank."""

    code = "candidate-not-found"
    title = "No such candidate"

    def __init__(self, design_id: str, rank: int, available: int) -> None:
        fault = Fault(
            "rank",
            str(rank),
            f"this design has {available} candidate(s).",
            f"Ask for a rank from 1 to {available}." if available else "It has none to show.",
            self.code,
        )
        super().__init__(f"Design {design_id} has no candidate of rank {rank}.", (fault,))


class ResultNotReady(SpanwrightError):
    """The design has no result: it waits, runs, failed or was cancelled."""

    code = "result-not-ready"
    title = "No result yet"

    def __init__(self, design_id: str, state: str) -> None:
        remedies = {
            "queued": "Wait for a worker to take it up and ask again.",
            "running": "Wait for it to finish and ask again.",
            "failed": "Read the reason of the failure in the design and submit it again.",
        }
        fault = Fault(
            "design_id",
            design_id,
            f"this design is {state} and has no result.",
            remedies.get(state, "Submit the request again."),
            self.code,
        )
        super().__init__(f"Design {design_id} is {state}.", (fault,))


class KeyReused(SpanwrightError):
    """The idempotency key already belongs to a different request."""

    code = "idempotency-key-reused"
    title = "This key belongs to another request"

    def __init__(self, key: str) -> None:
        fault = Fault(
            "Idempotency-Key",
            key[:64],
            "this key was used before with a different request.",
            "Send the same request again, or take a new key for a new request.",
            self.code,
        )
        super().__init__(f"The key {key[:64]!r} was used with a different request.", (fault,))


class StoreUnavailable(SpanwrightError):
    """The database did not answer within the bounded retries."""

    code = "store-unavailable"
    title = "The store does not answer"


class SchemaMismatch(SpanwrightError):
    """The database was made by another release and cannot be used as it is."""

    code = "schema-mismatch"
    title = "The database is of another release"


class BenchBusy(SpanwrightError):
    """What-ifs are answered one after the other, and others wait already."""

    code = "what-if-busy"
    title = "Too many what-ifs at once"

    def __init__(self, why: str) -> None:
        super().__init__(f"{why} Ask again in a moment.")


class BenchTooSlow(SpanwrightError):
    """A what-if took longer than allowed and was given up."""

    code = "what-if-too-slow"
    title = "This what-if takes too long"

    def __init__(self, limit_s: float) -> None:
        super().__init__(
            f"There was no answer within {limit_s:g} s. Ask about fewer bands, or submit a design."
        )


class BenchMissing(SpanwrightError):
    """What-ifs are not answered here: no bench was put into this process."""

    code = "what-if-not-here"
    title = "What-ifs are not answered here"

    def __init__(self) -> None:
        super().__init__(
            "This service was started without a bench for what-ifs; 'spanwright serve' has one."
        )
