"""From a problem to its solution: the form in which it is solved best, the pursuit, the checks, the verdict."""

from __future__ import annotations

import time
from collections.abc import Callable
from functools import partial

import numpy as np
from numpy.typing import NDArray

from solvers.curve import Curve
from solvers.diagnosis import diagnose
from solvers.functions import compile_problem
from solvers.gauge import Gauged, in_parametric_form
from solvers.guess import guesses
from solvers.lowering import lower
from solvers.problem import Problem
from solvers.pursuit import End, Pursuit, first_mesh, go_on, pursue
from solvers.regraph import regraph
from solvers.scaling import find_scales
from solvers.sharpen import sharpen
from solvers.solution import Solution, Verdict, Watch
from solvers.trajectory import costate_curve, curve
from solvers.transcription import layout

Array = NDArray[np.float64]


_EARLY = {End.INFEASIBLE: Verdict.INFEASIBLE, End.UNBOUNDED: Verdict.NO_OPTIMUM}
"""Verdicts that need no curve."""

SHARE = 0.6
"""Share of the remaining time that the search for switches may take."""


def solve(problem: Problem, watch: Watch | None = None) -> Solution:
    """Solve a problem.  Never raises for a numerical failure: that is an outcome with a diagnosis."""
    began = time.perf_counter()
    deadline = began + problem.options.time_limit
    for squared in (True, False):
        gauged = in_parametric_form(problem, _sizes(problem), squared)
        if gauged is None or (squared and not gauged.squared):
            continue
        pursuit = pursue(gauged.problem, watch, deadline)
        if pursuit.solved or pursuit.end in (End.STOPPED, End.TIME):
            return _solution(problem, pursuit, gauged, began)
    return _solution(problem, _in_given_form(problem, watch, deadline), None, began)


def _in_given_form(problem: Problem, watch: Watch | None, deadline: float) -> Pursuit:
    """Plain meshes first; where controls switch, then the switches as unknowns; else plain meshes to the end."""
    pursuit = pursue(problem, watch, deadline, meshes=3)
    if not pursuit.solved or pursuit.end in (End.CONVERGED, End.STOPPED, End.TIME):
        return pursuit
    now = time.perf_counter()
    sharp = sharpen(pursuit, watch, now + SHARE * (deadline - now))
    if sharp is not None and sharp.end in (End.CONVERGED, End.SETTLED):
        return sharp
    plain = go_on(pursuit, watch, deadline)
    if sharp is not None and sharp.value_error < plain.value_error:
        return sharp
    return plain


def _sizes(problem: Problem) -> dict[str, float]:
    """Typical sizes of the independent variable and the unknowns; the same one where they are of like size."""
    compiled = compile_problem(lower(problem))
    where = layout(compiled, first_mesh(len(problem.places) - 1))
    z = guesses(compiled, where)[0].z
    span = float(np.ptp(z[where.places])) or 1.0
    sizes = find_scales(compiled, where, z).states
    found = {
        name: float(size) for (name, order), size in zip(compiled.lowered.states, sizes, strict=True) if order == 0
    }
    return {problem.independent: span} | {n: span if span / 30 < s < span * 30 else s for n, s in found.items()}


def _solution(problem: Problem, pursuit: Pursuit, gauged: Gauged | None, began: float) -> Solution:
    times = {"total": time.perf_counter() - began}
    diagnosis = diagnose(pursuit)
    if not pursuit.solved:
        verdict = _EARLY.get(pursuit.end)
        nearest = None if pursuit.nearest is None or gauged is not None else curve(pursuit.nearest)
        return Solution(verdict, curve=nearest, diagnosis=diagnosis, meshes=tuple(pursuit.steps),
                        iterations=pursuit.iterations, times=times)  # fmt: skip
    path = pursuit.paths[-1]
    names = {p.name for p in problem.parameters}
    parameters = {p.name: float(v) for p, v in zip(pursuit.problem.parameters, path.parameters, strict=True)
                  if p.name in names}  # fmt: skip
    value, value_error = path.value, pursuit.value_error
    shape, multipliers = curve(path), costate_curve(path)
    if gauged is not None:
        shape, multipliers = _as_graph(problem, gauged, shape, multipliers, value)
        if gauged.squared:
            value, value_error = float(np.sqrt(value)), value_error / (2 * float(np.sqrt(value)))
    return Solution(
        verdict=None,
        value=value,
        value_error=value_error if np.isfinite(value_error) else None,
        parameters=parameters,
        curve=shape,
        curve_error=pursuit.curve_error,
        costates=multipliers,
        meshes=tuple(pursuit.steps),
        iterations=pursuit.iterations,
        diagnosis=diagnosis,
        times={"total": time.perf_counter() - began},
        notes=(
            pursuit.end.value,
            pursuit.last[1].status if pursuit.last else "",
            "gauge" if gauged else "",
        ),
    )


def _as_graph(problem: Problem, gauged: Gauged, shape: Curve, multipliers: Curve, value: float) -> tuple[Curve, Curve]:
    """Curve and costates as functions of the problem's own independent variable."""
    x = problem.independent
    factor = 1 / (2 * float(np.sqrt(value))) if gauged.squared else 1.0
    functions: dict[str, Callable[[Array], Array]] = {}
    for unknown in problem.unknowns:
        functions[unknown.name] = partial(shape.evaluate, unknown.name)
        functions[unknown.name + "'"] = partial(_slope, shape, x, unknown.name)
    names = {unknown.name for unknown in problem.unknowns}
    costates = {name: partial(_scaled, multipliers, name, factor) for name in multipliers.functions if name in names}
    leading = problem.unknowns[0].name
    wanted = functions | {f"costate {name}": function for name, function in costates.items()}
    graph = regraph(shape.breaks, partial(shape.evaluate, x), wanted, leading)
    return (
        Curve(graph.breaks, {name: graph.functions[name] for name in functions}),
        Curve(graph.breaks, {name: graph.functions[f"costate {name}"] for name in costates}),
    )


def _slope(shape: Curve, x: str, name: str, at: Array) -> Array:
    return shape.evaluate(name + "'", at) / np.maximum(shape.evaluate(x + "'", at), 1e-300)


def _scaled(curve_: Curve, name: str, factor: float, at: Array) -> Array:
    return factor * curve_.evaluate(name, at)
