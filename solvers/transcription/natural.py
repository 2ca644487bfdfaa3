"""Natural sizes: how large an unknown is of which the data say nothing, read off the formulas.

A chain of given length between two points at the same height may hang down by a micrometre or by a kilometre; the
formulas tell.  Along a bend of size a every output of the problem is followed over many powers of ten of a.  Where one
of its terms takes over from another, or it reaches a limit, its growth changes: sqrt(1 + y'^2) is constant below a
slope of one and linear above.  The size at which most changes is the natural one, whatever the units are.  A pure
power changes nowhere, so that nothing is said.
"""

from __future__ import annotations

from collections.abc import Iterator
from functools import lru_cache

import numpy as np
from numpy.polynomial import polynomial
from numpy.typing import NDArray

from solvers.transcription.evaluation import end_inputs, mapped, point_inputs
from solvers.transcription.functions import Compiled, compile_problem, rounded_functions, without_rounding
from solvers.transcription.layout import Layout
from solvers.transcription.limits import constants_of, interval_of, quantity_bounds
from solvers.transcription.lowering import lower
from solvers.transcription.mesh import Mesh

Array = NDArray[np.float64]

POWERS = np.arange(-15, 16)
"""Powers of ten, around the length of the range, that are looked at."""
CHANGE = 0.25
"""Least change of growth, summed over the outputs, that tells a size."""
ALIKE = 0.5
"""Share of the largest change that is told from it: of several sizes the one nearest to the range is taken."""


def natural_sizes(compiled: Compiled, mesh: Mesh, where: Layout, z: Array) -> dict[str, float]:
    """The natural sizes of the unknowns that are zero all along z (SI) and have no bounds, as far as there are any."""
    found: dict[str, float] = {}
    unsized = list(_unsized(compiled, where, z))
    if not unsized:
        return found
    problem = compiled.lowered.problem
    if rounded_functions(problem):  # where they are rounded their growth changes too
        compiled = compile_problem(lower(without_rounding(problem)))
    for name, order in unsized:
        size = _natural(compiled, mesh, where, z, name, order)
        if size is not None:
            found[name] = size
    return found


def at_natural_sizes(compiled: Compiled, mesh: Mesh, where: Layout, z: Array) -> Array:
    """z with a bend of its natural size where an unknown is zero all along, so that sizes can be taken from it."""
    found = natural_sizes(compiled, mesh, where, z)
    if not found:
        return z
    bent = z[None].copy()
    for name, size in found.items():
        _bend(compiled, mesh, where, bent, name, np.array([size]))
    bent[:, where.integrals] = _totals(compiled, where, _values(compiled, where, bent))
    return np.asarray(bent[0])


def _unsized(compiled: Compiled, where: Layout, z: Array) -> Iterator[tuple[str, int]]:
    """Unknowns that are zero, with all their derivatives, and whose bounds do not tell a size, with their order."""
    lowered = compiled.lowered
    bounds = quantity_bounds(compiled)
    known = set()
    for quantities, indices, least, most in (
        (lowered.states, np.vstack([where.nodes, where.inner]), bounds[0], bounds[1]),
        (lowered.controls, where.controls, bounds[2], bounds[3]),
    ):
        values = np.abs(z[indices]).max(axis=0, initial=0.0)
        limits = np.maximum(*(np.where(np.isfinite(limit), np.abs(limit), 0.0) for limit in (least, most)))
        known |= {name for (name, _), size in zip(quantities, values + limits, strict=True) if size > 0}
    for unknown in lowered.problem.unknowns:
        if unknown.order and unknown.name not in known:
            yield unknown.name, unknown.order


def _natural(compiled: Compiled, mesh: Mesh, where: Layout, z: Array, name: str, order: int) -> float | None:
    """The size of one unknown at which the growth of the outputs changes most."""
    span = abs(float(np.ptp(z[where.places]))) or 1.0
    sizes = np.asarray(span * 10.0**POWERS, dtype=np.float64)
    bent = np.tile(z, (len(sizes), 1))
    _bend(compiled, mesh, where, bent, name, sizes)
    with np.errstate(all="ignore"):  # what vanishes or overflows tells nothing
        growth = np.log10(_outputs(compiled, where, bent))
        change = np.abs(growth[2:] - 2 * growth[1:-1] + growth[:-2])
    change = np.minimum(np.where(np.isfinite(change), change, 0.0), 1.0)
    change[np.isfinite(growth[1:-1]) & np.isnan(growth[2:])] = 1.0  # beyond this size it has no value
    change = change.sum(axis=1)
    if not change.max(initial=0.0) >= CHANGE:
        return None
    inner = POWERS[1:-1]
    told = np.flatnonzero(change >= ALIKE * change.max())
    return float(span * 10.0 ** inner[told[np.argmin(np.abs(inner[told]))]])


