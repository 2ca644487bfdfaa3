"""Check a document without solving it."""

from __future__ import annotations

import json
from typing import Annotated, Any

from fastapi import APIRouter, Depends, Query
from pydantic import BaseModel, ConfigDict, Field
from starlette.concurrency import run_in_threadpool
from starlette.responses import JSONResponse, Response

from service.negotiation import JSON
from service.openapi import PROBLEM_BODY, REFUSALS, failures, shape
from service.routes.needs import JsonBody, TheServices, accepts
from service.services import Services
from web import links

router = APIRouter(tags=["check"])


class Wish(BaseModel):
    """What the reading shall hold."""

    model_config = ConfigDict(extra="forbid")

    necessary: bool = Field(False, description="with the necessary conditions in symbols, derived in a worker")


@router.post(
    links.API_CHECK,
    summary="Check a document",
    response_model=None,
    dependencies=[Depends(accepts(JSON))],
    openapi_extra=PROBLEM_BODY,
    responses={
        200: shape("ReadingDocument"),
        **failures(*REFUSALS, "parameters", "not-acceptable", "foreign-request"),
    },
)
async def check(body: JsonBody, services: TheServices, wish: Annotated[Wish, Query()]) -> Response:
    """How the problem is understood, or everything that is wrong with it; nothing is kept and nothing is solved."""
    return JSONResponse(await reading_of(body, services, necessary=wish.necessary))


async def reading_of(body: bytes, services: Services, *, necessary: bool) -> dict[str, Any]:
    """The reading of a document; without its necessary conditions where they take too long.  Raises `Refused`."""
    reading = await run_in_threadpool(_reading, body)
    if not necessary:
        return reading
    whole = await services.dispatcher.understand(body)
    if whole is None:
        return {**reading, "notes": [*reading["notes"], "The necessary conditions took too long and are left out."]}
    with_necessary: dict[str, Any] = json.loads(whole)
    return with_necessary


def _reading(body: bytes) -> dict[str, Any]:
    from service.assemble import assemble  # see `service.later`
    from service.reading import read_back
    from service.spec import read

    document = read(body)
    return read_back(assemble(document), document)
