"""Databases for tests, by kind, and settings under which waiting is short."""

from __future__ import annotations

import shutil
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import pytest

from service.settings import Settings
from tests.service.servers import PostgresServer, fresh_database

KINDS = ("sqlite", "postgresql")


@contextmanager
def database(
    kind: str, request: pytest.FixtureRequest, folder: Path, *, migrated: bool = True
) -> Iterator[str]:
    """A database of a kind, with the tables or without; yields its URL."""
    if kind == "sqlite":
        file = folder / "spanwright.db"
        if migrated:
            shutil.copyfile(request.getfixturevalue("migrated_file"), file)
        yield f"sqlite:///{file}"
        return
    server: PostgresServer = request.getfixturevalue("postgres")
    template = request.getfixturevalue("migrated_template") if migrated else "template0"
    with fresh_database(server, template) as url:
        yield url


def short_lived(database_url: str, **changes: object) -> Settings:
    """Settings of a test: everything that takes time takes little."""
    plain: dict[str, object] = {
        "database_url": database_url,
        "redis_url": None,
        "workers": 2,
        "lease_s": 1.5,
        "sweep_s": 0.2,
        "progress_s": 0.05,
        "job_deadline_s": 60.0,
        "cancel_grace_s": 0.4,
    }
    return Settings.model_validate(plain | changes)


def environment(settings: Settings) -> dict[str, str]:
    """The settings as a process of its own reads them."""
    given = settings.model_dump(exclude_none=True)
    return {f"SPANWRIGHT_{name.upper()}": str(value) for name, value in given.items()}
