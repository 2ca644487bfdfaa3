"""Runs, complaints and readiness."""

from __future__ import annotations

from pydantic import Field

from service.schemas.parts import Part, RunState, Verdict


class Links(Part):
    """Addresses that belong to a run, relative to this server."""

    self: str
    page: str
    problem: str
    events: str
    result: str | None = None
    table: str | None = None
    cancel: str | None = None


class Run(Part):
    """One problem being solved, or solved."""

    id: str
    state: RunState
    title: str
    problem_hash: str
    created: str = Field(description="RFC 3339")
    finished: str | None
    seconds: float | None = Field(description="of work in the worker")
    verdict: Verdict | None
    value: float | None
    value_error: float | None
    value_unit: str | None
    failure: str | None = Field(description="why the run failed, where it did")
    links: Links


class RunPage(Part):
    """Runs, newest first; `next` is the address of the older ones."""

    runs: list[Run]
    next: str | None


class Complaint(Part):
    """One thing that is wrong, where, and what would be right."""

    pointer: str | None = Field(default=None, description="JSON pointer (RFC 6901) into the body that was sent")
    span: list[int] | None = Field(
        default=None, description="first character of the formula, and the one after the last"
    )
    code: str
    message: str
    hint: str | None = None


class ProblemDetails(Part):
    """RFC 9457."""

    type: str
    title: str
    status: int
    detail: str
    stage: str | None = None
    complaints: list[Complaint] | None = None


class Readiness(Part):
    """Whether runs can be accepted and solved."""

    ready: bool
    database: bool = Field(description="can be written")
    workers: int = Field(description="how many are up")
