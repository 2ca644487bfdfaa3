"""The progress of a run as Server-Sent Events."""

from __future__ import annotations

from collections.abc import AsyncIterator
from typing import Annotated

from fastapi import APIRouter, Depends, Header
from fastapi.sse import EventSourceResponse, ServerSentEvent

from service.openapi import failures
from service.routes.needs import TheRun, TheServices, accepts
from web import links

router = APIRouter(prefix=links.API_RUNS, tags=["runs"])


@router.get(
    "/{id}/events",
    summary="Follow a run",
    response_class=EventSourceResponse,
    dependencies=[Depends(accepts("text/event-stream"))],
    responses=failures("not-found", "not-acceptable"),
)
async def follow_run(
    run: TheRun,
    services: TheServices,
    last_event_id: Annotated[
        str | None, Header(description="the id of the last event received: goes on after it")
    ] = None,
) -> AsyncIterator[ServerSentEvent]:
    """Events `state`, `iteration`, `mesh` with JSON data in the user's units, then one `end`, which closes the stream.

    A comment comes now and then where nothing happens.  Each event has an id to go on from after a break.
    """
    async for event in services.dispatcher.follow(run.id, last_event_id):
        yield ServerSentEvent(data=event.data, event=event.data["kind"], id=event.id)
