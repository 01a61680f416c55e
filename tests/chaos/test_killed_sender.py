"""The short form of the sender that is killed: on both databases, with fewer requests."""

from __future__ import annotations

from pathlib import Path

from service.settings import Settings
from service.store.session import Store
from tests.chaos.killed_sender import send


def test_each_design_of_a_sender_that_is_killed_and_sends_again_exists_once(
    store: Store, settings: Settings, tmp_path: Path
) -> None:
    sent = send(store, settings, number=200, kills=3, seed=1, folder=tmp_path)
    assert sent.violations == ()
    assert sent.stored == 200
    # Some were sent again, or nothing was tested.
    assert sent.acceptances > 200
