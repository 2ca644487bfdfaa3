"""Different starts: waves of growing frequency on the default guess, and Sobol points within the bounds.

Where a problem has several extremals, the guess decides which of them is found.  The shapes in which extremals of one
problem differ are mostly those of low modes (an elastica bends to either side, in one half wave or in two); what these
miss, a few points spread evenly over all amplitudes and parameters may hit.  All starts are the same each time.
"""

from __future__ import annotations

from collections.abc import Iterator
from itertools import count, islice

import numpy as np

from solvers.problem import Problem, Unknown, Variation
from solvers.starts.sobol import DIMENSIONS, sobol

AMPLITUDE = 0.7
"""Size of a single wave, relative to the unknown's."""

MOST_WAVES = 6
"""The shortest wave that is tried by itself."""

SOBOL_MODES = 3
"""How many waves a Sobol point adds to each unknown, where its dimensions suffice."""

EVERY = 3
"""One in so many starts is a Sobol point."""


def variations(problem: Problem, number: int) -> list[Variation]:
    """So many starts, the default guess first; fewer where nothing can be varied."""
    names = [unknown.name for unknown in problem.unknowns if _varied(unknown)]
    waves, points = _waves(names), _points(names, problem, number)

    def mixed() -> Iterator[Variation]:
        yield Variation()
        for turn in count(1):
            first, second = (points, waves) if turn % EVERY == 0 else (waves, points)
            found = next(first, None) or next(second, None)
            if found is None:
                return
            yield found

    return list(islice(mixed(), number))


def _varied(unknown: Unknown) -> bool:
    """Whether a wave on the unknown means anything: a control without bounds follows from the states."""
    return unknown.order > 0 or bool(np.isfinite(unknown.upper - unknown.lower))


def _waves(names: list[str]) -> Iterator[Variation]:
    """One unknown with one wave at a time, up and down, long waves first."""
    for mode in range(MOST_WAVES):
        for name in names:
            for sign in (1, -1):
                label = f"{name} with {mode + 1} half wave{'s' if mode else ''} {'up' if sign > 0 else 'down'}"
                yield Variation(label, {name: (*[0.0] * mode, sign * AMPLITUDE)})


def _points(names: list[str], problem: Problem, number: int) -> Iterator[Variation]:
    """Sobol points over the amplitudes of all unknowns and the ranges of all parameters."""
    parameters = [p.name for p in problem.parameters][:DIMENSIONS]
    room = DIMENSIONS - len(parameters)
    names = names[:room]
    modes = min(SOBOL_MODES, room // len(names)) if names else 0
    dimensions = modes * len(names) + len(parameters)
    for index, point in enumerate(sobol(number, dimensions) if dimensions else ()):
        amplitudes = (2 * point[: modes * len(names)] - 1).reshape(-1, modes or 1) / np.arange(1, (modes or 1) + 1)
        yield Variation(
            f"Sobol point {index + 1}",
            {name: tuple(row.tolist()) for name, row in zip(names, amplitudes, strict=True)},
            {name: float(share) for name, share in zip(parameters, point[modes * len(names) :], strict=True)},
        )
