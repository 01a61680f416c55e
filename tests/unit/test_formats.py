"""Numbers as a planner writes them."""

import pytest

from service.contracts import formats


@pytest.mark.parametrize(
    ("written", "expected"),
    [
        (formats.mhz(7.1), "7.100"),
        (formats.khz(47.4), "+47"),
        (formats.khz(-1889.2), "-1889"),
        (formats.percent(0.514), "+0.51"),
        (formats.metres(20.816), "20.82"),
        (formats.metres(2.7964), "2.796"),
        (formats.ohms(83.71), "83.7"),
        (formats.ohms(5010.4), "5010"),
        (formats.swr(1.834), "1.83"),
        (formats.swr(54.4), "54"),
        (formats.swr(213.0), "> 100"),
        (formats.ratio(1.5), "1.5:1"),
        (formats.ratio(4.0), "4:1"),
        (formats.ordinal(1), "1st"),
        (formats.ordinal(3), "3rd"),
        (formats.ordinal(11), "11th"),
        (formats.ordinal(21), "21st"),
        (formats.listed(["a"]), "a"),
        (formats.listed(["a", "b", "c"]), "a, b and c"),
    ],
)
def test_each_quantity_is_written_as_the_trade_writes_it(written: str, expected: str) -> None:
    assert written == expected


def test_a_band_served_all_but_a_sliver_is_not_shown_as_served_whole() -> None:
    assert formats.share(0.9999) == "99 %"
    assert formats.share(1.0) == "100 %"
