"""Feet and metres, exactly."""

from __future__ import annotations

from decimal import Decimal
from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.contracts.units import feet_of, metres_of, number_of, per_metre_of


@given(st.decimals(min_value=0, max_value=10_000, places=4))
def test_feet_become_metres_to_the_last_digit(feet: Decimal) -> None:
    # The foot is 0.3048 m by the agreement of 1959; decimals multiply without rounding.
    assert metres_of(Fraction(feet), "ft") == float(feet * Decimal("0.3048"))


def test_metres_stay_as_they_are() -> None:
    assert metres_of(Fraction("24.1"), "m") == 24.1


def test_metres_are_told_in_feet() -> None:
    assert feet_of(Fraction("30.48"), "m") == 100.0


def test_a_price_per_foot_is_a_higher_price_per_metre() -> None:
    assert per_metre_of(Fraction("0.3048"), "ft") == 1.0
    assert per_metre_of(Fraction("0.3048"), "m") == 0.3048


@pytest.mark.parametrize(
    "text", ["", " ", "abc", "1,5", "1e3", "1/2", "0x10", "1_000", "--1", "1.2.3", "٣", "9" * 25]
)
def test_what_is_no_plain_decimal_number_is_no_number(text: str) -> None:
    assert number_of(text) is None


@pytest.mark.parametrize(("text", "number"), [("7", 7), (" 7.25 ", 7.25), ("-3", -3), (".5", 0.5)])
def test_plain_decimal_numbers_are_read(text: str, number: float) -> None:
    assert number_of(text) == Fraction(number)
