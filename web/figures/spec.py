"""The specification that Plotly draws a plot from, as plain data.

Colours are names of the style sheet's variables (`--line-1`): `figures.js` puts in what they stand for on the paper
that the reader has chosen, and again when that changes.
"""

from __future__ import annotations

import json
import math
from typing import Any

import numpy as np

from solvers.curve import Array
from web.display import LEAST_PLAIN, MOST_PLAIN
from web.figures.plot import Plot, Trace
from web.figures.ticks import decades, power_of_ten

DIGITS = 7
"""Enough for a picture; the tables and the result document hold the exact numbers."""


def spec(plot: Plot) -> dict[str, Any]:
    """`data` and `layout`; every number is finite or None, which lifts the pen."""
    several = len(plot.traces) > 1
    left, right, low, high = plot.extent()
    data = [_shaded(trace, low, high) for trace in plot.traces if trace.band is not None]
    data += [
        {
            "type": "scatter",
            "mode": "+".join(["lines"] * trace.joined + ["markers"] * trace.marked),
            "name": trace.label,
            "x": _numbers(trace.places),
            "y": _numbers(trace.values),
            "line": {"color": trace.colour, "dash": trace.line.dash, "width": 2.2, "simplify": False},
            "connectgaps": False,
            **_errors(trace),
            "hovertemplate": f"{_escaped(plot.across)} = %{{x}}<br>{_escaped(trace.label)} = %{{y}}<extra></extra>",
        }
        for trace in plot.traces
    ]
    across, up = _axis(plot.across, left, right), _axis(plot.up, low, high)
    if plot.logarithmic:
        up |= _powers(plot)
    elif plot.from_zero:
        up |= {"rangemode": "tozero"}
    if plot.equal:
        up |= {"scaleanchor": "x", "scaleratio": 1}
    if plot.whole_places:
        across |= {"dtick": max(1, math.ceil(max(len(trace.places) for trace in plot.traces) / 12))}
    layout: dict[str, Any] = {"xaxis": across, "yaxis": up, "showlegend": several}
    shapes: list[dict[str, Any]] = [
        {"type": "line", "xref": "x", "yref": "paper", "x0": x, "x1": x, "y0": 0, "y1": 0.03, "line": {"width": 1}}
        for x in _numbers(plot.rug)
    ]
    shapes += [
        {"type": "rect", "xref": "x", "yref": "paper", "x0": span.start, "x1": span.end, "y0": 0, "y1": 1,
         "fillcolor": span.colour, "opacity": 0.12, "layer": "below", "line": {"width": 0}}
        for span in plot.spans
    ]  # fmt: skip
    if shapes:
        layout["shapes"] = shapes
    return {"data": data, "layout": layout}


def _errors(trace: Trace) -> dict[str, Any]:
    """The dots and error bars of a trace, where it has them."""
    found: dict[str, Any] = {} if trace.joined else {"marker": {"color": trace.colour, "size": 6}}
    if len(trace.errors):
        bars = {"type": "data", "array": _numbers(trace.errors), "color": trace.colour, "thickness": 1.2, "width": 3}
        found["error_y"] = bars
    return found


def _shaded(trace: Trace, low: float, high: float) -> dict[str, Any]:
    """The band of a line as a filled area."""
    lower, upper = trace.edges(low, high)
    there = np.isfinite(lower) & np.isfinite(upper)
    return {
        "type": "scatter",
        "mode": "lines",
        "name": f"{trace.label}, one sigma",
        "x": _numbers(np.concatenate([trace.places[there], trace.places[there][::-1]])),
        "y": _numbers(np.concatenate([upper[there], lower[there][::-1]])),
        "fill": "toself",
        "fillcolor": trace.colour,
        "line": {"color": trace.colour, "width": 0},
        "opacity": 0.2,
        "hoverinfo": "skip",
        "showlegend": False,
    }


def data_block(plot: Plot) -> str:
    """The specification as text for a `<script type="application/json">`: no `<` that could end it."""
    text = json.dumps(spec(plot), ensure_ascii=False, allow_nan=False, separators=(",", ":"))
    return text.replace("<", "\\u003c").replace(">", "\\u003e").replace("&", "\\u0026")


def _axis(label: str, low: float, high: float) -> dict[str, Any]:
    """An axis with its title; numbers of a usual size are written out.

    Plotly raises exponents by an inline style, which the content security policy refuses: so they are written `1e-9`.
    """
    usual = max(abs(low), abs(high)) < MOST_PLAIN and high - low > LEAST_PLAIN
    return {
        "title": {"text": _escaped(label)},
        "zeroline": False,
        "exponentformat": "none" if usual else "e",
        "hoverformat": ".6~g",
    }


def _powers(plot: Plot) -> dict[str, Any]:
    """A logarithmic axis with ticks at powers of ten, their exponents raised by characters."""
    _, _, low, high = plot.extent()
    marks = decades(10.0 ** math.floor(math.log10(low)), 10.0 ** math.ceil(math.log10(high)))
    texts = [power_of_ten(mark) for mark in marks]
    return {"type": "log", "tickmode": "array", "tickvals": list(marks), "ticktext": texts}


def _numbers(numbers: Array) -> list[float | None]:
    size = np.abs(numbers)
    power = np.floor(np.log10(size, where=np.isfinite(size) & (size > 0), out=np.zeros_like(size)))
    scale = 10.0 ** np.clip(DIGITS - 1 - power, -300, 300)
    return [value if math.isfinite(value) else None for value in (np.round(numbers * scale) / scale).tolist()]


def _escaped(text: str) -> str:
    """Plotly reads a few tags in its texts; a user's `<` is no tag."""
    return text.replace("&", "&amp;").replace("<", "&lt;").replace(">", "&gt;")
