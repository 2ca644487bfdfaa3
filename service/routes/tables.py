"""The curve of a run as a table in several formats: by suffix, or by what the caller accepts."""

from __future__ import annotations

import json
from typing import TYPE_CHECKING, Annotated, Any, Literal

from fastapi import APIRouter, Query
from pydantic import BaseModel, ConfigDict, Field
from starlette.requests import Request
from starlette.responses import Response

from service import conditional
from service.errors import Fault
from service.negotiation import best
from service.openapi import failures
from service.results import result_of
from service.routes.needs import TheRun, TheServices
from service.run import Run
from service.services import Services
from web import links
from web.media_types import TABLES

if TYPE_CHECKING:  # else loaded with the first table, or by `service.later`
    from web.tables import Table, TableError

CSVW_JSON = "application/csvm+json"


class Choice(BaseModel):
    """Which rows and columns.  A parameter that is not known is refused, not ignored."""

    model_config = ConfigDict(extra="forbid")

    rows: int | None = Field(None, description="number of rows, evenly spaced, both ends included")
    step: float | None = Field(
        None, description="step in the unit of the first column; the last row is exactly the end, whatever the step"
    )
    columns: str | None = Field(None, description="columns with primes, separated by commas, such as x,x',a")
    derivatives: int = Field(0, description="derivatives of every unknown, 0 to 3, where no columns are named")
    sigma: bool = Field(False, description="beside every column one standard deviation from the constants' tolerances")
    extremal: int | None = Field(
        None, ge=1, description="number of one of several extremals, whose curve is wanted, counted from 1"
    )


TheChoice = Annotated[Choice, Query()]
Suffix = Literal["csv", "json", "xlsx", "npz"]
Part = Literal[
    "stretches", "costates", "checks", "prices", "slopes", "sweep", "continuation", "extremals", "fit", "meshes"
]
"""Those of `web.tables.PARTS`, which is loaded with the first table."""

router = APIRouter(prefix=links.API_RUNS, tags=["tables"], default_response_class=Response)
_MEDIA_TYPES = {suffix: media_type.partition(";")[0] for suffix, media_type in TABLES.items()}
_ANSWERS: dict[int | str, dict[str, Any]] = {
    200: {"description": "The table", "content": {media_type: {} for media_type in _MEDIA_TYPES.values()}},
    **failures("not-found", "unfinished", "no-curve", "parameters"),
}


@router.get(
    "/{id}/table.csv-metadata.json",
    summary="Describe the columns of the CSV table",
    response_model=None,
    responses={
        200: {"description": "The metadata", "content": {CSVW_JSON: {}}},
        **failures("not-found", "unfinished", "no-curve", "parameters"),
    },
)
def read_metadata(request: Request, run: TheRun, services: TheServices, choice: TheChoice) -> Response:
    """CSV on the Web: names, units and meanings of the columns of `table.csv` with the same query."""
    from web.tables import to_csvw

    described = to_csvw(_table(run, services, choice), f"table.csv{_query(request)}")
    return conditional.answer(request, json.dumps(described, ensure_ascii=False, allow_nan=False).encode(), CSVW_JSON)


@router.get("/{id}/table.{suffix}", summary="Read the curve as a table", response_model=None, responses=_ANSWERS)
def read_table(
    request: Request,
    run: TheRun,
    services: TheServices,
    suffix: Suffix,
    choice: TheChoice,
) -> Response:
    """At the nodes of the mesh, at `rows` places, or every `step`; the last row is exactly the end.

    Units are in the headings of CSV and XLSX, in `columns` of JSON, and in the metadata document of the CSV table.
    """
    return _answer(request, run, _table(run, services, choice), suffix)


@router.get(
    "/{id}/table",
    summary="Read the curve as a table in the format accepted",
    response_model=None,
    responses={**_ANSWERS, **failures("not-acceptable")},
)
def negotiate_table(request: Request, run: TheRun, services: TheServices, choice: TheChoice) -> Response:
    """The same as with a suffix; `Accept` decides between CSV, JSON, XLSX and NPZ."""
    offers = {media_type: suffix for suffix, media_type in _MEDIA_TYPES.items()}
    chosen = best(request.headers.get("accept", ""), tuple(offers))
    if chosen is None:
        raise Fault("not-acceptable", f"A table can be had as {', '.join(offers)}.")
    answer = _answer(request, run, _table(run, services, choice), offers[chosen])
    answer.headers["content-location"] = links.table(run.id, offers[chosen]) + _query(request)
    answer.headers["vary"] = "Accept"
    return answer


