"""Every address that a page, a script or an answer points to, in one place."""

from __future__ import annotations

from functools import cache
from hashlib import sha256
from urllib.parse import quote, urlencode

from web.assets import asset

HOME = "/"
COMPOSE = "/compose"
RUNS = "/runs"
REFERENCE = "/reference"
PROBLEMS = "/problems"
API = "/api/v1"
API_CHECK = f"{API}/check"
API_RUNS = f"{API}/runs"
API_DESCRIPTION = f"{API}/openapi.json"
PROBLEM_SCHEMA = f"{API}/schema/problem.json"
RESULT_SCHEMA = f"{API}/schema/result.json"


def static(path: str) -> str:
    """A file of `static/`, or of the vendored ones; its content is part of the address, so it may be kept for ever."""
    return f"/static/{path}?v={_fingerprint(path)}"


def compose(*, sample: str = "", run: str = "", view: str = "") -> str:
    """The composer, empty or filled with a sample or with the problem of a run."""
    return _with_query(COMPOSE, sample=sample, run=run, view=view)


def runs(*, state: str = "", verdict: str = "", text: str = "", after: str = "") -> str:
    """The list of runs: those in one state, with a verdict, with a text in the title, older than a cursor."""
    return _with_query(RUNS, state=state, verdict=verdict, q=text, after=after)


def run(run_id: str) -> str:
    """The page of one run: its progress, then its result."""
    return f"{RUNS}/{quote(run_id, safe='')}"


def stop(run_id: str) -> str:
    """Where a form is posted that stops a run."""
    return f"{run(run_id)}/stop"


def delete(run_id: str) -> str:
    """Where a form is posted that deletes a run."""
    return f"{run(run_id)}/delete"


def problem_type(name: str) -> str:
    """The page that explains one sort of refusal; also the `type` of the problem documents."""
    return f"{PROBLEMS}/{quote(name, safe='')}"


def api_run(run_id: str) -> str:
    """One run as JSON."""
    return f"{API_RUNS}/{quote(run_id, safe='')}"


def events(run_id: str) -> str:
    """The progress of a run as Server-Sent Events."""
    return f"{api_run(run_id)}/events"


def result(run_id: str) -> str:
    """The result document of a run."""
    return f"{api_run(run_id)}/result"


def table(
    run_id: str,
    suffix: str,
    *,
    rows: str = "",
    step: str = "",
    columns: str = "",
    derivatives: str = "",
    sigma: str = "",
    extremal: str = "",
) -> str:
    """The table of a result as `csv`, `json`, `xlsx` or `npz`."""
    path = f"{api_run(run_id)}/table.{suffix}"
    return _with_query(path, rows=rows, step=step, columns=columns, derivatives=derivatives, sigma=sigma,
                       extremal=extremal)  # fmt: skip


def part(run_id: str, name: str, suffix: str) -> str:
    """A part of a result (one of `web.tables.PARTS`) as `csv`, `json`, `xlsx` or `npz`."""
    return f"{api_run(run_id)}/{name}.{suffix}"


def observed(run_id: str, suffix: str, number: int = 1) -> str:
    """The residuals of one list of observations as a table."""
    path = f"{api_run(run_id)}/observations.{suffix}"
    return _with_query(path, list=str(number) if number > 1 else "")


def _with_query(path: str, **values: str) -> str:
    query = urlencode({name: value for name, value in values.items() if value})
    return f"{path}?{query}" if query else path


@cache
def _fingerprint(path: str) -> str:
    found = asset(path)
    if found is None:
        raise LookupError(f"there is no static file '{path}'")
    return sha256(found.read_bytes()).hexdigest()[:12]
