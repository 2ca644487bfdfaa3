"""What was found with its evidence: checks, verdict, prices, slopes, notes, all in the terms of the problem."""

from __future__ import annotations

import time
from collections.abc import Mapping, Sequence
from dataclasses import replace
from types import MappingProxyType

import numpy as np

from solvers import checks
from solvers.answers.fit import fit
from solvers.answers.place_errors import known_digits, place_errors
from solvers.answers.prices import prices
from solvers.answers.sensitivity import Shift, limit_shifts, slopes
from solvers.answers.stretches import stretches
from solvers.checks import conditions, curvature, held_arcs, lower_bound, refinement, rounding
from solvers.checks.redundancy import unambiguous
from solvers.checks.sampling import Asked, Sampler
from solvers.curve import Curve
from solvers.deadline import in_seconds
from solvers.diagnosis import diagnose, with_feasibility
from solvers.forms.choice import Found
from solvers.forms.first_look import behind_guess
from solvers.forms.gauge import Gauged
from solvers.forms.graph import as_graph, checks_on_graph, prices_of_original, steps_of_original, uprights
from solvers.forms.slack import SLACK
from solvers.formula.nodes import Name
from solvers.minimise.ipopt import FLOOR
from solvers.problem import KINK, Problem, Seek
from solvers.search.accumulation import accumulation
from solvers.search.chatter import chatter
from solvers.search.escape import escapes, may_escape
from solvers.search.record import End, Pursuit
from solvers.search.structure import present_switches
from solvers.solution import (
    Change,
    Check,
    Course,
    Price,
    Slope,
    Solution,
    Status,
    Stretch,
    SwitchPlace,
    Verdict,
)
from solvers.tables.usage import table_notes
from solvers.transcription.functions import SMOOTHING, rounded_functions
from solvers.transcription.limits import constants_of, number
from solvers.transcription.lowering import primed
from solvers.transcription.trajectory import Trajectory, costate_curve, curve
from solvers.undetermined import Undetermined, undetermined
from solvers.verdict import judge

EARLY = {
    End.INFEASIBLE: Verdict.INFEASIBLE,
    End.NOWHERE: Verdict.NOT_VERIFIED,
    End.UNBOUNDED: Verdict.NO_OPTIMUM,
}
"""Verdicts that need no curve."""

APPROACHED = (End.TORN, End.WIGGLES, End.AWAY)
"""Ends that say of a value that curves come as near to it as one likes."""
STANDS = 0.05
"""How far, relative to it, such a value may be from that on other points: a spike between the points costs what they do
not see."""

PROVED = (Verdict.GLOBAL_MINIMUM, Verdict.GLOBAL_MAXIMUM)

NO_OPTIMUM_FOUND = (Verdict.NOT_VERIFIED, Verdict.BEST_FOUND)
"""Verdicts on a curve whose multipliers need not be those of an optimum."""

UNDETERMINED = (
    "How the tolerances of the constants change the curve is left out: the optimality conditions do not determine it "
    "here (their matrix is singular, or nearly so)."
)

ROUNDED = 4 * float(np.finfo(float).eps)
"""What rounding alone leaves open, relative: no error is stated that is smaller."""
CURVE_FLOOR = 1e-10
"""What the minimiser itself leaves open of the curve, relative to its size."""
NO_LENGTH = 1e-9
"""Length of the range, relative to the size of a free end, that counts as none."""

LARGEST = 60_000
"""Unknowns of a mesh up to which the change of the whole curve is found: its system is factorised once more."""


