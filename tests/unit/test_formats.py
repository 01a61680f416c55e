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
        (formats.decibels(0.836), "0.84"),
        (formats.volts(59.34), "59.3"),
        (formats.volts(1999.6), "2000"),
        (formats.amperes(0.3174), "0.317"),
        (formats.amperes(12.84), "12.8"),
        (formats.component(5.4253), "5.43"),
        (formats.component(1248.3), "1248"),
        (formats.component(0.0372), "0.037"),
        (formats.newtons(85.23), "85.2"),
        (formats.newtons(1503.4), "1503"),
        (formats.celsius(-20.0), "-20"),
        (formats.celsius(12.5), "12.5"),
        (formats.pascals(430.4), "430"),
        (formats.ice_mm(6.5), "6.5"),
        (formats.ice_mm(10.0), "10"),
        (formats.safety_factor(3.0), "3.00"),
        (formats.minutes(30.0), "30 min"),
        (formats.khz_per_cm(3.526), "+3.53"),
        (formats.khz_per_cm(-13.93), "-13.9"),
        (formats.khz_per_cm(703.4), "+703"),
        (formats.money(19.43), "19.43"),
        (formats.money(7.0), "7.00"),
        (formats.money(0.425), "0.425"),
        (formats.part(0.36), "36 %"),
        (formats.part(1.0 / 3.0), "33.3 %"),
        (formats.feed_place(0.5, 20.0), "at the centre"),
        (formats.feed_place(0.36, 20.45), "7.36 m from one end (36 %)"),
        (formats.departed("1 % longer"), "when 1 % longer"),
        (formats.departed("wetter ground"), "over wetter ground"),
        (formats.departed("denser insulation"), "with denser insulation"),
        (formats.listed(["a", "b", "c"], "or"), "a, b or c"),
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
