"""The form in which a problem is solved best: parametric with one gauge or another, or as it is given."""

from __future__ import annotations

import time
from dataclasses import dataclass, replace
from functools import cache

import numpy as np

from solvers.deadline import Deadline
from solvers.forms.affine import Reduced, reduced
from solvers.forms.broken import corner_at_once, with_corner
from solvers.forms.first_look import at_constant_speed, first_look
from solvers.forms.gauge import Form, Gauged
from solvers.forms.jumping import solve_without_slopes
from solvers.forms.kinks import at_kinks
from solvers.forms.kinks_by_ends import by_ends
from solvers.forms.mixture import with_mixture
from solvers.forms.ridge import off_ridge
from solvers.forms.signs import better_below, one_signed, positive, positive_along, where_defined
from solvers.forms.slack import with_slacks
from solvers.forms.zigzag import runs_away
from solvers.minimise.ipopt import FLOOR
from solvers.problem import Problem, Seek
from solvers.search.at_bound import at_bound
from solvers.search.given import solve_as_given
from solvers.search.pursuit import go_on
from solvers.search.record import End, Pursuit
from solvers.search.widths import with_widths
from solvers.solution import Progress, Watch
from solvers.transcription.lowering import simple_bound

LOST = (End.FAILED, End.UNDEFINED)
"""Ends from which another first guess may help."""
DOUBTFUL = 0.5
"""Share of the time for a form that may turn out not to be equivalent."""
PATIENCE = 5.0
"""How many times as long as it took to find a curve that jumps may be looked for one that does not, in another form."""


@dataclass(frozen=True, slots=True)
class Found:
    """The pursuit of the form in which a problem was solved; `gauged` says how where that is parametric.

    `reduced` tells the form without slopes of a problem whose integrand is linear in them.

    `work` is the processor time in seconds that it took, where somebody needs to know.
    """

    pursuit: Pursuit
    gauged: Gauged | None
    work: float = float("inf")
    reduced: Reduced | None = None


def solve_in_best_form(problem: Problem, watch: Watch | None, deadline: Deadline, form: Form) -> Found:
    """The form in which a problem is solved, solved; `form` makes it parametric where that can be."""

    def solve(resolved: Problem) -> Found:
        return _solve(problem, resolved, watch, deadline, form)

    return by_ends(problem, solve) or solve(at_kinks(problem))


