"""Private servers for tests: PostgreSQL on a socket in a folder of its own, Redis on loopback."""

from __future__ import annotations

import os
import pwd
import shutil
import signal
import socket
import subprocess
import tempfile
import time
import uuid
from collections.abc import Callable, Iterable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path
from types import TracebackType
from typing import Any, Final, Self

import psycopg
import redis
from sqlalchemy import URL, make_url

_START_PATIENCE_S: Final = 60.0
_STOP_PATIENCE_S: Final = 30.0


class ServerMissing(Exception):
    """The programs for a server are missing; the message says what to install."""


# --------------------------------------------------------------------- PostgreSQL
class PostgresServer:
    """A PostgreSQL server; a private one can be stopped as if it had crashed, and started."""

    def __init__(self, url: URL, command: list[str], account: dict[str, Any], log: Path) -> None:
        self.url = url
        self._command, self._account, self._log = command, account, log
        self._process: subprocess.Popen[bytes] | None = None

    @classmethod
    @contextmanager
    def named(cls, url: str) -> Iterator[Self]:
        """The server the environment names."""
        yield cls(make_url(url), [], {}, Path(os.devnull))

    def start(self) -> None:
        """Start it and wait until it answers."""
        with self._log.open("ab") as log:
            self._process = subprocess.Popen(
                self._command, stdout=log, stderr=log, start_new_session=True, **self._account
            )
        _await(self._answers, self._process, self._log)

    def stop(self, how: signal.Signals = signal.SIGINT) -> None:
        """Stop it: SIGINT is its fast shutdown, SIGQUIT its immediate one, as in a crash."""
        if self._process is not None:
            self._process.send_signal(how)
            self._process.wait(_STOP_PATIENCE_S)
            self._process = None

    def execute(self, statement: str) -> None:
        """Run one statement outside any transaction."""
        text = self.url.set(drivername="postgresql").render_as_string(hide_password=False)
        with psycopg.connect(text, autocommit=True) as connection:
            connection.execute(statement.encode())

    def _answers(self) -> bool:
        try:
            self.execute("SELECT 1")
        except psycopg.OperationalError:
            return False
        return True


@contextmanager
def private_postgres() -> Iterator[PostgresServer]:
    """Start a PostgreSQL of our own, away from every other; it ends with the context."""
    programs = _postgres_programs()
    account, uid, gid = _unprivileged()
    # Not pytest's own folder: the server's account may not enter that one.
    folder = Path(tempfile.mkdtemp(prefix="spanwright-pg-"))
    try:
        data = folder / "data"
        data.mkdir()
        if uid is not None:
            for path in (folder, data):
                os.chown(path, uid, gid)
        subprocess.run(
            [
                programs / "initdb",
                f"--pgdata={data}",
                "--username=spanwright",
                "--auth=trust",
                "--encoding=UTF8",
                "--locale=C",
                "--no-sync",
                "--no-instructions",
            ],
            check=True,
            stdout=subprocess.DEVNULL,
            cwd="/",
            **account,
        )
        # A crash of the server is tested, one of the machine is not, so fsync only costs time.
        options = {"listen_addresses": "", "unix_socket_directories": str(folder), "fsync": "off"}
        command = [str(programs / "postgres"), "-D", str(data)]
        for name, value in options.items():
            command += ["-c", f"{name}={value}"]
        url = URL.create(
            "postgresql+psycopg", "spanwright", database="postgres", query={"host": str(folder)}
        )
        server = PostgresServer(
            url, ended_with_us(command), {**account, "cwd": "/"}, folder / "server.log"
        )
        server.start()
        try:
            yield server
        finally:
            server.stop()
    finally:
        shutil.rmtree(folder)


@contextmanager
def fresh_database(server: PostgresServer, template: str = "template0") -> Iterator[str]:
    """A database that exists as long as the context; yields its URL."""
    name = f"spanwright_test_{uuid.uuid4().hex[:12]}"
    # Copying files is quicker than writing every page of the template to the log.
    server.execute(f'CREATE DATABASE "{name}" TEMPLATE "{template}" STRATEGY file_copy')
    try:
        url = server.url.set(drivername="postgresql+psycopg", database=name)
        yield url.render_as_string(hide_password=False)
    finally:
        server.execute(f'DROP DATABASE "{name}" WITH (FORCE)')


