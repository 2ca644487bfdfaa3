"""Runs: start, read, list, stop, delete, and their result documents."""

from __future__ import annotations

import json
from typing import Annotated, Any

from fastapi import APIRouter, Depends, Header, Query
from pydantic import BaseModel, ConfigDict, Field
from starlette.concurrency import run_in_threadpool
from starlette.requests import Request
from starlette.responses import JSONResponse, Response

from service import conditional
from service.accepting import accept, idempotency_key
from service.errors import Fault
from service.negotiation import JSON, preferences
from service.openapi import PROBLEM_BODY, REFUSALS, failures, leading_on, shape
from service.resource import has_result, resource
from service.results import result_text
from service.routes.needs import JsonBody, TheRun, TheServices, accepts
from service.run import LONGEST_SOUGHT, CursorError, State
from service.schemas.parts import Verdict
from web import links

IMMUTABLE = "private, max-age=31536000, immutable"
RETRY_AFTER = "1"

router = APIRouter(
    prefix=links.API_RUNS, tags=["runs"], dependencies=[Depends(accepts(JSON))], responses=failures("not-acceptable")
)


_OPERATIONS = ("read_run", "read_problem", "cancel_run", "delete_run")
_OPERATIONS_ON_A_RESULT = (*_OPERATIONS, "read_result", "read_table")


@router.post(
    "",
    summary="Start a run",
    status_code=202,
    response_model=None,
    openapi_extra=PROBLEM_BODY,
    responses={
        200: shape("Run", "The run that this Idempotency-Key started before"),
        201: leading_on(
            shape("Run", "The run ended within the time waited"), *_OPERATIONS, "read_result", "read_table"
        ),
        202: leading_on(shape("Run", "Accepted, and kept from now on"), *_OPERATIONS),
        **failures(*REFUSALS, "idempotency-key", "foreign-request", "busy"),
    },
)
async def start_run(
    body: JsonBody,
    services: TheServices,
    prefer: Annotated[str, Header(description="`wait=10` waits so many seconds, `respond-async` does not")] = "",
    idempotency_key_: Annotated[
        str | None, Header(alias="Idempotency-Key", description="repeats of the request start nothing twice")
    ] = None,
) -> Response:
    """Check the document, keep it, solve it.

    With `Prefer: wait=N` the answer comes when the run has ended, after N seconds at the latest; without it at once.
    `Prefer: return=representation` puts the result document into a 201 instead of the run.
    """
    wishes = preferences(prefer, services.settings.wait_seconds)
    run, fresh = await run_in_threadpool(accept, services, body, idempotency_key(idempotency_key_))
    if wishes.wait:
        run = await services.dispatcher.wait(run.id, wishes.wait) or run
    headers = {"location": links.api_run(run.id)}
    if applied := wishes.applied(ended=run.state.ended):
        headers["preference-applied"] = applied
    if not run.state.ended:
        return JSONResponse(resource(run), 202, {**headers, "retry-after": RETRY_AFTER})
    status = 201 if fresh else 200
    if wishes.whole and has_result(run):
        headers["content-location"] = links.result(run.id)
        content = await run_in_threadpool(result_text, run, services.store)
        return Response(content, status, headers, media_type=JSON)
    return JSONResponse(resource(run), status, headers)


class Listing(BaseModel):
    """Which runs; a parameter that is not known is refused, not ignored."""

    model_config = ConfigDict(extra="forbid")

    limit: int = Field(50, ge=1, le=200, description="at most so many runs")
    after: str | None = Field(None, max_length=200, description="cursor, from the address of the next part")
    state: State | None = Field(None, description="only runs in this state")
    verdict: Verdict | None = Field(None, description="only runs with this verdict")
    title: str = Field(
        "", max_length=LONGEST_SOUGHT, description="only runs with this text in their title; A to Z in either case"
    )


@router.get(
    "",
    summary="List runs",
    response_model=None,
    responses={200: shape("RunPage"), **failures("parameters")},
)
def list_runs(request: Request, services: TheServices, listing: Annotated[Listing, Query()]) -> Response:
    """The newest first; `next` and the Link header (RFC 8288) lead on, also while new runs come in."""
    try:
        page = services.store.list(**listing.model_dump())
    except CursorError as error:
        raise Fault("parameters", f"after: {error}.") from None
    following = None
    if page.after:
        following = str(request.url.include_query_params(after=page.after).replace(scheme="", netloc=""))
    headers = {"link": f'<{following}>; rel="next"'} if following else {}
    return JSONResponse({"runs": [resource(run) for run in page.runs], "next": following}, headers=headers)


@router.get("/{id}", summary="Read a run", response_model=None, responses={200: shape("Run"), **failures("not-found")})
def read_run(request: Request, run: TheRun) -> Response:
    """How far it is, and what came out; cheap to ask again with If-None-Match."""
    headers = {} if run.state.ended else {"retry-after": RETRY_AFTER}
    return conditional.answer(request, _text(resource(run)), JSON, headers=headers)


@router.get(
    "/{id}/result",
    summary="Read the result document",
    response_model=None,
    responses={200: shape("ResultDocument"), **failures("not-found", "unfinished")},
)
def read_result(request: Request, run: TheRun, services: TheServices) -> Response:
    """The verdict with its evidence and the exact curve; it never changes."""
    return conditional.answer(request, result_text(run, services.store), JSON, cache=IMMUTABLE)


@router.get(
    "/{id}/problem",
    summary="Read the problem document",
    response_model=None,
    responses={200: {"description": "As it was sent"}, **failures("not-found")},
)
def read_problem(request: Request, run: TheRun, services: TheServices) -> Response:
    """The document that the run was started with."""
    return conditional.answer(request, (services.store.document(run.id) or "null").encode(), JSON, cache=IMMUTABLE)


@router.post(
    "/{id}/cancel",
    summary="Stop a run",
    status_code=202,
    response_model=None,
    responses={
        200: shape("Run", "The run has ended"),
        202: shape("Run", "It is asked to stop and does so soon"),
        **failures("not-found", "foreign-request"),
    },
)
def cancel_run(run: TheRun, services: TheServices) -> Response:
    """Stop with the best curve so far.  A run that has ended stays as it is."""
    after = services.dispatcher.cancel(run.id) or run
    return JSONResponse(resource(after), 200 if after.state.ended else 202)


@router.delete(
    "/{id}",
    summary="Delete a run",
    status_code=204,
    response_model=None,
    responses=failures("not-found", "foreign-request"),
)
def delete_run(run: TheRun, services: TheServices) -> Response:
    """Forget the run, its document and its result; one that is being solved is stopped."""
    services.dispatcher.delete(run.id)
    return Response(status_code=204)


def _text(document: dict[str, Any]) -> bytes:
    return json.dumps(document, ensure_ascii=False, allow_nan=False).encode("utf-8", "backslashreplace")
