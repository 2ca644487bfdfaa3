"""From a problem to its solution: the form in which it is solved best, the pursuit, the checks, the verdict."""

from __future__ import annotations

import time
from collections.abc import Mapping, Sequence
from dataclasses import replace
from functools import cache, partial
from itertools import count
from types import MappingProxyType

import numpy as np
from numpy.typing import NDArray

from solvers import checks
from solvers.answers.fit import fit
from solvers.answers.prices import prices
from solvers.answers.sensitivity import Shift, limit_shifts, slopes
from solvers.answers.stretches import sentences, stretches
from solvers.checks import conditions, curvature, lower_bound, refinement, rounding
from solvers.checks.redundancy import unambiguous
from solvers.checks.sampling import Sampler
from solvers.curve import Curve
from solvers.deadline import Deadline, in_seconds
from solvers.diagnosis import diagnose, with_feasibility
from solvers.forms.arc_guess import with_sketches
from solvers.forms.beside import side_by_side
from solvers.forms.broken import with_corner
from solvers.forms.cut import cut_at_switches
from solvers.forms.first_look import at_constant_speed, first_look
from solvers.forms.gauge import Form, Gauged, in_parametric_form
from solvers.forms.gauge_arcs import in_parametric_form_by_arcs
from solvers.forms.graph import as_graph, checks_on_graph, prices_of_original, uprights
from solvers.forms.rejoin import rejoin
from solvers.forms.ridge import off_ridge
from solvers.forms.signs import better_below, one_signed, positive, positive_along, where_defined
from solvers.forms.slack import SLACK, with_slacks
from solvers.minimise.ipopt import FLOOR
from solvers.problem import Continuation, Problem, Seek
from solvers.search.at_bound import at_bound
from solvers.search.chatter import chatter
from solvers.search.early import sharpened_early
from solvers.search.escape import escapes, may_escape
from solvers.search.holding import held_rightly
from solvers.search.irreducible import name_conflicts
from solvers.search.pursuit import go_on, pursue
from solvers.search.record import End, Pursuit
from solvers.search.sharpen import sharpen
from solvers.search.signals import jumps_at_breaks
from solvers.search.structure import at_the_edge, present_switches
from solvers.solution import (
    BranchPoint,
    Change,
    Check,
    Price,
    Progress,
    Slope,
    Solution,
    Status,
    Stretch,
    SwitchPlace,
    Verdict,
    Watch,
)
from solvers.starts.extremals import solve_from_starts
from solvers.starts.together import IN_TURN, Together
from solvers.sweep.found import Found, Tools
from solvers.sweep.points import sweep
from solvers.sweep.repair import without_contacts
from solvers.tables.usage import table_notes
from solvers.transcription.functions import SMOOTHING, rounded_functions
from solvers.transcription.lowering import primed
from solvers.transcription.trajectory import Trajectory, costate_curve, curve
from solvers.undetermined import Undetermined, undetermined
from solvers.verdict import judge

Array = NDArray[np.float64]

EARLY = {
    End.INFEASIBLE: Verdict.INFEASIBLE,
    End.NOWHERE: Verdict.NOT_VERIFIED,
    End.UNBOUNDED: Verdict.NO_OPTIMUM,
}
"""Verdicts that need no curve."""

LOST = (End.FAILED, End.UNDEFINED)
"""Ends from which another first guess may help."""

PROVED = (Verdict.GLOBAL_MINIMUM, Verdict.GLOBAL_MAXIMUM)

NO_OPTIMUM_FOUND = (Verdict.NOT_VERIFIED, Verdict.BEST_FOUND)
"""Verdicts on a curve whose multipliers need not be those of an optimum."""

UNDETERMINED = (
    "How the tolerances of the constants change the curve is left out: the optimality conditions do not determine it "
    "here (their matrix is singular, or nearly so)."
)

LARGEST = 60_000
"""Unknowns of a mesh up to which the change of the whole curve is found: its system is factorised once more."""

SHARE = 0.6
"""Share of the remaining time that the search for switches may take."""
DOUBTFUL = 0.5
"""Share of the time for a form that may turn out not to be equivalent."""
PATIENCE = 20.0
"""How much longer than the plain meshes it may take."""
NEARLY = 30.0
"""How far from the tolerance, as a factor, plain meshes are given a chance to finish first."""


