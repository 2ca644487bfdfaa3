"""Is it proved that no curve satisfies all conditions?  That none was found near any start proves nothing.

Two arguments are sound.  By intervals: a condition may want a value that its formula cannot have, or an end may lie
farther away than a limited rate leads within the longest time there is.  By convexity: of each condition the half that
bounds a convex set is kept and all else left out, dynamics that are not linear too; where even these conflict, of which
there is but one least violation, all of them do.
"""

from __future__ import annotations

from dataclasses import replace

from solvers.checks.composition import INF, Leaf, Shape, Unfold, shape_of
from solvers.checks.convexity import convex_curves, known, unfolding
from solvers.formula.nodes import Name, Node
from solvers.problem import Condition, Problem, Unknown
from solvers.search.attempt import SOLVED
from solvers.search.conflict import VIOLATED, least_violation_of
from solvers.search.effort import Minimiser
from solvers.search.record import Pursuit
from solvers.transcription.functions import Compiled, compile_problem
from solvers.transcription.limits import interval_of, number
from solvers.transcription.lowering import Quantity, lower

Interval = tuple[float, float]

ROUNDING = 1e-9
"""Share of the numbers involved by which intervals have to be apart."""


def contradictory(pursuit: Pursuit, minimise_: Minimiser) -> bool:
    """Whether the conditions of a pursuit that found its least violation are proved to contradict each other."""
    problem = pursuit.problem
    return convex_curves(problem) or beyond_intervals(pursuit.compiled) or _convex_halves_conflict(problem, minimise_)


def beyond_intervals(compiled: Compiled) -> bool:
    """Whether some condition wants a value that its formula cannot have, or that the rates cannot lead to in time."""
    problem = compiled.lowered.problem
    constants = {c.name: c.value for c in problem.constants}
    ranges = {name: (value, value) for name, value in constants.items()}
    ranges |= {p.name: (p.lower, p.upper) for p in problem.parameters}
    first, last = (_place(problem.places[k].tree, ranges, constants) for k in (0, -1))
    leaf = known(problem, constants, min(first[0], last[0]), max(first[1], last[1]))
    unfold = unfolding(problem)
    values = ((_range(shape_of(c.body, leaf, unfold)), interval_of(c, constants)) for c in problem.conditions)
    if any(_apart(*pair) for pair in values):
        return True
    lasting = max(last[0] - first[1], 0.0), max(last[1] - first[0], 0.0)
    return any(
        _apart(*pair)
        for unknown in problem.unknowns
        for pair in _reach(compiled, unknown, lasting, leaf, unfold, constants)
    )


def _place(tree: Node, ranges: dict[str, Interval], constants: dict[str, float]) -> Interval:
    if isinstance(tree, Name) and tree.name in ranges:
        return ranges[tree.name]
    value = number(tree, constants)
    return value, value


def _reach(
    compiled: Compiled, unknown: Unknown, lasting: Interval, leaf: Leaf, unfold: Unfold, constants: dict[str, float]
) -> list[tuple[Interval, Interval]]:
    """For each derivative below the highest: where it may be at the end, and where the conditions want it to be."""
    found = []
    highest = (unknown.name, unknown.order)
    rate = _range(leaf(Name(*highest)))
    if highest in compiled.lowered.given:
        rate = _both(rate, _range(shape_of(compiled.lowered.given[highest], leaf, unfold)))
    for order in reversed(range(unknown.order)):
        start, end = _wanted(compiled, (unknown.name, order), constants)
        everywhere = _range(leaf(Name(unknown.name, order)))
        found.append((_both(_after(start, rate, lasting), everywhere), end))
        rate = _both(_after(start, rate, (0.0, lasting[1])), everywhere)
    return found


def _wanted(compiled: Compiled, state: Quantity, constants: dict[str, float]) -> tuple[Interval, Interval]:
    """What the endpoint conditions leave of a state at the first place and at the last."""
    wanted = {0: (-INF, INF), len(compiled.lowered.problem.places) - 1: (-INF, INF)}
    for index, place, condition in compiled.fixed:
        if place in wanted and compiled.lowered.states[index] == state:
            wanted[place] = _both(wanted[place], interval_of(condition, constants))
    first, last = wanted.values()
    return first, last


def _range(shape: Shape) -> Interval:
    return shape.low, shape.high


def _both(one: Interval, other: Interval) -> Interval:
    return max(one[0], other[0]), min(one[1], other[1])


def _after(start: Interval, rate: Interval, lasting: Interval) -> Interval:
    """Where something is after a time, from where it starts and at what rates it moves."""
    ways = [0.0 if 0.0 in (time, speed) else time * speed for time in lasting for speed in rate]
    return start[0] + min(ways), start[1] + max(ways)


def _apart(one: Interval, other: Interval) -> bool:
    """Whether two intervals have nothing in common, beyond what rounding may do."""
    room = ROUNDING * max((abs(end) for end in (*one, *other) if abs(end) < INF), default=0.0)
    return one[0] > other[1] + room or other[0] > one[1] + room


def _convex_halves_conflict(problem: Problem, minimise_: Minimiser) -> bool:
    """Whether that part of the conflicts which is convex is one by itself."""
    constants = {c.name: c.value for c in problem.constants}
    try:
        first, last = (number(problem.places[k].tree, constants) for k in (0, -1))
    except KeyError:  # a place is free
        return False
    leaf, unfold = known(problem, constants, first, last), unfolding(problem)

    def halves(conditions: tuple[Condition, ...]) -> tuple[Condition, ...]:
        found = []
        for condition in conditions:
            shape = shape_of(condition.body, leaf, unfold)
            least = condition.lower if shape.concave else None
            most = condition.upper if shape.convex else None
            if least is not None or most is not None:
                found.append(replace(condition, lower=least, upper=most))
        return tuple(found)

    part = replace(
        problem,
        dynamics=tuple(
            equation
            for equation in problem.dynamics
            if all(shape_of(side, leaf, unfold).affine for side in (equation.left, equation.right))
        ),
        endpoints=halves(problem.endpoints),
        constraints=halves(problem.constraints),
        integrals=halves(problem.integrals),
    )
    if not convex_curves(part):
        return False
    pursuit = Pursuit(part, compile_problem(lower(part)))
    _, least = least_violation_of(pursuit, Minimiser(pursuit, minimise_.watch, minimise_.deadline))
    minimise_.pursuit.iterations += pursuit.iterations
    return least.minimum.outcome in SOLVED and least.total > VIOLATED
