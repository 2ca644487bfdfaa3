"""The list of runs: the newest first, by state, a page at a time."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import UTC, datetime
from typing import Any, ClassVar

from web import display, links
from web.pages.page import Page, told

STATES = ("waiting", "solving", "finished", "failed", "stopped")


@dataclass(frozen=True, slots=True)
class RunRow:
    """One run, ready to be shown; what is not known yet is an em dash."""

    title: str
    address: str
    state: str
    tone: str
    outcome: str
    value: str
    created: str
    created_exactly: str
    took: str
    delete: str
    stop: str


@dataclass(frozen=True, slots=True)
class Choice:
    """One entry of the filter."""

    label: str
    address: str
    chosen: bool


@dataclass(frozen=True, kw_only=True)
class RunsPage(Page):
    """The list of runs."""

    template: ClassVar[str] = "runs.html"
    here: ClassVar[str] = "runs"

    rows: tuple[RunRow, ...] = told("The runs of this page.")
    choices: tuple[Choice, ...] = told("Filters by state, the first is all.")
    filtered: str = told("The state that the list is limited to, or empty.")
    older: str = told("Address of the next page, or empty.")
    newest: str = told("Address of the first page, or empty where this is it.")


def runs_page(
    runs: Sequence[Mapping[str, Any]], *, now: datetime, state: str = "", after: str = "", next_cursor: str = ""
) -> RunsPage:
    """The page for runs as the interface lists them (see `run_row`)."""
    choices = [Choice("all", links.runs(), not state)]
    choices += [Choice(name, links.runs(state=name), name == state) for name in STATES]
    return RunsPage(
        title="Runs",
        rows=tuple(run_row(run, now) for run in runs),
        choices=tuple(choices),
        filtered=state,
        older=links.runs(state=state, after=next_cursor) if next_cursor else "",
        newest=links.runs(state=state) if after else "",
    )


def run_row(run: Mapping[str, Any], now: datetime) -> RunRow:
    """The row of a run: `id`, `title`, `state`, `created` (seconds since 1970), and, where known, `verdict`, `seek`,
    `value`, `value_error`, `value_unit`, `seconds`."""
    state, verdict = str(run["state"]), run.get("verdict")
    unfinished = state in ("waiting", "solving")
    created = datetime.fromtimestamp(float(run["created"]), UTC)
    value = display.with_error(run.get("value"), run.get("value_error"))
    return RunRow(
        title=str(run.get("title") or "Untitled problem"),
        address=links.run(str(run["id"])),
        state=state,
        tone=display.tone(verdict or state, str(run.get("seek") or "")),
        outcome=str(verdict or state),
        value=display.joined(value, str(run.get("value_unit") or "")),
        created=display.moment(created, now),
        created_exactly=created.isoformat(timespec="seconds"),
        took=display.duration(run.get("seconds")),
        delete="" if unfinished else links.delete(str(run["id"])),
        stop=links.stop(str(run["id"])) if unfinished else "",
    )
