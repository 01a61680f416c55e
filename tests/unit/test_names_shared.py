"""Names a request may use and names the engine knows are the same names."""

from service.contracts.feed import LINE_NAMES
from service.contracts.station_site import GROUND_CLASSES as GROUNDS_A_REQUEST_MAY_NAME
from service.contracts.stock import MATERIAL_NAMES, Conductor
from worker.engine.ground import GROUND_CLASSES
from worker.engine.line_catalogue import FEED_LINES
from worker.engine.material import MATERIALS
from worker.engine.wire_size import awg_diameter_m


def test_every_ground_class_a_request_may_name_is_known_to_the_engine() -> None:
    assert set(GROUNDS_A_REQUEST_MAY_NAME) - {"free-space"} == set(GROUND_CLASSES)


def test_every_material_a_request_may_name_is_known_to_the_engine() -> None:
    assert set(MATERIAL_NAMES) == set(MATERIALS)


def test_every_feed_line_a_request_may_name_is_known_to_the_engine() -> None:
    assert set(LINE_NAMES) == set(FEED_LINES)


def test_contract_and_engine_make_the_same_diameter_of_a_gauge() -> None:
    for gauge in range(41):
        contract_mm = Conductor(awg=gauge).bare_diameter_mm
        assert abs(contract_mm / 1e3 / awg_diameter_m(gauge) - 1.0) < 1e-12
