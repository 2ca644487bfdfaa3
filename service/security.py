"""Who may ask, and what browsers are told: hosts, origin of unsafe requests, headers of every answer."""

from __future__ import annotations

from collections.abc import Callable
from ipaddress import ip_address
from urllib.parse import urlsplit

from starlette.datastructures import Headers, MutableHeaders
from starlette.requests import Request
from starlette.types import ASGIApp, Message, Receive, Scope, Send

from service.errors import Fault, respond

SAFE_METHODS = frozenset({"GET", "HEAD", "OPTIONS", "TRACE"})
LOOPBACK_NAMES = ("localhost", "127.0.0.1", "[::1]")

HEADERS = {
    "content-security-policy": (
        "default-src 'none'; script-src 'self'; style-src 'self'; img-src 'self' data: blob:; font-src 'self'; "
        "connect-src 'self'; base-uri 'none'; form-action 'self'; frame-ancestors 'none'"
    ),
    "x-content-type-options": "nosniff",
    "cross-origin-opener-policy": "same-origin",
    "cross-origin-resource-policy": "same-origin",
    # Not "no-referrer": with it browsers send `Origin: null` with our own forms, which would then look foreign.
    "referrer-policy": "same-origin",
    "permissions-policy": "camera=(), geolocation=(), microphone=(), payment=(), usb=()",
}


class SecurityHeaders:
    """Puts `HEADERS` on every answer, also on those of an unexpected error."""

    def __init__(self, app: ASGIApp) -> None:
        self.app = app

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        if scope["type"] != "http":
            await self.app(scope, receive, send)
            return

        async def with_headers(message: Message) -> None:
            if message["type"] == "http.response.start":
                headers = MutableHeaders(scope=message)
                for name, value in HEADERS.items():
                    headers.setdefault(name, value)
                # Nothing is cached unless its route says so; what needs asking again says "no-cache" itself.
                headers.setdefault("cache-control", "no-store" if message["status"] >= 400 else "no-cache")
            await send(message)

        await self.app(scope, receive, with_headers)


class Gate:
    """Lets a request pass where `objection` has none, else answers with the fault."""

    def __init__(self, app: ASGIApp, objection: Callable[[Scope], Fault | None]) -> None:
        self.app = app
        self.objection = objection

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        fault = self.objection(scope) if scope["type"] == "http" else None
        if fault is None:
            await self.app(scope, receive, send)
        else:
            await respond(Request(scope), fault)(scope, receive, send)


def known_host(hosts: frozenset[str], *, addresses: bool) -> Callable[[Scope], Fault | None]:
    """Refuses requests for a name that is not ours: a foreign site may let its own name lead here (DNS rebinding).

    The browser then believes that this server belongs to that site.  The trick needs a name, so where other machines
    are let in (`addresses`) any plain address will do.
    """

    def objection(scope: Scope) -> Fault | None:
        host = Headers(scope=scope).get("host", "")
        name = _without_port(host).lower()
        if "*" in hosts or name in hosts or (addresses and _is_address(name)):
            return None
        return Fault("host", f"This server does not answer for the host name {host!r}.")

    return objection


def own_origin(scope: Scope) -> Fault | None:
    """Refuses unsafe requests that a browser sends for a foreign page; programs that are no browser pass."""
    if scope["method"] in SAFE_METHODS:
        return None
    headers = Headers(scope=scope)
    site = headers.get("sec-fetch-site")
    origin = headers.get("origin")
    if site is not None:
        foreign = site not in ("same-origin", "none")
    else:
        foreign = origin is not None and urlsplit(origin).netloc.lower() != headers.get("host", "").lower()
    if not foreign:
        return None
    return Fault("foreign-request", f"A page of {origin or 'another site'} may not change anything here.")


def _without_port(host: str) -> str:
    name, colon, port = host.rpartition(":")
    return name if colon and port.isdigit() else host


def _is_address(name: str) -> bool:
    try:
        ip_address(name.removeprefix("[").removesuffix("]"))
    except ValueError:
        return False
    return True
