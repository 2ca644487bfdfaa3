"""Turns a page's context into HTML.  An undeclared name is an error, and all text is escaped."""

from __future__ import annotations

from dataclasses import fields
from functools import cache
from pathlib import Path

from jinja2 import Environment, FileSystemLoader, StrictUndefined, select_autoescape

from web import links
from web.pages.page import Page
from web.wording import with_code

TEMPLATES = Path(__file__).parent / "templates"


def render(page: Page) -> str:
    """The whole page as text.  The template sees the fields of `page`, `here`, and the functions of `links`."""
    values = {item.name: getattr(page, item.name) for item in fields(page)}
    return environment().get_template(page.template).render(values, here=page.here)


@cache
def environment() -> Environment:
    """The one template environment; `links` is its only global, `with_code` its only filter of ours."""
    made = Environment(
        loader=FileSystemLoader(TEMPLATES),
        autoescape=select_autoescape(default=True, default_for_string=True),
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
        keep_trailing_newline=True,
        auto_reload=False,  # a page includes its parts many times over; looking at every file each time shows
    )
    made.globals["links"] = links
    made.filters["with_code"] = with_code
    return made
