"""A branch of solutions followed in one constant, around folds: where two solutions meet and vanish.

The optimality system on the mesh, with what binds as equalities, is solved together with the constant as one more
unknown and the length along the branch as one more equation, so that nothing is singular at a fold.  Along the branch
go Newton's steps from a predictor along the tangent; a fold lies where the constant turns back.

Where a limit begins or ceases to bind before any fold, the solution a little further on is found as one of a sweep is,
whatever limits are active there, and the branch goes on from there if the curve has hardly changed.  Where these change
at every such step it is a branch all the same: of points each of which is found so.  Behind a fold solutions need be no
minima: there the branch ends at such a limit.

Reference: Keller (1977), Numerical solution of bifurcation and nonlinear eigenvalue problems, in: Applications of
Bifurcation Theory (pseudo-arclength; from memory).
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from solvers.answers.response import Response, SingularError
from solvers.answers.sensitivity import limit_shifts
from solvers.deadline import Deadline
from solvers.minimise.ipopt import Minimum, Outcome
from solvers.minimise.newton import within_limits
from solvers.problem import Seek
from solvers.search import refinement
from solvers.search.attempt import make_program
from solvers.solution import Branch, BranchPoint
from solvers.transcription.functions import with_constants
from solvers.transcription.layout import layout
from solvers.transcription.program import Program, restated
from solvers.transcription.trajectory import Trajectory, carry, distance, slopes_of, trajectory

Array = NDArray[np.float64]
Indices = NDArray[np.int64]

POINTS = 150
"""Most points of a branch."""
FIRST_STEP = 0.05
SHORTEST, LONGEST = 1e-5, 0.1
"""Lengths of a step: root mean square of the scaled variables' change, with the constant's relative change."""
STEPS = 8
CLOSE = 1e-10
"""Newton's residual, scaled, at which a point counts as solved."""
RESTART = 0.01
"""Length of a step below which a limit is taken to be in the way."""
FURTHER = (0.01, 0.03)
"""How far on, relative to the constant, a solution is looked for whose limits are others."""
SAME_CURVE = 0.2
"""How far the states may move meanwhile, relative to their size: else it is another curve."""
QUICK = 3
"""Newton's steps up to which the next step along the branch may be longer."""


@dataclass(frozen=True, slots=True)
class _At:
    """A point with its tangent: of the free variables and the active rows (scaled), then of the constant.

    None where it is not determined, as where a limit just begins to bind.
    """

    path: Trajectory
    at: float
    tangent: Array | None

    @property
    def way(self) -> float:
        """How the constant changes along the branch."""
        return 0.0 if self.tangent is None else float(self.tangent[-1])


Onward = Callable[[Trajectory, float, float], Iterator[Trajectory]]
"""The solutions that are found from a path, for a value of the constant (SI), for another value of it."""


def follow(
    path: Trajectory,
    constant: str,
    to: float,
    onward: Onward,
    deadline: Deadline,
    stop: Callable[[BranchPoint], bool],
) -> Branch:
    """The branch through a solved path, from the constant's own value towards `to` (SI) and back behind a fold.

    `onward` finds solutions where other limits bind.  `stop` hears of every point and ends the branch where it says so.
    The path's mesh is made finer first: the curve changes along the branch.
    """
    return _Follower(path, constant, to, onward, deadline, stop).branch()