def solve(problem: Problem, watch: Watch | None = None, together: Together = IN_TURN) -> Solution:
    """Solve a problem.  Never raises for a numerical failure: that is an outcome with a diagnosis.

    `together` does the tasks of several starts; raises what it raises.
    """
    found = _of_arcs(problem, watch, together) if problem.arcs else _from_starts(problem, watch, together)
    note = _about_switches(problem, found)
    return replace(found, notes=(*found.notes, *([note] if note else []), *sentences(problem, found.stretches)))


def _of_arcs(problem: Problem, watch: Watch | None, together: Together) -> Solution:
    """Arcs are solved beside each other, on one common variable."""
    beside = side_by_side(problem)

    def hear(progress: Progress) -> bool:  # the common variable means nothing to a reader
        return watch is not None and watch(replace(progress, breaks=None))

    form = partial(in_parametric_form_by_arcs, beside)
    found = rejoin(beside, _from_starts(with_sketches(beside), hear, together, form))
    return _with_own_switches(problem, found, hear) or found


def _with_own_switches(problem: Problem, found: Solution, watch: Watch) -> Solution | None:
    """What comes of arcs that are cut where controls switch, where beside each other nothing could be shown."""
    began, options = time.perf_counter(), problem.options
    left = options.time_limit - found.times.get("solve", 0.0)
    several = options.starts > 1 or problem.sweeps or problem.continuation or problem.observations
    if found.value is None or found.verdict not in NO_OPTIMUM_FOUND or several or left <= 0:
        return None
    cut = cut_at_switches(problem, found)
    if cut is None:
        return None
    pursuit = pursue(cut.problem, watch, in_seconds(left))
    path = pursuit.paths[-1] if pursuit.solved else None
    if path is None or pursuit.end is not End.CONVERGED or at_the_edge(path) or not held_rightly(path):
        return None
    told = _solution(cut.problem, Found(pursuit, None), began)
    if told.verdict in NO_OPTIMUM_FOUND:
        return None
    record = replace(
        told,
        meshes=(*found.meshes, *told.meshes),
        iterations=found.iterations + told.iterations,
        times={stage: seconds + found.times.get(stage, 0.0) for stage, seconds in told.times.items()},
    )
    return cut.told(rejoin(cut.beside, record))


def _from_starts(
    problem: Problem, watch: Watch | None, together: Together, form: Form = in_parametric_form
) -> Solution:
    """Solve a problem without arcs from as many starts as are asked for, and sweep it where that is asked for."""
    began, idle = time.perf_counter(), time.process_time()
    deadline = in_seconds(problem.options.time_limit)
    if problem.options.starts > 1:
        solve_one = partial(_solve_once, form=form)
        solution = solve_from_starts(problem, watch, solve_one, first_look(problem).sizes, together)
        varied = problem.sweeps or problem.continuation
        found = _found(problem, watch, deadline, form) if varied else None  # variants begin at the default guess
    else:
        found = _found(problem, watch, deadline, form)
        found = replace(found, work=time.process_time() - idle)
        name_conflicts(found.pursuit, watch, deadline)
        solution = _solution(problem, found, began)
    if problem.sweeps and found is not None:
        solution = _with_sweep(solution, problem, found, watch, deadline, form)
    if problem.continuation is not None and found is not None:
        solution = _with_branch(solution, problem.continuation, found, watch, deadline)
    return solution


def _solve_once(problem: Problem, watch: Watch | None, form: Form) -> Solution:
    """Solve a problem from its one start, for its constants as they stand."""
    began, deadline = time.perf_counter(), in_seconds(problem.options.time_limit)
    found = _found(problem, watch, deadline, form)
    name_conflicts(found.pursuit, watch, deadline)
    return _solution(problem, found, began)


def _with_branch(
    solution: Solution, continuation: Continuation, found: Found, watch: Watch | None, deadline: Deadline
) -> Solution:
    """The solution with the branch through it."""
    if not found.pursuit.solved:
        return solution
    from solvers.branch import POINTS, follow  # here, so that SciPy is loaded only where it is needed

    began, counted = time.perf_counter(), count(1)

    def stop(point: BranchPoint) -> bool:
        sign = Progress("point", 0, 0, 0, 0, value(point.value), point=(next(counted), POINTS))
        return watch is not None and watch(sign)

    def value(found_value: float) -> float:
        return found_value if found.gauged is None else found.gauged.value(found_value)

    path = unambiguous(without_contacts(found.pursuit, deadline))
    branch = follow(path, continuation.constant, continuation.to, deadline, stop)
    points, folds = (tuple(replace(p, value=value(p.value)) for p in some) for some in (branch.points, branch.folds))
    times = {**solution.times, "continuation": time.perf_counter() - began}
    return replace(solution, branch=replace(branch, points=points, folds=folds), times=times)


