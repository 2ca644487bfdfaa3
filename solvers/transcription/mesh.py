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

Array = NDArray[np.float64]


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
        return len(self.owner)

    @cached_property
    def counts(self) -> NDArray[np.int64]:
        """How many points each interval has: the degree of its scheme."""
        return np.array([interval.scheme.degree for interval in self.intervals])

    @cached_property
    def owner(self) -> NDArray[np.int64]:
        """The interval of every point."""
        return np.repeat(np.arange(len(self.counts)), self.counts)

    @cached_property
    def stretch(self) -> NDArray[np.int64]:
        """The stretch of every interval."""
        return np.array([interval.stretch for interval in self.intervals])

    @cached_property
    def starts(self) -> Array:
        """Where every interval starts, as a fraction of its stretch."""
        return np.array([interval.start for interval in self.intervals])

    @cached_property
    def widths(self) -> Array:
        """The width of every interval, as a fraction of its stretch."""
        return np.array([interval.width for interval in self.intervals])

    @cached_property
    def gauss(self) -> NDArray[np.bool_]:
        """Which intervals have Gauss points."""
        return np.array([interval.scheme.family is Family.GAUSS for interval in self.intervals])

    @cached_property
    def local(self) -> Array:
        """The place of every point in its interval, from 0 to 1."""
        return np.concatenate([interval.scheme.points for interval in self.intervals])

    @cached_property
    def weights(self) -> Array:
        """The quadrature weight of every point in its interval."""
        return np.concatenate([interval.scheme.weights for interval in self.intervals])

    @property
    def stretches(self) -> int:
        """How many stretches there are."""
        return self.intervals[-1].stretch + 1

    @cached_property
    def alike(self) -> list[Alike]:
        """The intervals by scheme."""
        owners = np.array([id(i.scheme) for i in self.intervals])
        first = np.cumsum(self.counts) - self.counts
        groups = []
        for key, scheme_ in {id(i.scheme): i.scheme for i in self.intervals}.items():
            members = np.flatnonzero(owners == key)
            groups.append(Alike(scheme_, members, first[members][:, None] + np.arange(scheme_.degree)))
        return groups

    def breaks(self, places: Array) -> Array:
        """The ends of all intervals as values of the independent variable, from the values of the places."""
        lengths = places[self.stretch + 1] - places[self.stretch]
        return np.append(places[self.stretch] + self.starts * lengths, places[-1])

    def degrees(self) -> tuple[int, int]:
        """The lowest and the highest degree."""
        return int(self.counts.min()), int(self.counts.max())


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
