"""The page of a run that is waiting or being solved; its script shows how the solver converges."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, ClassVar

from web import display, links
from web.pages.page import Page, told
from web.unit_text import bracketed

REFRESH_SECONDS = 3
DEFAULT_TIME_LIMIT = 60.0

_SENTENCES = {
    "waiting": "Waiting for a free worker.",
    "solving": "A worker is solving the problem.",
}


@dataclass(frozen=True, kw_only=True)
class ProgressPage(Page):
    """What is known while a run is on its way."""

    template: ClassVar[str] = "progress.html"
    here: ClassVar[str] = "runs"

    run_id: str = told("The run.")
    state: str = told("waiting or solving.")
    state_tone: str = told("Class of the state's tag.")
    sentence: str = told("What is going on, in a sentence.")
    time_limit: str = told("How long the solver may take.")
    value_unit: str = told("Unit of the value, for the figures that arrive.")
    independent: str = told("Name and unit of the independent variable, for the picture of the mesh.")
    refresh: int = told("After how many seconds the page loads itself again where there is no script.")
    page_address: str = told("This page; it shows the result once there is one.")
    events_address: str = told("Where the progress comes from.")
    state_address: str = told("Where the state can be asked, should the progress not come through.")


def progress_page(run: Mapping[str, Any], problem: Mapping[str, Any]) -> ProgressPage:
    """From a run as the interface shows it and its problem document."""
    independent = problem.get("independent") or {}
    state, run_id = str(run["state"]), str(run["id"])
    return ProgressPage(
        title=str(run.get("title") or problem.get("title") or "Untitled problem"),
        run_id=run_id,
        state=state,
        state_tone=display.tone(state),
        sentence=_SENTENCES.get(state, ""),
        time_limit=display.duration(float((problem.get("solve") or {}).get("time_limit") or DEFAULT_TIME_LIMIT)),
        value_unit=display.unit(str(run.get("value_unit") or "")),
        independent=bracketed(str(independent.get("name") or ""), display.unit(str(independent.get("unit") or ""))),
        refresh=REFRESH_SECONDS,
        page_address=links.run(run_id),
        events_address=links.events(run_id),
        state_address=links.api_run(run_id),
    )
