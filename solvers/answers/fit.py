"""What a fit to observations says: residuals, the spread of the data, and how well the parameters are known.

With residuals r (over sigma where that is known) the covariance of the free numbers is s^2 (r' r'^T)^-1 on the
variations that keep dynamics, conditions and active limits: the method of Gauss and Newton, in which the curvature of
the model itself is left out.  s is 1 where the sigmas are known, else the spread of the residuals.  Where a functional
of its own is minimised with the squares, it is taken as the knowledge beforehand and its second derivative joins.  The
number of numbers that the data determine is the trace of what maps observed to fitted values, so that it also counts
where functions are free.

One factorisation of the optimality system serves all: its inverse, restricted to the variables, is that of the
reduced matrix.
References: Seber, Wild (1989), Nonlinear Regression, sections 2.1 and 5.1; Nocedal, Wright (2006), Numerical
Optimization, section 16.1.  (Both from memory.)
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import casadi as ca
import numpy as np
from numpy.typing import NDArray

from solvers.problem import Observation
from solvers.solution import Fit, Fitted
from solvers.tables.lookups import Lookups
from solvers.transcription.functions import Environment, place_index
from solvers.transcription.limits import constants_of
from solvers.transcription.trajectory import Trajectory

if TYPE_CHECKING:
    import scipy.sparse as sp

Array = NDArray[np.float64]
Indices = NDArray[np.int64]

BINDS = 1e-7
"""Least push (scaled) of an inequality that counts as an equality."""

COUNTED = 9
"""Digits behind the point to which a count of numbers is free of rounding."""

LOST = 1e-6
"""How far the inverse may miss the unit matrix on the parameters before it is no inverse."""


def fit(path: Trajectory) -> Fit | None:
    """The fit of a solved mesh, in SI; None where nothing was observed."""
    problem = path.program.compiled.lowered.problem
    if not problem.observations:
        return None
    models = [_Model(path, observation) for observation in problem.observations]
    weighted = problem.observations[0].weighted
    squares = float(sum((model.residuals**2).sum() for model in models))
    names = tuple(p.name for p in problem.parameters)
    slopes = _stacked(path, models)
    inverse = _Inverse(path, slopes)
    determined = inverse.determined
    if determined is None:
        count = sum(len(model.residuals) for model in models)
        told = tuple(model.told(None, None) for model in models)
        return Fit(squares, count, None, None, weighted, names, None, told)
    count, numbers = len(determined), round(float(determined.sum()), COUNTED)
    freedom = count - numbers
    spread = float(np.sqrt(squares / freedom)) if freedom > 1e-6 else None
    size = 1.0 if weighted else spread
    covariance = None if size is None else size**2 * inverse.of_parameters
    ends = np.cumsum([len(model.residuals) for model in models])[:-1]
    parts = np.split(determined, ends)
    told = tuple(model.told(size, part) for model, part in zip(models, parts, strict=True))
    held = tuple(name for name, free in zip(names, inverse.free, strict=True) if not free)
    return Fit(squares, count, freedom, spread, weighted, names, covariance, told, held)


class _Model:
    """One list of observations on a solved mesh: fitted values, and their slopes in states and parameters."""

    def __init__(self, path: Trajectory, observation: Observation) -> None:
        self.path, self.observation = path, observation
        compiled = path.program.compiled
        lowered = compiled.lowered
        problem = lowered.problem
        points = observation.points
        self.at = np.array([place_index(problem.places, point.place) for point in points])
        self.observed = np.array([point.value for point in points])
        self.sigma = np.array([point.sigma for point in points])
        x, p = ca.SX.sym("x", len(lowered.states)), ca.SX.sym("p", len(problem.parameters))
        t = ca.SX.sym("t")
        numbers = {"pi": ca.SX(np.pi), problem.independent: t}
        numbers |= {name: ca.SX(value) for name, value in constants_of(compiled).items()}
        numbers |= {parameter.name: p[k] for k, parameter in enumerate(problem.parameters)}
        lookups = Lookups()
        here = Environment(lowered, {q: x[k] for k, q in enumerate(lowered.states)}, numbers, lookups)
        body = here.formula(observation.body)
        slopes = ca.densify(ca.jacobian(body, ca.vertcat(x, p)))
        function = ca.Function("observed", [x, t, p], lookups.settled([body, slopes])).map(len(points))
        nodes = path.nodes[path.program.layout.at_place[self.at]]
        parameters = np.tile(path.parameters, (len(points), 1))
        values, found = function(nodes.T, path.places[self.at], parameters.T)
        self.fitted = np.asarray(values).ravel()
        self.slopes = np.asarray(found).reshape(len(points), -1)  # one row beside the other for each point

    @property
    def residuals(self) -> Array:
        """Observed less fitted, over sigma."""
        return np.asarray((self.observed - self.fitted) / self.sigma)

    def told(self, size: float | None, determined: Array | None) -> Fitted:
        """For the solution; `size` is the spread that counts as one, `determined` each point's share in its fit."""
        own = self.observation
        error = None
        if size is not None and determined is not None:
            error = size * self.sigma * np.sqrt(np.maximum(determined, 0.0))
        return Fitted(
            own.label,
            own.pointer,
            self.path.places[self.at],
            self.observed,
            self.fitted,
            self.sigma if own.weighted else None,
            self.residuals / size if size else None,
            error,
            own.unit,
            own.arc,
        )