class ListChoice(BaseModel):
    """Which list of observations."""

    model_config = ConfigDict(extra="forbid")

    list: int = Field(1, description="number of the list of observations, counted from 1")


@router.get(
    "/{id}/observations.{suffix}",
    summary="Read observations with their residuals as a table",
    response_model=None,
    responses=_ANSWERS,
)
def read_observations(
    request: Request,
    run: TheRun,
    services: TheServices,
    suffix: Suffix,
    choice: Annotated[ListChoice, Query()],
) -> Response:
    """Observed and fitted values, residuals, and standard deviations where they are known; one row for each point."""
    from web.tables import FILE_FORMATS, TableError, observed_table

    result = result_of(run, services.store)
    if not result["curve"]:
        raise Fault("no-curve", "This run ended without a curve; its result document says why.")
    try:
        made = observed_table(result, choice.list)
    except TableError as error:
        raise _refused(error) from None
    headers = {"content-disposition": f'attachment; filename="curvewright-{run.id[:8]}-observations.{suffix}"'}
    file = FILE_FORMATS[suffix]
    return conditional.answer(request, file.write(made), file.media_type, headers=headers)


@router.get(
    "/{id}/{part}.{suffix}",
    summary="Read a part of the result as a table",
    response_model=None,
    responses={**_ANSWERS, **failures("no-part")},
)
def read_part(request: Request, run: TheRun, services: TheServices, part: Part, suffix: Suffix) -> Response:
    """One row for each stretch, check, price, slope, point or curve: texts first, then numbers.

    `costates` are at the nodes of the mesh.
    """
    from web.tables import FILE_FORMATS, TableError, part_table

    try:
        made = part_table(result_of(run, services.store), part)
    except TableError as error:
        raise Fault("no-part", f"{error.message} {error.hint}") from None
    headers = {"content-disposition": f'attachment; filename="curvewright-{run.id[:8]}-{part}.{suffix}"'}
    file = FILE_FORMATS[suffix]
    return conditional.answer(request, file.write(made), file.media_type, headers=headers)


def _table(run: Run, services: Services, choice: Choice) -> Table:
    from web.tables import TableError, table

    result = result_of(run, services.store)
    if choice.extremal is not None:
        result = _of_extremal(result, choice.extremal)
    if not result["curve"]:
        raise Fault("no-curve", "This run ended without a curve; its result document says why.")
    columns = None
    if choice.columns is not None:
        columns = [name for part in choice.columns.split(",") if (name := part.strip())]
    try:
        return table(result, rows=choice.rows, step=choice.step, columns=columns, derivatives=choice.derivatives,
                     sigma=choice.sigma)  # fmt: skip
    except TableError as error:
        raise _refused(error) from None


def _of_extremal(result: dict[str, Any], number: int) -> dict[str, Any]:
    """The result with one of its extremals in its place; raises `Fault`."""
    from web.tables import TableError

    found = result.get("extremals") or []
    if number > len(found):
        hint = f"They are numbered from 1 to {len(found)}." if found else "Ask for several `starts` in `solve`."
        raise _refused(TableError(f"There is no extremal {number}.", hint, "bad-extremal"))
    return {**result, "band": None, **found[number - 1]}


def _refused(error: TableError) -> Fault:
    complaint = {"in": "query", "code": error.code, "message": error.message, "hint": error.hint}
    return Fault("parameters", f"{error.message} {error.hint}", complaints=[complaint])


def _answer(request: Request, run: Run, made: Table, suffix: str) -> Response:
    from web.tables import FILE_FORMATS

    headers = {"content-disposition": f'attachment; filename="curvewright-{run.id[:8]}.{suffix}"'}
    if suffix == "csv":
        address = f"{links.api_run(run.id)}/table.csv-metadata.json{_query(request)}"
        headers["link"] = f'<{address}>; rel="describedby"; type="{CSVW_JSON}"'
    file = FILE_FORMATS[suffix]
    return conditional.answer(request, file.write(made), file.media_type, headers=headers)


def _query(request: Request) -> str:
    return f"?{request.url.query}" if request.url.query else ""
