"""The impedance filter: order, identities, problems on their own lines, and limits."""

import json
from io import BytesIO, StringIO
from typing import Any

import numpy as np
import pytest

from worker.cli.impedance_lines import answer, filter_lines
from worker.engine.ground import tabulate
from worker.engine.ground.medium import Ground
from worker.engine.thin_wire import feed_impedance

WIRE = {"frequency_hz": 7.1e6, "length_m": 20.4, "radius_m": 1e-3}
OVER_GROUND = WIRE | {
    "height_m": 10.0,
    "relative_permittivity": 13.0,
    "conductivity_s_per_m": 0.005,
}


def answered(*wires: dict[str, Any] | str) -> list[dict[str, Any]]:
    lines = [wire if isinstance(wire, str) else json.dumps(wire) for wire in wires]
    return [json.loads(line) for line in answer(lines, 1).lines]


def impedance(out: dict[str, Any]) -> complex:
    return complex(out["resistance_ohm"], out["reactance_ohm"])


def test_a_wire_in_free_space_gets_the_solver_s_own_answer() -> None:
    solved = feed_impedance(20.4, 1e-3, 7.1e6)
    (out,) = answered(WIRE)
    assert impedance(out) == pytest.approx(complex(solved.impedance_ohm), rel=1e-9)
    assert out["gap_m"] == 1e-3
    assert out["unknowns"] == int(solved.unknowns)


def test_a_wire_over_ground_gets_the_answer_with_that_ground() -> None:
    table = tabulate(Ground(13.0, 0.005), 7.1e6, 10.0, 40.0)
    solved = feed_impedance(20.4, 1e-3, 7.1e6, reflected=table)
    (out,) = answered(OVER_GROUND)
    assert impedance(out) == pytest.approx(complex(solved.impedance_ohm), rel=1e-6)


def test_perfect_ground_is_asked_for_by_inf_and_needs_no_permittivity() -> None:
    perfect = WIRE | {"height_m": 10.0, "conductivity_s_per_m": "inf"}
    sea = WIRE | {"height_m": 10.0, "relative_permittivity": 80, "conductivity_s_per_m": 1e9}
    first, second = answered(perfect, sea)
    assert impedance(first) == pytest.approx(impedance(second), rel=1e-3)


def test_a_metal_adds_its_resistance() -> None:
    perfect, copper = answered(WIRE, WIRE | {"material": "annealed-copper"})
    assert 0.1 < copper["resistance_ohm"] - perfect["resistance_ohm"] < 2.0


def test_a_hotter_metal_adds_more() -> None:
    cold, hot = answered(
        WIRE | {"material": "annealed-copper", "temperature_c": -20},
        WIRE | {"material": "annealed-copper", "temperature_c": 80},
    )
    assert hot["resistance_ohm"] > cold["resistance_ohm"]


def test_answers_come_in_the_order_of_the_lines_whatever_is_solved_together() -> None:
    wires = [
        (OVER_GROUND if index % 2 else WIRE) | {"id": index, "length_m": 18.0 + 0.1 * index}
        for index in range(12)
    ]
    assert [out["id"] for out in answered(*wires)] == list(range(12))


def test_wires_solved_together_get_the_answers_they_get_alone() -> None:
    wires = [WIRE | {"length_m": float(length)} for length in np.linspace(15.0, 25.0, 5)]
    alone = [impedance(answered(wire)[0]) for wire in wires]
    assert [impedance(out) for out in answered(*wires)] == pytest.approx(alone, rel=1e-6)


@pytest.mark.parametrize(
    ("line", "field"),
    [
        ("{not json", "request"),
        (json.dumps({"frequency_hz": 7.1e6, "length_m": 20.4}), "radius_m"),
        (json.dumps(WIRE | {"length_m": -1}), "length_m"),
        (json.dumps(WIRE | {"lenght_m": 1}), "lenght_m"),
        (json.dumps(WIRE | {"height_m": 10.0}), "relative_permittivity"),
        (json.dumps(WIRE | {"material": "unobtainium"}), "material"),
        (json.dumps(WIRE | {"length_m": 2000.0}), "length"),
        (json.dumps(OVER_GROUND | {"height_m": 1e-3}), "height"),
        (json.dumps(WIRE | {"radius_m": 0.9}), "radius"),
    ],
)
def test_a_bad_line_is_answered_on_its_own_line_and_the_rest_go_on(line: str, field: str) -> None:
    before, problem, after = answered(WIRE | {"id": "a"}, line, WIRE | {"id": "c"})
    assert (before["id"], after["id"]) == ("a", "c")
    assert "resistance_ohm" in before
    assert "resistance_ohm" in after
    assert problem["line"] == 2
    assert field in problem["faults"][0]["field"]
    assert problem["faults"][0]["remedy"]


def test_a_bad_line_keeps_its_id() -> None:
    (out,) = answered(WIRE | {"id": {"row": 7}, "length_m": -1})
    assert out["id"] == {"row": 7}


def test_a_stream_is_answered_whole_and_its_problems_are_counted() -> None:
    source = BytesIO(f"{json.dumps(WIRE)}\nnonsense\n\n{json.dumps(WIRE)}".encode())
    sink = StringIO()
    assert filter_lines(source, sink) == 1
    kinds = ["resistance_ohm" in json.loads(line) for line in sink.getvalue().splitlines()]
    assert kinds == [True, False, True]


def test_lines_are_numbered_as_in_the_file_with_its_empty_lines() -> None:
    sink = StringIO()
    filter_lines(BytesIO(b"\n\nnonsense\n"), sink)
    assert json.loads(sink.getvalue())["line"] == 3
