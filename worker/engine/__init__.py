"""Pure numerics: what a straight wire does at radio frequency, in SI units."""

from typing import Final

#: Recorded with every result; raised whenever a change moves a figure a planner could see.
ENGINE_VERSION: Final = "0.2"
