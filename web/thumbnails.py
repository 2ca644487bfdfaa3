"""A small static picture of a curve: what a sample looks like before anybody has clicked on it.

The picture is inline SVG without a style attribute, so it obeys the security policy and follows light and dark.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from html import escape

from markupsafe import Markup

WIDTH, HEIGHT, EDGE = 240, 132, 16
"""Size of the picture and the space kept free around the curve, in units of its view box."""

Points = Sequence[tuple[float, float]]


@dataclass(frozen=True, slots=True)
class Sketch:
    """What a picture is made of.

    `curve` is drawn with a dot at each end, `others` thin and dashed below it (a second unknown, a control, a limit)
    and on the same axes.  `true_shape` keeps the same scale in both directions, as for a shape in space; else the
    picture is filled.  `downwards` is for depths, which grow downwards.
    """

    curve: tuple[tuple[float, float], ...]
    others: tuple[tuple[tuple[float, float], ...], ...] = ()
    true_shape: bool = False
    downwards: bool = False


def thumbnail(
    points: Points,
    *,
    others: Sequence[Points] = (),
    true_shape: bool = False,
    downwards: bool = False,
    title: str = "",
) -> Markup:
    """The picture of a polyline as an SVG element; without a title it is decoration and hidden from screen readers."""
    every = [point for line in (points, *others) for point in line]
    if len(points) < 2:
        raise ValueError("a picture needs at least two points")
    left, right = min(x for x, _ in every), max(x for x, _ in every)
    low, high = min(y for _, y in every), max(y for _, y in every)
    across = (WIDTH - 2 * EDGE) / ((right - left) or 1.0)
    up = (HEIGHT - 2 * EDGE) / ((high - low) or 1.0)
    if true_shape:
        across = up = min(across if right > left else up, up if high > low else across)
    sign = 1 if downwards else -1

    def place(point: tuple[float, float]) -> tuple[float, float]:
        x = WIDTH / 2 + across * (point[0] - (left + right) / 2)
        return round(x, 1), round(HEIGHT / 2 + sign * up * (point[1] - (low + high) / 2), 1)

    def line(of: Points, css: str) -> str:
        spots = [place(point) for point in of]
        kept = [spot for count, spot in enumerate(spots) if count in (0, len(spots) - 1) or spot != spots[count - 1]]
        return f'<polyline class="{css}" points="{" ".join(f"{x:g},{y:g}" for x, y in kept)}"/>'

    ends = "".join(
        f'<circle class="thumb-end" cx="{x:g}" cy="{y:g}" r="4"/>' for x, y in (place(points[0]), place(points[-1]))
    )
    label = f'role="img" aria-label="{escape(title)}"' if title else 'aria-hidden="true"'
    return Markup(
        f'<svg class="thumb" viewBox="0 0 {WIDTH} {HEIGHT}" {label}>'
        f"{''.join(line(other, 'thumb-other') for other in others)}{line(points, 'thumb-curve')}{ends}</svg>"
    )


def sketch_picture(sketch: Sketch, title: str = "") -> Markup:
    """The picture of a sketch."""
    return thumbnail(
        sketch.curve,
        others=sketch.others,
        true_shape=sketch.true_shape,
        downwards=sketch.downwards,
        title=title,
    )
