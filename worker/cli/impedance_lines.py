"""The `impedance` filter: one wire a line in, its impedance a line out, order kept.

Lines are JSON (NDJSON). A line that is refused, or that lies outside what the models cover,
is answered by a problem object on its own line and the rest go on.
"""

from __future__ import annotations

import json
from collections import defaultdict
from collections.abc import Iterable, Sequence
from dataclasses import asdict, dataclass
from io import BufferedIOBase
from typing import Annotated, Any, BinaryIO, Literal, Self, TextIO

import numpy as np
from pydantic import Field, ValidationError, model_validator

from service.contracts.quantities import Contract
from service.contracts.refusals import faults_of, rule_broken
from service.contracts.stock import MaterialName
from service.errors import Fault
from worker.engine.conductor import internal_impedance_ohm_per_m
from worker.engine.errors import EngineError, OutOfRange
from worker.engine.ground import Ground, GroundTable, tabulate
from worker.engine.material import MATERIALS, REFERENCE_TEMPERATURE_C
from worker.engine.thin_wire import feed_impedance

_LONGEST_LINE = 4096
_CHUNK_BYTES = 1 << 16


class WireLine(Contract):
    """One wire: a straight one, fed over a gap, in free space or level over ground.

    Without ``height_m`` the wire is in free space; with it, both ground constants are
    needed, or ``conductivity_s_per_m`` of ``"inf"`` for a perfect ground. Without
    ``material`` the conductor is perfect; without ``gap_m`` the gap is the engine's default.
    """

    id: Any = None
    frequency_hz: Annotated[float, Field(gt=0.0)]
    length_m: Annotated[float, Field(gt=0.0)]
    radius_m: Annotated[float, Field(gt=0.0)]
    height_m: Annotated[float, Field(gt=0.0)] | None = None
    relative_permittivity: Annotated[float, Field(ge=1.0)] | None = None
    conductivity_s_per_m: Annotated[float, Field(ge=0.0)] | Literal["inf"] | None = None
    feed_fraction: Annotated[float, Field(gt=0.0, lt=1.0)] = 0.5
    gap_m: Annotated[float, Field(gt=0.0)] | None = None
    material: MaterialName | None = None
    temperature_c: Annotated[float, Field(ge=-100.0, le=200.0)] = REFERENCE_TEMPERATURE_C

    @model_validator(mode="after")
    def _ground_is_whole(self) -> Self:
        perfect = self.conductivity_s_per_m == "inf"
        permittivity_missing = self.relative_permittivity is None and not perfect
        if self.height_m is not None and (
            permittivity_missing or self.conductivity_s_per_m is None
        ):
            raise rule_broken(
                "ground-missing",
                "a wire at a height needs its ground.",
                "Add relative_permittivity and conductivity_s_per_m, or leave out height_m "
                "for free space.",
                field="relative_permittivity" if permittivity_missing else "conductivity_s_per_m",
                value="",
            )
        return self

    def ground(self) -> Ground | None:
        """The ground under the wire; None in free space."""
        if self.height_m is None or self.conductivity_s_per_m is None:
            return None
        conductivity = float(self.conductivity_s_per_m)
        permittivity = 1.0 if self.relative_permittivity is None else self.relative_permittivity
        return Ground(permittivity, conductivity)


@dataclass(frozen=True, slots=True)
class Answers:
    """Answers to a run of lines, in their order, and how many of them are problems."""

    lines: tuple[str, ...]
    problems: int


@dataclass(frozen=True, slots=True)
class _Solved:
    impedance_ohm: complex
    error_ohm: float
    unknowns: int
    gap_m: float


_Outcome = _Solved | EngineError


def filter_lines(source: BinaryIO, sink: TextIO) -> int:
    """Answer every line of a stream, in order; returns how many were problems.

    What has come so far is answered together, so that a file goes through in large runs and
    a script that waits for each answer gets it.

    Parameters
    ----------
    source : binary file
        NDJSON in UTF-8, unbuffered or buffered.
    sink : text file
        Flushed after each run of answers.
    """
    problems, number, rest = 0, 1, b""
    while True:
        # read1 gives what is there, and waits only where nothing is.
        chunk = source.read1(_CHUNK_BYTES) if isinstance(source, BufferedIOBase) else source.read()
        *whole, rest = (rest + chunk).split(b"\n")
        if not chunk:
            whole, rest = [rest], b""
        lines = [line.decode("utf-8", errors="replace") for line in whole]
        answers = answer(lines, number)
        sink.writelines(line + "\n" for line in answers.lines)
        sink.flush()
        problems += answers.problems
        number += len(lines)
        if not chunk:
            return problems


