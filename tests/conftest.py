"""What every test may ask for: both databases, a broker, and a run that allows no skips.

A server is the one the environment names, or a private one started from the programs
installed; where there is neither, the tests that need it are skipped and the reason says what
to install.
"""

from __future__ import annotations

import os
from collections.abc import Iterator
from pathlib import Path

import pytest
from sqlalchemy import make_url

from service.settings import Settings
from service.store.session import Store, open_store
from service.store.tables import Base
from tests.service.databases import KINDS, database, short_lived
from tests.service.servers import (
    PostgresServer,
    RedisServer,
    ServerMissing,
    empty,
    fresh_database,
    private_postgres,
    private_redis,
)

_NO_SKIPS = "--no-skips"
_POSTGRES_URL = "SPANWRIGHT_TEST_POSTGRES_URL"
_REDIS_URL = "SPANWRIGHT_TEST_REDIS_URL"


# ------------------------------------------------------------------------- no skips
def pytest_addoption(parser: pytest.Parser) -> None:
    parser.addoption(
        _NO_SKIPS, action="store_true", help="a skipped test fails the run, as in .ci/run"
    )


def pytest_configure(config: pytest.Config) -> None:
    if config.getoption(_NO_SKIPS):
        config.pluginmanager.register(_NoSkips(), "no-skips")


class _NoSkips:
    """Remembers what was skipped, and turns a run that skipped anything into a failure."""

    def __init__(self) -> None:
        self.skipped: list[str] = []

    def pytest_runtest_logreport(self, report: pytest.TestReport) -> None:
        # An expected failure is reported as skipped too, but it did run.
        if report.skipped and not hasattr(report, "wasxfail"):
            self.skipped.append(report.nodeid)

    def pytest_collectreport(self, report: pytest.CollectReport) -> None:
        if report.skipped:
            self.skipped.append(report.nodeid)

    def pytest_sessionfinish(self, session: pytest.Session) -> None:
        if self.skipped and session.exitstatus == pytest.ExitCode.OK:
            session.exitstatus = pytest.ExitCode.TESTS_FAILED

    def pytest_terminal_summary(self, terminalreporter: pytest.TerminalReporter) -> None:
        if self.skipped:
            terminalreporter.section("skipped, which this run does not allow", red=True)
            for nodeid in self.skipped:
                terminalreporter.line(nodeid)


# -------------------------------------------------------------------------- servers
@pytest.fixture(scope="session")
def postgres() -> Iterator[PostgresServer]:
    """A PostgreSQL server on which databases may be made."""
    url = os.environ.get(_POSTGRES_URL)
    try:
        with private_postgres() if url is None else PostgresServer.named(url) as server:
            yield server
    except ServerMissing as missing:
        pytest.skip(f"{missing}, or name a server in {_POSTGRES_URL}")


@pytest.fixture
def own_postgres() -> Iterator[PostgresServer]:
    """A PostgreSQL server of the test's own, to be stopped as if it had crashed."""
    try:
        with private_postgres() as server:
            yield server
    except ServerMissing as missing:
        pytest.skip(str(missing))


@pytest.fixture(scope="session")
def redis_url() -> Iterator[str]:
    """A Redis server that is up throughout."""
    url = os.environ.get(_REDIS_URL)
    if url is not None:
        yield url
        return
    try:
        server = private_redis()
    except ServerMissing as missing:
        pytest.skip(f"{missing}, or name a server in {_REDIS_URL}")
    with server:
        yield server.url


@pytest.fixture
def own_redis() -> Iterator[RedisServer]:
    """A Redis server of the test's own, to be killed, frozen and started again."""
    try:
        server = private_redis()
    except ServerMissing as missing:
        pytest.skip(str(missing))
    with server:
        yield server


# ------------------------------------------------------------------------ databases
@pytest.fixture(scope="session")
def migrated_file(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """An SQLite file with the tables, to be copied."""
    file = tmp_path_factory.mktemp("migrated") / "spanwright.db"
    open_store(Settings(database_url=f"sqlite:///{file}")).close()
    return file


@pytest.fixture(scope="session")
def migrated_template(postgres: PostgresServer) -> Iterator[str]:
    """Name of a PostgreSQL database with the tables, to be copied."""
    with fresh_database(postgres) as url:
        open_store(Settings(database_url=url)).close()
        yield make_url(url).database or ""


@pytest.fixture(scope="session")
def shared_database(postgres: PostgresServer, migrated_template: str) -> Iterator[str]:
    """One PostgreSQL database for all tests, for emptying it is quicker than making another."""
    with fresh_database(postgres, migrated_template) as url:
        yield url


@pytest.fixture(params=KINDS)
def database_url(request: pytest.FixtureRequest, tmp_path: Path) -> Iterator[str]:
    """A database with the tables and nothing in them, on SQLite and then on PostgreSQL."""
    if request.param == "postgresql":
        url: str = request.getfixturevalue("shared_database")
        empty(url, [table.name for table in Base.metadata.sorted_tables])
        yield url
        return
    with database(request.param, request, tmp_path) as url:
        yield url


@pytest.fixture(params=KINDS)
def empty_database_url(request: pytest.FixtureRequest, tmp_path: Path) -> Iterator[str]:
    """A database without even tables, on SQLite and then on PostgreSQL."""
    with database(request.param, request, tmp_path, migrated=False) as url:
        yield url


@pytest.fixture
def settings(database_url: str) -> Settings:
    """Settings with leases so short that a test can wait for one to run out."""
    return short_lived(database_url)


@pytest.fixture
def store(settings: Settings) -> Iterator[Store]:
    """The store of those settings, without much patience."""
    store = open_store(settings, patience_s=5.0)
    yield store
    store.close()
