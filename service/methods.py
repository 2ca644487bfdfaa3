"""HEAD wherever GET works, and the list of methods that a path takes."""

from __future__ import annotations

import anyio
from starlette.applications import Starlette
from starlette.routing import Match
from starlette.types import ASGIApp, Message, Receive, Scope, Send

METHODS = ("GET", "POST", "PUT", "PATCH", "DELETE")


class HeadAnswers:
    """Answers HEAD as the same GET without its body (RFC 9110, section 9.3.2); an endless body is cut off at once."""

    def __init__(self, app: ASGIApp) -> None:
        self.app = app

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        if scope["type"] != "http" or scope["method"] != "HEAD":
            await self.app(scope, receive, send)
            return
        with anyio.CancelScope() as answering:

            async def headers_only(message: Message) -> None:
                if message["type"] == "http.response.start":
                    await send(message)
                    await send({"type": "http.response.body", "body": b"", "more_body": False})
                    answering.cancel()

            await self.app({**scope, "method": "GET"}, receive, headers_only)


def allowed(app: Starlette, scope: Scope) -> list[str]:
    """Every method that some route takes at this path."""
    found = [
        method
        for method in METHODS
        if any(route.matches({**scope, "method": method})[0] is Match.FULL for route in app.routes)
    ]
    return [*found, *(["HEAD"] if "GET" in found else []), *(["OPTIONS"] if found else [])]
