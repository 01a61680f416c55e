"""The bill of materials of one candidate: what to buy, how much, and what each part must bear."""

from __future__ import annotations

from datetime import datetime
from typing import Literal

from service.contracts.quantities import Contract

PartName = Literal[
    "conductor",
    "end insulator",
    "feed insulator",
    "transformer",
    "current balun",
    "common-mode choke",
    "inductor",
    "capacitor",
    "feed line",
    "rope",
    "pulley",
    "shackle",
]


class Rating(Contract):
    """One figure that a part must meet, and where it comes from.

    ``bound`` says how: with ``at least`` the part's own rating must not lie below ``value``, with
    ``at most`` not above it; ``nominal`` is the value to order.
    """

    name: str
    bound: Literal["at least", "at most", "nominal"]
    value: float
    unit: str
    source: str


class BillLine(Contract):
    """One part to buy.

    ``item_code`` and ``unit_price`` are those of the request's stock, unchanged; ``amount`` is
    quantity times price, in the same currency. All three are left out where the request says
    nothing of the part.
    """

    part: PartName
    description: str
    quantity: float
    unit: Literal["m", "piece"]
    quantity_source: str
    ratings: tuple[Rating, ...]
    item_code: str = ""
    unit_price: float | None = None
    amount: float | None = None


class BillOfMaterials(Contract):
    """Everything between the supports and down to the transmitter, as far as it is planned.

    ``purchase_reference`` is that of the request. ``planned_at`` is when the result was stored.
    ``notes`` say what is not on the bill or could not be told.
    """

    design_id: str
    design_name: str
    rank: int
    purchase_reference: str
    planned_at: datetime
    wire: str
    power_w: float
    lines: tuple[BillLine, ...]
    notes: tuple[str, ...]
    cautions: tuple[str, ...]
