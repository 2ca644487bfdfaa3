"""From a solved mesh to its error and to a better mesh: degree where the curve is smooth, width where it is not.

On every interval the Legendre coefficients of states and controls are looked at: where they fall fast a higher degree
finishes the job, where they do not the interval is cut near the place where the curve bends most.  Reference for the
idea: Mavriplis (1994), Adaptive mesh strategies for the spectral element method, Computer Methods in Applied Mechanics
and Engineering 116 (from memory).
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.polynomial import legendre
from numpy.typing import NDArray

from solvers.search.contacts import contacts
from solvers.search.excess import excess, on_arcs
from solvers.transcription.collocation import Family
from solvers.transcription.functions import linear_controls
from solvers.transcription.mesh import Interval, Mesh, interval
from solvers.transcription.trajectory import Trajectory, sizes_of

Array = NDArray[np.float64]
Indices = NDArray[np.int64]

HIGHEST_DEGREE = 11
SMOOTH = 0.45
"""Least fall per degree, in powers of ten, of the coefficients of a curve that counts as smooth."""
HALVED = float(np.log10(2.0))
"""How much faster coefficients fall per degree on half an interval."""
LEAST_HALF = 5
"""Least degree of the halves of an interval that is smooth by itself."""
NOISE = 1e-6
"""An error of a control, relative to that of a state, below which the control tells nothing."""
NARROWEST = 1e-11
"""Least width of an interval, relative to the whole, and to what is added up to reach it: else breaks fall together."""
LEAST_WIDTH = 1e-30
"""... and where numbers tell breaks apart, as beside an end at zero: there a singular end may need ever less."""
END_DEGREE = 6
"""Least degree beside such a cut: beyond it the curve is smooth."""
STEADY = 0.9
"""How much less a state rises towards an end, at the most, over the share of the way that is cut off at once."""
SLIVER = 0.3
"""How narrow an interval is, relative to its neighbour, that was cut off that for the trouble at its end ..."""
GOOD = 0.1
"""... and its error, relative to that neighbour's, where the trouble was elsewhere."""
END_CUT = 0.12
"""Where an interval is cut whose trouble sits at one of its ends ..."""
MOST_CUTS = 4
"""... and how often at most, at an end of a stretch where it has been cut before: there the trouble stays ..."""
FOREMOST = 0.1
"""... and is, with such a share of the largest error, what stands in the way."""


@dataclass(frozen=True, slots=True)
class Estimate:
    """Per interval: `errors` relative to each quantity's size, and the coefficients that tell the `shape` of the worst
    quantity and of the one that shows best where the curve `bends`.  `gained` (SI) is by how much the value may be too
    good as limits are left between the points: how far, times what the limit pushes, to first order.
    """

    errors: Array
    shapes: tuple[Array, ...]
    bends: tuple[Array, ...]
    gained: float = 0.0

    @property
    def worst(self) -> float:
        """The largest error of the mesh."""
        return float(self.errors.max())


