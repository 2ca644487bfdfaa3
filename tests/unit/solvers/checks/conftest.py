"""Solved, stationary and deliberately wrong curves for the tests of the checks."""

from __future__ import annotations

import json
from dataclasses import replace
from functools import lru_cache

import numpy as np
import pytest
import scipy.sparse as sp
from scipy.sparse.linalg import spsolve

from service.assemble import assemble
from service.spec import read
from solvers.checks.sampling import Sampler
from solvers.deadline import FOREVER
from solvers.minimise.ipopt import Minimum, Outcome
from solvers.search.pursuit import pursue
from solvers.transcription.functions import compile_problem
from solvers.transcription.layout import layout
from solvers.transcription.lowering import lower
from solvers.transcription.mesh import uniform
from solvers.transcription.program import transcribe
from solvers.transcription.scaling import find_row_sizes, find_scales
from solvers.transcription.trajectory import trajectory


def problem_of(document):
    return assemble(read(json.dumps({"format": 1, "title": "test", **document}).encode()))


@lru_cache
def _solved(text):
    pursuit = pursue(problem_of(json.loads(text)), None, FOREVER, meshes=8)
    assert pursuit.solved, pursuit.end
    return pursuit


@pytest.fixture(scope="session")
def pursued():
    """The pursuit of a document's problem in its given form."""
    return lambda document: _solved(json.dumps(document))


@pytest.fixture(scope="session")
def solved(pursued):
    """The finest mesh of a document's problem in its given form."""
    return lambda document: pursued(document).paths[-1]


def _program(document, intervals, degree):
    compiled = compile_problem(lower(problem_of(document)))
    mesh = uniform(len(compiled.lowered.problem.places) - 1, intervals, degree)
    where = layout(compiled, mesh)
    z = np.ones(where.size)
    z[where.places] = np.linspace(0, 1, len(where.places))
    scales = find_scales(compiled, where, z)
    return transcribe(compiled, mesh, where, scales, find_row_sizes(compiled, where, scales, z))


def _trajectory(program, z, multipliers, value=0.0):
    minimum = Minimum(Outcome.SOLVED, z, value, np.zeros(len(z)), multipliers, 1, 0.0, 0.0, "made for a test")
    return trajectory(program, minimum)


@pytest.fixture(scope="session")
def sketched(drawn):
    """A curve of given states and controls without any multipliers, whatever the problem says."""

    def make(document, states, controls, intervals=3, degree=4):
        program = _program(document, intervals, degree)
        z = np.zeros(program.layout.size)
        fixed = program.lower == program.upper
        z[fixed] = program.lower[fixed]
        return drawn(_trajectory(program, z, np.zeros(program.rows.count)), states, controls)

    return make


@pytest.fixture(scope="session")
def stationary():
    """The stationary curve of a problem with quadratic integrand and linear conditions, minimum or not.

    One Newton step on the conditions of first order: what a minimiser would never stop at is found as well.
    """

    def make(document, intervals=16, degree=4):
        program = _program(document, intervals, degree)
        z = np.zeros(program.layout.size)
        fixed = program.lower == program.upper
        z[fixed] = program.lower[fixed]
        numbers = program.numbers
        gradient, g = numbers.gradient(z), numbers.constraints(z)
        jacobian = numbers.jacobian_pattern.filled(numbers.jacobian(z))
        upper = numbers.hessian_pattern.filled(numbers.hessian(z, 1.0, np.zeros(program.rows.count)))
        hessian = upper + sp.triu(upper, 1).T
        free = np.flatnonzero(~fixed)
        jacobian = jacobian[:, free]
        matrix = sp.bmat([[hessian[free][:, free], jacobian.T], [jacobian, None]], format="csc")
        right = np.concatenate([-gradient[free], program.row_lower - g])
        step = spsolve(matrix, right)
        z[free] += step[: len(free)]
        value = numbers.value(z)
        return _trajectory(program, z, step[len(free) :], value)

    return make


@pytest.fixture(scope="session")
def examine():
    """One check of a trajectory, undefined numbers being the check's business."""

    def make(check, path, *arguments):
        with np.errstate(all="ignore"):
            return check(Sampler(path), *arguments)

    return make


def _refreshed(path):
    """The trajectory with z made to agree with its parts."""
    where = path.program.layout
    z = path.z.copy()
    z[where.inner], z[where.controls], z[where.nodes] = path.states, path.controls, path.nodes
    return replace(path, z=z)


@pytest.fixture(scope="session")
def drawn():
    """The trajectory with other states and controls: functions of the independent variable, one per column."""

    def make(path, states, controls):
        at = path.points
        return _refreshed(replace(
            path,
            states=np.column_stack([f(at) for f in states]),
            nodes=np.column_stack([f(path.breaks) for f in states]),
            controls=np.column_stack([f(at) for f in controls]),
        ))  # fmt: skip

    return make


@pytest.fixture(scope="session")
def refreshed():
    return _refreshed
