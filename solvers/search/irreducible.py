"""Smallest sets of conditions that conflict: without any one of them, the others can be met.

The least violation of all conditions says what would have to give, but not what it stands against, and among conditions
that could give equally well it chooses anyhow.  So conditions that do not press are dropped at once, then those that do
one by one: where the rest is violated all the same, the condition has no part in the conflict (deletion filter).  What
is left of each conflict is priced: how far would each condition have to give if it alone gave?

Where conditions are not convex, "violated" means as far as the minimiser finds from the curve of least violation.
Reference: Chinneck, Dravnieks (1991), Locating minimal infeasible constraint sets in linear programs, ORSA Journal on
Computing 3 (from memory).
"""

from __future__ import annotations

from dataclasses import replace
from itertools import chain

from solvers.deadline import Deadline
from solvers.minimise.elastic import PULL, LeastViolation, groups, without
from solvers.search.attempt import SOLVED, make_program
from solvers.search.conflict import VIOLATED
from solvers.search.effort import Minimiser
from solvers.search.record import End, Pursuit
from solvers.solution import Finding, Watch
from solvers.starts.guess import first_guess
from solvers.transcription.program import Program
from solvers.transcription.trajectory import Trajectory

BUDGET = 10.0
"""Seconds of processor time for all of it."""
MOST = 3
"""How many conflicts are looked for that have no condition in common."""
PRESSING = 1e-4
"""Least force, beside that of a condition that gives, of one that may have a part in the conflict."""
LITTLE = 1e-2
"""How much less the curve is pulled to where it was, once it has come near to the least violation."""
REACH = 3.0
"""A curve farther away, in sizes of its quantities, is not thought of where only the strong pull led to an end."""
STEEP = 1.0
"""A slope counts as large only where it moves the function below it by more than its size: else the pull would keep a
curve level that may well be steep once a limit of its slope is dropped."""
DEAR = 1e3
"""What it costs that another condition gives, while one is asked how far it alone would have to."""


def name_conflicts(pursuit: Pursuit, watch: Watch | None, deadline: Deadline) -> None:
    """Let the findings of a pursuit without any curve be its smallest conflicts, where there is time to find any."""
    if pursuit.end not in (End.INFEASIBLE, End.NOWHERE) or pursuit.nearest is None:
        return
    pursuit.conflicts = conflicts(pursuit.nearest, Minimiser(pursuit, watch, deadline))
    if len(pursuit.conflicts) > 1:
        pursuit.conflicts = tuple(
            tuple(replace(finding, note=f"conflict {number}") for finding in conflict)
            for number, conflict in enumerate(pursuit.conflicts, 1)
        )
    if pursuit.conflicts:
        pursuit.findings = tuple(chain(*pursuit.conflicts))


def conflicts(path: Trajectory, minimise_: Minimiser) -> tuple[tuple[Finding, ...], ...]:
    """The conflicts at a curve of least violation; the findings of each say how far each condition alone has to give.

    Empty where the time did not suffice for one.
    """
    search = _Search(path, minimise_, minimise_.deadline.within(BUDGET))
    found: list[tuple[Finding, ...]] = []
    left = set(search.every)
    while left and len(found) < MOST:
        conflict = search.irreducible(left)
        if conflict is None:
            break
        found.append(search.alone(conflict))
        left -= conflict
    return tuple(found)


class _Search:
    """Least violations of parts of the conditions, all from the same curve."""

    def __init__(self, path: Trajectory, minimise_: Minimiser, deadline: Deadline) -> None:
        compiled, mesh, where = path.program.compiled, path.program.mesh, path.program.layout
        self._program = make_program(compiled, mesh, where, first_guess(compiled, mesh, where).z, faint=STEEP)
        self._z = path.z / self._program.scale
        self._minimiser = Minimiser(minimise_.pursuit, minimise_.watch, deadline)
        self.every = {group.pointer for group in groups(path.program)}

    def irreducible(self, kept: set[str]) -> set[str] | None:
        """A conflict among some conditions (by pointer) that vanishes without any one of them; None where there is
        none, or no time to find it."""
        least = self._violation(kept)
        if least is None:
            return None
        pressing = {pointer for pointer in kept if least.forces.get(pointer, 0.0) > PRESSING}
        without_idle = self._violation(pressing) if pressing < kept else None
        if without_idle is not None:
            kept, least = pressing, without_idle
        for pointer in sorted(kept, key=lambda one: (least.forces.get(one, 0.0), one)):
            if len(kept) > 1 and self._violation(kept - {pointer}) is not None:
                kept = kept - {pointer}
        return None if self._minimiser.deadline.over or self._minimiser.stopped else kept

    def _violation(self, kept: set[str]) -> LeastViolation | None:
        """How the conditions are violated at the least; None where they are not, or where that is not known."""
        least = self._settled(without(self._program, self.every - kept), {})
        return least if least.minimum.outcome in SOLVED and least.total > VIOLATED else None

    def _settled(self, program: Program, prices: dict[str, float]) -> LeastViolation:
        """The least violation where the pull to the start keeps nothing back any more.

        A curve that meets all at a distance d would let no more than pull*d^2/2 be violated: where much more is, the
        first, strong pull suffices should the minimiser fail without it.
        """
        first = self._minimiser.relax(program, self._z, prices=prices, pull=PULL, steadily=True)
        if first.minimum.outcome not in SOLVED or first.total <= VIOLATED:
            return first
        second = self._minimiser.relax(program, first.z, prices=prices, pull=LITTLE * PULL, steadily=True)
        clear = first.total > PULL / 2 * len(self._z) * REACH**2
        return first if clear and second.minimum.outcome not in SOLVED else second

    def alone(self, conflict: set[str]) -> tuple[Finding, ...]:
        """How far each condition of a conflict would have to give if it alone gave, where that helps at all."""
        program = without(self._program, self.every - conflict)
        found = []
        for pointer in sorted(conflict):
            least = self._settled(program, dict.fromkeys(conflict - {pointer}, DEAR))
            own = [finding for finding in least.findings if finding.pointer == pointer]
            if own and len(own) == len(least.findings) and least.minimum.outcome in SOLVED:
                found.append(own[0])
            else:
                label = next(group.label for group in groups(program) if group.pointer == pointer)
                found.append(Finding(label, pointer))
        return tuple(found)
