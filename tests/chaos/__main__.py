"""The long form: a thousand jobs, three workers, faults at random; tables of what followed.

    python -m tests.chaos --form all --jobs 1000 --seed 7

The forms are ``celery`` on PostgreSQL and Redis, ``embedded`` on SQLite, and ``sender``: five
requests a job, sent by a process that is killed and sends again, on either database. It ends
with status 1 if any promise was broken.
"""

from __future__ import annotations

import argparse
import secrets
import shutil
import sys
import tempfile
from contextlib import closing
from pathlib import Path
from typing import Final, cast

from rich.console import Console
from rich.table import Table

from service.settings import Settings
from service.store.session import open_store
from tests.chaos.course import MARGIN_S, Course, Report, run
from tests.chaos.killed_sender import send
from tests.chaos.workers import Form
from tests.service.servers import fresh_database, private_postgres

_FORMS: Final[tuple[Form, ...]] = ("celery", "embedded")
_FAULTS_OF_EACH: Final = 4
_REQUESTS_A_JOB: Final = 5
_KILLS: Final = 8


def main() -> None:
    """Run what the command line asks for."""
    parser = argparse.ArgumentParser(prog="python -m tests.chaos", description=__doc__)
    parser.add_argument("--form", choices=(*_FORMS, "sender", "all"), default="all")
    parser.add_argument("--jobs", type=int, default=1000)
    parser.add_argument("--seed", type=int, default=secrets.randbelow(10_000))
    parser.add_argument("--faults", type=int, default=_FAULTS_OF_EACH, help="of each kind")
    parser.add_argument("--lease-s", type=float, default=5.0)
    parser.add_argument("--job-s", type=float, default=0.2, help="of a core, in the mean")
    given = parser.parse_args()
    out = Console(width=100)
    kept = [_kept(out, form, given) for form in (*_FORMS, "sender") if given.form in (form, "all")]
    sys.exit(0 if all(kept) else 1)


def _kept(out: Console, form: str, given: argparse.Namespace) -> bool:
    """Run one form; whether every promise was kept. What it leaves is removed only then."""
    folder = Path(tempfile.mkdtemp(prefix="spanwright-chaos-"))
    out.print(f"{form}: {given.jobs} jobs, seed {given.seed}, kept in {folder}")
    if form == "sender":
        violations = _send(out, _REQUESTS_A_JOB * given.jobs, given.seed, folder)
    else:
        course = Course(
            cast("Form", form),
            given.jobs,
            given.seed,
            given.faults,
            lease_s=given.lease_s,
            job_s=given.job_s,
        )
        report = run(course, folder)
        _show(out, report)
        violations = report.violations
    for violation in violations:
        out.print(f"BROKEN: {violation}", style="bold red", markup=False)
    if not violations:
        out.print("every promise was kept")
        shutil.rmtree(folder)
    return not violations


def _send(out: Console, number: int, seed: int, folder: Path) -> tuple[str, ...]:
    violations: list[str] = []
    with private_postgres() as server, fresh_database(server) as postgres_url:
        for kind, url in (
            ("sqlite", f"sqlite:///{folder / 'spanwright.db'}"),
            ("postgresql", postgres_url),
        ):
            settings = Settings(database_url=url, redis_url=None)
            (folder / kind).mkdir()
            with closing(open_store(settings)) as store:
                sent = send(store, settings, number, _KILLS, seed, folder / kind)
            out.print(
                f"{kind}: {number} requests, sender killed {_KILLS} times, "
                f"{sent.acceptances} acceptances, {sent.stored} designs stored"
            )
            violations += sent.violations
    return tuple(violations)


def _show(out: Console, report: Report) -> None:
    table = Table("fault", "after job", "next result, s", "its jobs free again, s")
    for each in report.told:
        freed = "" if each.freed_s is None else f"{each.freed_s:.2f}"
        table.add_row(each.what, str(each.at_job), f"{each.stored_s:.2f}", freed)
    out.print(table)
    course, verdict = report.course, report.verdict
    out.print(
        f"{verdict.accepted} accepted, {verdict.done} done, {verdict.executions} executions, "
        f"{verdict.refused_late} late results refused, store away for the submitter "
        f"{report.store_away} times, {report.took_s:.0f} s"
    )
    out.print(f"asked: moving again within {course.lease_s + MARGIN_S:.0f} s; 0 lost; 0 twice")


if __name__ == "__main__":
    main()