def empty(database_url: str, tables: Iterable[str]) -> None:
    """Empty tables; whoever still holds a lock on them is a test that did not clean up."""
    url = make_url(database_url).set(drivername="postgresql")
    with psycopg.connect(url.render_as_string(hide_password=False)) as connection:
        connection.execute("SET lock_timeout = '5s'")
        connection.execute(f"TRUNCATE {', '.join(tables)}".encode())


def _postgres_programs() -> Path:
    found = shutil.which("postgres")
    places = [] if found is None else [Path(found).resolve().parent]
    versions = Path("/usr/lib/postgresql").glob("*/bin")
    places += sorted(versions, key=lambda place: int(place.parent.name), reverse=True)
    for place in places:
        if (place / "postgres").exists() and (place / "initdb").exists():
            return place
    raise ServerMissing("PostgreSQL is missing: install it (Debian: apt-get install postgresql)")


def _unprivileged() -> tuple[dict[str, Any], int | None, int]:
    """Arguments of subprocess for an account PostgreSQL agrees to run under; it refuses root."""
    if os.geteuid() != 0:
        return {}, None, 0
    for name in ("postgres", "nobody"):
        try:
            entry = pwd.getpwnam(name)
        except KeyError:
            continue
        account = {"user": entry.pw_uid, "group": entry.pw_gid, "extra_groups": []}
        return account, entry.pw_uid, entry.pw_gid
    raise ServerMissing("PostgreSQL does not run as root, and there is no account 'nobody'")


# -------------------------------------------------------------------------- Redis
@dataclass(slots=True)
class RedisServer:
    """A Redis server that keeps nothing on disk, so that it comes back empty."""

    program: str
    port: int
    log: Path
    process: subprocess.Popen[bytes] | None = field(default=None, init=False)

    @property
    def url(self) -> str:
        """Where it listens."""
        return f"redis://127.0.0.1:{self.port}/0"

    def start(self) -> None:
        """Start it, empty, and wait until it answers."""
        command = [self.program, "--port", str(self.port), "--bind", "127.0.0.1", "--save", ""]
        with self.log.open("ab") as log:
            self.process = subprocess.Popen(
                ended_with_us([*command, "--appendonly", "no"]),
                stdout=log,
                stderr=log,
                cwd=self.log.parent,
                start_new_session=True,
            )
        _await(self._answers, self.process, self.log)

    def send(self, how: signal.Signals) -> None:
        """Freeze it or wake it."""
        if self.process is not None:
            self.process.send_signal(how)

    def kill(self) -> None:
        """Kill it at once; what it held is gone."""
        if self.process is not None:
            self.process.kill()
            self.process.wait(_STOP_PATIENCE_S)
            self.process = None

    def __enter__(self) -> Self:
        """Itself; it runs already."""
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        """Kill it and take its folder away."""
        self.kill()
        shutil.rmtree(self.log.parent)

    def _answers(self) -> bool:
        client = redis.Redis(port=self.port, socket_timeout=1.0)
        try:
            client.ping()
        except redis.RedisError:
            return False
        finally:
            client.close()
        return True


def private_redis() -> RedisServer:
    """A Redis of our own on a free port of the loopback, started."""
    program = shutil.which("redis-server")
    if program is None:
        raise ServerMissing("Redis is missing: install it (Debian: apt-get install redis-server)")
    with socket.create_server(("127.0.0.1", 0)) as probe:
        port: int = probe.getsockname()[1]
    server = RedisServer(program, port, Path(tempfile.mkdtemp(prefix="spanwright-redis-")) / "log")
    server.start()
    return server


# --------------------------------------------------------------------------- both
def ended_with_us(command: list[str]) -> list[str]:
    """The command, ended with us even if we are killed, where the machine can do that."""
    setpriv = shutil.which("setpriv")
    return command if setpriv is None else [setpriv, "--pdeathsig", "KILL", "--", *command]


def _await(answers: Callable[[], bool], process: subprocess.Popen[bytes], log: Path) -> None:
    until = time.monotonic() + _START_PATIENCE_S
    while not answers():
        if process.poll() is not None or time.monotonic() > until:
            raise RuntimeError(f"the server did not start:\n{log.read_text(errors='replace')}")
        time.sleep(0.02)
