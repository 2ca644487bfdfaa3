"""Touches of a limit that were taken for one place with the switch of a control beside them.

A control that switches just before a state touches its limit, or just after, looks on a coarse mesh as if both
happened at once.  At one place they are over-determined: the slope of the state, which vanishes at a touch by itself,
has to be held at zero there, and that has a price.

Reference: Bryson, Denham, Dreyfus (1963), Optimal programming problems with inequality constraints I, AIAA Journal 1
(at a touch only the costate of what is limited jumps; from memory).
"""

from __future__ import annotations

import numpy as np

from solvers.problem import Touch
from solvers.search.signals import SWITCH, Switch
from solvers.search.structure import on_limits, present_switches
from solvers.transcription.trajectory import Trajectory

PRICE = 1e-6
"""The price of the slope at a touch, scaled, from which on it is held."""
APART = 4e-3
"""How far apart, relative to the whole, both are placed at first."""


def parted(path: Trajectory) -> list[Switch] | None:
    """The switches of a path, those that are touches besides as two; None where no touch has to be held."""
    problem = path.program.compiled.lowered.problem
    forced = {touch.place: touch for touch in problem.touches if _forced(path, touch)}
    if not forced:
        return None
    found: list[Switch] = []
    labels = [place.label for place in problem.places if place.label.startswith(SWITCH + " ")]
    for label, switch in zip(labels, present_switches(path), strict=True):
        if label not in forced:
            found.append(switch)
            continue
        at = switch.place + _flatter_side(path, forced[label]) * APART * float(np.ptp(path.places))
        found += [Switch(switch.place, switch.low, switch.high, None, switch.of), Switch(at, at, at, switch.touching)]
    return sorted(found, key=lambda switch: switch.place)


def _forced(path: Trajectory, touch: Touch) -> bool:
    """Whether a control switches at a touch and the slope there has to be held."""
    program = path.program
    problem = program.compiled.lowered.problem
    rank = [place.label for place in problem.places].index(touch.place)
    if on_limits(problem.held, rank - 1) == on_limits(problem.held, rank):
        return False
    slope = program.layout.nodes[program.layout.at_place[rank], _slope(path, touch)]
    price = path.bound_multipliers[slope] * program.scale[slope] / abs(program.value_scale)
    return bool(abs(price) > PRICE)


def _flatter_side(path: Trajectory, touch: Touch) -> int:
    """On which side of a touch the state bends less: there it stays near its limit for longer."""
    problem = path.program.compiled.lowered.problem
    node = path.program.layout.at_place[[place.label for place in problem.places].index(touch.place)]
    slopes = np.abs(path.nodes[:, _slope(path, touch)])
    before, after = (slopes[node + way] / abs(path.breaks[node + way] - path.breaks[node]) for way in (-1, 1))
    return 1 if after < before else -1


def _slope(path: Trajectory, touch: Touch) -> int:
    """Which state is the slope of the one that touches its limit."""
    lowered = path.program.compiled.lowered
    slope = lowered.slope_of((touch.name, touch.order))
    if slope is None:
        raise ValueError("only a state whose slope is a state can touch a limit")
    return lowered.states.index(slope)
