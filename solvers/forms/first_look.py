"""What the first guess of a problem tells of the form in which it is solved best: sizes, the integrand, the curve."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from solvers.forms.gauge import SPEED, Gauged
from solvers.forms.steepness import steep_slopes
from solvers.problem import Problem, Seek
from solvers.search.attempt import FIRST_INTERVALS, first_mesh, make_program
from solvers.starts.guess import first_guess
from solvers.transcription.evaluation import point_outputs
from solvers.transcription.functions import compile_problem
from solvers.transcription.layout import layout
from solvers.transcription.lowering import lower
from solvers.transcription.natural import at_natural_sizes
from solvers.transcription.scaling import find_scales

Array = NDArray[np.float64]

KEPT = 1e-9
"""Violations of a guess up to this are rounding."""
CLEARLY = 1e-2
"""Relative difference of values that no coarse mesh makes."""
FINER = 4
ALIKE = 30.0
"""Factor within which sizes of the range and of an unknown count as the same."""


@dataclass(frozen=True, slots=True)
class FirstLook:
    """The first guess of a problem (SI).

    `sizes` are typical ones of the independent variable and of the unknowns, the same one where they are of one kind or
    of like size; `integrand` (M) is that at the points of the mesh; `curve` has, by name, the values of the independent
    variable and of the unknowns along the guess (M + N + 1).
    """

    sizes: Mapping[str, float]
    integrand: Array
    curve: Mapping[str, Array]


def first_look(problem: Problem) -> FirstLook:
    """Draw the first guess of a problem and measure it."""
    compiled = compile_problem(lower(problem))
    mesh = first_mesh(len(problem.places) - 1)
    where = layout(compiled, mesh)
    z = first_guess(compiled, mesh, where).z
    places = z[where.places]
    span = float(np.ptp(places)) or 1.0
    scales = find_scales(compiled, where, at_natural_sizes(compiled, mesh, where, z))
    steep = steep_slopes(compiled, where, z, scales.controls)
    at = np.concatenate([mesh.breaks(places), where.points(places)])
    order = np.argsort(at, kind="stable")
    sizes, curve = {problem.independent: span}, {problem.independent: at[order]}
    for k, (name, derivative) in enumerate(compiled.lowered.states):
        if derivative == 0:
            size = float(scales.states[k])
            alike = span / ALIKE < size < span * ALIKE
            sizes[name] = span * steep[name] if name in steep else span if alike else size
            curve[name] = np.concatenate([z[where.nodes[:, k]], z[where.inner[:, k]]])[order]
    return FirstLook(sizes, point_outputs(compiled, where, z)[:, -1], curve)


def behind_guess(problem: Problem, value: float) -> bool:
    """Whether the first guess keeps all conditions and clearly has a better value (SI) already.

    Of dynamics a guess knows nothing: then it is none of the curves that are compared.
    """
    if problem.dynamics:
        return False
    compiled, sign = compile_problem(lower(problem)), -1.0 if problem.seek is Seek.MAXIMUM else 1.0
    for count in (FIRST_INTERVALS, FINER * FIRST_INTERVALS):  # where its own integral is not clear, nothing is
        mesh = first_mesh(len(problem.places) - 1, count)
        where = layout(compiled, mesh)
        guess = first_guess(compiled, mesh, where)
        program = make_program(compiled, mesh, where, guess.z)
        z = guess.z / program.scale
        kept = guess.violation <= KEPT and ((z >= program.lower - KEPT) & (z <= program.upper + KEPT)).all()
        if not (kept and sign * (value - guess.value) > CLEARLY * abs(guess.value)):
            return False
    return True


def at_constant_speed(gauged: Gauged, look: FirstLook) -> Gauged:
    """A graph in parametric form that begins with the first guess, told at constant speed.

    Where that is the gauge, the guess leaves only the problem's own conditions to be met.
    """
    if not gauged.graph:
        return gauged
    steps = np.stack([np.diff(values) / look.sizes[name] for name, values in look.curve.items()])
    way = np.concatenate([[0.0], np.cumsum(np.linalg.norm(steps, axis=0))])
    if not 0 < way[-1] < np.inf:
        return gauged
    evenly = np.linspace(0.0, 1.0, len(way))
    unknowns = []
    for unknown in gauged.problem.unknowns:
        values = np.interp(evenly, way / way[-1], look.curve[unknown.name])
        guess = tuple(zip(evenly.tolist(), values.tolist(), strict=True))
        unknowns.append(replace(unknown, guess=guess, sketched=unknown.sketched or unknown.guess is None))
    parameters = [
        replace(p, guess=float(way[-1])) if p.name == SPEED else p for p in gauged.problem.parameters
    ]  # fmt: skip
    start = replace(gauged.problem.start, modes={})  # the first guess has them
    changed = replace(gauged.problem, unknowns=tuple(unknowns), parameters=tuple(parameters), start=start)
    return replace(gauged, problem=changed)
