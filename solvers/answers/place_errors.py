"""How well the places of a curve are known: those of its switches, of its junctions with limits, of its free ends.

At a switch a control jumps, and the value grows with the square of the distance from the best place: what the place
still moved from one mesh to the next tells how well it is known.  Where a control comes to its limit smoothly, or a
state does, the value changes only to third order with the place (Maurer, 1981; from memory): there the minimiser leaves
it loose, and both pieces of the control, continued, do not meet where they should.  As the curve itself moves only to
second order with such a place, the gap between the pieces over the difference of their slopes is its distance from
where they meet.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.polynomial import legendre
from numpy.typing import NDArray

from solvers.search.record import Pursuit
from solvers.search.settling import worth_of_misses
from solvers.search.signals import SWITCH
from solvers.search.structure import determined_by
from solvers.transcription.lowering import Quantity
from solvers.transcription.trajectory import Trajectory, sizes_of

Array = NDArray[np.float64]

SMOOTH = 1e-2
"""Jump of a control, relative to its size, up to which it goes on smoothly."""
SAFE = 3.0
"""What is seen of an error counts so many times."""
LEFT_OPEN = 1e-11
"""What the minimiser leaves open of a place, relative to the range: the barrier of its room pushes it a little."""
ORDERS = 2
"""Derivatives of a control that are looked at where pieces meet smoothly."""


def place_errors(pursuit: Pursuit) -> list[float | None]:
    """For each place of the solved problem how far it may be off (SI); None for one that is given."""
    path = pursuit.paths[-1]
    problem, where = path.program.compiled.lowered.problem, path.program.layout
    moved = _moved(pursuit)
    found: list[float | None] = []
    for index, (place, node) in enumerate(zip(problem.places, where.at_place, strict=True)):
        if where.places[index] not in where.parameters:
            found.append(None)
            continue
        loose = _looseness(path, node) if place.label.startswith(SWITCH + " ") else 0.0
        room = np.abs(np.delete(path.places, index) - path.places[index]).min()
        found.append(float(min(SAFE * (moved[index] + loose), room)))
    return found


def known_digits(value: float, error: float | None, *, most: int = 9) -> str:
    """A number with the digits that are known: its error is at most half of the last one's unit."""
    if not error or not value:
        return f"{value:.{most}g}"
    digits = math.floor(math.log10(abs(value))) + 1 + math.floor(-math.log10(2 * error))
    return f"{value:.{min(max(digits, 1), most)}g}"


def _moved(pursuit: Pursuit) -> Array:
    """How far places may still move with further meshes, and by what the minimiser has left open.

    Between arcs on which all is held only states remain, and at the ends of arcs these are twice as exact as between.
    """
    path = pursuit.paths[-1]
    if len(pursuit.paths) < 2:
        return np.full(len(path.places), np.inf)
    before, now = (step.error or 0.0 for step in pursuit.steps[-2:])
    moved = np.abs(path.places - pursuit.paths[-2].places) * (min(now / before, 1.0) if before else 1.0)
    missed = worth_of_misses(path) / max(abs(path.value), abs(path.program.value_scale))
    share = (now**2 if _all_held(path) else now) + missed + LEFT_OPEN
    return np.asarray(moved + share * float(np.abs(path.places).max()))


def _all_held(path: Trajectory) -> bool:
    """Whether every control is held on a limit, or determined by one, all along."""
    compiled = path.program.compiled
    problem, controls = compiled.lowered.problem, set(compiled.lowered.controls)
    taken: list[set[Quantity]] = [set() for _ in problem.places[1:]]
    for held in problem.held:
        taken[held.stretch] |= determined_by(held, compiled)
    return all(found == controls for found in taken)


def _looseness(path: Trajectory, node: int) -> float:
    """How far a break may be from where the pieces of the controls on both sides of it meet; 0 where one jumps."""
    (left, blur, steep), (right, other, steeper) = _piece(path, node - 1, 1.0), _piece(path, node, -1.0)
    gaps, blur, steep = np.abs(right - left), blur + other, max(steep, steeper)
    if (gaps[0] > SMOOTH * sizes_of(path)[1]).any():
        return 0.0
    best = np.inf
    for order in range(1, ORDERS + 1):
        told = gaps[order] > SAFE * blur * steep**order
        reach = ((gaps[0] + blur)[told] * order / gaps[order, told]) ** (1 / order)
        best = min(best, reach.min(initial=np.inf))
    return float(best)


def _piece(path: Trajectory, k: int, end: float) -> tuple[Array, Array, float]:
    """The controls of an interval and their derivatives at one of its ends (orders x m), how exact the controls are
    there, and how much steeper than its size a polynomial of this degree may be (Markov, 1889; from memory)."""
    width, count = float(path.breaks[k + 1] - path.breaks[k]), path.program.mesh.counts[k]
    modes = path.control_modes[k, :count]
    values = [legendre.legval(end, legendre.legder(modes, order)) * (2 / width) ** order for order in range(ORDERS + 1)]
    return np.array(values), np.abs(modes[-1]), 2 * (count - 1) ** 2 / width
