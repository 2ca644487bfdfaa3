"""The page of an answer that is an error."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, ClassVar

from web.pages.page import Page, told


@dataclass(frozen=True, slots=True)
class Objection:
    """One thing that is wrong; `place` is the pointer of the member, or the parameter of the query, or ""."""

    place: str
    message: str
    hint: str


@dataclass(frozen=True, kw_only=True)
class FaultPage(Page):
    """What went wrong with a request, for a browser."""

    template: ClassVar[str] = "fault.html"

    status: int = told("The HTTP status.")
    detail: str = told("One sentence about this case.")
    kind: str = told("Address of the page that explains this sort of failure.")
    objections: tuple[Objection, ...] = told("Everything that is wrong; empty where the detail says it all.")


def fault_page(problem: Mapping[str, Any]) -> FaultPage:
    """The page of a problem document (RFC 9457)."""
    return FaultPage(
        title=problem["title"],
        status=problem["status"],
        detail=problem["detail"],
        kind=problem["type"],
        objections=tuple(
            Objection(
                place=complaint.get("pointer") or complaint.get("parameter") or "",
                message=complaint["message"],
                hint=complaint.get("hint") or "",
            )
            for complaint in problem.get("complaints", ())
        ),
    )
