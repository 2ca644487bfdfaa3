"""The points of a sweep: all values of its constants together, walked outwards from the problem as it stands."""

from __future__ import annotations

from collections.abc import Iterator
from functools import cached_property
from itertools import product

import numpy as np
from numpy.typing import NDArray

from solvers.problem import Problem

Array = NDArray[np.float64]
Index = tuple[int, ...]

CURVES = 7
"""Points whose curves are kept: so many lines can be told apart in one figure."""


class Grid:
    """The points of a problem's sweep, each by one index for every swept constant."""

    def __init__(self, problem: Problem) -> None:
        self.sweeps = problem.sweeps
        values = {c.name: c.value for c in problem.constants}
        self.given: Array = np.array([values[sweep.constant] for sweep in self.sweeps])
        """The values of the swept constants in the problem as it stands."""
        self.names = tuple(sweep.constant for sweep in self.sweeps)
        self.shape = tuple(len(sweep.values) for sweep in self.sweeps)

    @cached_property
    def indices(self) -> list[Index]:
        """All points, row by row: the values of the last constant run fastest."""
        return list(product(*(range(count) for count in self.shape)))

    def at(self, index: Index) -> Array:
        """The values of the swept constants at a point."""
        return np.array([sweep.values[k] for sweep, k in zip(self.sweeps, index, strict=True)])

    @cached_property
    def start(self) -> Index:
        """The point next to the problem as it stands."""
        return tuple(
            int(np.argmin(np.abs(np.array(sweep.values) - value)))
            for sweep, value in zip(self.sweeps, self.given, strict=True)
        )

    def outwards(self) -> list[Index]:
        """Every point after those that lie between it and the start."""
        return sorted(self.indices, key=self.away)

    def away(self, index: Index) -> int:
        """How many points lie between a point and the start."""
        return sum(abs(k - s) for k, s in zip(index, self.start, strict=True))

    @cached_property
    def kept(self) -> set[Index]:
        """The points whose curves are kept."""
        most = int(CURVES ** (1 / len(self.shape)))
        return set(product(*(np.unique(np.linspace(0, n - 1, min(n, most)).round().astype(int)).tolist()
                             for n in self.shape)))  # fmt: skip

    def behind(self, index: Index, count: int = 1) -> Iterator[tuple[Index, Index]]:
        """Along each constant the point so many places nearer to the start, and the one as far again behind that."""
        for axis in reversed(range(len(index))):
            way = self.start[axis] - index[axis]
            if abs(way) >= count:
                step = int(np.sign(way)) * count
                near, far = (tuple(k + (axis == a) * step * n for a, k in enumerate(index)) for n in (1, 2))
                yield near, far
