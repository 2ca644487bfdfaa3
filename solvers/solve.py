"""From a problem to its solution: guess, minimise, refine until the tolerance is met, check, judge."""

from __future__ import annotations

import time
from dataclasses import dataclass, field

import numpy as np

from solvers import refinement
from solvers.collocation import Family
from solvers.functions import Compiled, compile_problem
from solvers.guess import guesses
from solvers.ipopt import Iterate, Minimum, Outcome, Start, minimise
from solvers.lowering import lower
from solvers.mesh import Mesh, uniform
from solvers.problem import Problem
from solvers.scaling import find_row_sizes, find_scales
from solvers.solution import MeshStep, Progress, Solution, Watch
from solvers.trajectory import Trajectory, carry, costate_curve, curve, trajectory
from solvers.transcription import Program, layout, transcribe

FIRST_INTERVALS = 8
FIRST_DEGREE = 4
MESHES = 25


@dataclass(slots=True)
class Campaign:
    """What is known while a problem is being solved."""

    compiled: Compiled
    watch: Watch | None
    deadline: float
    steps: list[MeshStep] = field(default_factory=list)
    paths: list[Trajectory] = field(default_factory=list)
    minima: list[Minimum] = field(default_factory=list)
    iterations: int = 0
    stopped: bool = False

    def minimise(self, program: Program, start: Start) -> Minimum:
        """One mesh, with signs of life."""
        mesh = program.mesh
        number = len(self.steps) + 1

        def hear(iterate: Iterate) -> bool:
            self.iterations += 1
            if self.watch is None:
                return False
            progress = Progress("iteration", number, self.iterations, len(mesh.intervals), mesh.points,
                                iterate.value * program.value_scale, iterate.infeasibility)  # fmt: skip
            self.stopped = self.watch(progress) or self.stopped
            return self.stopped

        return minimise(program, start, time_limit=self.deadline - time.perf_counter(), watch=hear)


def solve(problem: Problem, watch: Watch | None = None) -> Solution:
    """Solve a problem."""
    began = time.perf_counter()
    compiled = compile_problem(lower(problem))
    campaign = Campaign(compiled, watch, began + problem.options.time_limit)
    mesh = first_mesh(compiled)
    where = layout(compiled, mesh)
    guess = guesses(compiled, where)[0]
    scales = find_scales(compiled, where, guess.z)
    program = transcribe(compiled, mesh, scales, find_row_sizes(compiled, where, scales, guess.z))
    start = Start(guess.z / program.scale)
    tolerance = problem.options.tolerance
    value_error = np.inf
    for _ in range(MESHES):
        at = time.perf_counter()
        minimum = campaign.minimise(program, start)
        path = trajectory(program, minimum)
        found = refinement.estimate(path)
        degrees = mesh.degrees()
        campaign.steps.append(MeshStep(len(mesh.intervals), mesh.points, *degrees, path.value, found.worst,
                                       minimum.iterations, time.perf_counter() - at))  # fmt: skip
        campaign.paths.append(path)
        campaign.minima.append(minimum)
        if minimum.outcome not in (Outcome.SOLVED, Outcome.ACCEPTABLE):
            break
        if len(campaign.paths) > 1:
            value_error = abs(path.value - campaign.paths[-2].value)
            if found.worst <= tolerance and value_error <= tolerance * max(
                abs(path.value), 1e-3 * abs(program.value_scale)
            ):
                break
        mesh = refinement.refine(path, found, 0.3 * tolerance)
        if mesh == program.mesh:
            mesh = refinement.finer(mesh)
        where = layout(compiled, mesh)
        carried = carry(path, mesh, where)
        scales = find_scales(compiled, where, carried.z)
        program = transcribe(compiled, mesh, scales, find_row_sizes(compiled, where, scales, carried.z))
        start = carried.onto(program)
    path = campaign.paths[-1]
    return Solution(
        verdict=None,
        value=path.value,
        value_error=value_error if np.isfinite(value_error) else None,
        parameters={p.name: float(v) for p, v in zip(problem.parameters, path.parameters, strict=True)},
        curve=curve(path),
        costates=costate_curve(path),
        meshes=tuple(campaign.steps),
        iterations=campaign.iterations,
        times={"total": time.perf_counter() - began},
        notes=(campaign.minima[-1].status,),
    )


def first_mesh(compiled: Compiled) -> Mesh:
    """A coarse mesh whose outermost points do not touch the ends, where integrands like to be infinite."""
    stretches = len(compiled.lowered.problem.places) - 1
    return uniform(stretches, FIRST_INTERVALS, FIRST_DEGREE, Family.RADAU)
