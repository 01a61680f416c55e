"""The bill of materials: what is on it, how much, what each part must bear, and where that is from.

Figures are worked out here by hand from the stored ones; margins are those the bill tells.
"""

from __future__ import annotations

import pytest

from service.contracts.bill import BillOfMaterials
from service.exports.bill_of_materials import bill_of_materials
from service.exports.part_duty import at_least
from tests.service.bills import HANGING, MOMENT, line, planned, rating, sample_bill
from tests.service.samples import FULL

PLAIN_FEED = {"reference_ohm": 50.0, "transformer_ratios": [1.0]}


def parts(bill: BillOfMaterials) -> list[str]:
    return [each.part for each in bill.lines]


# --------------------------------------------------------------------------- the conductor
def test_the_wire_to_buy_is_that_of_the_cutting_list() -> None:
    wire = line(sample_bill(), "conductor")
    assert (wire.quantity, wire.unit) == (HANGING.wire_total_m, "m")
    assert "legs of 10.507 m and 10.507 m" in wire.quantity_source


def test_without_a_cutting_list_the_wire_has_a_stated_allowance() -> None:
    design, candidate, report = planned()
    bare = report.model_copy(update={"hanging": None})
    wire = line(bill_of_materials(design, candidate, bare), "conductor")
    assert wire.quantity == pytest.approx(1.05 * candidate.length_m, abs=0.0005)
    assert "5 %" in wire.quantity_source


def test_item_code_and_price_are_those_of_the_stock_unchanged() -> None:
    stock = {"conductors": [{"awg": 12, "item_code": "  =W-12", "price_per_m": 0.12345678}]}
    wire = line(sample_bill(stock=stock), "conductor")
    assert (wire.item_code, wire.unit_price) == ("=W-12", 0.12345678)
    assert wire.amount == pytest.approx(HANGING.wire_total_m * 0.12345678, abs=0.005)


def test_a_wire_without_a_price_has_neither_price_nor_amount() -> None:
    wire = line(sample_bill(), "conductor")
    assert (wire.item_code, wire.unit_price, wire.amount) == ("W-12", None, None)


def test_wires_that_are_alike_are_told_apart_by_their_cost() -> None:
    alike = [{"awg": 12, "price_per_m": 0.5}, {"awg": 12, "price_per_m": 0.75}]
    bill = sample_bill(stock={"conductors": alike})
    assert line(bill, "conductor").unit_price == 0.5
    assert not any("Several conductors" in each for each in bill.notes)


def test_of_wires_that_cannot_be_told_apart_what_differs_is_left_out_and_said() -> None:
    sleeves = [{"awg": 12, "insulation": {"thickness_mm": each}} for each in (0.5, 0.8)]
    bill = sample_bill(stock={"conductors": sleeves})
    names = [each.name for each in line(bill, "conductor").ratings]
    assert "insulation thickness" not in names
    assert any("Several conductors" in each for each in bill.notes)


def test_of_two_prices_that_come_to_the_same_cost_none_is_told() -> None:
    alike = [{"awg": 12, "price_per_m": each} for each in (0.5, 0.5001)]
    bill = sample_bill(stock={"conductors": alike})
    assert line(bill, "conductor").unit_price is None
    assert any("Several conductors" in each for each in bill.notes)


def test_an_insulated_wire_tells_its_sleeve() -> None:
    assert rating(sample_bill(**FULL), "conductor", "insulation thickness").value == 0.8


# ---------------------------------------------------------------------- voltages and loads
def test_end_insulators_bear_twice_the_largest_end_voltage_of_bands_in_use() -> None:
    bill = sample_bill()  # 20m is unserved: its 2400 V are not rated for
    found = rating(bill, "end insulator", "working voltage")
    assert (found.bound, found.value, found.unit) == ("at least", 2 * 1600.0, "V peak")
    assert "15m" in found.source


def test_insulators_bear_the_largest_tension_times_the_safety_factor_asked_for() -> None:
    bill = sample_bill(hanging={"safety_factor": 4.0})
    for part in ("end insulator", "feed insulator", "conductor"):
        found = rating(bill, part, "breaking load")
        assert found.value == at_least(4.0 * 301.7)
        assert "wind" in found.source
    assert rating(bill, "rope", "breaking load").value == at_least(4.0 * 299.0)


def test_pulleys_and_shackles_work_at_twice_the_tension_of_the_rope() -> None:
    bill = sample_bill()
    for part in ("pulley", "shackle"):
        assert rating(bill, part, "working load").value == 2 * 299.0


def test_rope_reaches_from_the_wire_over_the_support_to_the_ground() -> None:
    rope = line(sample_bill(), "rope")
    assert rope.quantity == pytest.approx(2 * (HANGING.tail_m + 10.0 + 1.0), abs=0.005)


def test_a_band_that_is_not_served_is_named_as_not_rated_for() -> None:
    assert any("20m, not served" in each for each in sample_bill().notes)


def test_where_no_band_is_served_the_bill_says_so_first_of_all() -> None:
    design, candidate, report = planned()
    bands = tuple(each.model_copy(update={"service": "unserved"}) for each in candidate.bands)
    useless = candidate.model_copy(update={"bands": bands})
    bill = bill_of_materials(design, useless, report)
    assert any("buy nothing" in each for each in bill.notes)


