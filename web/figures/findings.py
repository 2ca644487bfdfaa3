"""What a figure shows, in one sentence: the caption that is read instead of the picture."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from solvers.curve import Array
from web.display import quantity

_FLAT = 1e-9
_MOST_TOLD = 3
Jump = tuple[float, float, float]


def course(name: str, unit: str, places: Array, values: Array, independent: tuple[str, str]) -> str:
    """`y falls from 2 m to 1.04 m at x = 1.37 m and ends at 2.4 m`, without a full stop."""
    seen = np.isfinite(values)
    places, values = places[seen], values[seen]
    if not len(values):
        return f"{name} is not defined here"
    first, last, low, high = (float(v) for v in (values[0], values[-1], values.min(), values.max()))
    reach = high - low
    if reach <= _FLAT * max(abs(low), abs(high)):
        return f"{name} stays at {amount(first, unit)}"
    steps = np.diff(values)
    small = 1e-4 * reach
    if np.all(steps >= -1e-6 * reach):
        return f"{name} rises from {amount(first, unit)} to {amount(last, unit)}"
    if np.all(steps <= 1e-6 * reach):
        return f"{name} falls from {amount(first, unit)} to {amount(last, unit)}"
    parts = [f"{name} starts at {amount(first, unit)}"]
    turns = sorted((int(at) for at in (values.argmin(), values.argmax())), key=lambda at: float(places[at]))
    for at in turns:
        value = float(values[at])
        if min(abs(value - first), abs(value - last)) > small:
            word = "lowest" if value == low else "highest"
            parts.append(f"is {word} with {amount(value, unit)} at {_at(independent, float(places[at]))}")
    parts.append(f"ends at {amount(last, unit)}")
    return ", ".join(parts[:-1]) + " and " + parts[-1] if len(parts) > 1 else parts[0]


def switching(name: str, unit: str, jumps: Sequence[Jump], independent: tuple[str, str]) -> str:
    """`a jumps at t = 0.14 s from 2 m/s² to −2 m/s²`, without a full stop; "" where it does not jump."""
    if not jumps:
        return ""
    told = " and ".join(
        f"at {_at(independent, place)} from {amount(before, unit)} to {amount(after, unit)}"
        for place, before, after in jumps[:_MOST_TOLD]
    )
    more = len(jumps) - _MOST_TOLD
    return f"{name} jumps {told}" + (f" and at {more} more places" if more > 0 else "")


def sentence(parts: Sequence[str]) -> str:
    """Parts joined to one sentence with a full stop."""
    text = "; ".join(part for part in parts if part)
    return f"{text}." if text else ""


def amount(value: float, unit: str) -> str:
    """A value as captions have it: four digits and the unit."""
    return quantity(value if abs(value) > 1e-12 else 0.0, unit, 4)


def _at(independent: tuple[str, str], place: float) -> str:
    return f"{independent[0]} = {amount(place, independent[1])}"
