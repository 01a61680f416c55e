"""The bench: where a wire is moved by hand. The service only knows what it asks of one.

Numerics stay outside of the service, so whoever puts the application together hands one in;
without it the pages and the API say so.
"""

from __future__ import annotations

from typing import Protocol

from service.contracts.what_if import WhatIf, WhatIfRequest


class Bench(Protocol):
    """Answers what-ifs at once, one after the other."""

    def try_wire(self, asked: WhatIfRequest) -> WhatIf:
        """How a wire would serve each band.

        Raises
        ------
        RequestRefused
            If the wire lies outside what the models cover.
        BenchBusy
            If others wait already, or the answer was lost; asking again is safe.
        BenchTooSlow
            If there is no answer within the time allowed.
        """
        ...
