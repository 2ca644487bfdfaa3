"""What every limited control does from switch to switch, and where states and constraints lie on their limits.

A control that acts linearly and is neither on a limit nor determined by what is, runs singular: there the Hamiltonian
does not depend on it (Bryson, Ho, 1975, Applied Optimal Control, chapter 8; from memory).
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import replace
from itertools import groupby, pairwise

import numpy as np
from numpy.typing import NDArray

from solvers.answers.place_errors import known_digits
from solvers.problem import Problem
from solvers.search.chatter import chatter
from solvers.search.signals import SWITCH
from solvers.search.structure import determined_by
from solvers.solution import Course, Stretch
from solvers.transcription.functions import linear_controls
from solvers.transcription.limits import constants_of, interval_of, quantity_bounds
from solvers.transcription.lowering import Quantity, primed
from solvers.transcription.trajectory import Trajectory

Array = NDArray[np.float64]
Indices = NDArray[np.int64]
Flags = NDArray[np.bool_]

ON_LIMIT = 1e-6
"""How near to a limit, relative to the room it leaves, counts as on it where nothing is held there."""
FAINT = 1e-3
"""How small, relative to its size, a quantity's own extent may count as the room."""
FEWEST = 3
"""Points that make a stretch where nothing is held: at an end, or where a limit is touched, one or two come near."""

Edge = tuple[float, float | None]
"""Where a stretch begins or ends, and how far that may be off."""

_SIDES = {-1: Course.LOWER, 1: Course.UPPER}
_INSIDE, _SINGULAR = 0, 2
_COURSES = {**_SIDES, _INSIDE: Course.INSIDE, _SINGULAR: Course.SINGULAR}


def stretches(path: Trajectory, errors: Sequence[float | None], extremal: bool = False) -> tuple[Stretch, ...]:
    """All stretches of a path whose switches are places, quantity by quantity.

    Of a path without structure only controls that do the same from end to end, where it is known to be an `extremal`.
    `errors` are those of the places, None for given ones (`solvers.answers.place_errors`).
    """
    problem = path.program.compiled.lowered.problem
    switches = any(place.label.startswith(SWITCH + " ") for place in problem.places)
    if not (switches or problem.held or problem.calm):
        return tuple(_Reader(path, errors).throughout()) if extremal else ()
    return tuple(_Reader(path, errors).all())


