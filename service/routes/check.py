"""Check a document without solving it."""

from __future__ import annotations

from fastapi import APIRouter, Depends
from starlette.concurrency import run_in_threadpool
from starlette.responses import JSONResponse, Response

from service import schemas
from service.assemble import assemble
from service.negotiation import JSON
from service.openapi import PROBLEM_BODY, REFUSALS, failures
from service.reading import read_back
from service.routes.needs import JsonBody, accepts
from service.spec import read
from web import links

router = APIRouter(tags=["check"])


@router.post(
    links.API_CHECK,
    summary="Check a document",
    response_model=None,
    dependencies=[Depends(accepts(JSON))],
    openapi_extra=PROBLEM_BODY,
    responses={200: {"model": schemas.ReadingDocument}, **failures(*REFUSALS, "not-acceptable", "foreign-request")},
)
async def check(body: JsonBody) -> Response:
    """How the problem is understood, or everything that is wrong with it; nothing is kept and nothing is solved."""
    return JSONResponse(await run_in_threadpool(_reading, body))


def _reading(body: bytes) -> dict[str, object]:
    document = read(body)
    return read_back(assemble(document), document)
