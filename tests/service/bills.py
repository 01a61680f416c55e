"""Bills of materials of invented designs, for tests: with hanging and end voltages or without."""

from __future__ import annotations

from datetime import UTC, datetime
from itertools import count

from service.contracts.bill import BillLine, BillOfMaterials, Rating
from service.contracts.candidate import Candidate
from service.contracts.hanging import CutLeg, HungSpan, HungState
from service.contracts.progress import Design, Progress
from service.contracts.report import FeedReport
from service.exports.bill_of_materials import bill_of_materials
from tests.service.samples import sample_planned, sample_request

MOMENT = datetime(2026, 3, 4, 5, 6, 7, tzinfo=UTC)


def _state(weather: str, wire_n: float, rope_n: float) -> HungState:
    return HungState(
        weather=weather,
        temperature_c=-20.0,
        wind_pa=430.0,
        ice_mm=0.0,
        wire_tension_n=wire_n,
        rope_tension_n=rope_n,
        sag_m=0.4,
        swing_m=0.2,
        lowest_m=9.0,
        mean_height_m=9.7,
    )


HANGING = HungSpan(
    as_wanted=True,
    tail_m=1.845,
    wire_breaking_n=1503.0,
    rope_breaking_n=3000.0,
    safety_factor=5.0,
    safety_factor_wanted=3.0,
    weakest="wire, wind",
    states=(_state("as strung", 150.0, 151.0), _state("wind", 301.7, 299.0)),
    cutting=(
        CutLeg(leg="near", electrical_m=10.155, cut_m=10.507),
        CutLeg(leg="far", electrical_m=10.155, cut_m=10.507),
    ),
    wire_total_m=21.014,
    shape_m=((0.0, 0.0), (24.0, 0.0)),
    strength_source="invented",
    cautions=("An invented caution of hanging.",),
)


def planned(**changes: object) -> tuple[Design, Candidate, FeedReport]:
    """An invented design that is done, with hanging and end voltages in its first report."""
    request = sample_request(**changes)
    found = sample_planned(request)
    bands = []
    for band, number in zip(found.reports[0].bands, count(1)):
        assert band.stress is not None
        stress = band.stress.model_copy(update={"ends_peak_v": (700.0 + number, 800.0 * number)})
        bands.append(band.model_copy(update={"stress": stress}))
    report = found.reports[0].model_copy(update={"bands": tuple(bands), "hanging": HANGING})
    design = Design(
        id="0123456789abcdef0123456789abcdef",
        name=request.name,
        state="done",
        progress=Progress(fraction=1.0, step="done"),
        attempts=1,
        failure=None,
        created_at=MOMENT,
        queued_at=MOMENT,
        started_at=MOMENT,
        finished_at=MOMENT,
        bands=tuple(band.name for band in request.bands),
        request=request,
        result=found.result,
    )
    return design, found.result.candidates[0], report


def sample_bill(**changes: object) -> BillOfMaterials:
    """The bill of that design."""
    return bill_of_materials(*planned(**changes))


def line(bill: BillOfMaterials, part: str) -> BillLine:
    """The only line of a part."""
    (found,) = (each for each in bill.lines if each.part == part)
    return found


def rating(bill: BillOfMaterials, part: str, name: str) -> Rating:
    """One rating of the only line of a part."""
    (found,) = (each for each in line(bill, part).ratings if each.name == name)
    return found
