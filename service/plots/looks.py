"""Looks of the plots that are files of their own, and the hues that tell bands apart.

Hues are those of M. Okabe and K. Ito ("Color universal design", 2008), darkened where on white
they would be too faint; every line has a dash or a mark of its own besides.
"""

from __future__ import annotations

from typing import Final

#: Hues times dashes tell as many bands apart as one request may name.
_HUES: Final = ("#0067a5", "#b84a00", "#006b50", "#93387a", "#1a2530", "#8a6a00")
_DASHES: Final = 2

_INK: Final = "#1a2530"
_SOFT: Final = "#52606d"
_BLUE: Final = "#0067a5"
_VERMILION: Final = "#b84a00"

#: White around letters, so that lines behind do not run through them.
_HALO: Final = 'paint-order="stroke" stroke="#fff" stroke-width="3"'

#: Presentation attributes by class; the stylesheet of the pages says the same, and more.
LOOKS: Final[dict[str, str]] = {
    "svg": 'font-family="sans-serif" font-size="12" fill="none"',
    "paper": 'fill="#fff"',
    "frame": f'stroke="{_INK}"',
    "grid": 'stroke="#c5ccd3"',
    "half-power": f'stroke="{_SOFT}" stroke-dasharray="2 3"',
    "zero": f'stroke="{_SOFT}"',
    "wire-line": f'stroke="{_INK}" stroke-width="3"',
    "curve": 'stroke-width="2" stroke-linejoin="round"',
    "standing": f'stroke="{_BLUE}"',
    "size": f'stroke="{_SOFT}" stroke-width="1.2" stroke-dasharray="2 3"',
    "broadside": f'stroke="{_BLUE}"',
    "end-on": f'stroke="{_VERMILION}" stroke-dasharray="7 3"',
    "around": f'stroke="{_BLUE}"',
    "strongest": f'stroke="{_INK}" stroke-dasharray="1 3"',
    "shown": f'fill="{_BLUE}" stroke="#fff"',
    "feed-mark": f'fill="{_VERMILION}" stroke="#fff"',
    "resonance": f'stroke="{_INK}" stroke-dasharray="1 3"',
    "limit": f'stroke="{_VERMILION}" stroke-width="1.4" stroke-dasharray="7 4"',
    "limit-name": f'fill="{_VERMILION}" font-size="11"',
    "leader": 'stroke="#c5ccd3"',
    "order": f'fill="{_INK}" font-weight="600" {_HALO}',
    "ring": f'fill="{_SOFT}" font-size="10" {_HALO}',
    "words": f'fill="{_INK}"',
    "tick": f'fill="{_SOFT}"',
    "unit": f'fill="{_SOFT}"',
    "band-name": f'fill="{_INK}" font-weight="600"',
    "low-edge": 'fill="#fff" stroke-width="1.8"',
    "dash-0": "",
    "dash-1": 'stroke-dasharray="6 3"',
    **{f"hue-{index}": f'stroke="{hue}"' for index, hue in enumerate(_HUES)},
    **{f"filled-hue-{index}": f'fill="{hue}"' for index, hue in enumerate(_HUES)},
}


def band_look(index: int) -> str:
    """Classes of the line of one of several bands: a hue, and a dash once hues are used up."""
    return f"{band_hue(index)} dash-{index // len(_HUES) % _DASHES}"


def band_hue(index: int) -> str:
    """Class of the marks of one of several bands."""
    return f"hue-{index % len(_HUES)}"
