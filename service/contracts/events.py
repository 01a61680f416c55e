"""What a stream of events tells beside the states of designs and batches."""

from __future__ import annotations

from service.contracts.quantities import Contract


class Snapshot(Contract):
    """The start of what is stored now: the next ``states`` events tell where designs stand.

    ``complete`` is false where only those that changed last are told; read the list then.
    """

    states: int
    complete: bool
