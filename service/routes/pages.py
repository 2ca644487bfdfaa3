"""The pages.  Without script everything is a link or a form post that leads on with 303."""

from __future__ import annotations

import json
from dataclasses import asdict, replace
from datetime import UTC, datetime
from typing import Annotated, Any, Literal
from urllib.parse import parse_qsl

from fastapi import APIRouter, Depends, Query
from starlette.concurrency import run_in_threadpool
from starlette.requests import Request
from starlette.responses import HTMLResponse, RedirectResponse, Response

from service import conditional, samples
from service.accepting import accept
from service.body import FORM, read_body
from service.complaints import Refused
from service.errors import Fault
from service.resource import resource
from service.results import shown_result
from service.routes.check import reading_of
from service.routes.needs import TheRun, TheServices
from service.run import LONGEST_SOUGHT, CursorError, Run, State
from service.schemas.parts import Verdict
from service.services import Services
from service.sketches import sketches
from web import display, links
from web.form.draft import Draft, draft_from_post, draft_from_text, empty_draft
from web.pages.compose import compose_page
from web.pages.home import Sample, home_page
from web.pages.progress import progress_page
from web.pages.runs import runs_page
from web.render import render

RECENT = 6
RUNS_ON_A_PAGE = 50
MOST_FIELDS = 5_000
EXAMPLE = "hose"

router = APIRouter(include_in_schema=False, default_response_class=HTMLResponse)


async def _form(request: Request, services: TheServices) -> dict[str, str]:
    """The fields of a posted form; of a name that comes twice the last one counts."""
    body = await read_body(request, FORM, 2 * services.settings.body_bytes)  # escapes of the form take room too
    try:
        pairs = parse_qsl(body.decode("utf-8"), keep_blank_values=True, errors="strict", max_num_fields=MOST_FIELDS)
    except ValueError as error:
        raise Fault("bad-request", f"The form cannot be read: {error}.") from None
    return dict(pairs)


TheForm = Annotated[dict[str, str], Depends(_form)]


@router.get(links.HOME)
def show_home(request: Request, services: TheServices) -> str:
    """The sample problems and the latest runs."""
    pictures = sketches()
    page = home_page(
        [
            Sample(name, str(samples.load(name).get("title", name)), about, pictures.get(name))
            for name, about in samples.ABOUT.items()
        ],
        recent=_rows(services.store.list(limit=RECENT).runs),
        example=samples.text(EXAMPLE),
        base_url=_base(request),
        now=datetime.now(UTC),
    )
    return render(page)


@router.get(links.COMPOSE)
async def show_composer(
    request: Request, services: TheServices, sample: str = "", run: str = "", view: str = ""
) -> Response:
    """The composer: empty, or with a sample, or with the problem of a run."""
    if sample:
        draft = draft_from_text(_sample(sample), view)
    elif run:
        text = await run_in_threadpool(services.store.document, run)
        if text is None:
            raise Fault("not-found", "There is no run of this address; it may have been deleted.")
        draft = draft_from_text(text, view)
    else:
        return HTMLResponse(render(compose_page(empty_draft(), base_url=_base(request))))
    return await _composer(request, services, draft)


@router.post(links.COMPOSE)
async def post_composer(request: Request, services: TheServices, form: TheForm) -> Response:
    """Check, change the view or the rows, or solve: then on to the page of the run."""
    name = form.get("sample")
    draft = replace(draft_from_text(_sample(name)), solve=True) if name else draft_from_post(form)
    if not draft.solve or draft.complaints:
        return await _composer(request, services, draft)
    try:
        run, _ = await run_in_threadpool(accept, services, _bytes(draft))
    except Refused:
        return await _composer(request, services, draft)
    return _see(links.run(run.id))


async def _composer(request: Request, services: Services, draft: Draft) -> Response:
    """The page with the reading, or with all that is wrong; 422 only where it was to be solved."""
    reading: dict[str, Any] | None = None
    complaints: list[dict[str, Any]] = []
    try:
        reading = await reading_of(_bytes(draft), services, necessary=request.method == "POST")
    except Refused as refused:
        complaints = [asdict(complaint) for complaint in refused.complaints]
    page = compose_page(draft, base_url=_base(request), reading=reading, complaints=complaints)
    refused_solve = draft.solve and bool(complaints or draft.complaints)
    return HTMLResponse(await run_in_threadpool(render, page), 422 if refused_solve else 200)


@router.get(links.RUNS)
def list_runs(
    services: TheServices,
    state: Annotated[State | None, Query()] = None,
    verdict: Annotated[Verdict | Literal[""], Query()] = "",
    q: Annotated[str, Query(max_length=LONGEST_SOUGHT)] = "",
    after: Annotated[str, Query(max_length=200)] = "",
) -> str:
    """The runs that are wanted, the newest first."""
    text = q.strip()
    try:
        part = services.store.list(
            limit=RUNS_ON_A_PAGE, after=after or None, state=state, verdict=verdict or None, title=text
        )
    except CursorError as error:
        raise Fault("parameters", f"after: {error}.") from None
    page = runs_page(
        _rows(part.runs),
        now=datetime.now(UTC),
        state=state.value if state else "",
        verdict=verdict,
        text=text,
        after=after,
        next_cursor=part.after or "",
    )
    return render(page)


@router.get(links.RUNS + "/{id}")
def show_run(request: Request, run: TheRun, services: TheServices) -> Response:
    """How far the run is, or its result; a page of a run that has ended is cheap to ask for again."""
    if not run.state.ended:
        document = services.store.document(run.id) or "{}"
        return HTMLResponse(render(progress_page(resource(run), json.loads(document))))
    from web.pages.result import result_page  # see `service.later`

    page = result_page(
        shown_result(run, services.store),
        base_url=_base(request),
        query=request.query_params,
        moment=display.moment(datetime.fromtimestamp(run.updated, UTC), datetime.now(UTC)),
    )
    return conditional.answer(request, render(page).encode(), "text/html; charset=utf-8")


@router.post(links.RUNS + "/{id}/stop")
def stop_run(run: TheRun, services: TheServices) -> Response:
    """Stop with the best curve so far, and back to the run."""
    services.dispatcher.cancel(run.id)
    return _see(links.run(run.id))


@router.post(links.RUNS + "/{id}/delete")
def delete_run(run: TheRun, services: TheServices) -> Response:
    """Forget the run, and on to the list."""
    services.dispatcher.delete(run.id)
    return _see(links.RUNS)


def _rows(runs: tuple[Run, ...]) -> list[dict[str, Any]]:
    return [asdict(run) for run in runs]


def _sample(name: str) -> str:
    if name not in samples.ABOUT:
        raise Fault("not-found", f"There is no sample '{name}'.")
    return samples.text(name)


def _bytes(draft: Draft) -> bytes:
    return draft.text.encode("utf-8", "replace")


def _see(address: str) -> Response:
    return RedirectResponse(address, status_code=303)


def _base(request: Request) -> str:
    return str(request.base_url)
