"""The HTTP server of one process, which does not wait for streams that would never end."""

from __future__ import annotations

import socket

import uvicorn
from fastapi import FastAPI

from service.api.change_feed import ChangeFeed


class Server(uvicorn.Server):
    """Ends the streams of events before it waits for answers under way.

    Uvicorn tells an application that it stops only after the last answer is out, which is too
    late for streams.
    """

    async def shutdown(self, sockets: list[socket.socket] | None = None) -> None:
        """Stop: no new connections, streams ended, answers under way finished."""
        app = self.config.app
        feed = getattr(app.state, "change_feed", None) if isinstance(app, FastAPI) else None
        if isinstance(feed, ChangeFeed):
            feed.close()
        await super().shutdown(sockets)