def _with_sweep(
    solution: Solution, problem: Problem, found: Found, watch: Watch | None, deadline: Deadline, form: Form
) -> Solution:
    """The solution with the points of the sweep."""
    began = time.perf_counter()
    tools = Tools(
        alone=lambda other, room: _found(other, None, room, form),
        judge=lambda other, at, drawn, known: _solution(
            other, at, time.perf_counter(), brief=True, drawn=drawn, known=known
        ),
        fits=lambda other, at: (
            at.gauged is None or not at.gauged.squared or _rightly_squared(at.gauged, at.pursuit, not one_signed(other))
        ),
        form=form,
    )
    points = sweep(problem, found, tools, watch, deadline)
    return replace(solution, sweep=points, times={**solution.times, "sweep": time.perf_counter() - began})


def _found(problem: Problem, watch: Watch | None, deadline: Deadline, form: Form) -> Found:
    """The form in which a problem is solved, solved; `form` makes it parametric where that can be."""
    if problem.seek is Seek.STATIONARY:  # no jump can gain here, and Newton's method goes straighter in few variables
        pursuit = _in_given_form(with_slacks(problem), watch, deadline)
        if pursuit.end in (End.CONVERGED, End.STOPPED, End.TIME):
            return Found(pursuit, None)
    look = cache(lambda: first_look(problem))
    for squared in (True, False):
        gauged = form(problem, lambda: look().sizes, squared)
        if gauged is None or (squared and not gauged.squared):
            continue
        doubtful = squared and not one_signed(problem)
        if doubtful and not positive(better_below(problem) * look().integrand):
            continue
        room = deadline.within(DOUBTFUL * deadline.left) if doubtful else deadline
        gauged = gauged if gauged.squared else at_constant_speed(gauged, look())
        pursuit = _in_given_form(with_slacks(gauged.problem), watch, room)
        if squared and pursuit.end in LOST and gauged.graph:  # its square has values where a root has none
            gauged = where_defined(at_constant_speed(gauged, look()))
            pursuit = _in_given_form(with_slacks(gauged.problem), watch, room)
        if squared and pursuit.solved and not _rightly_squared(gauged, pursuit, doubtful):
            if (best := at_bound(problem, pursuit)) is not None:
                return Found(best, None)
            continue
        if doubtful and pursuit.solved and pursuit.end is End.TIME:
            pursuit = go_on(pursuit, watch, deadline)
        if (pursuit.solved and pursuit.end is not End.TORN) or pursuit.end in (End.STOPPED, End.TIME):
            return Found(pursuit, gauged)
    pursuit = _in_given_form(with_slacks(problem), watch, deadline)
    return Found(off_ridge(pursuit, watch, deadline) or with_corner(pursuit, watch, deadline) or pursuit, None)


def _in_given_form(problem: Problem, watch: Watch | None, deadline: Deadline) -> Pursuit:
    """Plain meshes first; where controls switch, then the switches as unknowns; else plain meshes to the end."""
    began = time.process_time()
    pursuit = pursue(problem, watch, deadline, meshes=1)
    early = sharpened_early(pursuit, watch, deadline)
    if early is not None:
        return _after(pursuit, early)
    if pursuit.solved and (pursuit.steps[-1].error or 0.0) <= NEARLY * problem.options.tolerance:
        pursuit = pursuit if pursuit.end is End.CONVERGED else go_on(pursuit, watch, deadline, 3)
    if pursuit.end is End.CONVERGED and jumps_at_breaks(pursuit.paths[-1]):  # their multipliers are not the only ones
        sharp = sharpen(pursuit, watch, deadline.within(PATIENCE * (time.process_time() - began)))
        return pursuit if sharp is None or sharp.end is not End.CONVERGED else _after(pursuit, sharp)
    if not pursuit.solved or pursuit.end in (End.CONVERGED, End.STOPPED, End.TIME, End.TORN):
        return pursuit
    room = min(SHARE * deadline.left, PATIENCE * (time.process_time() - began) + 1.0)
    sharp = sharpen(pursuit, watch, deadline.within(room))
    if sharp is not None:
        sharp = _after(pursuit, sharp)
        if sharp.end is End.TIME and not deadline.over and sharp.value_met_before:
            sharp.end = End.SETTLED  # the room for this search was over, not the time of the run
        if sharp.end is End.CONVERGED or (sharp.end is End.SETTLED and sharp.shown):
            return sharp
    plain = go_on(pursuit, watch, deadline)
    return plain if sharp is None or _nearer(plain, sharp) else sharp


