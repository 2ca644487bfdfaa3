"""The page of a run that is waiting or being solved; its script shows how the solver converges."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

from web import display, links
from web.pages.page import Page, told

REFRESH_SECONDS = 3

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


def progress_page(
    run_id: str,
    *,
    title: str,
    state: str,
    time_limit: float,
    value_unit: str = "",
    independent: str = "",
    stopping: bool = False,
) -> ProgressPage:
    """`time_limit` in seconds; `stopping` where the run was asked to stop and has not yet."""
    return ProgressPage(
        title=title or "Untitled problem",
        run_id=run_id,
        state=state,
        state_tone=display.tone(state),
        sentence="The run was asked to stop." if stopping else _SENTENCES.get(state, ""),
        time_limit=display.duration(time_limit),
        value_unit=display.unit(value_unit),
        independent=independent,
        refresh=REFRESH_SECONDS,
        page_address=links.run(run_id),
        events_address=links.events(run_id),
        state_address=links.api_run(run_id),
    )