def _stacked(path: Trajectory, models: list[_Model]) -> sp.csr_matrix:
    """Slopes of all fitted values over sigma in the scaled variables (points x variables)."""
    import scipy.sparse as sp

    where, scale = path.program.layout, path.program.scale
    blocks = []
    for model in models:
        columns = np.hstack([where.nodes[where.at_place[model.at]], np.tile(where.parameters, (len(model.at), 1))])
        values = model.slopes * scale[columns] / model.sigma[:, None]
        rows = np.repeat(np.arange(len(model.at)), columns.shape[1])
        blocks.append(sp.csr_matrix((values.ravel(), (rows, columns.ravel())), shape=(len(model.at), where.size)))
    return sp.vstack(blocks).tocsr()


class _Inverse:
    """The inverse of half the Hessian of the squares on the variations that are allowed."""

    def __init__(self, path: Trajectory, slopes: sp.csr_matrix) -> None:
        program = path.program
        self.determined: Array | None = None
        self.free = np.zeros(0, bool)  # of the parameters, those that no limit holds
        free, rows = _allowed(path)
        matrix = _system(path, slopes, free, rows)
        where = program.layout
        parameters = where.parameters
        wanted = np.zeros((matrix.shape[0], len(parameters)))
        position = np.full(where.size, -1)
        position[free] = np.arange(len(free))
        for column, index in enumerate(parameters):
            if position[index] >= 0:
                wanted[position[index], column] = 1.0
        sides = np.vstack([slopes[:, free].T.toarray(), np.zeros((len(rows), slopes.shape[0]))])
        solved = _solved(matrix, np.hstack([wanted, sides]))
        if solved is None:
            return
        count = len(parameters)
        self.free = position[parameters] >= 0
        own = np.where(position[parameters] >= 0, position[parameters], 0)
        block = solved[own][:, :count] * self.free[:, None]
        sizes = program.scale[parameters]
        self.of_parameters = (block + block.T) / 2 * sizes[:, None] * sizes + 0.0  # no -0
        determined = np.asarray((slopes[:, free] @ solved[: len(free), count:]).diagonal()).ravel()
        if np.any(determined < -LOST) or np.any(self.of_parameters.diagonal() < 0) or np.any(determined > 1 + LOST):
            return
        self.determined = determined


def _allowed(path: Trajectory) -> tuple[Indices, Indices]:
    """The variables that are free, and the rows that bind."""
    program = path.program
    size = abs(program.value_scale)
    pushed = np.abs(path.bound_multipliers * program.scale / size) > BINDS
    free = np.flatnonzero((program.lower < program.upper) & ~pushed)
    pressed = np.abs(path.row_multipliers * program.row_scale / size) > BINDS
    return free, np.flatnonzero((program.row_lower == program.row_upper) | pressed)


def _system(path: Trajectory, slopes: sp.csr_matrix, free: Indices, rows: Indices) -> sp.csc_matrix:
    """The optimality system: half the Hessian of the squares, bordered by the slopes of what binds."""
    import scipy.sparse as sp

    program = path.program
    numbers, z = program.numbers, path.z / program.scale
    problem = program.compiled.lowered.problem
    if problem.integrand is None and problem.endpoint is None:
        hessian = (slopes.T @ slopes).tocsr()
    else:  # the squares and what is minimised with them
        upper = numbers.hessian_pattern.filled(numbers.hessian(z, 1.0, np.zeros(program.rows.count))).tocsr()
        hessian = (upper + sp.triu(upper, 1).T) * (program.value_scale / 2)
    jacobian = numbers.jacobian_pattern.filled(numbers.jacobian(z)).tocsr()[rows][:, free]
    return sp.bmat([[hessian[free][:, free], jacobian.T], [jacobian, None]], format="csc")


def _solved(matrix: sp.csc_matrix, sides: Array) -> Array | None:
    """The solutions, or None where the data leave something open."""
    from scipy.sparse.linalg import splu

    try:
        found = np.asarray(splu(matrix).solve(sides))
    except RuntimeError:
        return None
    missed = np.abs(matrix @ found - sides).max(initial=0.0)
    return found if np.isfinite(found).all() and missed <= LOST * max(1.0, float(np.abs(sides).max())) else None
