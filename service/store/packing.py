"""Results and reports as stored: JSON, packed to a sixth, for most of a commit is writing.

Level 1 packs half a megabyte in a few milliseconds; higher levels save little more and take
longer than writing what they save.
"""

from __future__ import annotations

import zlib
from typing import Final

_LEVEL: Final = 1


def pack(text: str) -> bytes:
    """Text as it is stored."""
    return zlib.compress(text.encode(), _LEVEL)


def unpack(packed: bytes) -> str:
    """The text of what was stored."""
    return zlib.decompress(packed).decode()