def test_an_older_report_leaves_out_what_it_does_not_hold_and_says_so() -> None:
    design, candidate, report = planned()
    bands = tuple(each.model_copy(update={"stress": None}) for each in report.bands)
    older = report.model_copy(update={"hanging": None, "bands": bands})
    bill = bill_of_materials(design, candidate, older)
    assert line(bill, "end insulator").ratings == ()
    assert line(bill, "pulley").ratings == ()
    for missing in ("No tension", "No end voltage", "No voltage at the feed"):
        assert any(each.startswith(missing) for each in bill.notes), missing


@pytest.mark.parametrize(
    ("figure", "ordered"),
    [(0.0, 0.0), (1234.0, 1240.0), (1230.0, 1230.0), (0.30149, 0.302), (99.91, 100.0), (7.0, 7.0)],
)
def test_figures_to_order_by_have_three_digits_and_never_go_down(
    figure: float, ordered: float
) -> None:
    assert at_least(figure) == ordered


# ----------------------------------------------------------------------------- the feed
def test_a_transformer_has_ratio_power_and_what_its_antenna_side_bears() -> None:
    _, _, report = planned()
    bill = sample_bill()
    used = [each.stress for each in report.bands[:2] if each.stress is not None]
    volts = max(each.voltage_peak_v for each in used)
    amperes = max(each.current_rms_a for each in used)
    assert rating(bill, "transformer", "impedance ratio").value == 2.0
    assert rating(bill, "transformer", "power").value == 200.0
    assert rating(bill, "transformer", "voltage, antenna side").value == at_least(2 * volts)
    assert rating(bill, "transformer", "current, antenna side").value == at_least(2**0.5 * amperes)
    assert "common-mode choke" in parts(bill)


def test_at_one_to_one_a_current_balun_is_the_choke_too() -> None:
    bill = sample_bill(feed=PLAIN_FEED)
    assert {"transformer", "common-mode choke"}.isdisjoint(parts(bill))
    assert rating(bill, "current balun", "impedance ratio").value == 1.0
    assert rating(bill, "current balun", "common-mode impedance").value == 1000.0


def test_off_centre_the_choke_is_to_hold_back_more() -> None:
    choke = rating(sample_bill(**FULL), "common-mode choke", "common-mode impedance")
    assert choke.value == 5000.0


def test_a_balanced_line_has_its_choke_where_it_ends() -> None:
    line_450 = {"line": "window-line-450", "length_m": 12.0}
    bill = sample_bill(feed={**PLAIN_FEED, "feed_line": line_450})
    assert "current balun" not in parts(bill)
    assert "meets coaxial" in line(bill, "common-mode choke").description
    assert line(bill, "feed line").description == "Feed line, 450 Ω window line"


def test_the_feed_line_bears_the_power_times_the_largest_swr_within_limits() -> None:
    _, candidate, report = planned(**FULL)
    bill = sample_bill(**FULL)
    largest = max(
        point.swr
        for outcome, band in zip(candidate.bands, report.bands, strict=True)
        if outcome.service != "unserved"
        for point in (band.low, band.centre, band.high, *band.grid)
        if (point.transmitter_swr or 0.0) <= outcome.swr_limit
    )
    assert line(bill, "feed line").quantity == 20.0
    assert rating(bill, "feed line", "power at 21.45 MHz").value == at_least(400.0 * largest)


def test_no_swr_beyond_a_limit_counts_for_the_feed_line() -> None:
    design, candidate, report = planned(**FULL)
    limited = tuple(each.model_copy(update={"swr_limit": 1.5}) for each in candidate.bands)
    bill = bill_of_materials(design, candidate.model_copy(update={"bands": limited}), report)
    largest = max(
        point.swr
        for band in report.bands[:2]
        for point in band.grid
        if (point.transmitter_swr or 0.0) <= 1.5
    )
    assert rating(bill, "feed line", "power at 21.45 MHz").value == at_least(400.0 * largest)


def test_without_a_feed_line_the_bill_says_that_there_is_none() -> None:
    bill = sample_bill()
    assert "feed line" not in parts(bill)
    assert any("names no feed line" in each for each in bill.notes)


def test_parts_of_networks_are_on_it_for_bands_in_use_alone() -> None:
    _, _, report = planned(**FULL)
    bill = sample_bill(**FULL)
    told = [each for each in bill.lines if each.part in {"inductor", "capacitor"}]
    stored = [
        each
        for band in report.bands[:2]
        if band.matching is not None
        for each in band.matching.parts
    ]
    assert [each.ratings[0].value for each in told] == [each.value for each in stored]
    for ordered, part in zip(told, stored, strict=True):
        volts, amperes = ordered.ratings[1:]
        assert volts.value == at_least(2.0 * part.voltage_peak_v)
        assert amperes.value == at_least(2**0.5 * part.current_rms_a)


# ----------------------------------------------------------------------- what goes with it
def test_every_rating_says_where_it_comes_from() -> None:
    assert all(each.source for line in sample_bill(**FULL).lines for each in line.ratings)


def test_the_cautions_of_report_and_hanging_go_with_the_bill() -> None:
    _, _, report = planned()
    bill = sample_bill()
    assert {*report.cautions, *HANGING.cautions} < set(bill.cautions)


def test_the_purchase_reference_of_the_request_comes_back() -> None:
    assert sample_bill(purchase_reference="PO 2026/17").purchase_reference == "PO 2026/17"
    assert sample_bill().purchase_reference == ""


def test_the_bill_is_dated_by_its_result() -> None:
    assert sample_bill().planned_at == MOMENT