def _solve(stated: Problem, problem: Problem, watch: Watch | None, deadline: Deadline, form: Form) -> Found:
    """A problem, with its given kinks at places, in the form in which it is solved best."""
    if problem.seek is Seek.STATIONARY:  # no jump can gain here, and Newton's method goes straighter in few variables
        pursuit = solve_as_given(with_slacks(with_widths(problem)), watch, deadline)
        if pursuit.end in (End.CONVERGED, End.STOPPED, End.TIME):
            return Found(pursuit, None)
    if (alike := reduced(problem)) is not None:
        pursuit = solve_without_slopes(alike, watch, deadline)
        return Found(pursuit, None, reduced=alike if isinstance(alike, Reduced) else None)
    if (leaping := corner_at_once(problem, watch, deadline)) is not None:
        return Found(leaping, None)
    look = cache(lambda: first_look(problem))
    signed = one_signed(stated)
    if not signed and (away := runs_away(problem, lambda: look().curve, watch, deadline)) is not None:
        return Found(away, None)
    torn: Found | None = None
    began = time.process_time()
    for squared in (True, False):
        gauged = form(problem, lambda: look().sizes, squared)
        if gauged is None or (squared and not gauged.squared):
            continue
        doubtful = squared and not signed
        if doubtful and not positive(better_below(problem) * look().integrand):
            continue
        room = deadline.within(DOUBTFUL * deadline.left) if doubtful else deadline
        gauged = gauged if gauged.squared else at_constant_speed(gauged, look())
        hear = in_original_terms(gauged, watch)
        pursuit = solve_as_given(with_slacks(with_widths(gauged.problem)), hear, room)
        if squared and pursuit.end in LOST and gauged.graph:  # its square has values where a root has none
            gauged = where_defined(at_constant_speed(gauged, look()))
            pursuit = solve_as_given(with_slacks(with_widths(gauged.problem)), hear, room)
        if squared and pursuit.solved and not rightly_squared(gauged, pursuit, doubtful):
            if (best := at_bound(problem, pursuit)) is not None:
                return Found(best, None)
            continue
        if doubtful and pursuit.solved and pursuit.end is End.TIME:
            pursuit = go_on(pursuit, hear, deadline)
        if pursuit.solved and pursuit.end is End.TORN:
            torn = torn or Found(pursuit, gauged)
            deadline = deadline.within(PATIENCE * (time.process_time() - began))
        elif pursuit.solved or pursuit.end is End.STOPPED or (pursuit.end is End.TIME and torn is None):
            given = _with_limited_slope(problem, watch, deadline) if gauged.graph and pursuit.solved else None
            if given is not None and not _better(gauged.value(pursuit.paths[-1].value), given):
                return Found(given, None)
            return Found(pursuit, gauged)
    pursuit = _as_stated(problem, watch, deadline)
    if torn is not None and pursuit.end not in (End.CONVERGED, End.SETTLED, End.TORN, End.STOPPED):
        return torn
    for further in (off_ridge, with_corner, with_mixture):
        if (better := further(pursuit, watch, deadline)) is not None:
            return Found(better, None)
    return Found(pursuit, None)


def _as_stated(problem: Problem, watch: Watch | None, deadline: Deadline) -> Pursuit:
    """The problem solved in no other form but that for its kinks."""
    widened = with_widths(problem)
    pursuit = solve_as_given(with_slacks(widened), watch, deadline)
    whole = with_slacks(widened, parted=False)
    if pursuit.end is End.TORN and whole != pursuit.problem:  # where a slope has no bound, nor have its parts
        return solve_as_given(whole, watch, deadline)
    return pursuit


def in_original_terms(gauged: Gauged, watch: Watch | None) -> Watch | None:
    """Hears of the parametric form and tells of the original: its values, and no places of the parameter."""
    if watch is None:
        return None

    def hear(progress: Progress) -> bool:
        value = None if progress.value is None else gauged.value(progress.value)
        return watch(replace(progress, value=value, breaks=None if gauged.graph else progress.breaks))

    return hear


def _with_limited_slope(problem: Problem, watch: Watch | None, deadline: Deadline) -> Pursuit | None:
    """The problem as it is given where the slope is limited to both sides: then no curve stands upright, and switches
    between the limits, or a corner from one to the other, are found in this form only."""
    slope = problem.unknowns[0].name, 1
    limits = [condition for condition in problem.constraints if simple_bound(condition) == slope]
    if not any(limit.lower for limit in limits) or not any(limit.upper for limit in limits):
        return None
    given = solve_as_given(with_slacks(with_widths(problem)), watch, deadline)
    return with_corner(given, watch, deadline) or (given if given.end is End.CONVERGED else None)


def _better(value: float, than: Pursuit) -> bool:
    """Whether a value is better than that of a pursuit by more than the tolerance."""
    sign = -1.0 if than.problem.seek is Seek.MAXIMUM else 1.0
    return sign * (value - than.paths[-1].value) < -than.problem.options.tolerance * than.value_size


def rightly_squared(gauged: Gauged, pursuit: Pursuit, doubtful: bool) -> bool:
    """Whether the square was told from zero (else its root has no slope) and the integrand is positive all along."""
    path = pursuit.paths[-1]
    error = pursuit.value_error if np.isfinite(pursuit.value_error) else 0.0
    clear = path.value > max(error, FLOOR * abs(path.program.value_scale))
    return clear and (not doubtful or positive_along(gauged, path))