def _after(plain: Pursuit, sharp: Pursuit) -> Pursuit:
    """The pursuit with switches, its record with that of the plain meshes before it."""
    sharp.steps[:0] = plain.steps
    sharp.iterations += plain.iterations
    return sharp


def _nearer(plain: Pursuit, sharp: Pursuit) -> bool:
    """Whether plain meshes have come nearer to the tolerance than those with switches."""
    if End.CONVERGED in (plain.end, sharp.end) or plain.shown != sharp.shown:
        return plain.end is End.CONVERGED or (plain.shown and sharp.end is not End.CONVERGED)
    return plain.value_error <= sharp.value_error


def _rightly_squared(gauged: Gauged, pursuit: Pursuit, doubtful: bool) -> bool:
    """Whether the square was told from zero (else its root has no slope) and the integrand is positive all along."""
    path = pursuit.paths[-1]
    error = pursuit.value_error if np.isfinite(pursuit.value_error) else 0.0
    clear = path.value > max(error, FLOOR * abs(path.program.value_scale))
    return clear and (not doubtful or positive_along(gauged, path))


def _solution(
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
    if not brief and pursuit.end in (End.CONVERGED, End.SETTLED) and problem.seek is not Seek.STATIONARY:
        findings = escapes(pursuit, in_seconds(problem.options.time_limit))
        pursuit = replace(pursuit, end=End.AWAY, findings=findings) if findings else pursuit
    diagnosis = diagnose(pursuit)
    times = {"solve": solved_at - began}
    if not pursuit.solved:
        if diagnosis is not None and gauged is not None and gauged.graph:  # their places are in the parameter
            diagnosis = replace(diagnosis, findings=tuple(replace(f, place=None) for f in diagnosis.findings))
        nearest = None if pursuit.nearest is None or gauged is not None else curve(pursuit.nearest)
        return Solution(EARLY.get(pursuit.end), curve=nearest, diagnosis=diagnosis, meshes=tuple(pursuit.steps),
                        iterations=pursuit.iterations, times=times)  # fmt: skip
    path = unambiguous(pursuit.paths[-1])
    names = {p.name for p in problem.parameters}
    parameters = {p.name: float(v) for p, v in zip(pursuit.problem.parameters, path.parameters, strict=True)
                  if p.name in names}  # fmt: skip
    sampler = Sampler(path)
    rounded_off = rounding.effect(sampler)
    value, value_error = path.value, pursuit.value_error + rounded_off
    value_error_or_none = value_error if np.isfinite(value_error) else None
    curve_error = pursuit.curve_error if np.isfinite(pursuit.curve_error) else None
    made = checks.run(path, original=problem, value_error=value_error_or_none, curve_error=curve_error,
                      known=known, sampler=sampler)  # fmt: skip
    if conditions.NAME not in known and np.isfinite(taken := conditions.value_anew(sampler)):
        value_error += abs(taken - value)
        value_error_or_none = None if value_error_or_none is None else value_error
    diagnosis = with_feasibility(diagnosis, made)
    verdict = judge(problem.seek, made, pursuit.end)
    if verdict in PROVED and pursuit.end is End.TIME and may_escape(pursuit):
        verdict = Verdict.BEST_FOUND  # the bound may be one that is only approached, and nobody had time to find out
    if verdict in PROVED and (gap := lower_bound.gap(made)) is not None:  # the bound says it better than the meshes
        shown = gap * pursuit.value_size + FLOOR * abs(path.program.value_scale)
        value_error = min(value_error, shown + rounded_off)
        value_error_or_none, diagnosis = value_error, None
    shape = multipliers = Curve(path.breaks, {})
    if drawn or gauged is not None:
        shape = curve(path)
    bought: tuple[Price, ...] = ()
    depends: tuple[Slope, ...] = ()
    altered: tuple[Change, ...] = ()
    left_out = ""
    if not brief:
        multipliers, bought = costate_curve(path), prices(path)
        shifts = () if verdict in NO_OPTIMUM_FOUND else limit_shifts(path)
        depends = slopes(path, shifts) if shifts else ()
        altered, left_out = _changes(path, depends, shifts)
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
        value, value_error_or_none = (
            gauged.value(value),
            None if value_error_or_none is None else abs(factor) * value_error,
        )
    loose = () if brief else _undetermined(problem, path, gauged, made, value_error)
    kept = {name: functions for name, functions in shape.functions.items() if not name.startswith(SLACK + " ")}
    fitted = None if brief else fit(path)
    notes = () if brief else (*_notes(problem, pursuit, gauged), *([left_out] if left_out else []))
    switches = _switches(pursuit, gauged)
    return Solution(
        verdict=verdict,
        value=value,
        value_error=value_error_or_none,
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
        meshes=tuple(pursuit.steps),
        iterations=pursuit.iterations,
        times=times | {"checks": time.perf_counter() - solved_at},
        fit=fitted,
        notes=notes,
        switches=switches,
        stretches=() if brief else _stretches(path, gauged),
    )


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


def _switches(pursuit: Pursuit, gauged: Gauged | None) -> tuple[SwitchPlace, ...]:
    """Where controls switch, on the problem's own independent variable."""
    path = pursuit.paths[-1]
    found = present_switches(path)
    places = np.array([switch.place for switch in found])
    if gauged is not None and gauged.graph and found:
        places = curve(path).evaluate(gauged.original.independent, places)
    return tuple(SwitchPlace(float(place), switch.of) for place, switch in zip(places, found, strict=True))


def _stretches(path: Trajectory, gauged: Gauged | None) -> tuple[Stretch, ...]:
    """What lies between the switches; of a curve in parametric form what is said of the unknowns themselves."""
    found = stretches(path)
    if gauged is None or not found:
        return found
    names = {*(unknown.name for unknown in gauged.original.unknowns), *(c.label for c in gauged.original.conditions)}
    found = tuple(stretch for stretch in found if stretch.of in names)
    if not gauged.graph:
        return found
    x, drawn = gauged.original.independent, curve(path)
    starts = drawn.evaluate(x, np.array([s.start for s in found])).tolist()
    ends = drawn.evaluate(x, np.array([s.end for s in found])).tolist()
    told = (replace(s, start=start, end=end) for s, start, end in zip(found, starts, ends, strict=True))
    return tuple(stretch for stretch in told if stretch.start < stretch.end)


def _about_switches(problem: Problem, found: Solution) -> str:
    """Where controls switch, as a sentence; empty where they do not."""
    if not found.switches:
        return ""
    unit = f" {problem.independent_unit.text}" if problem.independent_unit.text else ""
    listed = ", ".join(f"{switch.place / problem.independent_unit.factor:.9g}" for switch in found.switches)
    word = "Switches" if any(switch.of for switch in found.switches) else "Corners"
    return f"{word} were found and made unknowns of the problem: {problem.independent} = {listed}{unit}."


def _with_uprights(pursuit: Pursuit, gauged: Gauged) -> Pursuit:
    """A pursuit in parametric form whose curve rises straight up somewhere ends torn: as a function it jumps there."""
    found = uprights(gauged, curve(pursuit.paths[-1]))
    if found and pursuit.end in (End.CONVERGED, End.SETTLED):
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


def _notes(problem: Problem, pursuit: Pursuit, gauged: Gauged | None) -> list[str]:
    """What was done to the problem that its reader should know."""
    notes = []
    if gauged is not None:
        notes.append(gauged.note)
    if len(pursuit.problem.unknowns) > len(problem.unknowns) and gauged is None:
        notes.append("abs, max or min in the integrand: written exactly, with auxiliary unknowns that bound them.")
    rounded = sorted(rounded_functions(pursuit.problem))
    if rounded:
        notes.append(f"{', '.join(rounded)} in the formulas: rounded over a width of {SMOOTHING:g}, so that "
                     "derivatives exist. What that may change of the value is part of its error.")  # fmt: skip
    notes += table_notes(pursuit.paths[-1])
    crowd = None if gauged is not None else chatter(pursuit.paths[-1])
    if crowd is not None and crowd.steady:
        place = f"{problem.independent} = {crowd.ends / problem.independent_unit.factor:.4g}"
        unit = f" {problem.independent_unit.text}" if problem.independent_unit.text else ""
        notes.append(f"{primed(crowd.control)} chatters: it switches ever faster towards {place}{unit}, each time "
                     f"after some {crowd.ratio:.2f} of the time before. The first switches were found; what follows "
                     "runs as their mean.")  # fmt: skip
    if pursuit.end is End.SETTLED:
        notes.append("The value stands still to the tolerance; the curve may be less exact than the value.")
    return notes
