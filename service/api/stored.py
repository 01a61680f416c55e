"""Answers from the store, with a tag by which a reader can ask whether they have changed."""

from __future__ import annotations

import hashlib
from http import HTTPStatus

from fastapi import Request, Response
from pydantic import BaseModel


def answer_stored(request: Request, contract: BaseModel) -> Response:
    """A contract as JSON with its ETag; 304 without a body where the reader has it already."""
    return answer_tagged(request, contract.model_dump_json(), "application/json")


def answer_tagged(
    request: Request, content: str | bytes, media_type: str, headers: dict[str, str] | None = None
) -> Response:
    """Anything with its ETag (RFC 9110, section 8.8.3); 304 where the reader has it already."""
    body = content.encode() if isinstance(content, str) else content
    tag = f'"{hashlib.sha256(body).hexdigest()[:32]}"'
    tagged = {"ETag": tag} | (headers or {})
    if _has_it_already(request, tag):
        return Response(status_code=HTTPStatus.NOT_MODIFIED, headers={"ETag": tag})
    return Response(body, media_type=media_type, headers=tagged)


def _has_it_already(request: Request, tag: str) -> bool:
    # If-None-Match compares weakly (RFC 9110, section 13.1.2).
    known = ",".join(request.headers.getlist("if-none-match")).split(",")
    return any(each.strip().removeprefix("W/") in {tag, "*"} for each in known)
