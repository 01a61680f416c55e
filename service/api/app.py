"""The application: settings in, routes, pages and guards put together."""

from __future__ import annotations

from collections.abc import AsyncIterator
from contextlib import ExitStack, asynccontextmanager, closing
from importlib.metadata import metadata

from fastapi import FastAPI

from service.api import (
    band_lists,
    batches,
    bills,
    candidates,
    check,
    designs,
    events,
    health,
    metrics,
    openapi,
    plots,
    problem_kinds,
    problems,
    what_if,
)
from service.api.change_feed import ChangeFeed
from service.api.ended_totals import EndedTotals
from service.api.guard import Guard
from service.api.request_watch import RequestWatch
from service.bench import Bench
from service.doorbell import Doorbell
from service.pages import routes as pages
from service.settings import Settings
from service.store.session import Store, open_store


def create_app(
    settings: Settings, store: Store | None = None, bench: Bench | None = None
) -> FastAPI:
    """Put the application together.

    Parameters
    ----------
    settings : Settings
    store : Store, optional
        One that is open already and stays its owner's; by default the application opens
        the one its settings name when it starts, and closes it when it ends.
    bench : Bench, optional
        Answers what-ifs, and stays its owner's; without one they are refused.
    """

    @asynccontextmanager
    async def lifespan(app: FastAPI) -> AsyncIterator[None]:
        with ExitStack() as opened:
            if store is None:
                app.state.store = opened.enter_context(closing(open_store(settings)))
            app.state.doorbell = opened.enter_context(closing(Doorbell(settings)))
            feed = ChangeFeed(app.state.store, settings.most_streams)
            app.state.change_feed = opened.enter_context(closing(feed))
            yield

    package = metadata("spanwright")
    app = FastAPI(
        title="Spanwright",
        version=package["Version"],
        description=package["Summary"],
        lifespan=lifespan,
        # The ready-made browsers of the description load scripts from other hosts.
        docs_url=None,
        redoc_url=None,
    )
    if store is not None:
        app.state.store = store
    app.state.bench = bench
    app.state.ended_totals = EndedTotals()
    app.state.request_figures = metrics.RequestFigures()
    problems.install(app)
    for each in (
        designs,
        batches,
        events,
        candidates,
        bills,
        check,
        band_lists,
        health,
        metrics,
        problem_kinds,
        plots,
        what_if,
        pages,
    ):
        app.include_router(each.router)
    app.mount("/static", pages.static_files, name="static")
    app.add_middleware(Guard)
    app.add_middleware(RequestWatch, figures=app.state.request_figures)
    openapi.describe(app)
    return app
