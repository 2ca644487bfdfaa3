"""Small pictures of the samples: drawn once from their solutions and kept beside them.

`python -m service.sketches` solves the samples and writes the file anew; a test holds it to fresh solutions.
"""

from __future__ import annotations

import json
import sys
from collections.abc import Mapping
from functools import cache
from pathlib import Path
from typing import TYPE_CHECKING, Any

from service import samples
from web.thumbnails import Sketch

if TYPE_CHECKING:
    from web.trajectory import Trajectory

_STORED = Path(__file__).parent / "samples" / "sketches" / "curves.json"
POINTS = 61
DIGITS = 4
_SHAPES = ("chute", "chute-over-duct", "hose", "hose-over-bench", "hose-lengths", "sleeve", "sleeve-limit")
_DOWNWARDS = ("chute", "chute-over-duct")
_DRAWN: Mapping[str, tuple[str, ...]] = {"crucible": ("x", "q"), "fin": ("y",)}
"""Unknowns to draw where it is not only the first one; the second and further ones are scaled to the first."""


@cache
def sketches() -> Mapping[str, Sketch]:
    """The picture of every sample that has one."""
    stored = json.loads(_STORED.read_text("utf-8"))
    return {name: _sketch(name, [_points(line) for line in lines]) for name, lines in stored.items()}


def drawn(name: str, result: Mapping[str, Any]) -> list[list[list[float]]]:
    """The lines of a sample's picture from its result document: points of the first unknown, then of others.

    Of a sweep the first unknown's curves that were kept, of a continuation the value over the constant.
    """
    from web.trajectory import read_sweep, read_trajectory  # not for a server, which only reads what is stored

    if (branch := result["continuation"]) is not None:
        way = sorted([*branch["points"], *branch["folds"]], key=lambda p: p["leg"])  # a fold ends its leg
        return [[[_short(point["at"]), _short(point["value"])] for point in way]]
    if result["sweep"] is not None:
        return [_line(kept, kept.names[0]) for _, kept in read_sweep(result)]
    trajectory = read_trajectory(result)
    assert trajectory is not None, f"sample {name} has no curve"
    return [_line(trajectory, unknown) for unknown in _DRAWN.get(name, trajectory.names[:1])]


def _line(trajectory: Trajectory, unknown: str) -> list[list[float]]:
    """Points of an unknown over all arcs."""
    import numpy as np

    places = np.linspace(trajectory.start, trajectory.end, POINTS)
    values = np.concatenate([arc.evaluate(unknown, 0, own) for arc, own in trajectory.by_arc(places)])
    return [[_short(x), _short(y)] for x, y in zip(places, values, strict=True)]


def _sketch(name: str, lines: list[tuple[tuple[float, float], ...]]) -> Sketch:
    curve, *others = lines
    if name in _DRAWN:
        others = [_scaled(other, curve) for other in others]
    return Sketch(curve, tuple(others), true_shape=name in _SHAPES, downwards=name in _DOWNWARDS)


def _scaled(
    line: tuple[tuple[float, float], ...], model: tuple[tuple[float, float], ...]
) -> tuple[tuple[float, float], ...]:
    """A line in other units, brought into the height of the first one."""
    low, high = min(y for _, y in line), max(y for _, y in line)
    bottom, top = min(y for _, y in model), max(y for _, y in model)
    return tuple((x, bottom + (y - low) / ((high - low) or 1.0) * (top - bottom)) for x, y in line)


def _points(line: list[list[float]]) -> tuple[tuple[float, float], ...]:
    return tuple((x, y) for x, y in line)


def _short(number: float) -> float:
    return float(f"{number:.{DIGITS}g}")


def main() -> None:
    """Solve the samples, those named as arguments or all, and keep their curves."""
    from service.jobs import perform

    stored = json.loads(_STORED.read_text("utf-8"))
    for name in sys.argv[1:] or samples.names():
        result = perform(samples.text(name), lambda event: None, lambda: False)
        if result["curve"] is not None:
            stored[name] = drawn(name, result)
    ordered = {name: stored[name] for name in samples.names() if name in stored}
    lines = [f"{json.dumps(name)}: {json.dumps(curves)}" for name, curves in ordered.items()]
    _STORED.write_text("{\n" + ",\n".join(lines) + "\n}\n", "utf-8")


if __name__ == "__main__":
    main()
