"""The reference page and the pages of failures."""

from __future__ import annotations

from dataclasses import asdict

from fastapi import APIRouter
from starlette.requests import Request
from starlette.responses import HTMLResponse

from service.errors import TYPES, Fault, ProblemType
from web import links
from web.pages.problems import Kind, ProblemPage, ProblemsPage
from web.pages.reference import reference_page
from web.render import render

router = APIRouter(include_in_schema=False, default_response_class=HTMLResponse)


@router.get(links.REFERENCE)
def read_reference(request: Request) -> str:
    """The HTTP interface, made from its own description."""
    return render(reference_page(request.app.openapi()))


@router.get(links.PROBLEMS)
def list_problem_types() -> str:
    """Every sort of failure."""
    return render(ProblemsPage(title="Refusals and failures", kinds=tuple(map(_kind, TYPES.values()))))


@router.get(links.PROBLEMS + "/{name}")
def read_problem_type(name: str) -> str:
    """One sort of failure."""
    if name not in TYPES:
        raise Fault("not-found", f"There is no problem type '{name}'.")
    return render(ProblemPage(title=TYPES[name].title, kind=_kind(TYPES[name])))


def _kind(kind: ProblemType) -> Kind:
    return Kind(**asdict(kind))
