"""The compose file, by its structure, and the commands that only containers run.

What may stand in such a file is from the Compose Specification (compose-spec.io); there is no
container engine here, so that the file is read and its commands are run without one.
"""

from __future__ import annotations

import os
import re
import socket
import subprocess
import sys
from contextlib import closing
from pathlib import Path
from typing import Any, Final

import pytest
import yaml
from sqlalchemy import make_url

from service.api.app import create_app
from service.settings import Settings
from service.store import workers
from service.store.connection import make_engine
from service.store.session import Store
from tests.service.databases import environment
from worker.cli.commands import app as cli

CHECKOUT: Final = Path(__file__).parents[2]
COMPOSE: Final[dict[str, Any]] = yaml.safe_load((CHECKOUT / "docker-compose.yml").read_text())
SERVICES: Final[dict[str, dict[str, Any]]] = COMPOSE["services"]
OURS: Final = ("migrations", "api", "worker")


# ------------------------------------------------------------------- the compose file
def test_the_services_are_those_of_the_scaled_form() -> None:
    assert set(SERVICES) == {*OURS, "postgres", "redis"}


@pytest.mark.parametrize("name", SERVICES)
def test_a_service_runs_hardened_and_not_as_root(name: str) -> None:
    service = SERVICES[name]
    assert str(service["user"]).partition(":")[0] not in ("", "0", "root")
    assert service["read_only"] is True
    assert service["cap_drop"] == ["ALL"]
    assert "no-new-privileges:true" in service["security_opt"]


@pytest.mark.parametrize("name", sorted(set(SERVICES) - {"migrations"}))
def test_whatever_stays_up_is_restarted_and_its_health_is_checked(name: str) -> None:
    assert SERVICES[name]["restart"] == "unless-stopped"
    assert SERVICES[name]["healthcheck"]["test"][0] == "CMD"


def test_what_serves_or_works_waits_for_the_migrations() -> None:
    for name in ("api", "worker"):
        assert SERVICES[name]["depends_on"] == {
            "migrations": {"condition": "service_completed_successfully"},
            "postgres": {"condition": "service_healthy"},
            "redis": {"condition": "service_healthy"},
        }


def test_a_worker_can_be_scaled() -> None:
    # A fixed name or a published port would allow one only.
    assert not {"container_name", "hostname", "ports"} & SERVICES["worker"].keys()


def test_only_the_api_is_published_and_to_this_machine_only() -> None:
    published = {name: service["ports"] for name, service in SERVICES.items() if "ports" in service}
    assert published == {"api": [f"127.0.0.1:{Settings().port}:{Settings().port}"]}


def test_no_secret_is_in_the_file() -> None:
    text = (CHECKOUT / "docker-compose.yml").read_text()
    assert not re.search(r"://[^\s/@]*:[^\s/@]+@", text)
    for service in SERVICES.values():
        for variable in service.get("environment", {}):
            assert "PASSWORD" not in variable or variable.endswith("_FILE")


def test_the_password_is_a_file_that_git_passes_over() -> None:
    folder = Path(COMPOSE["secrets"]["db-password"]["file"]).parent
    assert f"{folder}/" in (CHECKOUT / ".gitignore").read_text().splitlines()
    for name in (*OURS, "postgres"):
        assert SERVICES[name]["secrets"] == ["db-password"]


@pytest.mark.parametrize("name", OURS)
def test_the_environment_of_our_services_is_made_of_settings(name: str, tmp_path: Path) -> None:
    given = {
        variable.removeprefix("SPANWRIGHT_").lower(): value
        for variable, value in SERVICES[name]["environment"].items()
    }
    assert set(given) <= set(Settings.model_fields)
    file = tmp_path / "password"
    file.write_text("p@ss/word: %41\n")
    settings = Settings.model_validate(given | {"database_password_file": file})
    url = make_url(settings.database_url)
    assert (url.username, url.password, url.host) == (
        "spanwright",
        "p@ss/word: %41",
        "postgres",
    )


def test_commands_name_what_there_is() -> None:
    assert SERVICES["migrations"]["command"] == ["python", "-m", "service.migrate"]
    assert SERVICES["worker"]["command"][:4] == ["celery", "--app", "worker.celery_app", "worker"]
    assert SERVICES["worker"]["healthcheck"]["test"][-1] == "service.worker_alive"
    name, command, option = SERVICES["api"]["command"]
    assert name == "spanwright"
    commands = [getattr(each.callback, "__name__", "") for each in cli.registered_commands]
    assert command in commands
    assert option == "--no-workers"
    looked_at = re.search(r"127\.0\.0\.1:\d+(/[\w/]+)", SERVICES["api"]["healthcheck"]["test"][-1])
    assert looked_at is not None
    routes = create_app(Settings()).openapi()["paths"]
    assert looked_at[1] in routes


# ------------------------------------------------------------ what only containers run
def run(module: str, settings: Settings) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, "-m", module],
        cwd=CHECKOUT,
        env=os.environ | environment(settings),
        capture_output=True,
        text=True,
        check=False,
    )


def test_migrating_brings_an_empty_database_up_to_date(empty_database_url: str) -> None:
    settings = Settings(database_url=empty_database_url)
    ran = run("service.migrate", settings)
    assert ran.returncode == 0, ran.stderr
    assert "is at revision" in ran.stdout
    # Not opened as elsewhere, which would migrate by itself.
    with closing(Store(make_engine(empty_database_url), 1.0)) as store:
        assert workers.alive(store) == []


def test_migrating_what_cannot_be_migrated_fails_in_words(tmp_path: Path) -> None:
    away = Settings(database_url=f"sqlite:///{tmp_path}")
    ran = run("service.migrate", away.model_copy(update={"database_password_file": tmp_path}))
    assert ran.returncode == 1
    assert "SPANWRIGHT_DATABASE_PASSWORD_FILE" in ran.stderr
    assert "Traceback" not in ran.stderr


def test_a_worker_of_this_machine_is_seen_until_it_says_goodbye(
    store: Store, settings: Settings
) -> None:
    def announce(name: str, host: str) -> None:
        workers.announce(store, name, host=host, pid=1, carrier="celery", engine_version="1")

    announce("elsewhere", "another machine")
    gone = run("service.worker_alive", settings)
    assert gone.returncode == 1
    assert "No worker" in gone.stderr
    announce("here", socket.gethostname())
    seen = run("service.worker_alive", settings)
    assert seen.returncode == 0, seen.stderr
    assert "here" in seen.stdout
    workers.goodbye(store, "here")
    assert run("service.worker_alive", settings).returncode == 1
