"""The order of wires and which of them are shown, on small invented sets."""

import numpy as np
import pytest

from tests.unit.search.open_line import OpenLine
from worker.search.ranking import (
    Contender,
    Pick,
    best_first,
    contenders_of,
    distinct_leaders,
    nearest_odd_order,
    nearest_order,
    rank_keys,
)
from worker.search.scoring import Merit, Score, merit
from worker.search.space import BandGoal, WireOffer


def keys_of(
    required: list[int],
    width: list[float],
    worst: list[float],
    *,
    loss_db: list[float] | None = None,
    lengths_m: list[float] | None = None,
    cost: list[float] | None = None,
) -> list[int]:
    """The order of wires, each longer than the one before unless lengths are given."""
    count = len(required)
    alone = Merit(
        np.array(required), np.array(width), np.array(worst), np.array(loss_db or [0.0] * count)
    )
    longer_m = np.array(lengths_m or np.linspace(20.0, 21.0, count))
    keys = rank_keys(alone, longer_m, np.array(cost or [0.0] * count))
    return [int(index) for index in best_first(keys)]


def test_required_bands_outrank_everything_else() -> None:
    assert keys_of([1, 2], [0.9, 0.6], [1.1, 1.9]) == [1, 0]


def test_among_equals_the_larger_served_width_ranks_first() -> None:
    assert keys_of([1, 1], [0.6, 0.9], [1.1, 1.9]) == [1, 0]


def test_then_the_lower_worst_swr_ranks_first() -> None:
    assert keys_of([1, 1], [0.9, 0.9], [1.9, 1.1]) == [1, 0]


def test_then_the_lower_loss_of_the_line_ranks_first() -> None:
    assert keys_of([1, 1], [0.9, 0.9], [1.5, 1.5], loss_db=[1.9, 1.1]) == [1, 0]


def test_then_the_shorter_wire_ranks_first() -> None:
    assert keys_of([1, 1], [0.9, 0.9], [1.5, 1.5]) == [0, 1]
    assert keys_of([1, 1], [0.9, 0.9], [1.5, 1.5], lengths_m=[21.0, 20.0]) == [1, 0]


def test_then_the_cheaper_wire_ranks_first() -> None:
    same: dict[str, list[float]] = {"lengths_m": [20.0, 20.0], "cost": [9.0, 8.0]}
    assert keys_of([1, 1], [0.9, 0.9], [1.5, 1.5], **same) == [1, 0]


def test_a_few_centimetres_of_length_do_not_hide_the_price() -> None:
    near: dict[str, list[float]] = {"lengths_m": [20.0, 20.02], "cost": [9.0, 8.0]}
    assert keys_of([1, 1], [0.9, 0.9], [1.5, 1.5], **near) == [1, 0]


def test_of_wires_alike_the_first_and_shorter_stays_first() -> None:
    assert keys_of([1, 1], [0.9, 0.9], [1.5, 1.5], lengths_m=[20.0, 20.001]) == [0, 1]


def test_a_difference_in_width_or_loss_too_small_to_matter_does_not_decide() -> None:
    assert keys_of([1, 1], [0.9001, 0.9003], [1.5, 1.5]) == [0, 1]
    assert keys_of([1, 1], [0.9, 0.9], [1.5, 1.5], loss_db=[1.02, 0.98]) == [0, 1]


def test_a_difference_in_swr_too_small_to_build_does_not_decide() -> None:
    assert keys_of([1, 1], [0.9, 0.9], [1.5001, 1.5]) == [0, 1]


def test_orders_are_odd_and_change_at_whole_wavelengths() -> None:
    # One half wave is 10 m at 14.99 MHz.
    lengths_m = np.array([9.7, 19.9, 20.1, 29.6, 49.5])
    assert nearest_odd_order(lengths_m, 14.9896229e6).tolist() == [1, 1, 3, 3, 5]


def test_off_the_centre_orders_are_all_whole_numbers() -> None:
    lengths_m = np.array([9.7, 19.5, 20.1, 29.6, 49.5])
    assert nearest_order(lengths_m, 14.9896229e6).tolist() == [1, 2, 2, 3, 5]


@pytest.mark.parametrize(("centred", "order"), [(True, 1), (False, 2)])
def test_a_wire_off_the_centre_uses_a_band_on_its_second_order(centred: bool, order: int) -> None:
    # A full wave long on the band and served whole.
    lengths_m = np.array([19.4, 19.5, 19.6])
    swr = np.array([[1.6, 1.5, 1.6]])
    scored = Score(np.ones((1, 3)), swr, np.zeros((1, 3)))
    band = BandGoal("20m", 14.9e6, 15.0e6, required=True, weight=1.0, swr_limit=2.0)
    offer = WireOffer(OpenLine(), centred=centred)
    (top,) = contenders_of(scored, merit(scored, (band,)), lengths_m, (band,), (0, offer), 4.0)
    assert top.kind == ((order, 2),)
    assert top.pick == Pick(0, 4.0, 19.5)


def test_of_two_optima_of_one_kind_the_better_contends() -> None:
    # Both a half wave long on the band, served whole, with a worse length between them.
    lengths_m = np.linspace(9.6, 10.0, 5)
    swr = np.array([[1.9, 1.4, 1.8, 1.2, 1.9]])
    scored = Score(np.ones((1, 5)), swr, np.zeros((1, 5)))
    band = BandGoal("20m", 14.9e6, 15.0e6, required=True, weight=1.0, swr_limit=2.0)
    offer = WireOffer(OpenLine())
    (top,) = contenders_of(scored, merit(scored, (band,)), lengths_m, (band,), (0, offer), 1.0)
    assert top.pick == Pick(0, 1.0, float(lengths_m[3]))


def contender(place: float, kind: tuple[tuple[int, int], ...]) -> Contender:
    return Contender((place,), kind, Pick(0, 1.0, place))


def test_neighbours_of_one_optimum_are_shown_once() -> None:
    shown = distinct_leaders([contender(2.0, ((1, 2),)), contender(1.0, ((1, 2),))], 5)
    assert [each.pick.length_m for each in shown] == [1.0]


def test_a_wire_that_serves_a_band_on_another_order_is_shown_too() -> None:
    shown = distinct_leaders([contender(1.0, ((1, 2),)), contender(2.0, ((3, 2),))], 5)
    assert [each.pick.length_m for each in shown] == [1.0, 2.0]


def test_a_wire_that_serves_less_on_the_same_orders_adds_nothing() -> None:
    better, worse = contender(1.0, ((1, 2), (3, 2))), contender(2.0, ((1, 2), (3, 1)))
    assert len(distinct_leaders([better, worse], 5)) == 1


def test_a_wire_that_serves_nothing_is_shown_only_when_none_serves() -> None:
    idle = contender(2.0, ((0, 0),))
    assert len(distinct_leaders([contender(1.0, ((1, 2),)), idle], 5)) == 1
    assert len(distinct_leaders([idle], 5)) == 1


def test_no_more_leaders_than_asked_for_are_shown() -> None:
    several = [contender(float(n), ((n, 2),)) for n in (1, 3, 5, 7)]
    assert len(distinct_leaders(several, 2)) == 2
