"""A run that allows no skips, as the checks of every change do."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest

CHECKOUT = Path(__file__).parents[2]


def run_of(test: str, folder: Path, *options: str) -> subprocess.CompletedProcess[str]:
    (folder / "test_it.py").write_text(f"import pytest\n\n\ndef test_it():\n    {test}\n")
    (folder / "pytest.ini").write_text("[pytest]\n")
    command = [sys.executable, "-m", "pytest", "-p", "tests.conftest", "-p", "no:cacheprovider"]
    return subprocess.run(
        [*command, "-c", folder / "pytest.ini", *options, folder / "test_it.py"],
        cwd=CHECKOUT,
        capture_output=True,
        text=True,
        check=False,
    )


def test_a_skip_fails_a_run_that_allows_none_and_is_named(tmp_path: Path) -> None:
    run = run_of("pytest.skip('no server')", tmp_path, "--no-skips")
    assert run.returncode == pytest.ExitCode.TESTS_FAILED
    assert "test_it.py::test_it" in run.stdout


def test_a_skip_passes_elsewhere(tmp_path: Path) -> None:
    assert run_of("pytest.skip('no server')", tmp_path).returncode == pytest.ExitCode.OK


def test_an_expected_failure_is_no_skip(tmp_path: Path) -> None:
    run = run_of("pytest.xfail('known')", tmp_path, "--no-skips")
    assert run.returncode == pytest.ExitCode.OK
