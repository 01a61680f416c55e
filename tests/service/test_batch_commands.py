"""Batches at the command line, against a running service."""

from __future__ import annotations

import csv
import io
import json
import threading
import time
import uuid
from collections.abc import Callable
from pathlib import Path

import httpx
import pytest

from service.contracts.batch import Batch, BatchItem
from service.store.session import Store
from tests.service.batches_sent import planned
from tests.service.samples import request_fields
from tests.unit.cli import conftest as cli

typed = cli.typed

Run = Callable[..., cli.Ended]


@pytest.fixture
def run(typed: cli.Type, wire: httpx.Client, monkeypatch: pytest.MonkeyPatch) -> Run:
    """Type a batch command to the service of the tests."""
    monkeypatch.setenv("SPANWRIGHT_SERVICE", str(wire.base_url))
    return lambda *words: typed("batch", *words)


def lines_file(folder: Path, number: int, **changes: object) -> str:
    """A file with one request a line; no two are the same, nor those of another test."""
    file = folder / "station.ndjson"
    names = [f"{index} {uuid.uuid4().hex[:8]}" for index in range(1, number + 1)]
    file.write_text("\n".join(json.dumps(request_fields(name=name, **changes)) for name in names))
    return str(file)


def test_a_file_of_lines_is_submitted_without_naming_the_verb(run: Run, tmp_path: Path) -> None:
    end = run(lines_file(tmp_path, 3), "--name", "by lines", "--priority", "urgent")
    assert end.status == 0
    shown = Batch.model_validate_json(run("show", end.out.strip(), "--json").out)
    assert (shown.name, shown.priority, shown.size) == ("by lines", "urgent", 3)


def test_options_may_stand_before_the_file(run: Run, tmp_path: Path) -> None:
    end = run("--recompute", "--json", lines_file(tmp_path, 1))
    assert Batch.model_validate_json(end.out).recompute


@pytest.mark.parametrize("indent", [2, None])
def test_a_document_keeps_what_it_says_unless_the_command_says_otherwise(
    run: Run, tmp_path: Path, indent: int | None
) -> None:
    file = tmp_path / "document"
    said = {"name": "inside", "priority": "when-idle", "designs": [request_fields()]}
    file.write_text(json.dumps(said, indent=indent))
    kept = Batch.model_validate_json(run(str(file), "--json").out)
    assert (kept.name, kept.priority) == ("inside", "when-idle")
    changed = Batch.model_validate_json(run(str(file), "--json", "--priority", "urgent").out)
    assert (changed.name, changed.priority) == ("inside", "urgent")


def test_the_same_key_gives_the_same_batch(run: Run, tmp_path: Path) -> None:
    file = lines_file(tmp_path, 1)
    assert run(file, "--key", "typed twice").out == run(file, "--key", "typed twice").out


def test_without_a_key_each_submission_is_a_batch_of_its_own(run: Run, tmp_path: Path) -> None:
    file = lines_file(tmp_path, 1)
    assert run(file).out != run(file).out


def test_a_batch_that_is_refused_ends_with_status_2_and_names_every_line(
    run: Run, tmp_path: Path
) -> None:
    end = run(lines_file(tmp_path, 2, power_w=-1))
    assert end.status == 2
    assert "line 1: power_w" in end.err
    assert "line 2: power_w" in end.err
    assert end.out == ""


def test_faults_beyond_those_told_are_counted(run: Run, tmp_path: Path) -> None:
    assert "And 7 faults more." in run(lines_file(tmp_path, 107, power_w=-1)).err


def test_a_file_that_is_not_there_is_refused_by_its_name(run: Run) -> None:
    end = run("no-such-file.ndjson")
    assert (end.status, "no-such-file.ndjson" in end.err) == (2, True)


def test_a_lost_answer_is_told_with_the_key_to_send_again(typed: cli.Type, tmp_path: Path) -> None:
    # Port 9 (discard) is closed on any machine this runs on.
    file = lines_file(tmp_path, 1)
    end = typed("batch", file, "--key", "again", "--service", "http://127.0.0.1:9")
    assert end.status == 4
    assert "'--key again'" in " ".join(end.err.split())


def test_waiting_ends_with_the_batch_and_tells_of_its_failures(
    run: Run, wire_store: Store, tmp_path: Path
) -> None:
    batch_id = run(lines_file(tmp_path, 2)).out.strip()

    def work() -> None:
        time.sleep(0.2)  # so that the command finds it waiting first
        planned(wire_store, batch_id, fail=2)

    worker = threading.Thread(target=work)
    worker.start()
    end = run("wait", batch_id)
    worker.join()
    assert end.status == 3
    assert "1 done, 1 failed" in end.out
    assert "Invented failure" in end.out