def with_evidence(
    problem: Problem,
    found: Found,
    began: float,
    *,
    brief: bool = False,
    drawn: bool = True,
    known: Mapping[str, Check] = MappingProxyType({}),
) -> Solution:
    """What was found with its evidence; a brief one has the value and the verdict, and the curve where it is wanted."""
    pursuit, gauged = found.pursuit, found.gauged
    solved_at = time.perf_counter()
    if gauged is not None and pursuit.solved:
        pursuit = _with_uprights(pursuit, gauged)
    if pursuit.end in (End.CONVERGED, End.SETTLED) and problem.seek is not Seek.STATIONARY:
        findings = escapes(pursuit, in_seconds(problem.options.time_limit))
        pursuit = replace(pursuit, end=End.AWAY, findings=findings) if findings else pursuit
    diagnosis = diagnose(pursuit)
    times = {"solve": solved_at - began}
    meshes = tuple(pursuit.steps) if gauged is None else steps_of_original(gauged, pursuit.steps)
    if not pursuit.solved:
        if diagnosis is not None and gauged is not None and gauged.graph:  # their places are in the parameter
            diagnosis = replace(diagnosis, findings=tuple(replace(f, place=None) for f in diagnosis.findings))
        nearest = None if pursuit.nearest is None or gauged is not None else curve(pursuit.nearest)
        return Solution(EARLY.get(pursuit.end), curve=nearest, diagnosis=diagnosis, meshes=meshes,
                        iterations=pursuit.iterations, times=times)  # fmt: skip
    path = unambiguous(pursuit.paths[-1])
    names = {p.name for p in problem.parameters}
    parameters = {p.name: float(v) for p, v in zip(pursuit.problem.parameters, path.parameters, strict=True)
                  if p.name in names}  # fmt: skip
    sampler = Sampler(path, None if gauged is None else Asked(problem.seek, gauged.value))
    rounded_off = rounding.effect(sampler)
    value, value_error = path.value, pursuit.value_error + rounded_off + held_arcs.gain(sampler)
    value_floor = ROUNDED * abs(path.value)
    curve_error = _if_finite(pursuit.curve_error + CURVE_FLOOR)
    same = problem if found.reduced is None else found.reduced.judged  # on every curve
    made = checks.run(path, original=same, value_error=_if_finite(value_error), curve_error=curve_error,
                      known=known, sampler=sampler)  # fmt: skip
    if pursuit.end is End.WIGGLES:  # the others are about how the mean is mixed
        made = tuple(check for check in made if check.name in checks.FEASIBLE)
    taken = value if conditions.NAME in known else conditions.value_anew(sampler)
    if np.isfinite(taken):
        value_error += abs(taken - value)
    if left_open := checks.left_open(made):
        value_error += left_open * max(abs(value), abs(path.program.value_scale))
    diagnosis = with_feasibility(diagnosis, made)
    verdict = judge(problem.seek, made, pursuit.end)
    stands = abs(taken - value) <= STANDS * max(abs(value), abs(path.program.value_scale))
    if pursuit.end in APPROACHED and not stands:  # then nothing is approached
        verdict, diagnosis = Verdict.NOT_VERIFIED, diagnose(replace(pursuit, end=End.FAILED, findings=()))
    if verdict in PROVED and pursuit.end in (End.TIME, End.FAR) and may_escape(pursuit):
        verdict = Verdict.BEST_FOUND  # the bound may be one that is only approached, and nobody had time to find out
    if verdict in PROVED and (gap := lower_bound.gap(made)) is not None:  # the bound says it better than the meshes
        shown = gap * pursuit.value_size + FLOOR * abs(path.program.value_scale)
        value_error, diagnosis = min(value_error, shown + rounded_off), None
        made = lower_bound.settled(made, checks.FEASIBLE)
    if verdict is Verdict.BEST_FOUND and behind_guess(problem, value if gauged is None else gauged.value(value)):
        verdict = Verdict.NOT_VERIFIED
    value_error = max(value_error, value_floor)
    shape = multipliers = Curve(path.breaks, {})
    if drawn or gauged is not None:
        shape = curve(path)
    bought: tuple[Price, ...] = ()
    depends: tuple[Slope, ...] = ()
    altered: tuple[Change, ...] = ()
    left_out = ""
    if not brief:
        multipliers = costate_curve(path)
        bought = tuple(price for price in prices(path) if not price.pointer.startswith(f"/unknowns/{SLACK} "))
        shifts = () if verdict in NO_OPTIMUM_FOUND else limit_shifts(path)
        depends = slopes(path, shifts) if shifts else ()
        altered, left_out = _changes(path, depends, shifts)
    stated = value_error  # of the original's value
    if gauged is not None:
        factor = gauged.slope(value)
        anew = tuple(check for check in made if check.name not in known)  # those taken over are told already
        if gauged.graph:
            told = {check.name: check for check in checks_on_graph(gauged, shape, anew)}
            made = tuple(told.get(check.name, check) for check in made)
        bought = prices_of_original(bought, factor)
        depends = tuple(replace(slope, slope=factor * slope.slope) for slope in depends)
        if drawn:
            shape, multipliers, altered = as_graph(gauged, shape, multipliers, factor, altered)
        value, stated = gauged.value(value), abs(factor) * value_error
    loose = () if found.reduced is None else found.reduced.undetermined
    if not brief and not loose:
        loose = _undetermined(problem, path, gauged, made, value_error)
    plain = pursuit.end is not End.WIGGLES  # what is mixed is no control of the problem
    own = {unknown.name for unknown in (problem if gauged is None else gauged.problem).unknowns}  # no auxiliary ones
    kept = {name: functions for name, functions in shape.functions.items() if name.rstrip("'") in own}
    fitted = None if brief else fit(path)
    notes = () if brief else (*_notes(problem, found, pursuit), *([left_out] if left_out else []))
    if fitted is not None and (resting := [name for name in fitted.held if name in parameters]):
        rests, there = ("rests on its limit", "it") if len(resting) == 1 else ("rest on their limits", "them")
        notes += (f"{', '.join(resting)} {rests}: the one-sigma errors of the fit are those with {there} held there.",)
    errors = place_errors(pursuit)
    switches = _switches(pursuit, gauged, errors) if plain else ()
    open_ones = {one.name for one in loose if one.place is None}  # nothing says what these do
    courses = _stretches(pursuit, gauged, errors, verdict not in NO_OPTIMUM_FOUND) if plain and not brief else ()
    courses = tuple(s for s in courses if s.course is not Course.SINGULAR or s.of.rstrip("'") not in open_ones)
    return Solution(
        verdict=verdict,
        value=value,
        value_error=_if_finite(stated),
        parameters=parameters,
        curve=Curve(shape.breaks, kept) if drawn else None,
        curve_error=curve_error,
        costates=multipliers,
        prices=bought,
        slopes=depends,
        changes=altered,
        checks=made,
        diagnosis=diagnosis,
        undetermined=loose,
        meshes=meshes,
        iterations=pursuit.iterations,
        times=times | {"checks": time.perf_counter() - solved_at},
        fit=fitted,
        notes=notes,
        switches=switches,
        stretches=courses,
    )


