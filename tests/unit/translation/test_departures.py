"""The ways a wire may differ from the plan, as the engine is told of them."""

from __future__ import annotations

from math import sqrt

import pytest

from service.contracts.request import DesignRequest
from tests.service.samples import sample_request
from worker.engine.ground import Ground
from worker.search.steadiness import Departure
from worker.translation.departures import departures_of
from worker.translation.wires import Hanging, StockWire

AVERAGE = Ground(13.0, 0.005)


def departures(request: DesignRequest) -> dict[str, Departure]:
    hanging = Hanging(request)
    return {each.what: each for each in departures_of(hanging, hanging.ways[0])}


def model(departure: Departure) -> StockWire:
    assert isinstance(departure.model, StockWire)
    return departure.model


def ground_of(departure: Departure) -> Ground:
    grounds = model(departure).hung.grounds
    assert grounds is not None
    return grounds.ground


def height_m_of(departure: Departure) -> float:
    grounds = model(departure).hung.grounds
    assert grounds is not None
    return grounds.height_m


def test_a_bare_wire_over_ground_departs_in_length_height_and_ground() -> None:
    assert list(departures(sample_request())) == [
        "1 % longer",
        "1 % shorter",
        "0.5 m higher",
        "0.5 m lower",
        "wetter ground",
        "drier ground",
    ]


def test_without_tolerances_nothing_departs() -> None:
    assert departures(sample_request(tolerances=None)) == {}


def test_a_tolerance_of_nothing_is_no_departure() -> None:
    none = {"cutting_percent": 0, "height_m": 0, "ground_factor": 1, "insulation_percent": 0}
    assert departures(sample_request(tolerances=none)) == {}


def test_in_free_space_only_the_length_departs() -> None:
    site = {"span_m": 24.0, "ground": "free-space"}
    assert list(departures(sample_request(site=site))) == ["1 % longer", "1 % shorter"]


def test_perfect_ground_is_neither_wet_nor_dry() -> None:
    site = {"span_m": 24.0, "height_m": 9.0, "ground": "perfect"}
    assert not [what for what in departures(sample_request(site=site)) if "ground" in what]


def test_length_departs_by_the_per_cent_asked_for_and_nothing_else_does() -> None:
    told = departures(sample_request(tolerances={"cutting_percent": 2.5}))
    assert told["2.5 % longer"].length_ratio == pytest.approx(1.025)
    assert told["2.5 % shorter"].length_ratio == pytest.approx(0.975)
    assert height_m_of(told["2.5 % longer"]) == 10.0
    assert told["0.5 m higher"].length_ratio == 1.0


def test_height_departs_by_the_metres_asked_for_over_the_same_ground() -> None:
    told = departures(sample_request(tolerances={"height_m": 2.0}))
    assert height_m_of(told["2 m higher"]) == 12.0
    assert height_m_of(told["2 m lower"]) == 8.0
    assert ground_of(told["2 m lower"]) == ground_of(told["1 % longer"])


def test_a_wire_is_not_judged_lower_than_half_its_height() -> None:
    site = {"span_m": 24.0, "height_m": 3.0}
    told = departures(sample_request(site=site, tolerances={"height_m": 2.0}))
    assert "2 m higher" in told
    assert "2 m lower" not in told


def test_a_wire_is_not_judged_lower_than_the_ground_s_model_covers() -> None:
    # A hundredth of a wavelength at 1.81 MHz is 1.66 m.
    bands = [{"name": "160m", "low_mhz": 1.81, "high_mhz": 1.85}]
    site = {"span_m": 90.0, "height_m": 2.0}
    assert "0.5 m lower" not in departures(sample_request(bands=bands, site=site))


def test_ground_departs_by_the_factor_and_its_permittivity_by_the_root_of_it() -> None:
    told = departures(sample_request(tolerances={"ground_factor": 3.0}))
    wetter, drier = ground_of(told["wetter ground"]), ground_of(told["drier ground"])
    assert wetter.conductivity_s_per_m == pytest.approx(3.0 * AVERAGE.conductivity_s_per_m)
    assert drier.conductivity_s_per_m == pytest.approx(AVERAGE.conductivity_s_per_m / 3.0)
    assert wetter.relative_permittivity == pytest.approx(13.0 * sqrt(3.0))
    assert drier.relative_permittivity == pytest.approx(13.0 / sqrt(3.0))


@pytest.mark.parametrize(
    ("permittivity", "wetter", "drier"), [(1.2, 2.4, 1.0), (80.0, 88.0, 40.0), (95.0, 95.0, 47.5)]
)
def test_no_ground_is_emptier_than_a_vacuum_nor_wetter_than_water(
    permittivity: float, wetter: float, drier: float
) -> None:
    ground = {"relative_permittivity": permittivity, "conductivity_s_per_m": 0.01}
    site = {"span_m": 24.0, "height_m": 9.0, "ground": ground}
    told = departures(sample_request(site=site, tolerances={"ground_factor": 4.0}))
    assert ground_of(told["wetter ground"]).relative_permittivity == pytest.approx(wetter)
    assert ground_of(told["drier ground"]).relative_permittivity == pytest.approx(drier)


def test_insulation_departs_by_the_per_cent_asked_for() -> None:
    coated = {"awg": 12, "insulation": {"thickness_mm": 0.8, "relative_permittivity": 2.3}}
    request = sample_request(
        stock={"conductors": [coated]}, tolerances={"insulation_percent": 20.0}
    )
    told = departures(request)
    for what, permittivity in (("denser insulation", 2.76), ("lighter insulation", 1.84)):
        sleeve = model(told[what]).hung.sleeve
        assert sleeve is not None
        assert sleeve.relative_permittivity == pytest.approx(permittivity)
        assert height_m_of(told[what]) == 10.0


def test_insulation_is_never_lighter_than_air() -> None:
    coated = {"awg": 12, "insulation": {"thickness_mm": 0.8, "relative_permittivity": 1.1}}
    request = sample_request(
        stock={"conductors": [coated]}, tolerances={"insulation_percent": 50.0}
    )
    sleeve = model(departures(request)["lighter insulation"]).hung.sleeve
    assert sleeve is not None
    assert sleeve.relative_permittivity == 1.0


def test_departures_keep_the_place_of_the_feed() -> None:
    told = departures(sample_request(feed={"positions": [0.36]}))
    assert {model(each).hung.feed_fraction for each in told.values()} == {0.36}
