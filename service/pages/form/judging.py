"""A written form judged by the contract: its faults by field, or the size of its search."""

from __future__ import annotations

from dataclasses import dataclass

from service.contracts.estimate import SearchEstimate, estimate_search
from service.contracts.request import DesignRequest, parse_request
from service.errors import Fault, RequestRefused
from service.pages.form.entries import Entries
from service.pages.form.reading import read_form


@dataclass(frozen=True, slots=True)
class Judged:
    """What the contract says of a form.

    Attributes
    ----------
    request : DesignRequest or None
        The request, where nothing is wrong with it.
    faults : tuple of (str or None, Fault)
        Each fault with the name of the form's field it is about, None where it has none.
    estimate : SearchEstimate or None
        The size of the search, where there is a request.
    """

    request: DesignRequest | None
    faults: tuple[tuple[str | None, Fault], ...] = ()
    estimate: SearchEstimate | None = None


def judge(entries: Entries) -> Judged:
    """Read the entries as a request and have the contract judge it."""
    form = read_form(entries)
    try:
        request = parse_request(form.json())
    except RequestRefused as refused:
        return Judged(None, tuple((form.field_of(fault), fault) for fault in refused.faults))
    return Judged(request, estimate=estimate_search(request))
