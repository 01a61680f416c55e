"""A run that allows no skips, as the checks of every change do."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest

CHECKOUT = Path(__file__).parents[2]
TESTS = """
import pytest

def test_that_is_skipped():
    pytest.skip("no server")

def test_that_is_expected_to_fail():
    pytest.xfail("known")
"""


def test_a_skip_fails_a_run_that_allows_none_and_is_named(tmp_path: Path) -> None:
    (tmp_path / "test_it.py").write_text(TESTS)
    (tmp_path / "pytest.ini").write_text("[pytest]\n")
    command = [sys.executable, "-m", "pytest", "-p", "tests.conftest", "-p", "no:cacheprovider"]
    run = subprocess.run(
        [*command, "-c", tmp_path / "pytest.ini", "--no-skips", tmp_path / "test_it.py"],
        cwd=CHECKOUT,
        capture_output=True,
        text=True,
        check=False,
    )
    assert run.returncode == pytest.ExitCode.TESTS_FAILED
    _, title, named = run.stdout.partition("does not allow")
    assert title
    assert "test_it.py::test_that_is_skipped" in named
    assert "test_that_is_expected_to_fail" not in named
