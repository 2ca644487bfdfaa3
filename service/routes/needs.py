"""What routes depend on, by name."""

from __future__ import annotations

from collections.abc import Awaitable, Callable
from typing import Annotated

from fastapi import Depends
from starlette.requests import Request

from service.body import JSON, read_body
from service.errors import Fault
from service.negotiation import best
from service.run import Run
from service.services import Services


async def _services(request: Request) -> Services:  # not a plain function: that would be called in a thread
    services: Services = request.app.state.services
    return services


TheServices = Annotated[Services, Depends(_services)]


def known_run(id: str, services: TheServices) -> Run:
    """The run of this address; a fault where there is none."""
    run = services.store.get(id)
    if run is None:
        raise Fault("not-found", "There is no run of this address; it may have been deleted.")
    return run


TheRun = Annotated[Run, Depends(known_run)]


async def _json_body(request: Request) -> bytes:
    services = await _services(request)  # no dependency: each one takes a while
    return await read_body(request, JSON, services.settings.body_bytes)


JsonBody = Annotated[bytes, Depends(_json_body)]


def accepts(*offers: str) -> Callable[[Request], Awaitable[None]]:
    """A dependency: refuses where the caller takes none of `offers` (RFC 9110, section 15.5.7)."""

    async def check(request: Request) -> None:
        if best(request.headers.get("accept", ""), offers) is None:
            raise Fault("not-acceptable", f"This address answers with {' or '.join(offers)}.")

    return check
