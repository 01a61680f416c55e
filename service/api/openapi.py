"""The description of the API (OpenAPI 3.1), with the parts that the framework cannot see."""

from __future__ import annotations

from typing import Any, Final

from fastapi import FastAPI
from fastapi.openapi.utils import get_openapi
from pydantic.json_schema import models_json_schema

from service.api.problems import Problem
from service.contracts.bands import BandChoice
from service.contracts.batch import Batch, BatchRequest
from service.contracts.events import Snapshot
from service.contracts.request import DesignRequest
from service.contracts.what_if import WhatIfRequest
from service.store.changes import Change

#: A request may leave out what a stored design always has, so it is described apart.
_REF: Final = "#/components/schemas/Asked{model}"
_BAND_TEXT: Final = {
    "type": "string",
    "description": "A ready-made list's name, a colon and names of its bands",
    "examples": ["amateur-region-2: 40m, 15m"],
}

REQUEST_BODY: Final[dict[str, Any]] = {
    "required": True,
    "content": {"application/json": {"schema": {"$ref": _REF.format(model="DesignRequest")}}},
}

BATCH_BODY: Final[dict[str, Any]] = {
    "required": True,
    "content": {
        "application/json": {"schema": {"$ref": _REF.format(model="BatchRequest")}},
        "application/x-ndjson": {
            "schema": {
                "type": "string",
                "description": "One design request a line; name, priority and recompute of the "
                "batch go into the query",
            }
        },
    },
}


def describe(app: FastAPI) -> None:
    """Have the application describe itself, once, when first asked."""

    def described() -> dict[str, Any]:
        if app.openapi_schema is None:
            document = get_openapi(
                title=app.title,
                version=app.version,
                description=app.description,
                routes=app.routes,
            )
            document["components"]["schemas"] |= (
                _request_schemas() | _problem_schemas() | _event_schemas()
            )
            app.openapi_schema = document
        return app.openapi_schema

    # FastAPI documents replacing this method as the way to extend its description.
    app.openapi = described  # type: ignore[method-assign]  # the way FastAPI documents for extending it


def _request_schemas() -> dict[str, Any]:
    _, found = models_json_schema(
        [
            (DesignRequest, "validation"),
            (BatchRequest, "validation"),
            (BandChoice, "validation"),
            (WhatIfRequest, "validation"),
        ],
        ref_template=_REF,
    )
    schemas: dict[str, Any] = {f"Asked{name}": each for name, each in found["$defs"].items()}
    bands = {
        "description": "Bands with edges, choices from ready-made lists, or such choices as text",
        "anyOf": [
            _BAND_TEXT,
            {"$ref": _REF.format(model="BandChoice")},
            {
                "type": "array",
                "minItems": 1,
                "items": {
                    "anyOf": [
                        {"$ref": _REF.format(model="Band")},
                        {"$ref": _REF.format(model="BandChoice")},
                        _BAND_TEXT,
                    ]
                },
            },
        ],
    }
    for name in ("AskedDesignRequest", "AskedWhatIfRequest"):
        schemas[name]["properties"]["bands"] = bands
    return schemas


def _event_schemas() -> dict[str, Any]:
    """What server-sent events carry, which OpenAPI 3.1 cannot tie to the stream itself."""
    _, found = models_json_schema(
        [(Batch, "serialization"), (Change, "serialization"), (Snapshot, "serialization")],
        ref_template="#/components/schemas/{model}",
    )
    schemas: dict[str, Any] = found["$defs"]
    return schemas


def _problem_schemas() -> dict[str, Any]:
    problem = Problem.model_json_schema(ref_template="#/components/schemas/{model}")
    inner: dict[str, Any] = problem.pop("$defs")
    return inner | {"Problem": problem}
