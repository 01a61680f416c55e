"""Ready-made band lists that a request may name."""

from __future__ import annotations

from typing import Literal

from fastapi import APIRouter, Request, Response

from service.api.problems import responses
from service.api.stored import answer_stored
from service.contracts.band_lists import BAND_LISTS, BandList
from service.contracts.quantities import Contract

router = APIRouter(prefix="/v1/band-lists", tags=["band lists"])


class ListedBand(Contract):
    """One band of a list; ``obtained`` says how its edges were."""

    name: str
    low_mhz: float
    high_mhz: float
    obtained: Literal["read", "memory"]


class ListedBands(Contract):
    """One ready-made list with its source."""

    name: str
    title: str
    source: str
    bands: tuple[ListedBand, ...]


class AllBandLists(Contract):
    """Every ready-made list."""

    band_lists: tuple[ListedBands, ...]


def _listed(each: BandList) -> ListedBands:
    bands = tuple(
        ListedBand(
            name=band.name, low_mhz=band.low_mhz, high_mhz=band.high_mhz, obtained=band.obtained
        )
        for band in each.bands
    )
    return ListedBands(name=each.name, title=each.title, source=each.source, bands=bands)


_ALL = AllBandLists(band_lists=tuple(map(_listed, BAND_LISTS.values())))


@router.get("", response_model=AllBandLists, responses=responses())
def list_band_lists(request: Request) -> Response:
    """List the ready-made band lists by ITU Region, with edges and sources."""
    return answer_stored(request, _ALL)
