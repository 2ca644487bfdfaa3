"""The minimiser on behalf of a pursuit: it passes signs of life on, keeps count and knows the deadline."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
from numpy.typing import NDArray

from solvers.deadline import Deadline
from solvers.minimise.elastic import LeastViolation, least_violation
from solvers.minimise.ipopt import WIDE, Iterate, Minimum, Outcome, Start, minimise
from solvers.minimise.newton import stationary_point, straight_to
from solvers.problem import Seek
from solvers.search.attempt import runs_away
from solvers.search.record import Pursuit
from solvers.solution import MeshStep, Progress, Watch
from solvers.transcription.program import Program

Array = NDArray[np.float64]

UNHURRIED = 120
"""Iterations after which a search from afar is looked at."""
NEWTON_STEPS = 60
"""Iterations within which Newton's own steps have to be through from there."""
MANY_STATES = 24
"""States at each node beyond which a program is wide."""


class Minimiser:
    """Minimises programs, passes signs of life on and keeps count."""

    def __init__(self, pursuit: Pursuit, watch: Watch | None, deadline: Deadline) -> None:
        self.pursuit, self.watch, self.deadline = pursuit, watch, deadline
        self.seeks_any = pursuit.problem.seek is Seek.STATIONARY  # no better value
        self.stopped = False

    def __call__(self, program: Program, start: Start, options: dict[str, Any] | None = None) -> Minimum:
        if self.seeks_any:
            minimum = stationary_point(program, start, self._hear(program))
            self.pursuit.last = (program, minimum)
            if minimum.outcome is not Outcome.FAILED:
                return minimum
            options = (options or {}) | {"ipopt.max_iter": UNHURRIED}
        if program.compiled.point.states > MANY_STATES:
            options = WIDE | (options or {})
        minimum = minimise(program, start, deadline=self.deadline, watch=self._hear(program), options=options)
        self.pursuit.last = (program, minimum)
        return minimum

    def nearby(self, program: Program, start: Start) -> Minimum | None:
        """The stationary point next to a start, where it is found without looking around."""
        minimum = straight_to(program, start, self._hear(program))
        if minimum is not None:
            self.pursuit.last = (program, minimum)
        return minimum

    def patiently(self, program: Program, start: Start, options: dict[str, Any] | None = None) -> Minimum:
        """Minimise from a start that may be far away; where that stalls, try Newton's own steps from there.

        Near its end a line search may cut every step short, as along a curved limit that is followed (Maratos, 1978;
        from memory): what is not through after `UNHURRIED` iterations is taken for near.  Else the search goes on.
        """
        options = options or {}
        minimum = self(program, start, {"ipopt.max_iter": UNHURRIED} | options)
        if minimum.outcome is not Outcome.ITERATIONS or (self.seeks_any and runs_away(minimum)):
            return minimum
        reached = Start(minimum.z, minimum.bound_multipliers, minimum.multipliers)
        near = self(program, reached, {"ipopt.max_iter": NEWTON_STEPS})
        if near.outcome is not Outcome.ITERATIONS and near.outcome is not Outcome.FAILED:
            return near
        return minimum if "ipopt.max_iter" in options else self(program, start, options)

    def relax(self, program: Program, z: Array, **settings: Any) -> LeastViolation:
        """The curve that violates the conditions least."""
        return least_violation(program, z, deadline=self.deadline, watch=self._hear(program), **settings)

    def _hear(self, program: Program) -> Callable[[Iterate], bool]:
        mesh = program.mesh
        count = len(self.pursuit.steps) + 1

        def hear(iterate: Iterate) -> bool:
            self.pursuit.iterations += 1
            if self.watch is None:
                return False
            self.stopped = self.stopped or self.watch(
                Progress(
                    "iteration",
                    count,
                    self.pursuit.iterations,
                    len(mesh.intervals),
                    mesh.points,
                    iterate.value * program.value_scale,
                    iterate.infeasibility,
                )
            )
            return self.stopped

        return hear

    def record(self, program: Program, minimum: Minimum, value: float, error: float) -> None:
        mesh = program.mesh
        low, high = mesh.degrees()
        self.pursuit.steps.append(
            MeshStep(
                len(mesh.intervals),
                mesh.points,
                low,
                high,
                value,
                error,
                minimum.iterations,
                minimum.seconds + minimum.set_up,
            )
        )
        if self.watch is not None:
            breaks = self.pursuit.paths[-1].breaks
            self.stopped = self.stopped or self.watch(
                Progress(
                    "mesh",
                    len(self.pursuit.steps),
                    self.pursuit.iterations,
                    len(mesh.intervals),
                    mesh.points,
                    value,
                    None,
                    error,
                    tuple(float(b) for b in breaks),
                )
            )
