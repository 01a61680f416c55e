"""A request in a planner's words."""

from __future__ import annotations

from typing import Any

import pytest

from service.contracts.feed import LINE_NAMES
from service.contracts.station_site import GROUND_CLASSES
from service.pages.wording import (
    feed_in_words,
    ranking_in_words,
    site_in_words,
    stock_in_words,
    tolerances_in_words,
)
from tests.service.samples import sample_request


@pytest.mark.parametrize(
    ("site", "words"),
    [
        (
            {"span_m": 24.0, "ground": "free-space"},
            ", in free space.",
        ),
        (
            {"span_m": 24.0, "height_m": 7.5, "ground": "salt-water"},
            ", 7.50 m over salt water.",
        ),
        (
            {"span_m": 24.0, "height_m": [7.5, 9.0, 12.0], "ground": "salt-water"},
            ", 7.50, 9.00 or 12.00 m over salt water.",
        ),
        (
            {"span_m": 24.0, "height_m": {"low_m": 7.5, "high_m": 12.0}, "ground": "good"},
            ", any height from 7.50 to 12.00 m over good ground.",
        ),
        (
            {
                "span_m": 24.0,
                "height_m": 7.5,
                "ground": {"relative_permittivity": 13, "conductivity_s_per_m": 0.005},
            },
            ", 7.50 m over ground of relative permittivity 13 and 0.005 S/m.",
        ),
    ],
)
def test_a_site_in_words(site: dict[str, Any], words: str) -> None:
    assert site_in_words(sample_request(site=site).site) == (
        "24.00 m between the points of support, 0.500 m kept free at each end: "
        f"at most 23.00 m of wire{words}"
    )


@pytest.mark.parametrize("ground", GROUND_CLASSES)
def test_every_ground_class_has_words(ground: str) -> None:
    site = {"span_m": 24.0, "height_m": 7.5, "ground": ground}
    words = site_in_words(sample_request(site=site).site)
    assert "-" not in words.replace("ITU-R", "")
    assert "ground ground" not in words


def test_a_range_of_diameters_in_words() -> None:
    limits = {"low_mm": 1.0, "high_mm": 2.5, "material": "annealed-copper"}
    stock = sample_request(stock={"diameter_range": limits}).stock
    assert stock_in_words(stock) == ["any diameter from 1.00 to 2.50 mm, annealed copper"]


def test_an_insulated_conductor_in_words() -> None:
    sleeved = {"awg": 14, "insulation": {"thickness_mm": 0.8, "relative_permittivity": 2.3}}
    (words,) = stock_in_words(sample_request(stock={"conductors": [sleeved]}).stock)
    assert words.endswith(": insulation 0.80 mm thick, relative permittivity 2.3")


@pytest.mark.parametrize(
    ("line", "words"), [("rg-213", "RG-213"), ("window-line-450", "450 Ω window line")]
)
def test_a_feed_line_in_words(line: str, words: str) -> None:
    feed = {"feed_line": {"line": line, "length_m": 15.0}, "transformer_ratios": [4]}
    request = sample_request(feed=feed, power_w=20_000.0)
    assert feed_in_words(request) == (
        f"Fed at the centre, transformer 4:1, 15.00 m of {words}, 50.0 Ω reference, 20 kW. "
        "SWR limits apply at the feed point."
    )


@pytest.mark.parametrize("line", LINE_NAMES)
def test_every_feed_line_has_words(line: str) -> None:
    request = sample_request(feed={"feed_line": {"line": line, "length_m": 15.0}})
    assert "-" not in feed_in_words(request).replace("RG-", "")


@pytest.mark.parametrize(
    ("feed", "words"),
    [
        ({}, "Fed at the centre, "),
        ({"positions": [0.36]}, "Fed at 36\u00a0% of the length, "),
        ({"positions": [1 / 3, 0.5]}, "Fed at the centre or 33.3\u00a0% of the length, "),
        ({"positions": "anywhere"}, "Fed anywhere along the wire, "),
        ({"matching": "per-band"}, ", transformer 1:1, an L-network for each band, "),
        (
            {
                "feed_line": {"line": "rg-58", "length_m": 15.0},
                "reference_point": "transmitter",
            },
            ". SWR limits apply at the transmitter.",
        ),
    ],
)
def test_places_of_the_feed_networks_and_the_reference_point_in_words(
    feed: dict[str, Any], words: str
) -> None:
    assert words in feed_in_words(sample_request(feed=feed))


def test_a_conductor_with_its_price_in_words() -> None:
    stock = sample_request(stock={"conductors": [{"diameter_mm": 2.0, "price_per_m": 0.5}]}).stock
    assert stock_in_words(stock) == ["2.00 mm hard-drawn copper, 0.50 a metre"]


@pytest.mark.parametrize(
    ("asked", "words"),
    [
        ({}, "By each wire as planned. Sets of dipoles only where no single wire serves all"),
        ({"rank_by": "worst-case"}, "By how each wire holds up where it departs most"),
        ({"largest_set": 3}, "Sets of up to 3 dipoles asked for."),
        ({"largest_set": 1}, "No sets of dipoles."),
    ],
)
def test_what_the_ranking_goes_by_in_words(asked: dict[str, Any], words: str) -> None:
    assert words in ranking_in_words(sample_request(**asked))


@pytest.mark.parametrize(
    ("tolerances", "words"),
    [
        (
            {"cutting_percent": 0.5, "height_m": 1.0, "ground_factor": 3.0},
            (
                "Length ±0.5 %, height ±1 m, ground 3 times wetter and drier and permittivity of "
                "insulation ±10 %."
            ),
        ),
        (
            {"cutting_percent": 0, "height_m": 0, "ground_factor": 1, "insulation_percent": 0},
            "No departure.",
        ),
        (None, "None given: how a wire holds up was not looked at."),
    ],
)
def test_tolerances_in_words(tolerances: dict[str, Any] | None, words: str) -> None:
    assert tolerances_in_words(sample_request(tolerances=tolerances).tolerances) == words