def _if_finite(error: float) -> float | None:
    """An error, or None before one mesh was compared with another."""
    return error if np.isfinite(error) else None


def _undetermined(
    problem: Problem, path: Trajectory, gauged: Gauged | None, made: Sequence[Check], value_error: float
) -> tuple[Undetermined, ...]:
    """What nothing determines: by the formulas, or where the second variation leaves it open by moving the curve."""
    found = undetermined(problem)
    status = {check.name: check.status for check in made}
    if found or status.get(curvature.NAME) is not Status.NOT_APPLICABLE or not np.isfinite(value_error):
        return found
    solid = {*checks.FEASIBLE, *checks.FIRST_ORDER} - {refinement.NAME}  # from mesh to mesh such curves may wander
    if any(status.get(name) is Status.FAILED for name in solid):
        return ()
    from solvers.answers.flat import flat_directions  # here, so that SciPy is loaded only where it is needed

    def on_graph(place: float) -> float:
        if gauged is None or not gauged.graph:
            return place
        return float(curve(path).evaluate(problem.independent, np.array([place]))[0])

    names = {unknown.name for unknown in problem.unknowns} | {parameter.name for parameter in problem.parameters}
    return flat_directions(path, names, value_error, on_graph)


def _switches(pursuit: Pursuit, gauged: Gauged | None, errors: Sequence[float | None]) -> tuple[SwitchPlace, ...]:
    """Where controls switch, on the problem's own independent variable."""
    path = pursuit.paths[-1]
    known = dict(zip(map(float, path.places), errors, strict=True))
    found = present_switches(path)
    told = _in_original(gauged, pursuit, [(switch.place, known[switch.place]) for switch in found])
    return tuple(SwitchPlace(place, switch.of, error or 0.0)
                 for (place, error), switch in zip(told, found, strict=True))  # fmt: skip


def _stretches(
    pursuit: Pursuit, gauged: Gauged | None, errors: Sequence[float | None], extremal: bool
) -> tuple[Stretch, ...]:
    """What lies between the switches; of a curve in parametric form what is said of the unknowns themselves."""
    found = stretches(pursuit.paths[-1], errors, extremal)
    found = tuple(stretch for stretch in found if not stretch.of.startswith(SLACK + " "))
    if gauged is None or not found:
        return found
    names = {*(unknown.name for unknown in gauged.original.unknowns), *(c.label for c in gauged.original.conditions)}
    found = tuple(stretch for stretch in found if stretch.of in names)
    starts = _in_original(gauged, pursuit, [(s.start, s.start_error) for s in found])
    ends = _in_original(gauged, pursuit, [(s.end, s.end_error) for s in found])
    told = (replace(s, start=start, start_error=early, end=end, end_error=late)
            for s, (start, early), (end, late) in zip(found, starts, ends, strict=True))  # fmt: skip
    return tuple(stretch for stretch in told if stretch.start < stretch.end)


def _in_original(
    gauged: Gauged | None, pursuit: Pursuit, places: Sequence[tuple[float, float | None]]
) -> Sequence[tuple[float, float | None]]:
    """Places and their errors on the problem's own independent variable, which is an unknown in parametric form."""
    if gauged is None or not gauged.graph or not places:
        return places
    x, drawn = gauged.original.independent, curve(pursuit.paths[-1])
    at = np.array([place for place, _ in places])
    values, slopes = drawn.evaluate(x, at), np.abs(drawn.evaluate(x, at, 1))
    own = pursuit.curve_error * float(np.ptp(drawn.evaluate(x, drawn.breaks)))
    return [(float(value), None if error is None else float(slope * error + own))
            for value, slope, (_, error) in zip(values, slopes, places, strict=True)]  # fmt: skip


