"""Do transversality and the natural boundary conditions hold?

What nothing fixes must be stationary: the value of a state at a place (costate there against the slope of the endpoint
term and of the conditions), a parameter, a free end (the integral of H by that number, against the same), and each
integral that conditions use.  Bounds are allowed for: a free number may rest on its bound if it is pushed there.
All figures are the share of the functional that a change as large as the quantity itself could gain.

The threshold is that of stationarity, for the same reason.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from solvers.checks.sampling import Sampler
from solvers.checks.stationarity import complementarity
from solvers.search.signals import SWITCH
from solvers.solution import Check, Status
from solvers.transcription.evaluation import mapped
from solvers.transcription.limits import constants_of, interval_of

Array = NDArray[np.float64]

NAME = "free ends"

Finding = tuple[float, float | None, str, str]


def check(sampler: Sampler) -> Check:
    """The largest figure against the square root of the tolerance."""
    threshold = float(np.sqrt(sampler.tolerance))
    y, slopes = sampler.end_slopes
    findings = [*_states(sampler, slopes), *_numbers(sampler, slopes), *_integrals(sampler, slopes),
                *_conditions(sampler, y)]  # fmt: skip
    if not findings:
        return Check(NAME, Status.NOT_APPLICABLE, "Nothing is free: all ends are fixed, and there is no parameter.")
    figure, place, subject, sentence = max(findings, key=lambda finding: finding[0])
    status = Status.PASSED if figure <= threshold else Status.FAILED
    return Check(NAME, status, sentence, figure, threshold, place, subject)


def _step(value: float, slope: float, size: float, lower: float, upper: float, whole: float) -> float:
    """The projected step, relative to the size, where `slope` is the functional's and `whole` its size."""
    moved = min(max(value - size * (slope * size / whole), lower), upper)
    return abs(moved - value) / size if np.isfinite(slope) else np.inf


def _states(sampler: Sampler, slopes: Array) -> list[Finding]:
    path, n, count = sampler.path, sampler.point.states, sampler.count
    at_place = path.program.layout.at_place
    constants = constants_of(sampler.compiled)
    left, right = sampler.costate_ends[:, 0], sampler.costate_ends[:, 1]
    findings: list[Finding] = []
    for place, node in enumerate(at_place):
        for state in range(n):
            lower, upper = sampler.bounds[0][state], sampler.bounds[1][state]
            held = False
            for other, at, condition in sampler.compiled.fixed:
                if (other, at) == (state, place):
                    held = held or condition.equality
                    least, most = interval_of(condition, constants)
                    lower, upper = max(lower, least), min(upper, most)
            if held:
                continue
            slope = slopes[place * n + state]
            slope += left[node, state] if node < count else 0.0
            slope -= right[node - 1, state] if node > 0 else 0.0
            figure = _step(path.nodes[node, state], slope, sampler.state_extents[state], lower, upper,
                           sampler.value_size)  # fmt: skip
            name = f"{sampler.state_names[state]}({sampler.problem.places[place].label})"
            findings.append((figure, float(path.places[place]), name,
                             f"The costate meets its condition at {name} to {figure:.1e}."))  # fmt: skip
    return findings


def _numbers(sampler: Sampler, slopes: Array) -> list[Finding]:
    """Parameters, those that are places included."""
    path, where = sampler.path, sampler.path.program.layout
    problem, n, m = sampler.problem, sampler.point.states, sampler.point.controls
    if not problem.parameters:
        return []
    sample = sampler.halves
    gradient = sampler.halves_gradient * sample.measure[:, None]
    stretch = sampler.stretch[sample.interval]
    places = len(problem.places)
    findings: list[Finding] = []
    for index, parameter in enumerate(problem.parameters):
        slope = float(gradient[:, n + m + 2 + index].sum()) + slopes[places * n + places + index]
        for place in np.flatnonzero(where.places == where.parameters[index]):
            slope += float(gradient[stretch == place, n + m].sum())
            slope += float(gradient[stretch == place - 1, n + m + 1].sum())
            slope += slopes[places * n + place]
        size = abs(path.parameters[index]) or path.program.scale[where.parameters[index]]
        limits = (parameter.lower, parameter.upper)
        if parameter.name.startswith(SWITCH + " "):  # the room of a switch is no limit of the user's: nothing holds it
            limits, size = (-np.inf, np.inf), abs(sampler.span)
        figure = _step(path.parameters[index], slope, size, *limits, sampler.value_size)
        findings.append((figure, None, parameter.name,
                         f"The functional is stationary in {parameter.name} to {figure:.1e}."))  # fmt: skip
    return findings


def _integrals(sampler: Sampler, slopes: Array) -> list[Finding]:
    """The multiplier inside the Hamiltonian against the one of the condition that uses the integral."""
    path, where, rows = sampler.path, sampler.path.program.layout, sampler.path.program.rows
    count = len(where.integrals)
    if not count:
        return []
    gaps = slopes[len(slopes) - count :] + path.row_multipliers[rows.integrals : rows.conditions]
    sizes = np.abs(path.z[where.integrals])
    figure = float(np.max(np.abs(gaps) * np.where(sizes > 0, sizes, 1.0))) / sampler.value_size
    return [(figure, None, "integrals", f"The multipliers of the integrals are consistent to {figure:.1e}.")]


def _conditions(sampler: Sampler, y: Array) -> list[Finding]:
    """Multipliers of inequalities at places and of integrals: they push the right way, and only at the limit."""
    path, end = sampler.path, sampler.compiled.end
    inequalities = [(k, c) for k, c in enumerate(sampler.compiled.conditions) if not c.equality]
    if not inequalities:
        return []
    bodies = mapped(end.value, y[None, :], sampler.constants[None, :])[0]
    multipliers = path.row_multipliers[path.program.rows.conditions :]
    sizes = path.program.row_scale[path.program.rows.conditions :]
    constants = constants_of(sampler.compiled)
    findings: list[Finding] = []
    for k, condition in inequalities:
        lower, upper = interval_of(condition, constants)
        figure = complementarity(multipliers[k : k + 1], bodies[k : k + 1], lower, upper, sizes[k]) / sampler.value_size
        findings.append((figure, None, condition.label, f"The multiplier of '{condition.label}' times the distance "
                         f"from the limit is {figure:.1e} of the functional."))  # fmt: skip
    return findings
