"""From a broken contract to faults that name the field, the value and the remedy."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from pydantic import ValidationError
from pydantic_core import ErrorDetails, PydanticCustomError

from service.errors import Fault, RequestRefused

_LONGEST_VALUE = 80

# What to do about the faults pydantic finds by itself; context fills the braces.
_REMEDIES: Mapping[str, str] = {
    "missing": "Add this field.",
    "extra_forbidden": "Remove this field, or check its spelling.",
    "greater_than": "Give a value above {gt}.",
    "greater_than_equal": "Give a value of at least {ge}.",
    "less_than": "Give a value below {lt}.",
    "less_than_equal": "Give a value of at most {le}.",
    "string_too_short": "Give at least {min_length} character(s).",
    "string_too_long": "Give at most {max_length} characters.",
    "too_short": "Give at least {min_length} entry(ies).",
    "too_long": "Give at most {max_length} entries.",
    "literal_error": "Choose one of {expected}.",
    "float_parsing": "Give a number, for example 14.2.",
    "float_type": "Give a number, for example 14.2.",
    "int_parsing": "Give a whole number.",
    "int_type": "Give a whole number.",
    "int_from_float": "Give a whole number.",
    "finite_number": "Give a finite number.",
    "bool_parsing": "Give true or false.",
    "bool_type": "Give true or false.",
    "string_type": "Give a text.",
    "model_type": "Give an object with named fields.",
    "model_attributes_type": "Give an object with named fields.",
    "dict_type": "Give an object with named fields.",
    "list_type": "Give a list.",
    "tuple_type": "Give a list.",
    "json_invalid": "Send well-formed JSON (RFC 8259).",
}


#: Where pydantic's own words would only repeat the remedy.
_REASONS: Mapping[str, str] = {"literal_error": "this is none of the choices."}


def rule_broken(
    code: str, reason: str, remedy: str, *, field: str = "", value: object = None
) -> PydanticCustomError:
    """Build the error a validator raises when one of our own rules is broken.

    Parameters
    ----------
    code : str
        Stable short name of the rule.
    reason, remedy : str
        Sentences for the planner.
    field : str
        Path below the validated object, where the fault sits deeper than the validator.
    value : object
        What was given there; by default the validated object itself.
    """
    # The sentence is filled in from the context, so that braces in it stay braces.
    context = {"remedy": remedy, "reason": reason, "field": field, "value": value}
    return PydanticCustomError("rule:" + code, "{reason}", context)


def faults_of(error: ValidationError) -> tuple[Fault, ...]:
    """Translate pydantic's findings into our faults, in the order found."""
    found = [_fault(detail) for detail in error.errors(include_url=False)]
    # An entry that was refused is missing from its list, which pydantic then finds short.
    return tuple(
        fault
        for fault in found
        if fault.code != "too-short" or not any(_lies_below(other, fault) for other in found)
    )


def refusal_of(error: ValidationError) -> RequestRefused:
    """The refusal that carries all faults of a validation error."""
    return RequestRefused(faults_of(error))


def _fault(detail: ErrorDetails) -> Fault:
    context: Mapping[str, Any] = detail.get("ctx", {})
    kind = detail["type"]
    path = _path(detail["loc"])
    value = "" if kind == "missing" else _shown(detail.get("input"))
    if kind.startswith("rule:"):
        deeper = context["field"]
        joint = "." if path and deeper and not deeper.startswith("[") else ""
        if context["value"] is not None:
            value = _shown(context["value"])
        code = kind.removeprefix("rule:")
        where = path + joint + deeper or "request"
        return Fault(where, value, context["reason"], context["remedy"], code)
    template = _REMEDIES.get(kind, "Correct this field and send the request again.")
    return Fault(
        path or "request",
        value,
        _REASONS.get(kind) or _sentence(detail["msg"]),
        template.format(**context) if "{" in template else template,
        kind.replace("_", "-"),
    )


def _lies_below(inner: Fault, outer: Fault) -> bool:
    return inner.field.startswith((outer.field + "[", outer.field + "."))


def _path(location: tuple[int | str, ...]) -> str:
    text = ""
    for part in location:
        if isinstance(part, int):
            text += f"[{part}]"
        elif part.startswith("~"):
            # Tags of a discriminated union are ours, not the planner's.
            continue
        else:
            text += f".{part}" if text else part
    return text


def _shown(value: object) -> str:
    if isinstance(value, bytes):  # text that is no JSON, and may be very long
        value = value[: 4 * _LONGEST_VALUE].decode(errors="replace")
    text = value if isinstance(value, str) else repr(value)
    return text if len(text) <= _LONGEST_VALUE else text[: _LONGEST_VALUE - 1] + "…"


def _sentence(message: str) -> str:
    message = message[:1].lower() + message[1:]
    return message if message.endswith(".") else message + "."
