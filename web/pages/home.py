"""The home page: what this is, the sample problems, the latest runs, how lab software asks."""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import datetime
from typing import Any, ClassVar

from markupsafe import Markup

from web import links, snippets
from web.form.pretty import pretty
from web.pages.page import Page, told
from web.pages.runs import RunRow, run_row
from web.thumbnails import Sketch, sketch_picture


@dataclass(frozen=True, slots=True)
class Sample:
    """A sample problem as the service has it; `sketch` is None until its curve was drawn."""

    name: str
    title: str
    about: str
    sketch: Sketch | None = None


@dataclass(frozen=True, slots=True)
class Card:
    """A sample ready to be shown."""

    name: str
    title: str
    about: str
    address: str
    picture: Markup


@dataclass(frozen=True, kw_only=True)
class HomePage(Page):
    """The first page that anybody sees."""

    template: ClassVar[str] = "home.html"
    here: ClassVar[str] = "home"

    cards: tuple[Card, ...] = told("The sample problems.")
    recent: tuple[RunRow, ...] = told("The latest runs, the newest first; may be empty.")
    curl: str = told("A shell command that solves a small problem.")
    python: str = told("A Python program that does the same and saves the table.")


def home_page(
    samples: Sequence[Sample],
    *,
    recent: Sequence[Mapping[str, Any]],
    example: str,
    base_url: str,
    now: datetime,
) -> HomePage:
    """The page; `recent` holds runs as `web.pages.runs.run_row` takes them, `example` is a short document as JSON."""
    shown = pretty({name: part for name, part in json.loads(example).items() if name != "notes"})
    return HomePage(
        title="Optimal curves, shapes and motions",
        cards=tuple(
            Card(
                name=sample.name,
                title=sample.title,
                about=sample.about,
                address=links.compose(sample=sample.name),
                picture=sketch_picture(sample.sketch) if sample.sketch else Markup(""),
            )
            for sample in samples
        ),
        recent=tuple(run_row(run, now) for run in recent),
        curl=snippets.curl(shown, base_url),
        python=snippets.python(shown, base_url),
    )