def estimate(path: Trajectory) -> Estimate:
    """Local errors of a solved mesh.

    Controls in which all is linear are left out, as along a singular arc they are determined only through the states;
    but where they are kept calm, what they are allowed must be enough for them, and where a state is held on its limit
    they are determined by it.
    """
    lowered = path.program.compiled.lowered
    loose = linear_controls(path.program.compiled)
    calm = {(c.stretch, lowered.controls.index((c.name, c.order))) for c in lowered.problem.calm}
    mesh = path.program.mesh
    weights = np.minimum(1.0, np.diff(path.breaks) / (path.breaks[-1] - path.breaks[0]))
    state_sizes, control_sizes = sizes_of(path)
    states, controls = path.state_modes / state_sizes, path.control_modes / control_sizes * weights[:, None, None]
    errors, worst = _tails(states, mesh.counts + 1)
    for stretch, index in calm & {(stretch, index) for stretch in range(mesh.stretches) for index in loose}:
        kept = mesh.stretch == stretch
        allowed = _tails(controls[kept][:, :, [index]], (mesh.counts[kept] + 1) // 2)[0]
        errors[kept] = np.fmax(errors[kept], allowed)
    controls[np.ix_(~on_arcs(path), np.arange(controls.shape[1]), np.array(loose, dtype=np.int64))] = 0.0
    control_errors, control_worst = _tails(controls, mesh.counts)
    bending = control_errors > NOISE * errors  # else its bends are those of its rounding
    shapes, bends = [], []
    for k, count in enumerate(mesh.counts):
        shape = states[k, : count + 1, worst[k]] if states.shape[2] else np.zeros(1)
        bend = controls[k, :count, control_worst[k]] if bending[k] else shape
        shapes.append(bend if control_errors[k] > errors[k] else shape)
        bends.append(bend)
    errors = np.fmax(errors, control_errors)
    left, gained = excess(path)
    errors = np.maximum(errors, left)
    return Estimate(errors, tuple(shapes), tuple(bends), gained)


def _tails(modes: Array, lengths: Indices) -> tuple[Array, Indices]:
    """The largest last coefficients in each interval, and which quantity has them; `lengths` are how many there are."""
    each = np.arange(len(modes))
    if modes.shape[2] == 0:
        return np.zeros(len(modes)), np.zeros_like(each)
    last = np.abs(modes[each, lengths - 1])
    before = 0.1 * np.abs(modes[each, np.maximum(lengths - 2, 0)])
    last = np.where(lengths[:, None] > 2, np.maximum(last, before), last)
    worst = last.argmax(axis=1)
    return last[each, worst], worst


def _fall(modes: Array) -> float:
    """How fast coefficients fall, in powers of ten per degree: the slope of a line through their envelope."""
    envelope = np.log10(np.maximum(np.maximum.accumulate(np.abs(modes)[::-1])[::-1], 1e-300))[1:]
    if len(envelope) < 2:
        return 0.0
    offsets = np.arange(len(envelope)) - (len(envelope) - 1) / 2
    return -float(offsets @ envelope / (offsets @ offsets))


def _bend(modes: Array) -> float:
    """Where in the interval (0 to 1) the function bends most."""
    order = 2 if len(modes) > 3 else 1
    if len(modes) <= order:
        return 0.5
    grid = np.linspace(-1.0, 1.0, 41)
    return float((grid[int(np.argmax(np.abs(legendre.legval(grid, legendre.legder(modes, order)))))] + 1) / 2)


def refine(path: Trajectory, found: Estimate, tolerance: float) -> Mesh:
    """A better mesh for a local tolerance.

    Where the curve is smooth all along, it is made to suffice at once: one degree to spare, as the fall of coefficients
    is known from a few, and halves of the degree that they will need.  Else other meshes follow anyway.
    """
    mesh = path.program.mesh
    narrow = _too_narrow(path)
    each = falls(found)
    smooth = smooth_all_along(found, tolerance)
    along = any(contact.state for contact in contacts(path))  # there the curve bends wherever its limit does
    pieces: list[Interval] = []
    for k, old in enumerate(mesh.intervals):
        if found.errors[k] <= tolerance:
            pieces.append(old)
        else:
            missing = float(np.log10(found.errors[k] / tolerance))
            good = _good_beside(mesh, found.errors, k) if along else (False, False)
            often = 0 if narrow[k] else _graded(path, k) if found.errors[k] > FOREMOST * found.worst else 1
            pieces.extend(_replace(old, missing, each[k], found.bends[k], often, smooth, good))
    return Mesh(tuple(pieces))


def _too_narrow(path: Trajectory) -> NDArray[np.bool_]:
    """Which intervals are not cut any more."""
    mesh, widths = path.program.mesh, np.diff(path.breaks)
    starts, ends = path.places[mesh.stretch], path.places[mesh.stretch + 1]
    summed = np.abs(starts) + (mesh.starts + mesh.widths) * np.abs(ends - starts)
    whole = abs(float(path.breaks[-1] - path.breaks[0]))
    return np.asarray((widths < NARROWEST * np.minimum(whole, summed)) | (widths < LEAST_WIDTH * whole))


def _graded(path: Trajectory, k: int) -> int:
    """How often an interval is cut whose trouble sits at its end: as often as it was, where its stretch ends there.

    How often it was is told by how narrow it is, relative to an even mesh.  Only where that leads somewhere: towards an
    integrable end states rise the less the narrower the interval is, towards a jump they do not.
    """
    mesh = path.program.mesh
    own = np.flatnonzero(mesh.stretch == mesh.stretch[k])
    often = int(np.clip(np.log(mesh.widths[k] * len(own)) / np.log(END_CUT), 1, MOST_CUTS))
    if k not in own[[0, -1]] or often == 1 or not path.states.size:
        return 1
    nodes, breaks = (path.nodes, path.breaks) if k == own[0] else (path.nodes[::-1], path.breaks[::-1])
    end = k if k == own[0] else len(breaks) - 2 - k
    distances = np.abs(breaks - breaks[end])[end:]
    far = min(end + int(np.searchsorted(distances, distances[1] / END_CUT)), len(breaks) - 1)
    near, beyond = (np.abs(nodes[j] - nodes[end]) / sizes_of(path)[0] for j in (end + 1, far))
    worst = int(np.argmax(near))
    return often if near[worst] < STEADY * beyond[worst] else 1


def smooth_all_along(found: Estimate, tolerance: float) -> bool:
    """Whether coefficients fall fast on all intervals but those that are good enough anyway."""
    return all(fall >= SMOOTH or error <= tolerance for fall, error in zip(falls(found), found.errors, strict=True))


def falls(found: Estimate) -> list[float]:
    """How fast coefficients fall on every interval, in powers of ten per degree."""
    return [max(_fall(shape), 1e-3) for shape in found.shapes]


def _good_beside(mesh: Mesh, errors: Array, k: int) -> tuple[bool, bool]:
    """Whether an interval has a narrow neighbour before, and after it, that is good: no trouble sits at that end."""

    def good(j: int) -> bool:
        if not 0 <= j < len(mesh.intervals) or mesh.stretch[j] != mesh.stretch[k]:
            return False
        return bool(mesh.widths[j] < SLIVER * mesh.widths[k] and errors[j] < GOOD * errors[k])

    return good(k - 1), good(k + 1)


def _replace(
    old: Interval, missing: float, fall: float, bends: Array, often: int, smooth: bool, good: tuple[bool, bool]
) -> Iterator[Interval]:
    """One interval by better ones, to gain so many powers of ten; `often` it may be cut towards one of its ends."""
    family, degree = old.scheme.family, old.scheme.degree
    start, end = old.start, old.start + old.width
    wanted = _degree(degree, missing, fall, smooth)
    if fall >= SMOOTH and wanted <= HIGHEST_DEGREE:
        yield interval(old.stretch, start, end, family, wanted)
        return
    if not often:
        yield old
        return
    at_end = False
    if fall >= SMOOTH:  # smooth but far from resolved: halves of a higher degree
        cuts = [0.5]
        needed = _degree(degree, missing - HALVED * degree, fall + HALVED, smooth) if smooth else LEAST_HALF
        degree = min(max(degree, needed), HIGHEST_DEGREE)
    else:
        bend = _bend(bends)
        if (good[0] and bend < END_CUT) or (good[1] and bend > 1 - END_CUT):
            cuts, at_end = [0.5], True
        elif bend < END_CUT:
            cuts, at_end = [END_CUT**j for j in range(often, 0, -1)], True
        elif bend > 1 - END_CUT:
            cuts, at_end = [1 - END_CUT**j for j in range(1, often + 1)], True
        else:
            cuts = [max(bend - 0.15, bend / 2), min(bend + 0.15, (1 + bend) / 2)]
    edges = [start, *(start + cut * old.width for cut in cuts), end]
    if at_end:
        degree = max(degree, END_DEGREE)
    for left, right in pairwise(edges):
        touching = (left == start and old.start == 0.0) or (right == end)
        yield interval(old.stretch, left, right, family if touching else Family.RADAU, degree)


def _degree(degree: int, missing: float, fall: float, spare: bool) -> int:
    """The degree at which so many powers of ten are gained, or one more."""
    return degree + max(1, int(np.ceil(missing / fall)) + spare)


def finer(mesh: Mesh) -> Mesh:
    """The same mesh with every degree raised, to see what is left to gain."""
    return Mesh(tuple(interval(i.stretch, i.start, i.start + i.width, i.scheme.family, i.scheme.degree + 2)
                      for i in mesh.intervals))  # fmt: skip
