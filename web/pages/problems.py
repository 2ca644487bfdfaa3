"""The pages that explain the sorts of refusal and failure; their addresses are the `type` of problem documents."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

from web.pages.page import Page, told


@dataclass(frozen=True, slots=True)
class Kind:
    """One sort of failure: its address ends with `name`."""

    name: str
    status: int
    title: str
    explanation: str


@dataclass(frozen=True, kw_only=True)
class ProblemPage(Page):
    """One sort of failure."""

    template: ClassVar[str] = "problem.html"
    here: ClassVar[str] = "reference"

    kind: Kind = told("The sort of failure that is explained.")


@dataclass(frozen=True, kw_only=True)
class ProblemsPage(Page):
    """All sorts of failure."""

    template: ClassVar[str] = "problems.html"
    here: ClassVar[str] = "reference"

    kinds: tuple[Kind, ...] = told("Every sort of failure, in the order in which a request passes their tests.")
