"""A unit as the solver's records carry it: its text and its size in coherent SI units."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Unit:
    """`text` is what the user wrote ("mm/s^2"); one of it is `factor` coherent SI units."""

    text: str
    factor: float = 1.0


PLAIN = Unit("", 1.0)
"""The unit of what has none."""
