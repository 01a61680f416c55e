"""A running service over a private SQLite, and designs in every state in its store."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import httpx
import pytest

from service.api.app import create_app
from service.doorbell import Doorbell
from service.intake import submit
from service.settings import Settings
from service.store import jobs
from service.store.session import Store, open_store
from tests.service.pages import finished
from tests.service.samples import FULL, sample_planned, sample_request
from tests.service.serving import served


@dataclass(frozen=True, slots=True)
class Stored:
    """Identifiers of one design in each state."""

    done: str
    running: str
    queued: str
    cancelled: str


@pytest.fixture(scope="module")
def wire_settings(tmp_path_factory: pytest.TempPathFactory) -> Settings:
    folder: Path = tmp_path_factory.mktemp("wire")
    return Settings(database_url=f"sqlite:///{folder / 'wire.db'}", redis_url=None)


@pytest.fixture(scope="module")
def wire_store(wire_settings: Settings) -> Iterator[Store]:
    store = open_store(wire_settings)
    yield store
    store.close()


@pytest.fixture(scope="module")
def stored(wire_settings: Settings, wire_store: Store) -> Stored:
    """Designs that are in the store before anything is asked of it."""

    def submitted(name: str) -> str:
        request = sample_request(name=name)
        return submit(wire_store, Doorbell(wire_settings), request, None).design_id

    def claimed(name: str) -> tuple[str, jobs.ClaimedJob]:
        design_id = submitted(name)
        job = jobs.claim(wire_store, "worker of the tests", lease_s=600.0)
        assert job is not None
        assert job.design_id == design_id
        return design_id, job

    done, job = claimed("Invented station")
    assert jobs.finish(wire_store, job, sample_planned(job.request))
    running, _ = claimed("Running design")
    cancelled = submitted("Cancelled design")
    jobs.cancel(wire_store, cancelled)
    return Stored(done, running, submitted("Queued design"), cancelled)


@pytest.fixture(scope="module")
def wire(wire_settings: Settings, wire_store: Store, stored: Stored) -> Iterator[httpx.Client]:
    """A client of the application, served by uvicorn on a free port of the loopback."""
    del stored  # it is there first, so that claims find it alone
    with served(create_app(wire_settings, wire_store)) as client:
        yield client


@pytest.fixture(scope="module")
def hung_candidate(wire_store: Store, wire_settings: Settings, stored: Stored) -> str:
    """The address of a candidate of a design whose request says everything."""
    del stored
    request = sample_request(**FULL)
    design_id = finished(wire_store, wire_settings, request, sample_planned(request))
    return f"/designs/{design_id}/candidates/1"


@pytest.fixture(scope="module")
def hung_report(wire: httpx.Client, hung_candidate: str) -> dict[str, Any]:
    """Its report as the API gives it."""
    found: dict[str, Any] = wire.get(f"/v1{hung_candidate}/report").json()
    return found
