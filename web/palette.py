"""The line colours of plots, for light and dark paper, each with a dash pattern of its own.

Colour is never the only difference between two lines.  `static/css/tokens.css` declares the same colours as
`--line-1` to `--line-7`; a test holds the two together.
"""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Line:
    """One line style.  `dash` is in units of the plot (px); "solid" is a plain line."""

    name: str
    light: str
    dark: str
    dash: str


LINES = (
    Line("petrol", "#0b5f68", "#63c4c8", "solid"),
    Line("rust", "#b0461c", "#f0996b", "9px,4px"),
    Line("violet", "#6547a0", "#b9a2f0", "2px,3px"),
    Line("moss", "#566a0c", "#b3c755", "12px,3px,2px,3px"),
    Line("plum", "#a12c68", "#ee94c0", "5px,3px"),
    Line("steel", "#2a68ad", "#85b8f2", "14px,5px"),
    Line("umber", "#75552b", "#d2b285", "7px,2px,2px,2px,2px,2px"),
)
