"""A request in a planner's words."""

from __future__ import annotations

from typing import Any

import pytest

from service.contracts.feed import LINE_NAMES
from service.contracts.station_site import GROUND_CLASSES
from service.pages.wording import feed_in_words, site_in_words, stock_in_words
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
        f"50.0 Ω reference, transformer 4:1, 15.00 m of {words}, 20 kW."
    )


@pytest.mark.parametrize("line", LINE_NAMES)
def test_every_feed_line_has_words(line: str) -> None:
    request = sample_request(feed={"feed_line": {"line": line, "length_m": 15.0}})
    assert "-" not in feed_in_words(request).replace("RG-", "")
