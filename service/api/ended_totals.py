"""What has come of the jobs that ended, added up as it is told by the store.

Counters of a process must never fall, and jobs may be put in again or be taken away; so each
process adds up what ended, from the first that is stored, and reads only what is new.
"""

from __future__ import annotations

import threading
from bisect import bisect_left
from collections import Counter, defaultdict
from collections.abc import Sequence
from dataclasses import dataclass, field
from itertools import accumulate
from typing import Final

from service.contracts.progress import Priority, State
from service.store import figures
from service.store.figures import Ended
from service.store.session import Store

#: Read at a time, and how often at one asking: a large store is added up over several.
_PAGE: Final = 5000
_MOST_PAGES: Final = 20

_WAIT_S: Final = (0.1, 0.5, 1.0, 5.0, 15.0, 60.0, 300.0, 900.0, 3600.0, 14400.0, 86400.0)
_RUN_S: Final = (0.05, 0.1, 0.25, 0.5, 1.0, 2.5, 5.0, 10.0, 30.0, 60.0, 120.0, 300.0, 600.0)
_ATTEMPTS: Final = (1.0, 2.0, 3.0, 5.0, 10.0)
_MAP_ERROR_PERCENT: Final = (0.01, 0.02, 0.05, 0.1, 0.2, 0.5, 1.0, 2.0, 5.0)


@dataclass(slots=True)
class Spread:
    """How values spread over bins that end at ``bounds``, and their sum."""

    bounds: Sequence[float]
    total: float = 0.0
    _counts: list[int] = field(init=False)

    def __post_init__(self) -> None:
        self._counts = [0] * (len(self.bounds) + 1)

    def add(self, value: float | None) -> None:
        """Add a value; what has none is passed over."""
        if value is not None:
            self._counts[bisect_left(self.bounds, value)] += 1
            self.total += value

    def up_to(self) -> list[tuple[str, float]]:
        """For each bound, and for any value at all, how many values lie at or below it."""
        names = [*map(str, self.bounds), "+Inf"]
        return list(zip(names, map(float, accumulate(self._counts)), strict=True))


def _spreads(bounds: Sequence[float]) -> defaultdict[Priority, Spread]:
    return defaultdict(lambda: Spread(bounds))


@dataclass(slots=True)
class EndedTotals:
    """All that has ended so far, as one process knows it."""

    ended: Counter[tuple[State, Priority]] = field(default_factory=Counter)
    answered: int = 0
    set_aside: int = 0
    wait_s: defaultdict[Priority, Spread] = field(default_factory=lambda: _spreads(_WAIT_S))
    run_s: defaultdict[Priority, Spread] = field(default_factory=lambda: _spreads(_RUN_S))
    attempts: Spread = field(default_factory=lambda: Spread(_ATTEMPTS))
    map_error_percent: Spread = field(default_factory=lambda: Spread(_MAP_ERROR_PERCENT))
    _last: tuple[int, str] = (0, "")
    _reading: threading.Lock = field(default_factory=threading.Lock)

    def read_on(self, store: Store) -> None:
        """Add what has ended since, or as much of it as does not take long.

        Raises
        ------
        StoreUnavailable
            If the store stays away; what was read before stays added.
        """
        with self._reading:
            for _ in range(_MOST_PAGES):
                after_us, after_id = self._last
                page = figures.ended_since(store, after_us=after_us, after_id=after_id, limit=_PAGE)
                for each in page:
                    self._add(each)
                if len(page) < _PAGE:
                    return

    def _add(self, each: Ended) -> None:
        self._last = (each.changed_us, each.design_id)
        self.ended[each.state, each.priority] += 1
        self.answered += each.answered
        self.set_aside += each.set_aside
        self.wait_s[each.priority].add(each.wait_s)
        self.run_s[each.priority].add(each.run_s)
        self.map_error_percent.add(each.map_error_percent)
        # What a stored result answered was never attempted.
        self.attempts.add(each.attempts or None)
