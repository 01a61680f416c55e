"""Ready-made band lists by ITU Region: amateur HF to 6 m, and HF broadcasting.

Edges are those of the Table of Frequency Allocations (ITU Radio Regulations, Article 5)
for the three Regions; national rules may allow less. HF broadcasting under Article 12
uses the bands of Article 5 with the extensions of No. 5.134.

How each edge was obtained is said beside it: *read* in a text that quotes the regulation,
or *memory*, recalled and to be checked against the current edition.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Final, Literal


@dataclass(frozen=True, slots=True)
class BandEdges:
    """One band of a list: its name, its edges in MHz and how they were obtained."""

    name: str
    low_mhz: float
    high_mhz: float
    obtained: Literal["read", "memory"]


@dataclass(frozen=True, slots=True)
class BandList:
    """A named list of bands with its source."""

    name: str
    title: str
    source: str
    bands: tuple[BandEdges, ...]

    def find(self, name: str) -> BandEdges | None:
        """The band of that name; case and spaces do not matter ("40 M" is "40m")."""
        wanted = "".join(name.casefold().split())
        return next((band for band in self.bands if band.name == wanted), None)


_ARTICLE_5: Final = "ITU Radio Regulations, Article 5, Table of Frequency Allocations"
_ARTICLE_12: Final = (
    "ITU Radio Regulations, Article 5 with No. 5.134, seasonal planning by Article 12"
)

# name, obtained, edges in kHz in Regions 1, 2 and 3.
# Read: 160 m, 80 m, 40 m and 60 m (WRC-15) and 17 m in texts of the regional organisations
# of amateurs that quote Article 5. Region 1 has 1810–1850 kHz by the Table itself; some
# countries go to 2000 kHz by national footnote. 50–54 MHz in Region 1 since WRC-19, with
# national limits. The 60 m and 30 m bands are secondary, with power limits.
_AMATEUR_KHZ: Final = (
    ("160m", "read", (1810.0, 1850.0), (1800.0, 2000.0), (1800.0, 2000.0)),
    ("80m", "read", (3500.0, 3800.0), (3500.0, 4000.0), (3500.0, 3900.0)),
    ("60m", "read", (5351.5, 5366.5), (5351.5, 5366.5), (5351.5, 5366.5)),
    ("40m", "read", (7000.0, 7200.0), (7000.0, 7300.0), (7000.0, 7200.0)),
    ("30m", "memory", (10100.0, 10150.0), (10100.0, 10150.0), (10100.0, 10150.0)),
    ("20m", "memory", (14000.0, 14350.0), (14000.0, 14350.0), (14000.0, 14350.0)),
    ("17m", "read", (18068.0, 18168.0), (18068.0, 18168.0), (18068.0, 18168.0)),
    ("15m", "memory", (21000.0, 21450.0), (21000.0, 21450.0), (21000.0, 21450.0)),
    ("12m", "memory", (24890.0, 24990.0), (24890.0, 24990.0), (24890.0, 24990.0)),
    ("10m", "memory", (28000.0, 29700.0), (28000.0, 29700.0), (28000.0, 29700.0)),
    ("6m", "memory", (50000.0, 54000.0), (50000.0, 54000.0), (50000.0, 54000.0)),
)

# HF broadcasting worldwide; 41 m differs by Region and 75 m is no broadcasting band in
# Region 2. The tropical-zone bands (No. 5.113) are left out: they are not for all.
_BROADCAST_KHZ: Final = (
    ("75m", "read", (3950.0, 4000.0), None, (3900.0, 4000.0)),
    ("49m", "memory", (5900.0, 6200.0), (5900.0, 6200.0), (5900.0, 6200.0)),
    ("41m", "memory", (7200.0, 7450.0), (7300.0, 7400.0), (7200.0, 7450.0)),
    ("31m", "memory", (9400.0, 9900.0), (9400.0, 9900.0), (9400.0, 9900.0)),
    ("25m", "memory", (11600.0, 12100.0), (11600.0, 12100.0), (11600.0, 12100.0)),
    ("22m", "memory", (13570.0, 13870.0), (13570.0, 13870.0), (13570.0, 13870.0)),
    ("19m", "memory", (15100.0, 15800.0), (15100.0, 15800.0), (15100.0, 15800.0)),
    ("16m", "memory", (17480.0, 17900.0), (17480.0, 17900.0), (17480.0, 17900.0)),
    ("15m", "memory", (18900.0, 19020.0), (18900.0, 19020.0), (18900.0, 19020.0)),
    ("13m", "memory", (21450.0, 21850.0), (21450.0, 21850.0), (21450.0, 21850.0)),
    ("11m", "memory", (25670.0, 26100.0), (25670.0, 26100.0), (25670.0, 26100.0)),
)

_Row = tuple[str, str, *tuple[tuple[float, float] | None, ...]]


def _bands_of_region(rows: Iterable[_Row], region: int) -> tuple[BandEdges, ...]:
    chosen: list[BandEdges] = []
    for name, obtained, *regions in rows:
        edges = regions[region - 1]
        if edges is not None:
            how: Literal["read", "memory"] = "read" if obtained == "read" else "memory"
            chosen.append(BandEdges(name, edges[0] / 1e3, edges[1] / 1e3, how))
    return tuple(chosen)


def _all_lists() -> Mapping[str, BandList]:
    lists: dict[str, BandList] = {}
    for service, rows, title, source in (
        ("amateur", _AMATEUR_KHZ, "Amateur service", _ARTICLE_5),
        ("broadcast", _BROADCAST_KHZ, "HF broadcasting", _ARTICLE_12),
    ):
        for region in (1, 2, 3):
            name = f"{service}-region-{region}"
            bands = _bands_of_region(rows, region)
            lists[name] = BandList(name, f"{title}, ITU Region {region}", source, bands)
    return MappingProxyType(lists)


#: Every ready-made list by its name, ``amateur-region-2`` and the like.
BAND_LISTS: Final = _all_lists()
