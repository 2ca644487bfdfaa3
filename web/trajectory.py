"""The curve of a result document, read back so that it can be evaluated, differentiated and searched."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.polynomial import legendre

from solvers.curve import Array, Curve
from web.unit_text import per


@dataclass(frozen=True, slots=True)
class Arc:
    """One stretch of the independent variable with its mesh; the only one has the name ""."""

    name: str
    curve: Curve

    @property
    def start(self) -> float:
        """Where the arc begins."""
        return float(self.curve.breaks[0])

    @property
    def end(self) -> float:
        """Where the arc ends."""
        return float(self.curve.breaks[-1])


@dataclass(frozen=True, slots=True)
class Trajectory:
    """Functions of one independent variable over one arc or several that follow each other.

    Everything is in the user's units.  `units` maps the stored names (with primes) to their unit.
    """

    independent: str
    unit: str
    arcs: tuple[Arc, ...]
    units: Mapping[str, str]

    @property
    def start(self) -> float:
        """The first place."""
        return self.arcs[0].start

    @property
    def end(self) -> float:
        """The last place."""
        return self.arcs[-1].end

    @property
    def names(self) -> tuple[str, ...]:
        """The functions without their stored derivatives, in the order of the document."""
        stored = dict.fromkeys(name for arc in self.arcs for name in arc.curve.functions)
        return tuple(name for name in stored if not (name.endswith("'") and name.rstrip("'") in stored))

    def unit_of(self, name: str, derivative: int = 0) -> str:
        """The unit of a derivative: as stored, else made from the function's own unit."""
        stored = self.units.get(name + "'" * derivative)
        return per(self.units.get(name, ""), self.unit, derivative) if stored is None else stored

    def evaluate(self, arc: Arc, name: str, derivative: int, places: Array) -> Array:
        """Values of a derivative on one arc, NaN where the arc does not have the function.

        The highest stored derivative is differentiated further: each differentiation of a polynomial costs accuracy.
        At a break the interval on its left speaks.
        """
        stored, further = _source(arc.curve, name, derivative)
        if stored is None:
            return np.full(np.shape(places), np.nan)
        return arc.curve.evaluate(stored, places, further)

    def pieces(self, arc: Arc, name: str, derivative: int) -> tuple[Array, ...]:
        """Legendre coefficients of a derivative, interval by interval; empty where the arc does not have it."""
        stored, further = _source(arc.curve, name, derivative)
        if stored is None:
            return ()
        pieces = arc.curve.functions[stored]
        if not further:
            return pieces
        widths = np.diff(arc.curve.breaks)
        return tuple(
            legendre.legder(piece, further) * (2 / width) ** further
            for piece, width in zip(pieces, widths, strict=True)
        )


def read_trajectory(result: Mapping[str, Any]) -> Trajectory | None:
    """The curve of a result document, or None where it has none."""
    curve = result.get("curve")
    if not curve or not curve["arcs"]:
        return None
    independent = curve["independent"]
    return Trajectory(independent["name"], independent.get("unit") or "", _arcs(curve["arcs"]), _units(curve))


def read_costates(result: Mapping[str, Any]) -> Trajectory | None:
    """The multipliers along the curve of a result document, or None where it has none."""
    costates = (result.get("multipliers") or {}).get("costates")
    if not result.get("curve") or not costates or not costates["arcs"]:
        return None
    independent = result["curve"]["independent"]
    return Trajectory(independent["name"], independent.get("unit") or "", _arcs(costates["arcs"]), _units(costates))


def _arcs(documents: list[Mapping[str, Any]]) -> tuple[Arc, ...]:
    return tuple(
        Arc(
            document.get("name") or "",
            Curve(
                np.array(document["breaks"], dtype=float),
                {
                    name: tuple(np.array(piece, dtype=float) for piece in pieces)
                    for name, pieces in document["functions"].items()
                },
            ),
        )
        for document in documents
    )


def _units(document: Mapping[str, Any]) -> dict[str, str]:
    return {name: unit or "" for name, unit in (document.get("units") or {}).items()}


def _source(curve: Curve, name: str, derivative: int) -> tuple[str | None, int]:
    """The stored function to start from and how often to differentiate it."""
    for order in range(derivative, -1, -1):
        if name + "'" * order in curve.functions:
            return name + "'" * order, derivative - order
    return None, 0
