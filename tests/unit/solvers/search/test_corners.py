"""Corners of tables become breaks of the mesh."""

import numpy as np
import pytest

from solvers.search.corners import at_corners
from solvers.tables.table import CORNER
from solvers.transcription.mesh import uniform
from tests.unit.solvers.problems import path_along, stated

KNOTS = [0.0, 0.23, 0.6, 1.0]


def table(between, of="t", knots=KNOTS):
    points = [[float(at), float(value)] for at, value in zip(knots, [0, 1, 0.3, 0.8], strict=True)]
    return {"d": {"of": {of: ""}, "points": points, "between": between}}


def path(integrand, between, mesh=None, x=np.sin, u=np.cos, knots=KNOTS):
    tables = table(between, knots=knots)
    problem = stated(tables=tables, functional={"integrand": integrand}, endpoints=["x(0) = 0"])
    return path_along(mesh or uniform(1, 8, 4), x, u, problem)


def breaks(mesh):
    found = mesh.breaks(np.array([0.0, 1.0]))
    assert found[0] == 0
    assert found[-1] == pytest.approx(1, abs=1e-15)
    assert (np.diff(found) > 0).all()
    return found


def missing(places, mesh):
    return [at for at in places if np.abs(breaks(mesh) - at).min() > 1e-9]


@pytest.mark.parametrize("integrand", ["u^2 + d(t)*x", "u^2 + d(t)^2 + d(x/9)"])
def test_corners_of_the_independent_variable_become_breaks(integrand):
    curve = path(integrand, "monotone")
    mesh = at_corners(curve.program.mesh, curve)
    assert not missing([0.23, 0.6], mesh)
    assert 8 < len(mesh.intervals) <= 10


def test_both_ends_of_a_rounded_corner_become_breaks():
    curve = path("u^2 + d(t)*x", "linear")
    mesh = at_corners(curve.program.mesh, curve)
    reach = 0.23 * CORNER  # the shorter step is the first
    assert not missing([0.23 - reach, 0.23 + reach], mesh)


def test_the_curve_says_where_a_state_passes_a_corner():
    curve = path("u^2 + d(x)", "monotone", mesh=uniform(1, 4, 8))
    mesh = at_corners(curve.program.mesh, curve)
    assert not missing(np.arcsin([0.23, 0.6]), mesh)


def test_a_break_nearby_is_moved():
    curve = path("u^2 + d(t)*x", "monotone", knots=[0.0, 0.251, 0.499, 1.0])
    mesh = at_corners(curve.program.mesh, curve)
    assert len(mesh.intervals) == 8
    np.testing.assert_allclose(breaks(mesh)[[2, 4]], [0.251, 0.499], atol=1e-12)


@pytest.mark.parametrize(("integrand", "between"), [("u^2", "linear"), ("u^2 + d(t)*x", "smooth")])
def test_what_has_no_corners_keeps_its_mesh(integrand, between):
    curve = path(integrand, between)
    assert at_corners(curve.program.mesh, curve) is curve.program.mesh


def test_a_table_of_very_many_corners_is_left_to_refinement():
    fine = [[float(k), float(k % 2)] for k in range(-200, 201)]
    tables = {"d": {"of": {"t": ""}, "points": fine, "between": "monotone"}}
    problem = stated(tables=tables, functional={"integrand": "u^2 + d(400*t - 200)*x"}, endpoints=["x(0) = 0"])
    curve = path_along(uniform(1, 40, 4), np.sin, np.cos, problem)
    assert at_corners(curve.program.mesh, curve) is curve.program.mesh
