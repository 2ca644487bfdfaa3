"""The list of runs: the newest first, by state, verdict and title, a page at a time."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import UTC, datetime
from functools import partial
from typing import Any, ClassVar

from web import display, links
from web.pages.page import Page, told
from web.verdicts import VERDICTS

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
    state: str = told("The state that the list is limited to, or empty.")
    verdicts: tuple[str, ...] = told("Verdicts that the list can be limited to.")
    verdict: str = told("The verdict that it is limited to, or empty.")
    text: str = told("The text that titles have to hold, or empty.")
    filtered: bool = told("Whether it is limited in any way.")
    older: str = told("Address of the next page, or empty.")
    newest: str = told("Address of the first page, or empty where this is it.")


def runs_page(
    runs: Sequence[Mapping[str, Any]],
    *,
    now: datetime,
    state: str = "",
    verdict: str = "",
    text: str = "",
    after: str = "",
    next_cursor: str = "",
) -> RunsPage:
    """The page for runs as the interface lists them (see `run_row`); each filter keeps the others."""
    choices = [
        Choice(name or "all", links.runs(state=name, verdict=verdict, text=text), name == state)
        for name in ("", *STATES)
    ]
    same = partial(links.runs, state=state, verdict=verdict, text=text)
    return RunsPage(
        title="Runs",
        rows=tuple(run_row(run, now) for run in runs),
        choices=tuple(choices),
        state=state,
        verdicts=VERDICTS,
        verdict=verdict,
        text=text,
        filtered=bool(state or verdict or text),
        older=same(after=next_cursor) if next_cursor else "",
        newest=same() if after else "",
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
