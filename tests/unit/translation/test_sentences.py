"""The sentences of a result, on figures made up so that every case appears."""

from __future__ import annotations

from dataclasses import replace

import pytest

from service.contracts.candidate import BandOutcome, Service
from tests.unit.search.open_line import OpenLine, goal, resonant_m, space_of
from worker.search.appraisal import Appraisal, BandAppraisal, appraise
from worker.search.ranking import Pick
from worker.search.resonances import Resonance
from worker.search.scan import scan
from worker.search.space import WireOffer
from worker.search.trade_off import Gain
from worker.translation.wording import (
    band_reason,
    compromise,
    improvement,
    network_in_words,
    why_it_ranks,
)

FORTY = goal("40m", 7.0, 7.2)
FIFTEEN = goal("15m", 21.0, 21.45)
TWENTY = goal("20m", 14.0, 14.35, required=False)


@pytest.fixture(scope="module")
def look() -> Appraisal:
    """The open line, 20.31 m long, on three bands."""
    space = space_of(FORTY, FIFTEEN, TWENTY, wires=(WireOffer(OpenLine()),))
    found = scan(space, lambda _part, _step: None)
    pick = Pick(0, 2.0, 20.31)
    return appraise(space, (pick,), (found.maps[0].maps,))[0]


def outcome(
    name: str, service: Service, part: float, worst: float, order: int | None
) -> BandOutcome:
    return BandOutcome(
        name=name,
        required=True,
        service=service,
        served_fraction=part,
        order=order,
        resonance_mhz=None,
        offset_khz=None,
        offset_percent=None,
        swr_low=1.0,
        swr_centre=1.0,
        swr_high=1.0,
        swr_worst=worst,
        swr_limit=2.0,
        reason="",
    )


# ---------------------------------------------------------------------------- improvement
@pytest.mark.parametrize(
    ("gain", "text"),
    [
        (
            Gain(FIFTEEN, 1.0, 0.4, (FORTY,)),
            "0.400 m longer (20.71 m) would serve 15m whole, but no longer all of 40m.",
        ),
        (
            Gain(FIFTEEN, 1.0, -0.25, (FORTY, TWENTY)),
            "0.250 m shorter (20.06 m) would serve 15m whole, but no longer all of 40m and 20m.",
        ),
        (
            Gain(TWENTY, 0.618, 0.02, ()),
            "0.020 m longer (20.33 m) would serve 61 % of 20m.",
        ),
    ],
)
def test_what_another_length_would_bring_and_take(gain: Gain, text: str) -> None:
    assert improvement(gain, 20.31) == text


# -------------------------------------------------------------------------- why it ranks
def test_why_a_wire_ranks_names_what_is_served_in_part_and_not(look: Appraisal) -> None:
    outcomes = (
        outcome("40m", "served", 1.0, 1.834, 1),
        outcome("15m", "partly served", 0.874, 2.6, 3),
        outcome("20m", "unserved", 0.0, 54.0, None),
    )
    assert why_it_ranks(outcomes, look) == (
        "Through a 2:1 transformer, it serves 40m on its 1st resonance (worst SWR 1.83), "
        "serves in part 15m over 87 % and does not serve 20m."
    )


def test_a_wire_without_transformer_is_fed_directly(look: Appraisal) -> None:
    direct = replace(look, pick=Pick(0, 1.0, 20.31))
    told = why_it_ranks((outcome("40m", "served", 1.0, 1.5, None),), direct)
    assert told == "Fed directly, it serves 40m (worst SWR 1.50)."


# ------------------------------------------------------------------------ the band's reason
def reason(look: Appraisal, index: int, service: Service, part: float, worst: float) -> str:
    band = look.bands[index]
    return band_reason(band, outcome(band.goal.name, service, part, worst, 1), look.resonances)


def test_a_served_band_names_its_worst_swr_and_its_resonance(look: Appraisal) -> None:
    mhz = 7.1 * resonant_m(1, 7.1e6) / 20.31
    text = reason(look, 0, "served", 1.0, 1.834)
    assert text.startswith(
        f"SWR 1.83 or less from edge to edge, within 2.00; the 1st-order resonance at {mhz:.3f} MHz"
    )
    assert text.endswith(f"lies {1e3 * (mhz - 7.1):.0f} kHz above the centre.")


def test_a_resonance_below_the_centre_is_told_as_below(look: Appraisal) -> None:
    below = replace(look.bands[0].nearest or Resonance(1, "series", 0, 0), frequency_hz=7.05e6)
    band = replace(look.bands[0], nearest=below)
    text = band_reason(band, outcome("40m", "served", 1.0, 1.8, 1), look.resonances)
    assert "lies 50 kHz below the centre" in text


def test_a_band_served_in_part_names_the_part(look: Appraisal) -> None:
    text = reason(look, 1, "partly served", 0.879, 2.61)
    assert text.startswith("SWR within 2.00 over 87 % of the band, up to 2.61 in the rest;")
    assert "3rd-order resonance" in text


def test_an_unserved_band_beside_an_anti_resonance_is_told_so(look: Appraisal) -> None:
    text = reason(look, 2, "unserved", 0.0, 60.0)
    parallel = next(each for each in look.resonances if each.order == 2)
    assert float(look.bands[2].grid.fed.limited_swr.min()) > 100.0
    assert text.startswith("SWR > 100 at best, above 2.00;")
    assert f"anti-resonance at {parallel.frequency_hz / 1e6:.3f} MHz" in text
    assert "MHz below the centre" in text


def test_a_wire_without_resonances_is_told_so(look: Appraisal) -> None:
    bare = replace(look.bands[0], nearest=None)
    text = band_reason(bare, outcome("40m", "unserved", 0.0, 60.0, None), ())
    assert text.endswith("this wire has no usable resonance in the range looked at.")


@pytest.mark.parametrize(
    ("loss_db", "text"),
    [
        (0.4, ""),
        # 3 dB is half of the power, 10 dB nine tenths of it.
        (3.0103, " Its network loses 3.01 dB, 50 % of the power, in coils as usually wound."),
        (10.0, " Its network loses 10.00 dB, 90 % of the power, in coils as usually wound."),
    ],
)
def test_a_network_that_loses_much_is_told_so(loss_db: float, text: str) -> None:
    assert network_in_words(loss_db) == text


# -------------------------------------------------------------------------- the compromise
def test_the_compromise_names_the_length_each_band_would_want(look: Appraisal) -> None:
    text = compromise(look)
    for order, band in ((1, FORTY), (3, FIFTEEN)):
        assert f"would want {resonant_m(order, band.centre_hz):.2f} m" in text
    assert "20.31 m is the compromise" in text
    assert "3.000 times the 1st" in text
    # 20m lies beside the anti-resonance: no length is wanted for it.
    assert "20m" not in text


def test_one_band_alone_is_no_compromise(look: Appraisal) -> None:
    text = compromise(replace(look, bands=look.bands[:1]))
    assert text.endswith("this wire is 20.31 m.")
    assert "compromise" not in text


def test_a_wire_used_off_all_resonances_says_so(look: Appraisal) -> None:
    far: tuple[BandAppraisal, ...] = look.bands[2:]
    assert compromise(replace(look, bands=far)) == "No band is used near a resonance of this wire."
