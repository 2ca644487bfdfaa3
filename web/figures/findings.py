"""What a figure shows, in one sentence: the caption that is read instead of the picture."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from solvers.curve import Array
from web.display import quantity
from web.extremes import Extremes

_FLAT = 1e-7
_LEAP = 0.02
_WIGGLE = 1e-6
_SEEN = 1e-4
_MOST_TOLD = 3
Jump = tuple[float, float, float]


def course(
    name: str,
    unit: str,
    values: Array,
    reach: Extremes | None,
    independent: tuple[str, str],
    jumps: Sequence[Jump] = (),
) -> str:
    """`y falls from 2 m to 1.04 m at x = 1.37 m and ends at 2.4 m`, without a full stop.

    `values` run along the curve, NaN where there is none; `reach` are the exact extremes.
    """
    values = values[np.isfinite(values)]
    if not len(values):
        return f"{name} is not defined here"
    first, last = float(values[0]), float(values[-1])
    extent = 0.0 if reach is None else reach.highest - reach.lowest
    if reach is None or extent <= _FLAT * reach.largest:
        return f"{name} stays at {amount(first, unit)}"
    leaps = [jump for jump in jumps if abs(jump[2] - jump[1]) > _LEAP * extent]
    if leaps:
        return _leaping(name, unit, leaps, reach, independent)
    steps = np.diff(values)
    for word, sign in (("rises", 1), ("falls", -1)):
        if np.all(sign * steps >= -_WIGGLE * extent):
            return f"{name} {word} from {amount(first, unit)} to {amount(last, unit)}"
    parts = [f"{name} starts at {amount(first, unit)}"]
    turns = [("lowest", reach.lowest, reach.lowest_at), ("highest", reach.highest, reach.highest_at)]
    for word, value, place in sorted(turns, key=lambda turn: turn[2]):
        if min(abs(value - first), abs(value - last)) > _SEEN * extent:
            parts.append(f"is {word} with {amount(value, unit)} at {_at(independent, place)}")
    parts.append(f"ends at {amount(last, unit)}")
    return ", ".join(parts[:-1]) + " and " + parts[-1]


def _leaping(name: str, unit: str, leaps: Sequence[Jump], reach: Extremes, independent: tuple[str, str]) -> str:
    """`a jumps at t = 0.14 s from 2 m/s² to −2 m/s²`; many jumps are counted, not told."""
    if len(leaps) > _MOST_TOLD:
        within = f"between {amount(reach.lowest, unit)} and {amount(reach.highest, unit)}"
        return f"{name} lies {within} and jumps at {len(leaps)} places"
    told = " and ".join(
        f"at {_at(independent, place)} from {amount(before, unit)} to {amount(after, unit)}"
        for place, before, after in leaps
    )
    return f"{name} jumps {told}"


def sentence(parts: Sequence[str]) -> str:
    """Parts joined to one sentence with a full stop."""
    text = "; ".join(part for part in parts if part)
    return f"{text}." if text else ""


def amount(value: float, unit: str) -> str:
    """A value as captions have it: four digits and the unit."""
    return quantity(value if abs(value) > 1e-12 else 0.0, unit, 4)


def _at(independent: tuple[str, str], place: float) -> str:
    return f"{independent[0]} = {amount(place, independent[1])}"
