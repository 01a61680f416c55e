"""From rows to contracts, and identifiers before any row is looked for."""

from __future__ import annotations

import json
import re
from typing import Any, Final
from zlib import error as ZlibError  # noqa: N812  # the module names its error in small letters

from pydantic import ValidationError
from sqlalchemy import Row

from service.contracts.candidate import DesignResult
from service.contracts.progress import DesignSummary, Progress
from service.contracts.refusals import faults_of
from service.contracts.request import DesignRequest
from service.errors import DesignNotFound, SchemaMismatch
from service.store.order import word_of
from service.store.packing import unpack
from service.store.tables import DesignRow, JobRow

_IDENTIFIER: Final = re.compile(r"[0-9a-f]{32}")


def is_identifier(text: str) -> bool:
    """Whether a text can be an identifier, before any database has to make sense of it."""
    return _IDENTIFIER.fullmatch(text) is not None


def refuse_malformed(design_id: str) -> None:
    """Refuse what cannot be the identifier of a design.

    Raises
    ------
    DesignNotFound
    """
    if not is_identifier(design_id):
        raise DesignNotFound(design_id)


def read_request(design_id: str, request: str) -> DesignRequest:
    """The request of a stored design.

    Raises
    ------
    SchemaMismatch
        If it was accepted by a release with another contract.
    """
    try:
        return DesignRequest.model_validate_json(request)
    except ValidationError as error:
        raise SchemaMismatch(
            f"The request of design {design_id} was accepted by another release and breaks the "
            f"contract of this one ({faults_of(error)[0]}) Submit it again in today's form."
        ) from error


def read_result(design_id: str, packed: bytes) -> DesignResult:
    """The result of a stored design.

    Raises
    ------
    SchemaMismatch
        If it was stored by a release with another contract.
    """
    try:
        return DesignResult.model_validate_json(unpack(packed))
    except (ValidationError, ZlibError) as error:
        raise SchemaMismatch(
            f"The result of design {design_id} was stored by another release and cannot be read "
            "by this one. Submit the request again."
        ) from error


def summary_of(row: Row[DesignRow, JobRow]) -> DesignSummary:
    """One line in the list of designs."""
    return DesignSummary(**summary_fields(row[0], row[1]))


def summary_fields(design: DesignRow, job: JobRow) -> dict[str, Any]:
    """What a summary tells of a design, by the names of its fields."""
    return {
        "id": design.id,
        "name": design.name,
        "state": job.state,
        "priority": word_of(job.priority),
        "progress": Progress(fraction=job.progress, step=job.step),
        "attempts": job.attempts,
        "failure": job.failure,
        "created_at": design.created_at,
        "queued_at": job.queued_at,
        "started_at": job.started_at,
        "finished_at": job.finished_at,
        "batch_id": design.batch_id,
        "batch_line": design.batch_line,
        "answered_by": design.answered_by,
        "bands": tuple(band["name"] for band in json.loads(design.request)["bands"]),
    }
