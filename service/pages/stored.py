"""What pages are given: the store that the application opened."""

from __future__ import annotations

from typing import Annotated

from fastapi import Depends, Request

from service.store.session import Store


def store_of(request: Request) -> Store:
    """The store that the application opened."""
    store: Store = request.app.state.store
    return store


StoreHere = Annotated[Store, Depends(store_of)]
