"""Where an arc on a limit of a state begins while a control on a limit of its own already pushes away from it.

Before that place the state may not come from beyond its limit, and on the arc the control that follows from the state
may not be beyond its own: with the control on its limit the rate of the state vanishes just there.  At the points both
limits are kept anyhow, but the arc begins between points, and there a curve would gain by keeping neither.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from solvers.formula.algebra import ZERO
from solvers.formula.nodes import Name, Node, Number
from solvers.formula.substitute import at_place, substitute, written_out
from solvers.problem import Condition, Held, Place
from solvers.search.signals import SWITCH
from solvers.transcription.evaluation import point_outputs
from solvers.transcription.limits import constants_of, number, quantity_bounds
from solvers.transcription.lowering import Quantity, primed
from solvers.transcription.trajectory import Trajectory


def smooth_entries(
    path: Trajectory, places: Sequence[Place], values: Sequence[float], held: Sequence[Held]
) -> Iterator[Condition]:
    """The conditions at such places, which have these values; what is held is read off the path, as are the signs."""
    compiled = path.program.compiled
    lowered = compiled.lowered
    for arc in held:
        if (arc.name, arc.order) not in lowered.states or not places[arc.stretch].label.startswith(SWITCH + " "):
            continue
        state = lowered.states.index((arc.name, arc.order))
        order, moved = compiled.reached_by(state)
        before = [h for h in held if h.stretch == arc.stretch - 1 and (h.name, h.order) in moved]
        rate = lowered.given.get((arc.name, arc.order + 1))
        if order != 0 or len(moved) != 1 or not before or rate is None:
            continue
        control = before[0].name, before[0].order
        k = lowered.controls.index(control)
        limit = float(quantity_bounds(compiled)[3 if before[0].side > 0 else 2][k])
        inside = (path.points > values[arc.stretch]) & (path.points < values[arc.stretch + 1])
        z = path.z.copy()
        z[path.program.layout.controls[:, k]] = limit
        rates = point_outputs(compiled, path.program.layout, z)[inside, state]
        if not (rates * arc.side < 0).all():
            continue
        body = _there(path, rate, control, _limit(path, before[0], limit), places[arc.stretch])
        yield Condition(body, ZERO, ZERO, f"{SWITCH}: {primed((arc.name, arc.order))} comes to its limit", "")


def _there(path: Trajectory, rate: Node, control: Quantity, limit: Node, place: Place) -> Node:
    """A rate at a place, with a control on its limit."""
    problem = path.program.compiled.lowered.problem
    whole = written_out(rate, problem.where)
    functions = {unknown.name for unknown in problem.unknowns}
    held = substitute(
        whole, lambda node: limit if isinstance(node, Name) and (node.name, node.order) == control else None
    )
    return at_place(held, place.tree, "", problem.independent, functions)


def _limit(path: Trajectory, held: Held, value: float) -> Node:
    """The limit of a control, which has this value, as a formula of constants where it is one."""
    constants = constants_of(path.program.compiled)
    for quantity, condition in path.program.compiled.bounds:
        tree = condition.upper if held.side > 0 else condition.lower
        if quantity == (held.name, held.order) and tree is not None and number(tree, constants) == value:
            return tree
    return Number(value, "")