def about_switches(problem: Problem, found: Solution) -> str:
    """Where controls switch, as a sentence; empty where they do not."""
    if not found.switches:
        return ""
    unit = f" {problem.independent_unit.text}" if problem.independent_unit.text else ""
    factor = problem.independent_unit.factor
    listed = ", ".join(known_digits(switch.place / factor, switch.error / factor) for switch in found.switches)
    word = "Switches" if any(switch.of for switch in found.switches) else "Corners"
    return f"{word} were found and made unknowns of the problem: {problem.independent} = {listed}{unit}."


def _no_length(problem: Problem, path: Trajectory) -> bool:
    """Whether the ends of a range, of which one is free, came together."""
    names = [parameter.name for parameter in path.program.compiled.lowered.problem.parameters]
    values = dict(zip(names, path.parameters.tolist(), strict=True))
    sizes = dict(zip(names, path.program.scales.parameters.tolist(), strict=True))
    ends = problem.places[0].tree, problem.places[-1].tree
    free = [end.name for end in ends if isinstance(end, Name) and end.name in values]
    start, end = (number(tree, constants_of(path.program.compiled) | values) for tree in ends)
    return any(abs(end - start) <= NO_LENGTH * sizes[name] for name in free)


def _with_uprights(pursuit: Pursuit, gauged: Gauged) -> Pursuit:
    """A pursuit in parametric form whose curve rises straight up somewhere ends torn: as a function it jumps there."""
    found = uprights(gauged, curve(pursuit.paths[-1]))
    if found and pursuit.end in (End.CONVERGED, End.SETTLED, End.TORN):
        return replace(pursuit, end=End.TORN, findings=found)
    return pursuit


def _changes(path: Trajectory, depends: Sequence[Slope], shifts: Sequence[Shift]) -> tuple[tuple[Change, ...], str]:
    """How the tolerances of the constants change the curve; where that is left out, why."""
    if not any(slope.tolerance for slope in depends):
        return (), ""
    if path.program.layout.size > LARGEST:
        return (), f"How the tolerances change the curve is left out: the mesh has more than {LARGEST:,} unknowns."
    from solvers.answers.response import SingularError, changes  # here, so that SciPy is loaded only where it is needed

    try:
        return changes(path, shifts), ""
    except SingularError:
        return (), UNDETERMINED


def _notes(problem: Problem, found: Found, pursuit: Pursuit) -> list[str]:
    """What was done to the problem that its reader should know."""
    gauged = found.gauged
    notes = [form.note for form in (gauged, found.reduced) if form is not None]
    if any(unknown.name.startswith(SLACK + " ") for unknown in pursuit.problem.unknowns) and gauged is None:
        notes.append("abs, max or min in the integrand: written exactly, with auxiliary unknowns that bound them.")
    if any(place.label.startswith(KINK + " ") for place in pursuit.problem.places):
        notes.append("Kinks of formulas that are given along the range lie on breaks of the mesh: they are exact.")
    rounded = sorted(rounded_functions(pursuit.problem))
    if rounded:
        notes.append(f"{', '.join(rounded)} in the formulas: rounded over {SMOOTHING:g} of the size of their "
                     "arguments, so that derivatives exist. What that may change of the value is part of its "
                     "error.")  # fmt: skip
    notes += table_notes(pursuit.paths[-1])
    crowd = None if gauged is not None else chatter(pursuit.paths[-1])
    if crowd is not None and crowd.steady:
        place = f"{problem.independent} = {crowd.ends / problem.independent_unit.factor:.4g}"
        unit = f" {problem.independent_unit.text}" if problem.independent_unit.text else ""
        notes.append(f"{primed(crowd.control)} chatters: it switches ever faster towards {place}{unit}, each time "
                     f"after some {crowd.ratio:.2f} of the time before. The first switches were found; what follows "
                     "runs as their mean.")  # fmt: skip
    crowded = None if gauged is not None else accumulation(pursuit.paths[-1])
    if crowded is not None:
        rest = float(pursuit.paths[-1].places[crowded.rest]) / problem.independent_unit.factor
        unit = f" {problem.independent_unit.text}" if problem.independent_unit.text else ""
        notes.append(f"Touches accumulate: {primed(crowded.state)} cannot come to rest on its limit at once, as a "
                     f"control appears only in its derivative of order {crowded.order}. It touches it ever faster; the "
                     f"first {len(crowded.places) - 1} were found, and from about {problem.independent} = {rest:.2g}"
                     f"{unit} on, what follows is taken for an arc on the limit.")  # fmt: skip
    if _no_length(problem, pursuit.paths[-1]):
        notes.append("The best curve has no length: it ends where it begins, and what is shown of it is a point.")
    if pursuit.end is End.SETTLED:
        notes.append("The value stands still to the tolerance; the curve may be less exact than the value.")
    return notes
