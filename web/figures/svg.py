"""A plot as a still SVG picture: there before any script, without any, and on paper.

Its colours are the style sheet's variables, so it follows light and dark; all texts are escaped.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from html import escape

import numpy as np

from solvers.curve import Array
from web.display import number
from web.figures.plot import Plot, Span, Trace
from web.figures.ticks import decades, power_of_ten, ticks

WIDTH, HEIGHT = 480, 300
LEFT, RIGHT, TOP, BOTTOM = 64, 14, 12, 46
LEGEND = 20
MOST_POINTS = 900

Scale = Callable[[float], float]


def svg(plot: Plot) -> str:
    """The picture as markup; hidden from screen readers, which get the caption and the table of values."""
    legend = _legend(plot) if len(plot.traces) > 1 else []
    top = TOP + LEGEND * _legend_rows(plot)
    left, right, low, high = _margins(plot, plot.extent(), top)
    across = _scale(left, right, LEFT, WIDTH - RIGHT)
    up = _logarithmic(low, high, HEIGHT - BOTTOM, top) if plot.logarithmic else _scale(low, high, HEIGHT - BOTTOM, top)
    parts = [
        f'<svg class="plot-still" viewBox="0 0 {WIDTH} {HEIGHT}" aria-hidden="true" focusable="false">',
        *_axes(plot, (left, right, low, high), across, up, top),
        *(_span(span, across, top) for span in plot.spans),
        *(_band(trace, (low, high), across, up) for trace in plot.traces if trace.band is not None),
        *(_line(trace, across, up, plot.logarithmic) for trace in plot.traces),
        *legend,
        "</svg>",
    ]
    return "".join(parts)


def _margins(plot: Plot, extent: tuple[float, float, float, float], top: float) -> tuple[float, float, float, float]:
    """The visible ranges: some air above and below, and on both sides one scale where the plot asks for it."""
    left, right, low, high = extent
    if plot.logarithmic:
        floor, ceiling = 10.0 ** math.floor(math.log10(low)), 10.0 ** math.ceil(math.log10(high))
        low, high = floor, ceiling if ceiling > floor else floor * 10
    else:
        air = 0.05 * (high - low)
        low, high = low if plot.from_zero else low - air, high + air
    if plot.whole_places:
        left, right = left - 0.2, right + 0.2
    if plot.equal:
        wide, tall = WIDTH - LEFT - RIGHT, HEIGHT - BOTTOM - top
        scale = max((right - left) / wide, (high - low) / tall)
        more_across, more_up = scale * wide - (right - left), scale * tall - (high - low)
        left, right = left - more_across / 2, right + more_across / 2
        low, high = low - more_up / 2, high + more_up / 2
    return left, right, low, high


def _scale(low: float, high: float, start: float, end: float) -> Scale:
    return lambda value: start + (value - low) / (high - low) * (end - start)


def _logarithmic(low: float, high: float, start: float, end: float) -> Scale:
    linear = _scale(math.log10(low), math.log10(high), start, end)
    return lambda value: linear(math.log10(value))


def _axes(plot: Plot, ranges: tuple[float, float, float, float], across: Scale, up: Scale, top: float) -> list[str]:
    left, right, low, high = ranges
    floor = HEIGHT - BOTTOM
    parts = []
    marks = ticks(left, right)
    if plot.whole_places:
        marks = tuple(mark for mark in marks if mark == round(mark))
    for mark in marks:
        x = across(mark)
        parts.append(f'<path class="plot-grid" d="M{x:.1f} {top}V{floor}"/>')
        parts.append(f'<text class="plot-tick" x="{x:.1f}" y="{floor + 16}" text-anchor="middle">{number(mark)}</text>')
    for mark in decades(low, high) if plot.logarithmic else ticks(low, high):
        y = up(mark)
        parts.append(f'<path class="plot-grid" d="M{LEFT} {y:.1f}H{WIDTH - RIGHT}"/>')
        label = power_of_ten(mark) if plot.logarithmic else number(mark)
        parts.append(f'<text class="plot-tick" x="{LEFT - 6}" y="{y + 4:.1f}" text-anchor="end">{label}</text>')
    parts += [f'<path class="plot-rug" d="M{across(x):.1f} {floor}v-8"/>' for x in plot.rug.tolist()]
    parts.append(f'<path class="plot-frame" d="M{LEFT} {top}V{floor}H{WIDTH - RIGHT}"/>')
    middle = (LEFT + WIDTH - RIGHT) / 2
    parts.append(
        f'<text class="plot-axis" x="{middle:.0f}" y="{HEIGHT - 8}" text-anchor="middle">{escape(plot.across)}</text>'
    )
    half = (top + floor) / 2
    parts.append(
        f'<text class="plot-axis" transform="translate(13 {half:.0f}) rotate(-90)" text-anchor="middle">'
        f"{escape(plot.up)}</text>"
    )
    return parts


def _line(trace: Trace, across: Scale, up: Scale, logarithmic: bool) -> str:
    places, values = _thinned(trace.places, trace.values)
    pen, steps, dots = "M", [], []
    last = ""
    for place, value in zip(places.tolist(), values.tolist(), strict=True):
        if not (math.isfinite(place) and math.isfinite(value)) or (logarithmic and value <= 0):
            pen = "M"
            continue
        point = f"{across(place):.1f} {up(value):.1f}"
        if point != last or pen == "M":
            steps.append(pen + point)
            dots.append(point.split(" "))
        pen, last = "L", point
    dash = "" if trace.line.dash == "solid" else f' stroke-dasharray="{trace.line.dash.replace("px", "")}"'
    path = f'<path class="plot-line {trace.colour[2:]}"{dash} d="{"".join(steps)}"/>' if trace.joined else ""
    if len(trace.errors) and not logarithmic:
        path += _bars(trace, across, up)
    if trace.marked:
        path += "".join(f'<circle class="plot-dot {trace.colour[2:]}" cx="{x}" cy="{y}" r="3.5"/>' for x, y in dots)
    return path


def _bars(trace: Trace, across: Scale, up: Scale) -> str:
    """Error bars as one path."""
    rows = zip(trace.places.tolist(), trace.values.tolist(), trace.errors.tolist(), strict=True)
    steps = [f"M{across(x):.1f} {up(y - e):.1f}V{up(y + e):.1f}" for x, y, e in rows if math.isfinite(y + e)]
    return f'<path class="plot-bar {trace.colour[2:]}" d="{"".join(steps)}"/>'


def _band(trace: Trace, ranges: tuple[float, float], across: Scale, up: Scale) -> str:
    """The band as one area: along its upper edge and back along the lower one."""
    lower, upper = trace.edges(*ranges)
    there = np.flatnonzero(np.isfinite(lower) & np.isfinite(upper))
    there = there[:: math.ceil(len(there) / MOST_POINTS) or 1] if len(there) else there
    way = [(trace.places[k], upper[k]) for k in there] + [(trace.places[k], lower[k]) for k in there[::-1]]
    points = " ".join(f"{across(x):.1f},{up(y):.1f}" for x, y in way)
    return f'<polygon class="plot-band {trace.colour[2:]}" points="{points}"/>'


def _span(span: Span, across: Scale, top: float) -> str:
    left, right = across(span.start), across(span.end)
    place = f'x="{left:.1f}" y="{top}" width="{right - left:.1f}" height="{HEIGHT - BOTTOM - top}"'
    return f'<rect class="plot-span {span.colour[2:]}" {place}/>'


def _thinned(places: Array, values: Array) -> tuple[Array, Array]:
    """Every so-maniest point, but never without the ends of a riser or of a gap."""
    if len(places) <= MOST_POINTS:
        return places, values
    keep = np.zeros(len(places), dtype=bool)
    keep[:: math.ceil(len(places) / MOST_POINTS)] = True
    keep[-1] = True
    step = np.abs(np.diff(values, prepend=values[0]))
    sharp = ~np.isfinite(values) | ~np.isfinite(step) | (np.diff(places, prepend=places[0] - 1) == 0)
    keep |= sharp | np.roll(sharp, -1) | np.roll(sharp, 1)
    return places[keep], values[keep]


def _legend_places(plot: Plot) -> list[tuple[float, int]]:
    """Where each entry of the legend begins: x and row."""
    x, row, found = float(LEFT), 0, []
    for trace in plot.traces:
        width = 44 + 7.5 * len(trace.label)
        if x + width > WIDTH - RIGHT and x > LEFT:
            x, row = float(LEFT), row + 1
        found.append((x, row))
        x += width
    return found


def _legend_rows(plot: Plot) -> int:
    return _legend_places(plot)[-1][1] + 1 if len(plot.traces) > 1 else 0


def _legend(plot: Plot) -> list[str]:
    parts = []
    for trace, (x, row) in zip(plot.traces, _legend_places(plot), strict=True):
        y = 14 + LEGEND * row
        dash = "" if trace.line.dash == "solid" else f' stroke-dasharray="{trace.line.dash.replace("px", "")}"'
        if trace.joined:
            parts.append(f'<path class="plot-line {trace.colour[2:]}"{dash} d="M{x:.0f} {y - 4}h28"/>')
        else:
            parts.append(f'<circle class="plot-dot {trace.colour[2:]}" cx="{x + 14:.0f}" cy="{y - 4}" r="3.5"/>')
        parts.append(f'<text class="plot-tick" x="{x + 33:.0f}" y="{y}">{escape(trace.label)}</text>')
    return parts
