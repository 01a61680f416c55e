"""The long form: a thousand jobs, three workers, faults at random; tables of what followed.

    python -m tests.chaos --form both --jobs 1000 --seed 7

Ends with status 1 if any promise was broken.
"""

from __future__ import annotations

import argparse
import secrets
import shutil
import sys
import tempfile
from pathlib import Path
from typing import Final, cast

from rich.console import Console
from rich.table import Table

from tests.chaos.course import MARGIN_S, Course, Report, run
from tests.chaos.workers import Form

_FORMS: Final[tuple[Form, ...]] = ("celery", "embedded")
_FAULTS_OF_EACH: Final = 4


def main() -> None:
    """Run what the command line asks for."""
    parser = argparse.ArgumentParser(prog="python -m tests.chaos", description=__doc__)
    parser.add_argument("--form", choices=(*_FORMS, "both"), default="both")
    parser.add_argument("--jobs", type=int, default=1000)
    parser.add_argument("--seed", type=int, default=secrets.randbelow(10_000))
    parser.add_argument("--faults", type=int, default=_FAULTS_OF_EACH, help="of each kind")
    parser.add_argument("--lease-s", type=float, default=5.0)
    given = parser.parse_args()
    out = Console(width=100)
    forms = _FORMS if given.form == "both" else (cast("Form", given.form),)
    broken = False
    for form in forms:
        course = Course(form, given.jobs, given.seed, given.faults, lease_s=given.lease_s)
        folder = Path(tempfile.mkdtemp(prefix="spanwright-chaos-"))
        out.print(f"{form}: {course.jobs} jobs, seed {course.seed}, log in {folder}")
        report = run(course, folder)
        _show(out, report)
        if report.violations:
            broken = True
        else:
            shutil.rmtree(folder)
    sys.exit(1 if broken else 0)


def _show(out: Console, report: Report) -> None:
    table = Table("fault", "after job", "next result, s", "its jobs claimed again, s")
    for each in report.told:
        again = "" if each.claimed_again_s is None else f"{each.claimed_again_s:.2f}"
        table.add_row(each.what, str(each.at_job), f"{each.stored_s:.2f}", again)
    out.print(table)
    course, verdict = report.course, report.verdict
    out.print(
        f"{verdict.accepted} accepted, {verdict.done} done, {verdict.executions} executions, "
        f"{verdict.refused_late} late results refused, store away for the submitter "
        f"{report.store_away} times, {report.took_s:.0f} s"
    )
    out.print(f"asked: moving again within {course.lease_s + MARGIN_S:.0f} s; 0 lost; 0 twice")
    for violation in report.violations:
        out.print(f"BROKEN: {violation}", style="bold red", markup=False)
    if not report.violations:
        out.print("every promise was kept")


if __name__ == "__main__":
    main()
