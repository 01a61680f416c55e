"""Scoring by SWR over bands, on curves whose served part is known by hand."""

import numpy as np
import pytest

from worker.engine.line_catalogue import FEED_LINES
from worker.search.feeding import Feeding
from worker.search.scoring import Score, merit, score, served_fraction
from worker.search.space import BandGoal, FloatArray


def band(name: str = "b", *, required: bool = True, weight: float = 1.0) -> BandGoal:
    return BandGoal(name, 7.0e6, 7.3e6, required, weight, 2.0)


def scored_as(swr: FloatArray, bands: tuple[BandGoal, ...]) -> Score:
    """Scores of wires that show this SWR: a resistance of so many times the reference."""
    return score(50.0 * swr.astype(np.complex128), bands, Feeding(50.0), 1.0)


def test_a_band_within_its_limit_everywhere_is_served_whole() -> None:
    swr = np.full((1, 5, 1), 1.5)
    assert served_fraction(swr, np.array(2.0))[0, 0] == 1.0


def test_a_band_above_its_limit_everywhere_is_not_served() -> None:
    swr = np.full((1, 5, 1), 2.5)
    assert served_fraction(swr, np.array(2.0))[0, 0] == 0.0


def test_the_limit_is_crossed_where_the_straight_line_between_points_crosses_it() -> None:
    # From 1 to 3 in one step the limit of 2 is met half way; the second step is all outside.
    swr = np.array([1.0, 3.0, 3.0])[None, :, None]
    assert served_fraction(swr, np.array(2.0))[0, 0] == pytest.approx(0.25)


def test_touching_the_limit_at_a_point_still_counts_as_served() -> None:
    swr = np.array([1.2, 2.0, 1.4])[None, :, None]
    assert served_fraction(swr, np.array(2.0))[0, 0] == 1.0


def test_only_required_bands_count_as_required_served() -> None:
    bands = (band("a"), band("b", required=False))
    gained = merit(scored_as(np.full((2, 3, 1), 1.5), bands), bands)
    assert gained.required_served[0] == 1


def test_weights_share_out_the_served_width() -> None:
    bands = (band("a", weight=3.0), band("b", weight=1.0))
    swr = np.stack([np.full((3, 1), 1.5), np.full((3, 1), 9.0)])
    assert merit(scored_as(swr, bands), bands).weighted_served[0] == pytest.approx(0.75)


def test_the_worst_swr_leaves_out_bands_that_are_not_served() -> None:
    bands = (band("a"), band("b"))
    swr = np.stack([np.full((3, 1), 1.5), np.full((3, 1), 40.0)])
    assert merit(scored_as(swr, bands), bands).swr_worst[0] == pytest.approx(1.5)


def test_with_nothing_served_the_nearest_miss_counts() -> None:
    bands = (band("a"), band("b"))
    swr = np.stack([np.full((3, 1), 3.0), np.full((3, 1), 40.0)])
    assert merit(scored_as(swr, bands), bands).swr_worst[0] == pytest.approx(3.0)


def test_with_one_band_served_in_part_the_nearest_miss_counts_too() -> None:
    swr = np.array([1.5, 3.0, 9.0])[None, :, None]
    assert merit(scored_as(swr, (band(),)), (band(),)).swr_worst[0] == pytest.approx(9.0)


def test_a_transformer_divides_the_impedance_that_is_judged() -> None:
    scored = score(np.full((1, 3, 1), 200.0 + 0.0j), (band(),), Feeding(50.0), 4.0)
    assert scored.swr_worst[0, 0] == pytest.approx(1.0)


def test_the_loss_is_that_of_the_line_at_the_centre_of_the_band() -> None:
    line, length_m = FEED_LINES["rg-58"], 30.0
    feeding = Feeding(50.0, line, length_m)
    scored = score(np.full((1, 3, 1), 50.0 + 0.0j), (band(),), feeding, 1.0)
    # On a line its own resistance loses only what the line loses matched.
    matched_db = length_m * float(sum(line.attenuation.terms_db_per_m(7.15e6)))
    assert scored.loss_db[0, 0] == pytest.approx(matched_db, rel=2e-3)


def test_the_loss_counted_is_the_largest_of_the_bands_served_at_all() -> None:
    fractions = np.array([[1.0], [0.3], [0.0]])
    losses = np.array([[0.5], [0.8], [9.0]])
    gained = merit(Score(fractions, np.ones((3, 1)), losses), (band("a"), band("b"), band("c")))
    assert gained.loss_db[0] == 0.8


def test_a_band_served_only_between_the_points_looked_at_is_found_and_measured() -> None:
    # Of 50 ohm and a straight reactance, in resonance half way between two of seven points. The
    # mismatch power is a parabola, so that the part within a limit is known in closed form.
    goal = BandGoal("b", 7.0e6, 7.3e6, required=True, weight=1.0, swr_limit=1.2)
    hertz = goal.grid_hz(7)
    centre_hz, slope_ohm_per_hz = 0.5 * (hertz[3] + hertz[4]), 14.0 / 25e3
    impedance = 50.0 + 1j * slope_ohm_per_hz * (hertz - centre_hz)
    scored = score(impedance[None, :, None], (goal,), Feeding(50.0), 1.0)
    # (S + 1)² / 4S = 1 + X² / 4R² at the limit: |X| = R (S - 1) / sqrt(S).
    reach_hz = 50.0 * 0.2 / np.sqrt(1.2) / slope_ohm_per_hz
    assert reach_hz < 25e3
    assert scored.served_fraction[0, 0] == pytest.approx(2.0 * reach_hz / 300e3, rel=1e-2)


def test_a_limit_exceeded_only_between_the_points_is_found_too() -> None:
    # A resistance that swells between the third and the fifth point of seven.
    goal = BandGoal("b", 7.0e6, 7.3e6, required=True, weight=1.0, swr_limit=1.99)
    places = np.linspace(-1.0, 1.0, 7)
    swell = 50.0 * (2.0 - 0.15 * (places - 1.0 / 6.0) ** 2)
    scored = score(swell[None, :, None].astype(np.complex128), (goal,), Feeding(50.0), 1.0)
    assert scored.swr_worst[0, 0] == pytest.approx(2.0, rel=1e-4)
    assert scored.served_fraction[0, 0] < 1.0