class _Reader:
    """Reads what is on its limit point by point: -1 on the lower one, 1 on the upper one, 0 between."""

    def __init__(self, path: Trajectory, errors: Sequence[float | None]) -> None:
        self.path, self.errors = path, errors
        self.compiled = path.program.compiled
        self.problem = self.compiled.lowered.problem
        self.stretch = path.program.layout.stretch
        crowd = chatter(path)
        self.crowd = crowd if crowd is not None and crowd.steady else None
        state_lower, state_upper, lower, upper = quantity_bounds(self.compiled)
        lowered = self.compiled.lowered
        self.limited = [q for q, low, high in zip(lowered.controls, lower, upper, strict=True)
                        if np.isfinite(low) or np.isfinite(high)]  # fmt: skip
        program, rows = path.program, path.program.rows
        sizes = program.scales
        self.controls = self._sides(lowered.controls, path.controls, lower, upper, sizes.controls)
        self.states = self._sides(lowered.states, path.states, state_lower, state_upper, sizes.states)
        pointwise = slice(rows.pointwise, rows.rims)
        shape = len(path.points), self.compiled.point.constraints
        values = program.numbers.constraints(path.z / program.scale)[pointwise].reshape(shape)
        row_sizes, constants = program.row_scale[pointwise].reshape(shape), constants_of(self.compiled)
        limits = np.array([interval_of(c, constants) for c in self.compiled.pointwise]).reshape(-1, 2)
        self.equal = np.array([c.equality for c in self.compiled.pointwise], dtype=bool)
        self.constraints = _near(values, limits[:, 0] / row_sizes, limits[:, 1] / row_sizes)
        known = [(rank, h) for h in self.problem.held if (rank := self.compiled.rank_of(h)) is not None]
        self.constraints[:, [rank for rank, _ in known]] = 0
        for rank, held in known:
            self.constraints[self.stretch == held.stretch, rank] = held.side

    def all(self) -> Iterator[Stretch]:
        for quantity in self.limited:
            calm = np.isin(self.stretch, [c.stretch for c in self.problem.calm if (c.name, c.order) == quantity])
            for start, end, code in self._runs(self._codes(quantity, calm), fewest=2):
                yield from self._without_crowd(_between(start, end, primed(quantity), _COURSES[code], control=True))
        for index, quantity in enumerate(self.compiled.lowered.states):
            yield from self._on_limits(primed(quantity), self.states[:, index])
        for index, condition in enumerate(self.compiled.pointwise):
            if condition.pointer and not self.equal[index]:
                yield from self._on_limits(condition.label, self.constraints[:, index])

    def throughout(self) -> Iterator[Stretch]:
        """Controls that act linearly and are on one limit, or singular, all along."""
        everywhere = np.ones(len(self.stretch), dtype=bool)
        for index in linear_controls(self.compiled):
            quantity = self.compiled.lowered.controls[index]
            codes = self._codes(quantity, everywhere)
            if codes[0] != _INSIDE and (codes == codes[0]).all():
                for start, end, code in self._runs(codes, fewest=1):
                    yield _between(start, end, primed(quantity), _COURSES[code], control=True)

    def _codes(self, quantity: Quantity, calm: Flags) -> Indices:
        """What a control does at every point; where it is `calm` it may be singular."""
        sides = self.controls[:, self.compiled.lowered.controls.index(quantity)]
        return np.where(self._singular(quantity, calm) & (sides == _INSIDE), _SINGULAR, sides)

    def _without_crowd(self, found: Stretch) -> Iterator[Stretch]:
        """What follows the switches that were found of a control that chatters is not singular before they crowd."""
        crowd, own = self.crowd, (found.of, found.start)
        if crowd is not None and own == (primed(crowd.control), self.path.places[crowd.last + 1]):
            ends: Edge = crowd.ends, crowd.ends - found.start  # as far as the series had to be continued
            if crowd.ends >= found.end:
                ends = found.end, found.end_error
            yield replace(found, end=ends[0], end_error=ends[1], course=Course.CHATTERING)
            found = replace(found, start=ends[0], start_error=ends[1])
        if found.start < found.end:
            yield found

    def _sides(
        self, quantities: Sequence[Quantity], values: Array, lower: Array, upper: Array, sizes: Array
    ) -> Indices:
        """On which limit every quantity is at every point: by its values, and a state that is held only where it is."""
        sides = _near(values / sizes, *np.broadcast_arrays(lower / sizes, upper / sizes, values)[:2])
        known = [h for h in (*self.problem.held, *self.problem.implied) if (h.name, h.order) in quantities]
        columns = [quantities.index((h.name, h.order)) for h in known]
        if quantities is self.compiled.lowered.states:
            sides[:, columns] = 0
        for held, column in zip(known, columns, strict=True):
            sides[self.stretch == held.stretch, column] = held.side
        return sides

    def _singular(self, quantity: Quantity, calm: Flags) -> Flags:
        """Where a control is calm, and the constraints that bind there leave it free together with the others."""
        n, lowered = self.compiled.point.states, self.compiled.lowered
        count, own = len(lowered.controls), lowered.controls.index(quantity)
        occurs = np.zeros((self.compiled.point.constraints, count), dtype=bool)
        for row, column in zip(self.compiled.point.jacobian_rows, self.compiled.point.jacobian_columns, strict=True):
            if n <= row < n + len(occurs) and n <= column < n + count:
                occurs[row - n, column - n] = True
        free = self.controls == 0
        for held in self.problem.held:
            for taken in determined_by(held, self.compiled):
                free[self.stretch == held.stretch, lowered.controls.index(taken)] = False
        binding = ((self.constraints != 0) | self.equal) & (free.astype(int) @ occurs.T.astype(int) > 0)
        involved = free & (binding.astype(int) @ occurs.astype(int) > 0)
        involved[:, own] = True
        return np.asarray(calm & (involved.sum(axis=1) > binding.sum(axis=1)))

    def _on_limits(self, label: str, sides: Indices) -> Iterator[Stretch]:
        """The stretches of one state or constraint on a limit."""
        for start, end, side in self._runs(sides, fewest=FEWEST):
            if side:
                yield _between(start, end, label, _SIDES[side])

    def _runs(self, codes: Indices, *, fewest: int) -> Iterator[tuple[Edge, Edge, int]]:
        """Runs of equal codes, from the place where each begins to where it ends, both with their errors.

        That is a place of the problem where one is no more than a point away, else halfway between two points.  What
        has too few points belongs to what comes before, or else after.
        """
        points, places = self.path.points, self.path.places
        kept: list[tuple[int, int]] = []  # first point, code
        for code, group in groupby(range(len(codes)), key=lambda k: int(codes[k])):
            members = list(group)
            if len(members) >= fewest and not (kept and kept[-1][1] == code):
                kept.append((members[0], code))
        known = list(zip(map(float, places), self.errors, strict=True))
        edges = [known[0]]
        for first, _ in kept[1:]:
            around = points[max(first - 2, 0) : first + 2]
            halfway, reach = float(points[first - 1] + points[first]) / 2, float(points[first] - points[first - 1]) / 2
            near = [edge for edge in known if around[0] <= edge[0] <= around[-1]]
            edges.append(min(near, key=lambda edge: abs(edge[0] - halfway), default=(halfway, reach)))
        edges.append(known[-1])
        yield from ((start, end, code) for (start, end), (_, code) in zip(pairwise(edges), kept, strict=False))


def _between(start: Edge, end: Edge, of: str, course: Course, *, control: bool = False) -> Stretch:
    return Stretch(start[0], end[0], of, course, control, start_error=start[1], end_error=end[1])


def _near(values: Array, lower: Array, upper: Array) -> Indices:
    """-1 where scaled values (points x quantities) are on the lower limit, 1 on the upper one, else 0."""
    room = np.minimum(upper - lower, np.maximum(np.ptp(values, axis=0), FAINT))
    sides = np.zeros(values.shape, dtype=np.int64)
    sides[values - lower < ON_LIMIT * room] = -1
    sides[upper - values < ON_LIMIT * room] = 1
    return sides


def sentences(problem: Problem, found: Sequence[Stretch]) -> Iterator[str]:
    """What is singular and what lies on a limit though it is no control, with the places in the user's unit."""
    factor, unit = problem.independent_unit.factor, problem.independent_unit.text
    told: dict[tuple[str, str, Course], list[str]] = {}
    for s in found:
        if s.course is Course.SINGULAR or (s.course in _SIDES.values() and not s.control):
            start, end = (known_digits(at / factor, None if error is None else error / factor, most=5)
                          for at, error in ((s.start, s.start_error), (s.end, s.end_error)))  # fmt: skip
            told.setdefault((s.of, s.arc, s.course), []).append(f"{start} to {end}")
    for (of, arc, course), places in told.items():
        verb = "runs" if course is Course.SINGULAR else "is"
        on = f" on {arc}" if arc else ""
        where = ", and from ".join(places)
        yield f"{of} {verb} {course.value}{on} from {problem.independent} = {where}{' ' + unit if unit else ''}."
