"""Problems of the numerical core's tests, and short ways to transcribe and to minimise them."""

from __future__ import annotations

import numpy as np
from scipy.special import ellipe, ellipk

from solvers.minimise.ipopt import Minimum, Outcome, Start, minimise
from solvers.starts.guess import first_guess
from solvers.transcription.collocation import Family
from solvers.transcription.functions import compile_problem
from solvers.transcription.layout import layout
from solvers.transcription.lowering import lower
from solvers.transcription.mesh import Mesh, interval, uniform
from solvers.transcription.program import transcribe
from solvers.transcription.scaling import find_row_sizes, find_scales
from solvers.transcription.trajectory import trajectory
from tests.unit.service.assemble import stating

LEAST_TIME = {
    "independent": {"name": "t", "from": 0, "to": "T"},
    "parameters": {"T": {"within": [0.1, 100]}},
    "unknowns": {"x": {}, "u": {"within": [-1, 1]}},
    "dynamics": ["x'' = u"],
    "functional": {"endpoint": "T"},
    "endpoints": ["x(0) = 1", "x'(0) = 1", "x(T) = 0", "x'(T) = 0"],
}
"""Least time to rest at the origin, |u| <= 1: u = -1 until 1 + sqrt(3/2), then 1; T = 1 + sqrt(6).

Pontryagin et al. (1962), The Mathematical Theory of Optimal Processes, section 5 (from memory).
"""


def stated(**members):
    """x' = u from 0 to 1 with the least integral of u^2, some members replaced; a minimum unless told otherwise."""
    return stating.stated(**_sought(members))


def shape(**members):
    """The shortest curve y(x) over 0 to 3 without units or conditions, some members replaced."""
    given = {
        "independent": {"name": "x", "from": 0, "to": 3},
        "unknowns": {"y": {}},
        "dynamics": None,
        "functional": {"integrand": "sqrt(1 + y'^2)"},
        "endpoints": [],
    }
    return stating.stated(**_sought(given | members))


def _sought(members):
    if "functional" not in members:
        return members
    return members | {"functional": {"seek": "minimum"} | members["functional"]}


def regulator(**members):
    """x' = x + u from x = 1, least integral of (x^2 + u^2)/2 over 0 to 1."""
    given = {
        "dynamics": ["x' = x + u"],
        "functional": {"integrand": "(x^2 + u^2)/2"},
        "endpoints": ["x(0) = 1"],
    }
    return stated(**given | members)


def swing(load, quarters):
    """The integral of q'^2/2 + load cos q over a length of so many quarters of a swing of the pendulum
    q'' = -load sin q: closed form by complete elliptic integrals of the parameter m = sin(a/2)^2, a the largest angle,
    as K(m) = sqrt(load)/quarters; the mean of cos q is 2 E/K - 1, and q'^2/2 = load (cos q - cos a).
    """
    low, high = 0.0, 1.0 - 1e-12
    for _ in range(100):
        m = (low + high) / 2
        low, high = (m, high) if ellipk(m) < np.sqrt(load) / quarters else (low, m)
    return 2 * load * (2 * ellipe(m) / ellipk(m) - 1) - load * (1 - 2 * m)


def compiled(problem):
    return compile_problem(lower(problem))


def mixed_mesh(stretches=1):
    """Unequal intervals of both families and several degrees in every stretch."""
    pieces = [
        interval(stretch, start, end, family, degree)
        for stretch in range(stretches)
        for start, end, family, degree in (
            (0.0, 0.2, Family.GAUSS, 3),
            (0.2, 0.7, Family.RADAU, 4),
            (0.7, 1.0, Family.GAUSS if stretch == stretches - 1 else Family.RADAU, 2),
        )
    ]
    return Mesh(tuple(pieces))


def start_of(problem, mesh):
    """The first guess (SI) on a mesh."""
    functions = compiled(problem)
    return first_guess(functions, mesh, layout(functions, mesh)).z


def program_of(problem, mesh=None, z=None):
    """The program of a problem on a mesh, with scales from the first guess or from values (SI)."""
    mesh = mesh or uniform(len(problem.places) - 1, 4, 4)
    functions = compiled(problem)
    where = layout(functions, mesh)
    values = start_of(problem, mesh) if z is None else z
    scales = find_scales(functions, where, values)
    return transcribe(functions, mesh, where, scales, find_row_sizes(functions, where, scales, values))


def solved_on(problem, mesh=None, z=None):
    """The trajectory that minimises a problem on one mesh."""
    program = program_of(problem, mesh, z)
    start = start_of(problem, program.mesh) if z is None else z
    minimum = minimise(program, Start(np.asarray(start) / program.scale))
    assert minimum.outcome in (Outcome.SOLVED, Outcome.ACCEPTABLE), minimum.status
    return trajectory(program, minimum)


def path_along(mesh, x, u, problem=None):
    """A path whose state and control are given functions of t from 0 to 1, whatever the dynamics."""
    problem = problem or stated(endpoints=["x(0) = 0"])
    program = program_of(problem, mesh)
    where = program.layout
    z = np.zeros(where.size)
    z[where.places] = [0, 1]
    breaks = mesh.breaks(np.array([0.0, 1.0]))
    z[where.nodes[:, 0]], z[where.inner[:, 0]] = x(breaks), x(where.fractions)
    z[where.controls[:, 0]] = u(where.fractions)
    none = Minimum(
        Outcome.SOLVED, z / program.scale, 0.0, np.zeros(where.size), np.zeros(program.rows.count), 0, 0, 0, ""
    )
    return trajectory(program, none)
