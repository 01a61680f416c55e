"""Sets of dipoles, against every subset of small invented pools."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import combinations

import numpy as np
import pytest

from worker.search.sets import ChosenSet, best_sets
from worker.search.space import FloatArray


@dataclass(frozen=True)
class Pool:
    """How much of each band each wire serves, and which bands are required."""

    served: FloatArray
    required: np.ndarray[tuple[int], np.dtype[np.bool_]]
    weight: FloatArray

    def best_sets(self, largest: int) -> tuple[ChosenSet, ...]:
        return best_sets(self.served, self.required, self.weight, largest)

    def worth(self, members: tuple[int, ...]) -> tuple[int, float]:
        """Required bands served whole and width by weight, by the plain definition."""
        most = self.served[list(members)].max(axis=0)
        whole = int(np.sum((most >= 1.0) & self.required))
        return whole, float(most @ self.weight / self.weight.sum())

    def best_of(self, size: int) -> tuple[int, float]:
        """The best that any subset of at most so many wires is worth."""
        subsets = (
            each
            for count in range(1, size + 1)
            for each in combinations(range(len(self.served)), count)
        )
        return max((self.worth(each) for each in subsets), key=lambda worth: worth)


def pool(seed: int, wires: int, bands: int) -> Pool:
    """A pool in which wires serve some bands whole, some in part and most not at all."""
    rng = np.random.default_rng(seed)
    parts = rng.choice([0.0, 0.0, 0.0, 0.25, 0.5, 0.75, 1.0, 1.0], size=(wires, bands))
    required = rng.random(bands) < 0.6
    required[0] = True
    return Pool(parts, required, rng.choice([0.5, 1.0, 2.0], size=bands))


@pytest.mark.parametrize("seed", range(25))
def test_the_best_set_of_each_size_is_the_best_of_all_subsets(seed: int) -> None:
    each = pool(seed, wires=7, bands=5)
    for size in range(1, 5):
        found = each.best_sets(size)[-1]
        whole, width = each.best_of(size)
        assert found.required_served == whole
        assert found.weighted_served == pytest.approx(width, abs=1e-12)
        assert each.worth(found.members) == pytest.approx((whole, width))


@pytest.mark.parametrize("seed", range(25))
def test_the_first_that_serves_all_required_is_the_smallest_that_can(seed: int) -> None:
    each = pool(seed, wires=7, bands=5)
    wanted = int(each.required.sum())
    sizes = [size for size in range(1, 5) if each.best_of(size)[0] == wanted]
    enough = [found for found in each.best_sets(4) if found.required_served == wanted]
    assert bool(enough) == bool(sizes)
    if sizes:
        assert len(enough[0].members) == sizes[0]


@pytest.mark.parametrize("seed", range(25))
def test_every_larger_set_gains_and_none_has_a_member_to_spare(seed: int) -> None:
    each = pool(seed, wires=7, bands=5)
    found = each.best_sets(4)
    worths = [(one.required_served, one.weighted_served) for one in found]
    assert worths == sorted(worths)
    assert len({len(one.members) for one in found}) == len(found)
    for one in found[1:]:
        for left_out in one.members:
            rest = tuple(member for member in one.members if member != left_out)
            assert each.worth(rest) < (one.required_served, one.weighted_served - 1e-12)


@pytest.mark.parametrize("seed", range(10))
def test_each_band_is_given_to_the_member_that_serves_the_most_of_it(seed: int) -> None:
    each = pool(seed, wires=7, bands=5)
    for found in each.best_sets(3):
        for band, server in enumerate(found.server):
            most = each.served[list(found.members), band].max()
            assert (server is None) == (most == 0.0)
            if server is not None:
                assert server in found.members
                assert each.served[server, band] == most


def test_one_required_band_more_outweighs_any_width() -> None:
    # The first serves all of five wished bands, the second one required band and nothing else.
    served = np.array([[0.0, 1.0, 1.0, 1.0, 1.0, 1.0], [1.0, 0.0, 0.0, 0.0, 0.0, 0.0]])
    required = np.array([True] + [False] * 5)
    (found,) = best_sets(served, required, np.array([0.1] + [10.0] * 5), 1)
    assert found.members == (1,)


def test_a_band_served_in_part_by_two_is_not_served_whole_by_both() -> None:
    served = np.array([[0.5, 1.0], [0.5, 0.0]])
    found = best_sets(served, np.array([True, True]), np.ones(2), 2)
    assert [each.members for each in found] == [(0,)]
    assert found[0].required_served == 1


def test_wires_that_serve_nothing_make_no_set() -> None:
    assert best_sets(np.zeros((3, 2)), np.array([True, False]), np.ones(2), 3) == ()


@pytest.mark.parametrize("wires", [8, 150])
def test_of_wires_alike_the_one_preferred_is_taken(wires: int) -> None:
    # All serve the first band; the last three serve the second as well, all alike.
    served = np.zeros((wires, 3))
    served[: wires - 3, 0] = 1.0
    served[-3:, 1] = 1.0
    found = best_sets(served, np.ones(3, dtype=bool), np.ones(3), 3)
    assert [each.members for each in found] == [(0,), (0, wires - 3)]


def test_a_preferred_wire_takes_the_place_of_one_whose_other_bands_are_served_anyway() -> None:
    # The third serves all the first does and more, but the second serves that more as well.
    served = np.array([[1.0, 0.0, 0.0], [0.0, 1.0, 1.0], [1.0, 1.0, 0.0]])
    found = best_sets(served, np.ones(3, dtype=bool), np.ones(3), 2)
    assert found[-1].members == (0, 1)


@pytest.mark.parametrize("seed", range(5))
def test_the_same_pool_gives_the_same_sets(seed: int) -> None:
    each = pool(seed, wires=30, bands=8)
    assert each.best_sets(4) == each.best_sets(4)


@pytest.mark.parametrize("seed", range(5))
def test_of_many_sets_alike_the_one_of_wires_preferred_is_taken(seed: int) -> None:
    # Every wire twice: whatever is chosen, it is the first of the two.
    each = pool(seed, wires=30, bands=8)
    twice = Pool(np.vstack([each.served, each.served]), each.required, each.weight)
    for found in twice.best_sets(3):
        assert all(member < 30 for member in found.members)
