"""What several starts led to, as a list with small pictures."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from markupsafe import Markup

from web import display, links
from web.figures.series import series
from web.thumbnails import thumbnail
from web.trajectory import read_trajectory

PICTURE_POINTS = 160


@dataclass(frozen=True, slots=True)
class Found:
    """One distinct curve: its picture, the address of its table, value and verdict, and the starts that led there."""

    picture: Markup
    table: str
    value: str
    verdict: str
    tone: str
    parameters: tuple[tuple[str, str], ...]
    count: int
    starts: str


def found_by_starts(result: Mapping[str, Any], run_id: str) -> tuple[Found, ...]:
    """The extremals of a result document, in its order: the best first."""
    unit = str(result.get("value_unit") or "")
    seek = str(((result.get("problem") or {}).get("functional") or {}).get("seek") or "")
    return tuple(
        Found(
            picture=_picture(extremal),
            table=links.table(run_id, "csv", extremal=str(number)) if extremal["curve"] else "",
            value=display.joined(display.with_error(extremal["value"], extremal["value_error"]), unit),
            verdict=extremal["verdict"] or "no verdict",
            tone=display.tone(extremal["verdict"], seek),
            parameters=tuple(
                (name, display.quantity(item["value"], item["unit"], 7))
                for name, item in extremal["parameters"].items()
            ),
            count=len(extremal["starts"]),
            starts="; ".join(extremal["starts"]),
        )
        for number, extremal in enumerate(result.get("extremals") or (), start=1)
    )


def _picture(extremal: Mapping[str, Any]) -> Markup:
    """The first unknown over the independent variable: a shape to tell the curves apart by."""
    trajectory = read_trajectory(extremal)
    if trajectory is None:
        return Markup()
    places, values = series(trajectory, trajectory.names[0], most=PICTURE_POINTS)
    return thumbnail(list(zip(places.tolist(), values.tolist(), strict=True)))
