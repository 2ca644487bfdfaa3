"""What is known of a pursuit: the meshes that were solved, the errors, and how it ended."""

from __future__ import annotations

from dataclasses import dataclass, field
from enum import Enum

import numpy as np

from solvers.minimise.ipopt import FLOOR, Minimum
from solvers.problem import Problem
from solvers.search import refinement
from solvers.solution import Finding, MeshStep
from solvers.transcription.functions import Compiled
from solvers.transcription.program import Program
from solvers.transcription.trajectory import Trajectory


class End(Enum):
    """How a pursuit ended."""

    CONVERGED = "converged"
    SETTLED = "settled"  # the value and the states stand still, controls do not sharpen any more
    POINTS = "points limit"
    FINEST = "finest mesh"  # numbers do not tell breaks apart any more
    TIME = "out of time"
    FAR = "out of reach"  # the error falls too slowly for any time like the limit
    STOPPED = "stopped"
    INFEASIBLE = "infeasible"  # proved
    NOWHERE = "no curve found"  # that satisfies all conditions
    UNBOUNDED = "unbounded"
    TORN = "degenerates"  # the curve tends to one that jumps
    WIGGLES = "wiggles"  # the faster a control changes between two values, the better
    AWAY = "runs away"  # the curve is the better the farther it goes
    UNDEFINED = "undefined"
    FAILED = "no progress"


@dataclass(slots=True)
class Pursuit:
    """What is known while one form of a problem is being solved; `paths` are the meshes that were solved."""

    problem: Problem
    compiled: Compiled
    end: End = End.FAILED
    steps: list[MeshStep] = field(default_factory=list)
    paths: list[Trajectory] = field(default_factory=list)
    estimates: list[refinement.Estimate] = field(default_factory=list)
    nearest: Trajectory | None = None  # the curve that violates least, where none satisfies all conditions
    last: tuple[Program, Minimum] | None = None
    first: Program | None = None  # the one whose sizes are those of the first guess
    findings: tuple[Finding, ...] = ()
    broken: tuple[Finding, ...] = ()  # what that curve violates, worst first
    conflicts: tuple[tuple[Finding, ...], ...] = ()  # the smallest sets of conditions that no curve satisfies
    value_error: float = np.inf
    curve_error: float = np.inf
    value_met_before: bool = False
    iterations: int = 0
    gently: bool = False  # whether the last warm start had to begin with a small barrier
    astray: bool = False  # whether a barrier that adapts did not come to an end
    blocked: bool = False  # whether the next mesh could not be solved

    @property
    def solved(self) -> bool:
        """Whether any mesh was solved."""
        return bool(self.paths)

    @property
    def value_size(self) -> float:
        """The size that errors of the value are relative to."""
        path = self.paths[-1]
        return max(abs(path.value), 1e-3 * abs(path.program.value_scale))

    @property
    def value_met(self) -> bool:
        """Whether the value is as exact as was asked for, or as the minimiser can tell."""
        floor = 2 * FLOOR * abs(self.paths[-1].program.value_scale)
        return self.value_error <= self.problem.options.tolerance * self.value_size + floor

    @property
    def shown(self) -> bool:
        """Whether the stated errors allow a verdict: where the value is flat, the curve may be known less exactly."""
        return self.solved and self.value_met and self.curve_error <= float(np.sqrt(self.problem.options.tolerance))

    @property
    def done(self) -> bool:
        """Whether no more meshes are wanted: the tolerance is met, or the value stands still and is shown."""
        return self.end is End.CONVERGED or (self.end is End.SETTLED and self.value_met_before and self.shown)