def answer(lines: Sequence[str], first_number: int) -> Answers:
    """Answer a run of lines together; what can be solved at once is.

    Parameters
    ----------
    lines : sequence of str
        NDJSON, one wire a line; empty lines are passed over.
    first_number : int
        Number of the first line, for the problems.
    """
    found: dict[int, str] = {}
    wires: dict[int, WireLine] = {}
    problems = 0
    for index, line in enumerate(lines):
        if not line.strip():
            continue
        try:
            wires[index] = _read(line)
        except ValidationError as error:
            found[index] = _problem(first_number + index, faults_of(error), _id_of(line))
            problems += 1
    for group in _solvable_together(wires):
        for index, solved in _solve(group, wires):
            if isinstance(solved, EngineError):
                faults = (_fault(solved),)
                found[index] = _problem(first_number + index, faults, wires[index].id)
                problems += 1
            else:
                found[index] = _result(wires[index], solved)
    return Answers(tuple(found[index] for index in sorted(found)), problems)


def _read(line: str) -> WireLine:
    if len(line) > _LONGEST_LINE:
        error = rule_broken(
            "line-too-long",
            f"the line is longer than {_LONGEST_LINE} characters.",
            "Send one wire a line.",
            value=f"{len(line)} characters",
        )
        raise ValidationError.from_exception_data(
            "WireLine", [{"type": error, "loc": (), "input": ""}]
        )
    return WireLine.model_validate_json(line)


def _solvable_together(wires: dict[int, WireLine]) -> Iterable[list[int]]:
    """Indices grouped by what one call of the solver can take: one ground table, or none."""
    groups: dict[object, list[int]] = defaultdict(list)
    for index, wire in wires.items():
        groups[None if wire.height_m is None else (wire.frequency_hz, _medium(wire))].append(index)
    return groups.values()


def _medium(wire: WireLine) -> tuple[object, ...]:
    return (wire.height_m, wire.relative_permittivity, wire.conductivity_s_per_m)


def _solve(group: list[int], wires: dict[int, WireLine]) -> Iterable[tuple[int, _Outcome]]:
    """Solve a group in one call; where one of it lies out of range, halve it until it is alone."""
    try:
        return zip(group, _batch([wires[index] for index in group]), strict=True)
    except EngineError as error:
        if len(group) == 1:
            return [(group[0], error)]
    middle = len(group) // 2
    return [*_solve(group[:middle], wires), *_solve(group[middle:], wires)]


def _batch(wires: list[WireLine]) -> list[_Solved]:
    found = feed_impedance(
        np.array([wire.length_m for wire in wires]),
        np.array([wire.radius_m for wire in wires]),
        np.array([wire.frequency_hz for wire in wires]),
        feed_fraction=np.array([wire.feed_fraction for wire in wires]),
        gap_m=np.array([wire.gap_m or wire.radius_m for wire in wires]),
        wire_impedance_ohm_per_m=np.array([_series(wire) for wire in wires]),
        reflected=_table(wires),
    )
    return [
        _Solved(
            complex(found.impedance_ohm[row]),
            float(found.estimated_error_ohm[row]),
            int(found.unknowns[row]),
            float(found.gap_m[row]),
        )
        for row in range(len(wires))
    ]


def _series(wire: WireLine) -> complex:
    if wire.material is None:
        return 0j
    material = MATERIALS[wire.material]
    per_m = internal_impedance_ohm_per_m(
        wire.radius_m, wire.frequency_hz, material, wire.temperature_c
    )
    return complex(per_m)


def _table(wires: list[WireLine]) -> GroundTable | None:
    ground, height_m = wires[0].ground(), wires[0].height_m
    if ground is None or height_m is None:
        return None
    reach_m = max(wire.length_m for wire in wires)
    return tabulate(ground, wires[0].frequency_hz, height_m, reach_m)


def _result(wire: WireLine, solved: _Solved) -> str:
    out: dict[str, object] = {
        "resistance_ohm": solved.impedance_ohm.real,
        "reactance_ohm": solved.impedance_ohm.imag,
        "estimated_error_ohm": solved.error_ohm,
        "unknowns": solved.unknowns,
        "gap_m": solved.gap_m,
    }
    return json.dumps(_with_id(wire.id, out))


def _problem(number: int, faults: Iterable[Fault], identity: object) -> str:
    listed = list(faults)
    out = {
        "type": "about:blank",
        "title": "This line was refused",
        "detail": "; ".join(str(fault) for fault in listed),
        "line": number,
        "faults": [asdict(fault) for fault in listed],
    }
    return json.dumps(_with_id(identity, out), ensure_ascii=False)


def _with_id(identity: object, out: dict[str, object]) -> dict[str, object]:
    return out if identity is None else {"id": identity} | out


def _id_of(line: str) -> object:
    """The id of a line that was refused, as far as it can be read."""
    try:
        read = json.loads(line[:_LONGEST_LINE])
    except ValueError:
        return None
    return read.get("id") if isinstance(read, dict) else None


def _fault(error: EngineError) -> Fault:
    if not isinstance(error, OutOfRange):
        return Fault("wire", "", f"{error}.", "Try a slightly different wire.", "not-converged")
    unit = f" {error.unit}" if error.unit else ""
    return Fault(
        error.quantity,
        f"{error.value:.6g}{unit}",
        "it lies outside what the model covers.",
        f"Give a value from {error.low:.6g} to {error.high:.6g}{unit}.",
        "out-of-range",
    )