def _bend(compiled: Compiled, mesh: Mesh, where: Layout, curves: Array, name: str, sizes: Array) -> None:
    """Add a bend to one unknown and its derivatives, of another size in each curve; what is given at an end stays."""
    lowered = compiled.lowered
    places = curves[0, where.places]
    span = float(np.ptp(places)) or 1.0
    nodes, points = ((at - places[0]) / span for at in (mesh.breaks(places), where.points(places)))
    last = len(places) - 1
    held = {place for state, place, c in compiled.fixed if c.equality and lowered.states[state] == (name, 0)}
    shape = _shape(0 in held, last in held)
    for quantities, indices, at in (
        (lowered.states, where.nodes, nodes),
        (lowered.states, where.inner, points),
        (lowered.controls, where.controls, points),
    ):
        for column, (other, order) in enumerate(quantities):
            if other == name:
                rate = polynomial.polyval(at, polynomial.polyder(shape, order))
                curves[:, indices[:, column]] += sizes[:, None] * rate / span**order


@lru_cache
def _shape(starts_at_zero: bool, ends_at_zero: bool) -> Array:
    """A curved polynomial on 0 to 1."""
    shape = np.array([1.0, 0.0, 0.5])
    if starts_at_zero:
        shape = polynomial.polymul(shape, [0.0, 1.0])
    if ends_at_zero:
        shape = polynomial.polymul(shape, [1.0, -1.0])
    return shape


def _outputs(compiled: Compiled, where: Layout, bent: Array) -> Array:
    """How large each output is along each of some curves (curves x outputs), from its limits where it has any.

    The last one is the whole functional, in which a pure power of the integrand may meet another of the endpoint term.
    The integrals in the curves become their own.
    """
    point, constants = compiled.point, constants_of(compiled)
    values = _values(compiled, where, bent)
    columns = [values[:, :, k] for k in range(point.states)]
    for k, condition in enumerate(compiled.pointwise, start=point.states):
        limits = [limit for limit in interval_of(condition, constants) if np.isfinite(limit)]
        columns += [values[:, :, k] - limit for limit in dict.fromkeys(limits)]
    first = point.states + point.constraints
    columns += [values[:, :, k] for k in range(first, point.outputs)]
    bent[:, where.integrals] = _totals(compiled, where, values)
    ends = mapped(compiled.end.value, end_inputs(where, bent), np.tile(compiled.constants, (len(bent), 1)))
    for k, condition in enumerate(compiled.conditions):
        limits = [limit for limit in interval_of(condition, constants) if np.isfinite(limit)]
        columns += [ends[:, [k]] - limit for limit in dict.fromkeys(limits)]
    columns.append(ends[:, -1:])
    whole = np.abs(values[:, :, -1]) @ where.measures + np.abs(ends[:, -1])  # where an integral meets an endpoint term
    columns.append(whole[:, None])
    return np.stack([np.abs(column).mean(axis=1) for column in columns], axis=1)


def _values(compiled: Compiled, where: Layout, bent: Array) -> Array:
    """The outputs of the point function along some curves (curves x M x outputs)."""
    outputs = mapped(compiled.point.value, *point_inputs(compiled, where, bent))
    return outputs.reshape(len(bent), -1, compiled.point.outputs)


def _totals(compiled: Compiled, where: Layout, values: Array) -> Array:
    """The integrals along some curves."""
    first = compiled.point.states + compiled.point.constraints
    integrands = values[:, :, first : first + compiled.point.integrals]
    return np.asarray(np.einsum("m,cmi->ci", where.measures, np.nan_to_num(integrands, posinf=0.0, neginf=0.0)))
