"""The curve of a result document, read back so that it can be evaluated, differentiated and searched."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.polynomial import legendre
from numpy.typing import NDArray

from solvers.curve import Array
from web.unit_text import per

Intervals = NDArray[np.intp]


@dataclass(frozen=True, slots=True)
class Arc:
    """One stretch of the independent variable with its mesh; the only one has the name "".

    `breaks` has n + 1 places.  `functions` maps a name with primes to Legendre coefficients of the shape (degree + 1,
    n), one column for each interval, in the local variable that runs from -1 to 1.
    """

    name: str
    breaks: Array
    functions: Mapping[str, Array]

    @property
    def start(self) -> float:
        """Where the arc begins."""
        return float(self.breaks[0])

    @property
    def end(self) -> float:
        """Where the arc ends."""
        return float(self.breaks[-1])

    def coefficients(self, name: str, derivative: int = 0) -> Array | None:
        """Legendre coefficients of a derivative as in `functions`; None where the arc does not have the function.

        The highest stored derivative is differentiated further: each differentiation of a polynomial costs accuracy.
        """
        for order in range(derivative, -1, -1):
            stored = self.functions.get(name + "'" * order)
            if stored is not None:
                further = derivative - order
                if not further:
                    return stored
                scale = (2 / np.diff(self.breaks)) ** further
                return np.asarray(legendre.legder(stored, further, axis=0) * scale, dtype=float)
        return None

    def places(self, local: Array, intervals: Intervals) -> Array:
        """Places from -1 to 1 within their intervals as values of the independent variable."""
        left, right = self.breaks[intervals], self.breaks[intervals + 1]
        return np.asarray(left + (right - left) * (local + 1) / 2, dtype=float)

    def evaluate(self, name: str, derivative: int, places: Array) -> Array:
        """Values at places on the arc, NaN where it does not have the function; at a break the interval on its left
        speaks."""
        coefficients = self.coefficients(name, derivative)
        if coefficients is None:
            return np.full(np.shape(places), np.nan)
        owner = np.clip(np.searchsorted(self.breaks, places, side="left") - 1, 0, len(self.breaks) - 2)
        left, right = self.breaks[owner], self.breaks[owner + 1]
        return values((2 * places - left - right) / (right - left), coefficients, owner)


def values(local: Array, coefficients: Array, intervals: Intervals) -> Array:
    """The polynomials of the given intervals at places from -1 to 1: three arrays in step, one value each."""
    return np.asarray(legendre.legval(local, coefficients[:, intervals], tensor=False), dtype=float)


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
    def stored(self) -> tuple[str, ...]:
        """Every function of the document, in its order."""
        return tuple(dict.fromkeys(name for arc in self.arcs for name in arc.functions))

    @property
    def names(self) -> tuple[str, ...]:
        """The functions without their stored derivatives, in the order of the document."""
        stored = self.stored
        return tuple(name for name in stored if not (name.endswith("'") and name.rstrip("'") in stored))

    def unit_of(self, name: str, derivative: int = 0) -> str:
        """The unit of a derivative: as stored, else made from the function's own unit."""
        stored = self.units.get(name + "'" * derivative)
        return per(self.units.get(name, ""), self.unit, derivative) if stored is None else stored

    def by_arc(self, places: Array) -> list[tuple[Arc, Array]]:
        """Rising places shared out among the arcs; a junction goes to the arc that ends there, and where it is named
        twice to the arc that begins there too."""
        ends = np.array([arc.end for arc in self.arcs[:-1]])
        first, behind = (np.searchsorted(places, ends, side=side) for side in ("left", "right"))
        return list(zip(self.arcs, np.split(places, np.minimum(first + 1, behind)), strict=True))


def read_trajectory(result: Mapping[str, Any]) -> Trajectory | None:
    """The curve of a result document, or None where it has none."""
    curve = result.get("curve")
    return _read(curve, curve["independent"]) if curve and curve["arcs"] else None


def read_costates(result: Mapping[str, Any]) -> Trajectory | None:
    """The multipliers along the curve of a result document, or None where it has none."""
    curve, costates = result.get("curve"), (result.get("multipliers") or {}).get("costates")
    return _read(costates, curve["independent"]) if curve and costates and costates["arcs"] else None


def read_changes(result: Mapping[str, Any]) -> tuple[Trajectory, ...]:
    """What one standard deviation of each constant does to the curve; () where that is not known."""
    curve = result.get("curve")
    changes = (result.get("band") or {}).get("curve") or ()
    return tuple(_read({"arcs": c["arcs"], "units": curve["units"]}, curve["independent"]) for c in changes if curve)


def band(changes: Sequence[Trajectory], name: str, derivative: int, places: Array) -> Array | None:
    """One standard deviation of a function at rising places (independent tolerances), NaN where an arc lacks it; None
    where it is not known."""
    if not changes or any(all(arc.coefficients(name, derivative) is None for arc in c.arcs) for c in changes):
        return None
    parts = [np.concatenate([arc.evaluate(name, derivative, some) for arc, some in change.by_arc(places)])
             for change in changes]  # fmt: skip
    return np.asarray(np.sqrt(np.sum(np.square(parts), axis=0)))


def read_sweep(result: Mapping[str, Any]) -> list[tuple[int, Trajectory]]:
    """The curves of a sweep with the index of their point; the units are those of the curve where there is one."""
    sweep, curve = result.get("sweep"), result.get("curve") or {}
    independent = curve.get("independent") or (result.get("problem") or {}).get("independent")
    if not sweep or not independent:
        return []
    return [
        (int(one["point"]), _read({"arcs": one["arcs"], "units": curve.get("units") or {}}, independent))
        for one in sweep["curves"]
    ]


def _read(functions: Mapping[str, Any], independent: Mapping[str, Any]) -> Trajectory:
    return Trajectory(
        independent=str(independent["name"]),
        unit=str(independent.get("unit") or ""),
        arcs=tuple(
            Arc(
                str(arc.get("name") or ""),
                np.array(arc["breaks"], dtype=float),
                {name: _padded(pieces) for name, pieces in arc["functions"].items()},
            )
            for arc in functions["arcs"]
        ),
        units={name: unit or "" for name, unit in (functions.get("units") or {}).items()},
    )


def _padded(pieces: Sequence[Sequence[float]]) -> Array:
    """Coefficients of all intervals as columns; lower degrees end in zeros."""
    height = max(len(piece) for piece in pieces)
    return np.array([[*piece, *[0.0] * (height - len(piece))] for piece in pieces], dtype=float).T