class _Follower:
    def __init__(
        self,
        path: Trajectory,
        constant: str,
        to: float,
        onward: Onward,
        deadline: Deadline,
        stop: Callable[[BranchPoint], bool],
    ) -> None:
        self.names = [c.name for c in path.program.compiled.lowered.problem.constants]
        self.constant, self.index, self.to = constant, self.names.index(constant), to
        self.onward, self.deadline, self.stop = onward, deadline, stop
        self.began = path.program.compiled.constants[self.index]
        self.size = max(abs(self.began), abs(to), 1e-300)
        self.path = _finer(path)
        self.points: list[BranchPoint] = []
        self.folds: list[BranchPoint] = []
        self.error = 0.0
        self.crossed = 0  # how often limits began or ceased to bind

    def branch(self) -> Branch:
        """Follow it."""
        end = self._followed()
        if self.crossed:
            times = "once" if self.crossed == 1 else f"{self.crossed} times"
            end = f"{end} On the way limits began or ceased to bind; the branch was taken up beyond that {times}."
        return Branch(self.constant, tuple(self.points), tuple(self.folds), end, self.error)

    def _followed(self) -> str:
        here, step = self._here(self.path, self.began), FIRST_STEP
        alone: _At | None = None  # the point beyond which nothing was found where other limits bind
        if self._add(here):
            return "Stopped."
        while len(self.points) < POINTS:
            if self.deadline.over:
                return "The time limit was reached."
            found = self._next(here, step)
            if found is None and here is not alone and (here.tangent is None or step <= RESTART):
                beyond = self._restarted(here)
                if beyond is None:
                    alone = here
                else:
                    self.crossed += 1
                    found, step = (beyond, QUICK), FIRST_STEP
            if found is None:
                if here.tangent is None or step <= SHORTEST:
                    return self._stuck()
                step /= 2
                continue
            there, count = found
            if there.way * here.way < 0:
                self._fold(here, there, step)
            if self._past(there):
                self._add_last(there)
                return "The branch reaches the value asked for."
            if self._behind(there):
                return "The branch has come back."
            here = there
            if self._add(here):
                return "Stopped."
            step = min(step * (1.5 if count <= QUICK else 1.0 if count <= QUICK + 2 else 0.6), LONGEST)
        return self._unfinished(here)

    def _here(self, path: Trajectory, at: float) -> _At:
        """A solution with its tangent, if it has one, towards the value that is asked for."""
        try:
            found = self._corrected(path, at, None, 0.0)
        except SingularError:
            found = None
        if found is None:
            return _At(path, at, None)
        point, way = found[0], float(np.sign(self.to - self.began))
        assert point.tangent is not None
        return point if point.way * way >= 0 else replace(point, tangent=-point.tangent)

    def _unfinished(self, here: _At) -> str:
        """That the branch may go on, and how to follow it on."""
        unit = self.path.program.compiled.lowered.problem.constants[self.index].unit
        shown = f"{here.at / unit.factor:.6g} {unit.text}".rstrip()
        told = f"The branch has {POINTS} points; it may go on. To follow it from here, give {self.constant} the value "
        told += f"{shown} under `constants`"
        return f"{told}, with a `guess` near this branch: it is behind a fold." if self.folds else f"{told}."

    def _stuck(self) -> str:
        """Why no further point was found."""
        if self.folds:
            return ("No further point was found: a limit begins or ceases to bind here, and behind a fold no branch is "
                    "followed beyond that; or the curve degenerates.")  # fmt: skip
        return ("No further point was found: a limit begins or ceases to bind here and nothing continues the curve "
                "beyond it, or the curve degenerates.")  # fmt: skip

    def _restarted(self, here: _At) -> _At | None:
        """The branch a little further on, with the limits that are active there; None where it is not found again."""
        if self.folds or here.path.program.compiled.lowered.problem.seek is Seek.STATIONARY:
            return None
        way = float(np.sign(self.to - self.began))
        for share in FURTHER:
            at = here.at + way * share * self.size
            at = self.to if (at - self.to) * way > 0 else at
            for path in self.onward(here.path, here.at, at):
                if distance(path, here.path) <= SAME_CURVE:
                    return self._here(path, at)
        return None

    def _past(self, point: _At) -> bool:
        return bool((point.at - self.to) * np.sign(self.to - self.began) >= 0)

    def _behind(self, point: _At) -> bool:
        return bool(self.folds and (point.at - self.began) * np.sign(self.to - self.began) < 0)

    def _add_last(self, beyond: _At) -> None:
        """Keep the point for the very value that was asked for, next to one beyond it."""
        last = beyond if beyond.at == self.to else self._here(beyond.path, self.to)
        if last is beyond or last.tangent is not None:
            self._add(last)

    def _add(self, point: _At) -> bool:
        """Keep a point; whether to stop there."""
        self.error = max(self.error, refinement.estimate(point.path).worst)
        self.points.append(self._told(point))
        return self.stop(self.points[-1])

    def _told(self, point: _At) -> BranchPoint:
        return BranchPoint(point.at, point.path.value, len(self.folds))

    def _fold(self, before: _At, after: _At, step: float) -> None:
        """Where between two points the constant turns: false position on its share of the tangent."""
        low, high = (0.0, before.way), (step, after.way)
        best = min(before, after, key=lambda point: abs(point.way))
        for _ in range(STEPS):
            length = low[0] - low[1] * (high[0] - low[0]) / (high[1] - low[1])
            found = self._next(before, length)
            if found is None:
                break
            share = found[0].way
            best = found[0]
            if abs(share) < 1e-7:
                break
            low, high = ((length, share), high) if share * low[1] > 0 else (low, (length, share))
        self.folds.append(self._told(best))

    def _next(self, here: _At, step: float) -> tuple[_At, int] | None:
        """The point at a distance along the branch, with the number of Newton's steps; None where there is none."""
        if here.tangent is None:
            return None
        try:
            return self._corrected(here.path, here.at, here.tangent, step)
        except SingularError:
            return None

    def _corrected(self, path: Trajectory, at: float, tangent: Array | None, step: float) -> tuple[_At, int] | None:
        """Newton's method from a predictor; without a tangent at a fixed value of the constant."""
        before = Response(path)
        free, active = before.free, before.active
        begun = self._vector(path, free, active, at)
        vector = begun if tangent is None else begun + step * tangent
        weights = np.concatenate([np.full(len(free), 1 / max(len(free), 1)), np.zeros(len(active)), [1.0]])
        row = np.append(np.zeros(len(vector) - 1), 1.0) if tangent is None else weights * tangent
        for count in range(STEPS + 1):
            moved = self._moved(before, vector)
            system = Response(moved)
            if not np.array_equal(system.free, free) or not np.array_equal(system.active, active):
                return None
            residual = np.append(system.residual(), row @ (vector - begun) - (0.0 if tangent is None else step))
            if not np.isfinite(residual).all():
                return None
            push = system.push(self.index, limit_shifts(moved)[self.index]) * self.size
            solve = _bordered(system.matrix, push, row)
            if np.abs(residual).max() <= CLOSE:
                unit = solve(np.append(np.zeros(len(vector) - 1), 1.0))
                unit /= np.sqrt(weights @ unit**2) * (1.0 if row @ unit > 0 else -1.0)
                inside = within_limits(moved.program, moved.z / moved.program.scale)
                return (_At(moved, float(vector[-1] * self.size), unit), count) if inside else None
            vector = vector - solve(residual)
        return None

    def _vector(self, path: Trajectory, free: Indices, active: Indices, at: float) -> Array:
        program = path.program
        rows = path.row_multipliers * program.row_scale / abs(program.value_scale)
        return np.concatenate([(path.z / program.scale)[free], rows[active], [at / self.size]])

    def _moved(self, before: Response, vector: Array) -> Trajectory:
        """The path with these variables and multipliers, for this value of the constant; what rests on limits does."""
        at, path, free = float(vector[-1] * self.size), before.path, before.free
        program = restated(path.program, with_constants(path.program.compiled, {self.constant: at}))
        z, rows = path.z / program.scale, np.zeros(program.rows.count)
        z = np.where(before.sides < 0, program.lower, np.where(before.sides > 0, program.upper, z))
        z[free], rows[before.active] = vector[: len(free)], vector[len(free) : -1]
        return _at_variables(program, z, rows, before.sides != 0)


