"""Bang-bang and singular problems sharpened: switches read off a softened solve, made unknown, solved again."""

from __future__ import annotations

from solvers.collocation import Family
from solvers.functions import linear_controls
from solvers.mesh import Interval, Mesh, interval
from solvers.problem import Problem
from solvers.pursuit import End, Pursuit, pursue
from solvers.solution import Watch
from solvers.structure import present_switches, signals, softened, switches, with_switches
from solvers.trajectory import Trajectory

SOFTNESS = (1e-3, 1e-5)
"""Weights of the softened problems that are tried in turn."""
ROUNDS = 4
AGREEMENT = 1e-2
"""How far the value may move when the structure is made exact, relative to its size."""


def sharpen(base: Pursuit, watch: Watch | None, deadline: float) -> Pursuit | None:
    """A pursuit of the same problem with its switches as unknowns; None where there are none or that leads nowhere."""
    path = base.paths[-1]
    if not signals(path):
        return None
    linear = linear_controls(base.compiled)
    best: Pursuit | None = None
    for softness in SOFTNESS if linear else (0.0,):
        seen = path
        if softness:
            soft = softened(path, linear, softness)
            calm = pursue(soft, watch, deadline, meshes=3, start=path, mesh=path.program.mesh)
            if not calm.solved:
                continue
            seen = calm.paths[-1]
        found = _rounds(base.problem, seen, watch, deadline)
        if found is None or not _agrees(found, base):
            continue
        if found.end is End.CONVERGED:
            return found
        if best is None or found.value_error < best.value_error:
            best = found
    return best


def _rounds(problem: Problem, path: Trajectory, watch: Watch | None, deadline: float) -> Pursuit | None:
    """Read switches off a path, solve with them, and look again until nothing new is found."""
    best: Pursuit | None = None
    for _ in range(ROUNDS):
        found = sorted([*switches(path), *present_switches(path)], key=lambda switch: switch.place)
        changed = with_switches(problem, found, path)
        if changed is None:
            return best
        pursuit = pursue(changed, watch, deadline, meshes=6, start=path, mesh=_mesh(changed))
        if not pursuit.solved:
            return best
        best = pursuit
        path = pursuit.paths[-1]
        if pursuit.end in (End.CONVERGED, End.TIME, End.STOPPED):
            return best
    return best


def _mesh(problem: Problem) -> Mesh:
    """Few intervals where everything is held, more where a control is free."""
    pieces: list[Interval] = []
    held = {h.stretch for h in problem.held}
    last = len(problem.places) - 2
    for stretch in range(last + 1):
        count, degree = (2, 5) if stretch in held else (4, 6)
        for k in range(count):
            family = Family.GAUSS if stretch == last and k == count - 1 else Family.RADAU
            pieces.append(interval(stretch, k / count, (k + 1) / count, family, degree))
    return Mesh(tuple(pieces))


def _agrees(found: Pursuit, base: Pursuit) -> bool:
    """Whether the sharpened value is the one that the plain meshes tend to."""
    return abs(found.paths[-1].value - base.paths[-1].value) <= AGREEMENT * base.value_size
