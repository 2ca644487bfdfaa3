"""From a problem to its solution: arcs, starts, the best form, the evidence, sweeps and branches."""

from __future__ import annotations

import time
from dataclasses import replace
from functools import partial
from itertools import count

from solvers.answers.stretches import sentences
from solvers.checks.redundancy import unambiguous
from solvers.deadline import Deadline, in_seconds
from solvers.evidence import NO_OPTIMUM_FOUND, about_switches, with_evidence
from solvers.forms.arc_guess import with_sketches
from solvers.forms.beside import side_by_side
from solvers.forms.choice import Found, rightly_squared, solve_in_best_form
from solvers.forms.cut import cut_at_switches
from solvers.forms.first_look import first_look
from solvers.forms.gauge import Form, in_parametric_form
from solvers.forms.gauge_arcs import in_parametric_form_by_arcs
from solvers.forms.kinks_on_arcs import arcs_at_kinks
from solvers.forms.rejoin import rejoin
from solvers.forms.saddle import left_behind, off_saddle, on_saddle
from solvers.forms.signs import one_signed
from solvers.problem import Continuation, Problem
from solvers.search.holding import held_rightly
from solvers.search.irreducible import name_conflicts
from solvers.search.pursuit import pursue
from solvers.search.record import End
from solvers.search.structure import at_the_edge
from solvers.solution import BranchPoint, Progress, Solution, Watch
from solvers.starts.extremals import solve_from_starts
from solvers.starts.together import IN_TURN, Together
from solvers.sweep.onward import onward
from solvers.sweep.points import sweep
from solvers.sweep.repair import without_contacts
from solvers.sweep.tools import Tools

SADDLES = 4
"""How many saddles are left one after the other."""


def solve(problem: Problem, watch: Watch | None = None, together: Together = IN_TURN) -> Solution:
    """Solve a problem.  Never raises for a numerical failure: that is an outcome with a diagnosis.

    `together` does the tasks of several starts; raises what it raises.
    """
    found = _of_arcs(problem, watch, together) if problem.arcs else _from_starts(problem, watch, together)
    note = about_switches(problem, found)
    return replace(found, notes=(*found.notes, *([note] if note else []), *sentences(problem, found.stretches)))


def _of_arcs(problem: Problem, watch: Watch | None, together: Together) -> Solution:
    """Arcs are solved beside each other, on one common variable."""
    problem = arcs_at_kinks(problem)
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
    told = with_evidence(cut.problem, Found(pursuit, None), began)
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
        solve_one, leave_saddle = (partial(_solve_once, form=form, leaving=leaving) for leaving in (False, True))
        solution = solve_from_starts(problem, watch, solve_one, leave_saddle, first_look(problem).sizes, together)
        varied = problem.sweeps or problem.continuation
        found = (
            solve_in_best_form(problem, watch, deadline, form) if varied else None
        )  # variants begin at the default guess
    else:
        found = solve_in_best_form(problem, watch, deadline, form)
        found = replace(found, work=time.process_time() - idle)
        found, solution = _told(problem, found, watch, deadline, began)
    if problem.sweeps and found is not None:
        solution = _with_sweep(solution, problem, found, watch, deadline, form)
    if problem.continuation is not None and found is not None:
        solution = _with_branch(solution, problem, problem.continuation, found, watch, deadline, form)
    return solution


def _solve_once(problem: Problem, watch: Watch | None, form: Form, leaving: bool) -> Solution:
    """Solve a problem from its one start, for its constants as they stand; `leaving` a saddle or not."""
    began, deadline = time.perf_counter(), in_seconds(problem.options.time_limit)
    found = solve_in_best_form(problem, watch, deadline, form)
    if leaving:
        return _told(problem, found, watch, deadline, began)[1]
    name_conflicts(found.pursuit, watch, deadline)
    return with_evidence(problem, found, began)


def _told(
    problem: Problem, found: Found, watch: Watch | None, deadline: Deadline, began: float
) -> tuple[Found, Solution]:
    """What was found with its evidence; where that shows a saddle, what is found beside it."""
    name_conflicts(found.pursuit, watch, deadline)
    solution, left = with_evidence(problem, found, began), ""
    for _ in range(SADDLES):
        beside = off_saddle(problem, found, watch, deadline) if on_saddle(solution) else None
        if beside is None:
            break
        left = left or left_behind(problem, solution)
        found, solution = beside, with_evidence(problem, beside, began)
    return found, replace(solution, notes=(*solution.notes, left)) if left else solution


def _with_branch(
    solution: Solution,
    problem: Problem,
    continuation: Continuation,
    found: Found,
    watch: Watch | None,
    deadline: Deadline,
    form: Form,
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
    further = onward(problem, continuation.constant, found, _tools(form), deadline)
    branch = follow(path, continuation.constant, continuation.to, further, deadline, stop)
    points, folds = (tuple(replace(p, value=value(p.value)) for p in some) for some in (branch.points, branch.folds))
    times = {**solution.times, "continuation": time.perf_counter() - began}
    return replace(solution, branch=replace(branch, points=points, folds=folds), times=times)


def _with_sweep(
    solution: Solution, problem: Problem, found: Found, watch: Watch | None, deadline: Deadline, form: Form
) -> Solution:
    """The solution with the points of the sweep."""
    began = time.perf_counter()
    points = sweep(problem, found, _tools(form), watch, deadline)
    return replace(solution, sweep=points, times={**solution.times, "sweep": time.perf_counter() - began})


def _tools(form: Form) -> Tools:
    return Tools(
        alone=lambda other, room: solve_in_best_form(other, None, room, form),
        judge=lambda other, at, drawn, known: with_evidence(
            other, at, time.perf_counter(), brief=True, drawn=drawn, known=known
        ),
        fits=lambda other, at: (
            at.gauged is None or not at.gauged.squared or rightly_squared(at.gauged, at.pursuit, not one_signed(other))
        ),
        off_saddle=lambda other, at, told, room: off_saddle(other, at, None, room) if on_saddle(told) else None,
        form=form,
    )