def _bordered(matrix: Any, column: Array, row: Array) -> Callable[[Array], Array]:
    """Solves with the matrix bordered by a column and a row: not singular at a fold.  Raises `SingularError`."""
    from scipy.sparse import bmat
    from scipy.sparse.linalg import splu

    whole = bmat([[matrix, column[:, None]], [row[None, :-1], [[row[-1]]]]], format="csc")
    try:
        return splu(whole).solve  # type: ignore[no-any-return]
    except RuntimeError as error:
        raise SingularError from error


def _at_variables(program: Program, z: Array, rows: Array, resting: NDArray[np.bool_]) -> Trajectory:
    """The trajectory of scaled variables and multipliers; variables that are `resting` on a limit push against it."""
    bounds = np.where(resting, -slopes_of(program, z, rows), 0.0)
    value = program.numbers.value(z)
    return trajectory(program, Minimum(Outcome.SOLVED, z, value, bounds, rows, 0, 0.0, 0.0, "Newton"))


def _finer(path: Trajectory) -> Trajectory:
    """The path on a mesh of higher degrees, as a start; limits that do not hold it have no multipliers."""
    compiled, mesh = path.program.compiled, refinement.finer(refinement.finer(path.program.mesh))
    where = layout(compiled, mesh)
    carried = carry(path, mesh, where)
    program = make_program(compiled, mesh, where, carried.z, path.program)
    start = carried.onto(program)
    rows = np.zeros(program.rows.count) if start.multipliers is None else start.multipliers
    equal = program.row_lower == program.row_upper
    return _at_variables(program, start.z, np.where(equal, rows, 0.0), program.lower == program.upper)
