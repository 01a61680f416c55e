"""The short form of the chaos test: every kind of fault once, in the midst of work."""

from __future__ import annotations

from pathlib import Path

import pytest

from tests.chaos.course import Course, Report, run
from tests.chaos.workers import Form
from tests.service.servers import ServerMissing


def ran(form: Form, folder: Path) -> Report:
    course = Course(
        form,
        jobs=40,
        seed=4,
        faults_of_each=1,
        lease_s=1.5,
        sweep_s=0.3,
        longest_outage_s=1.5,
        most_waiting=12,
        processes=1,
    )
    try:
        return run(course, folder)
    except ServerMissing as missing:
        pytest.skip(str(missing))


@pytest.mark.parametrize(("form", "faults"), [("embedded", 4), ("celery", 6)])
def test_whatever_fails_every_job_is_done_and_stored_once(
    form: Form, faults: int, tmp_path: Path
) -> None:
    report = ran(form, tmp_path)
    assert report.violations == ()
    assert report.verdict.done == report.verdict.accepted >= report.course.jobs
    assert len(report.told) == faults
    # The worker that was frozen handed in too late, or the freezing has tested nothing.
    assert report.verdict.refused_late >= 1