def test_waiting_for_what_is_done_ends_with_status_0(
    run: Run, wire_store: Store, tmp_path: Path
) -> None:
    batch_id = run(lines_file(tmp_path, 1)).out.strip()
    planned(wire_store, batch_id)
    end = run("wait", batch_id, "--json")
    assert (end.status, Batch.model_validate_json(end.out).counts.done) == (0, 1)


def test_waiting_too_long_ends_with_status_5(run: Run, tmp_path: Path) -> None:
    end = run(lines_file(tmp_path, 1), "--wait", "--patience", "0")
    assert (end.status, "1 designs of batch" in end.err) == (5, True)


def test_results_are_fetched_as_lines_and_as_a_table(
    run: Run, wire_store: Store, tmp_path: Path
) -> None:
    batch_id = run(lines_file(tmp_path, 2)).out.strip()
    planned(wire_store, batch_id)
    file = tmp_path / "results.ndjson"
    assert run("results", batch_id, "--output", str(file)).status == 0
    assert [json.loads(line)["line"] for line in file.read_text().splitlines()] == [1, 2]
    table = run("results", batch_id, "--csv").out
    rows = list(csv.DictReader(io.StringIO(table, newline="")))
    assert [(row["line"], row["rank"]) for row in rows] == [
        *(("1", "1"), ("1", "2"), ("2", "1"), ("2", "2"))
    ]


def test_results_that_come_in_many_parts_are_written_whole(
    run: Run, wire: httpx.Client, wire_store: Store, tmp_path: Path
) -> None:
    batch_id = run(lines_file(tmp_path, 20)).out.strip()
    planned(wire_store, batch_id)
    file = tmp_path / "results.ndjson"
    assert run("results", batch_id, "-o", str(file)).status == 0
    assert file.stat().st_size > 3 * 64 * 1024
    assert file.read_bytes() == wire.get(f"/v1/batches/{batch_id}/results").content


def test_results_that_are_refused_leave_no_file(run: Run, tmp_path: Path) -> None:
    file = tmp_path / "results.ndjson"
    assert run("results", "0" * 32, "--output", str(file)).status == 2
    assert not file.exists()


def test_a_file_that_cannot_be_written_is_refused_by_its_name(run: Run, tmp_path: Path) -> None:
    batch_id = run(lines_file(tmp_path, 1)).out.strip()
    end = run("results", batch_id, "--output", str(tmp_path / "nowhere" / "file"))
    assert (end.status, "--output" in end.err) == (2, True)


def test_designs_of_one_state_are_listed_by_line(
    run: Run, wire_store: Store, tmp_path: Path
) -> None:
    batch_id = run(lines_file(tmp_path, 3)).out.strip()
    planned(wire_store, batch_id, fail=2)
    end = run("designs", batch_id, "--state", "done", "--json")
    found = [BatchItem.model_validate_json(line) for line in end.out.splitlines()]
    assert [(each.line, each.state) for each in found] == [(1, "done"), (3, "done")]
    assert "failed: =Invented failure" in " ".join(run("designs", batch_id).out.split())


def test_what_failed_is_run_again_and_cancelled(
    run: Run, wire_store: Store, tmp_path: Path
) -> None:
    batch_id = run(lines_file(tmp_path, 2)).out.strip()
    planned(wire_store, batch_id, fail=1)
    assert run("rerun", batch_id).out.strip() == batch_id
    assert "1 queued, 1 done" in run("show", batch_id).out
    assert "1 done, 1 cancelled" in run("cancel", batch_id).out


def test_all_of_a_batch_is_run_again_as_another(run: Run, tmp_path: Path) -> None:
    batch_id = run(lines_file(tmp_path, 1)).out.strip()
    again = Batch.model_validate_json(run("rerun", batch_id, "--all", "--json").out)
    assert (again.id != batch_id, again.recompute) == (True, True)


def test_the_list_has_the_newest_first(run: Run, tmp_path: Path) -> None:
    file = lines_file(tmp_path, 1)
    first, second = run(file).out.strip(), run(file).out.strip()
    out = run("list", "--most", "2").out
    assert 0 < out.index(second) < out.index(first)


def test_the_verbs_are_shown_without_any(run: Run) -> None:
    assert "rerun" in run("--help").out


@pytest.mark.usefixtures("run")
def test_a_single_design_is_submitted_with_its_priority(
    typed: cli.Type, wire: httpx.Client, tmp_path: Path
) -> None:
    file = tmp_path / "request.json"
    file.write_text(json.dumps(request_fields()))
    design_id = typed("submit", str(file), "--priority", "urgent").out.strip()
    assert wire.get(f"/v1/designs/{design_id}").json()["priority"] == "urgent"
    end = typed("submit", str(file), "--priority", "soon")
    assert (end.status, "priority" in end.err) == (2, True)
