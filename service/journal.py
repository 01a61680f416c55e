"""The journal: what a process tells of itself, as lines for people or as JSON for machines.

Modules log through `logging` as ever. Entry points call `set_up` once; whoever takes up a job or
a request says so by `bound`, and every line told meanwhile carries it. Passwords of the settings
are blotted out of whatever is told.
"""

from __future__ import annotations

import json
import logging
import re
import sys
import traceback
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from contextvars import ContextVar
from datetime import UTC, datetime
from types import MappingProxyType
from typing import Any, Final, TextIO
from urllib.parse import unquote, urlsplit

from service.settings import Settings

_NOTHING: Final[Mapping[str, object]] = MappingProxyType({})
_bound: ContextVar[Mapping[str, object]] = ContextVar("journal", default=_NOTHING)

#: Attributes that every record has; others were given by ``extra`` and are told.
_OWN: Final = frozenset(vars(logging.makeLogRecord({}))) | {"message", "asctime", "taskName"}
_BLOT: Final = "***"
#: A password within an address, whoever's it is.
_IN_ADDRESS: Final = re.compile(r"(\w://[^\s/:@]*):[^\s/@]+@")
#: A shorter password is a part of many words, and is only looked for within addresses.
_SHORTEST_SECRET: Final = 6
#: What could move a terminal's cursor, or pass for another line.
_CONTROL: Final = re.compile(r"[\x00-\x08\x0b-\x1f\x7f-\x9f]")

#: Libraries that tell more than anybody asked for.
_QUIET: Final = ("alembic", "httpx", "httpcore")


@contextmanager
def bound(**what: object) -> Iterator[None]:
    """Have every line told within the context carry what is given, where it is not None.

    Threads begun meanwhile carry it only if they run in a copy of the context.
    """
    given = {name: value for name, value in what.items() if value is not None}
    token = _bound.set({**_bound.get(), **given})
    try:
        yield
    finally:
        _bound.reset(token)


def set_up(settings: Settings) -> None:
    """Have the whole process log in the form of the settings, on standard error."""
    told = handler(settings, sys.stderr)
    logging.basicConfig(handlers=[told], level=settings.least_level, force=True)
    for name in _QUIET:
        logging.getLogger(name).setLevel(logging.WARNING)
    # What a library warns of goes the same way.
    logging.captureWarnings(capture=True)


def handler(settings: Settings, stream: TextIO) -> logging.Handler:
    """What writes records to a stream in the form of the settings, without their passwords."""
    secrets = _passwords(settings.database_url, settings.redis_url)
    writer = logging.StreamHandler(stream)
    writer.setFormatter(_Json(secrets) if settings.log_format == "json" else _Plain(secrets))
    return writer


class _Blotting(logging.Formatter):
    """What both forms share: they tell nothing secret."""

    def __init__(self, secrets: tuple[str, ...]) -> None:
        super().__init__()
        self._secrets = secrets

    def blotted(self, text: str) -> str:
        for secret in self._secrets:
            text = text.replace(secret, _BLOT)
        return _IN_ADDRESS.sub(rf"\1:{_BLOT}@", text)


class _Json(_Blotting):
    """One JSON object a line."""

    def format(self, record: logging.LogRecord) -> str:
        told: dict[str, object] = {
            "time": _moment(record).isoformat(timespec="milliseconds"),
            "level": record.levelname.lower(),
            "logger": record.name,
            "event": record.getMessage(),
            "process": record.process,
        }
        told |= {name: value for name, value in _carried(record).items() if name not in told}
        if record.exc_info:
            told["exception"] = _trace(record)
        # Before they are written as JSON, in which a secret may look otherwise.
        plain = {name: self._plain(value) for name, value in told.items()}
        return json.dumps(plain, ensure_ascii=False)

    def _plain(self, value: object) -> object:
        return value if isinstance(value, int | float | None) else self.blotted(str(value))


class _Plain(_Blotting):
    """A line to read: time, level, event, and what it carries in brackets."""

    def format(self, record: logging.LogRecord) -> str:
        moment = _moment(record).astimezone().strftime("%Y-%m-%d %H:%M:%S")
        told = f"{moment} {record.levelname.lower()}: {record.getMessage()}"
        carried = " ".join(f"{name}={value}" for name, value in _carried(record).items())
        if carried:
            told += f" [{carried}]"
        if record.exc_info:
            told += f"\n{_trace(record)}"
        # Indented, so that nothing that was sent to us can pass for a line of ours.
        return _CONTROL.sub("?", self.blotted(told)).replace("\n", "\n    ")


def _carried(record: logging.LogRecord) -> Mapping[str, object]:
    given = {name: value for name, value in vars(record).items() if name not in _OWN}
    return {**_bound.get(), **given}


def _moment(record: logging.LogRecord) -> datetime:
    return datetime.fromtimestamp(record.created, UTC)


def _trace(record: logging.LogRecord) -> str:
    error: Any = record.exc_info
    return "".join(traceback.format_exception(*error)).rstrip()


def _passwords(*addresses: str | None) -> tuple[str, ...]:
    """Passwords within addresses, as written there and as they are meant."""
    found = {urlsplit(address).password for address in addresses if address}
    written = {each for each in found if each and len(each) >= _SHORTEST_SECRET}
    # The longest first, for one may hold another.
    return tuple(sorted(written | set(map(unquote, written)), key=len, reverse=True))
