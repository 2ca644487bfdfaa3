"""The mesh: the independent variable cut into stretches between places, each stretch into intervals.

A stretch runs from one place to the next; its inner breaks are fractions of its width, so they move along when a
place is itself an unknown.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import cached_property
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from solvers.transcription.collocation import Family, Scheme, scheme


@dataclass(frozen=True, slots=True)
class Interval:
    """One interval: `start` and `width` as fractions of its stretch, and its scheme."""

    stretch: int
    start: float
    width: float
    scheme: Scheme


@dataclass(frozen=True, slots=True)
class Alike:
    """The intervals of one scheme of degree K: the G `members`, and the indices of their points (G x K)."""

    scheme: Scheme
    members: NDArray[np.int64]
    points: NDArray[np.int64]


@dataclass(frozen=True)
class Mesh:
    """Intervals in order; every stretch is covered from 0 to 1."""

    intervals: tuple[Interval, ...]

    @property
    def points(self) -> int:
        """How many collocation points there are."""
        return sum(interval.scheme.degree for interval in self.intervals)

    @property
    def stretches(self) -> int:
        """How many stretches there are."""
        return self.intervals[-1].stretch + 1

    @cached_property
    def alike(self) -> list[Alike]:
        """The intervals by scheme."""
        owners = np.array([id(i.scheme) for i in self.intervals])
        degrees = np.array([i.scheme.degree for i in self.intervals])
        first = np.cumsum(degrees) - degrees
        groups = []
        for key, scheme_ in {id(i.scheme): i.scheme for i in self.intervals}.items():
            members = np.flatnonzero(owners == key)
            groups.append(Alike(scheme_, members, first[members][:, None] + np.arange(scheme_.degree)))
        return groups

    def breaks(self, places: np.ndarray) -> np.ndarray:
        """The ends of all intervals as values of the independent variable, from the values of the places."""
        starts = [places[i.stretch] + i.start * (places[i.stretch + 1] - places[i.stretch]) for i in self.intervals]
        return np.array([*starts, places[-1]])

    def degrees(self) -> tuple[int, int]:
        """The lowest and the highest degree."""
        degrees = [interval.scheme.degree for interval in self.intervals]
        return min(degrees), max(degrees)


def interval(stretch: int, start: float, end: float, family: Family, degree: int) -> Interval:
    """An interval from two fractions of its stretch."""
    return Interval(stretch, start, end - start, scheme(family, degree))


def uniform(stretches: int, count: int, degree: int, family: Family = Family.RADAU) -> Mesh:
    """`count` equal intervals in each stretch."""

    def pieces() -> Iterator[Interval]:
        edges = np.linspace(0.0, 1.0, count + 1)
        for stretch in range(stretches):
            for left, right in pairwise(edges):
                yield interval(stretch, float(left), float(right), family, degree)

    return Mesh(tuple(pieces()))
