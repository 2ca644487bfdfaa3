"""Scaling: no result depends on units, on the origin or direction of the independent variable, or on any order."""

from itertools import pairwise

import numpy as np
import pytest

from solvers.solve import solve
from solvers.transcription.collocation import Family
from solvers.transcription.layout import layout
from solvers.transcription.mesh import Mesh, interval, uniform
from solvers.transcription.scaling import FAINT, find_row_sizes, find_scales, sizes_along
from tests.unit.solvers.problems import compiled, shape, solved_on, start_of, stated

MESH = uniform(1, 6, 6)


def pendulum(length=1.0, time=1.0, force=1.0, cost=1.0, start=0.0, seek="minimum", **members):
    """A nonlinear oscillator brought to rest, in units that are so many times smaller, from another zero of time."""
    sign = "" if seek == "minimum" else "-"
    given = {
        "constants": {"L": length, "S": time, "F": force, "J": cost, "a": start, "b": start + 2 * time},
        "independent": {"name": "t", "from": "a", "to": "b"},
        "dynamics": ["x'' = (L/S^2)*(u/F - sin(x/L) + (t - a)/(4*S)*(x/L)^2)"],
        "functional": {"seek": seek, "integrand": f"{sign}(J/S)*((x/L)^2 + (u/F)^2)"},
        "endpoints": ["x(a) = L", "x'(a) = 0", "x(b) = 0", "x'(b) = 0"],
        "constraints": ["u/F >= -3/2"],
    }
    return stated(**given | members)


@pytest.fixture(scope="module")
def plain():
    return solved_on(pendulum(), MESH)


@pytest.mark.parametrize(
    "units",
    [
        {"length": 1e6},
        {"length": 1e-6},
        {"time": 1e6},
        {"time": 1e-6},
        {"force": 1e6},
        {"force": 1e-6},
        {"cost": 1e6},
        {"cost": 1e-6},
        {"length": 1e6, "time": 1e-3, "force": 1e-6, "cost": 1e5},
        {"length": 1e-4, "time": 1e6, "force": 1e6, "cost": 1e-6},
    ],
    ids=str,
)
def test_units_change_nothing(plain, units):
    path = solved_on(pendulum(**units), MESH)
    length, time, force, cost = (units.get(name, 1.0) for name in ("length", "time", "force", "cost"))
    assert path.value == pytest.approx(cost * plain.value, rel=1e-8)
    np.testing.assert_allclose(path.states / [length, length / time], plain.states, atol=1e-8)
    np.testing.assert_allclose(path.controls / force, plain.controls, atol=1e-7)
    np.testing.assert_allclose(path.costates * [length, length / time] / cost, plain.costates, atol=1e-6)


@pytest.mark.parametrize("start", (-1.0, 1e3, -1e5))
def test_the_origin_of_the_independent_variable_changes_nothing(plain, start):
    path = solved_on(pendulum(start=start), MESH)
    assert path.value == pytest.approx(plain.value, rel=1e-8)
    np.testing.assert_allclose(path.states, plain.states, atol=1e-8)


def test_the_direction_of_the_independent_variable_changes_nothing(plain):
    """With s = -t the same curve runs backwards; second derivatives keep their sign."""
    path = solved_on(
        pendulum(
            constants={"L": 1, "F": 1},
            independent={"name": "s", "from": -2, "to": 0},
            dynamics=["x'' = u - sin(x) - s/4*x^2"],
            functional={"integrand": "x^2 + u^2"},
            endpoints=["x(0) = L", "x'(0) = 0", "x(-2) = 0", "x'(-2) = 0"],
        ),
        MESH,
    )
    assert path.value == pytest.approx(plain.value, rel=1e-7)  # other points, other errors
    np.testing.assert_allclose(path.nodes[::-1, 0], plain.nodes[:, 0], atol=1e-6)
    np.testing.assert_allclose(path.nodes[::-1, 1], -plain.nodes[:, 1], atol=1e-6)


def test_the_greatest_opposite_is_the_least(plain):
    path = solved_on(pendulum(seek="maximum"), MESH)
    assert path.value == pytest.approx(-plain.value, rel=1e-9)
    np.testing.assert_allclose(path.states, plain.states, atol=1e-8)


def test_the_order_of_members_changes_nothing():
    """Two coupled masses, told in two orders."""
    members = {
        "unknowns": {"x": {}, "y": {}, "u": {"within": [-4, 4]}, "w": {}},
        "dynamics": ["x'' = u - x + y", "y'' = w + x*y"],
        "functional": {"integrand": "u^2 + 2*w^2 + x^2"},
        "endpoints": ["x(0) = 1", "x'(0) = 0", "y(0) = 0", "y'(0) = 1", "x(1) = 0", "y(1) = 0"],
        "constraints": ["x + y <= 2", "w >= -9"],
    }
    turned = {name: dict(reversed(part.items())) if isinstance(part, dict) else part[::-1] for name, part in
              members.items()}  # fmt: skip
    path, other = solved_on(stated(**members), MESH), solved_on(stated(**turned), MESH)
    assert other.value == pytest.approx(path.value, rel=1e-9)
    for quantity in (("x", 0), ("x", 1), ("y", 0), ("y", 1)):
        own, its = (p.program.compiled.lowered.states.index(quantity) for p in (path, other))
        np.testing.assert_allclose(other.states[:, its], path.states[:, own], atol=1e-7)


def test_the_whole_solver_does_not_see_units():
    values = []
    for units in ({}, {"length": 1e6, "time": 1e-6, "force": 1e-5, "cost": 1e6}):
        solution = solve(pendulum(**units))
        values.append((solution.value / units.get("cost", 1.0), solution.verdict, len(solution.meshes)))
    assert values[0][0] == pytest.approx(values[1][0], rel=1e-8)
    assert values[0][1:] == values[1][1:]


def scales_of(problem, fill=None, before=None):
    functions = compiled(problem)
    mesh = uniform(1, 4, 4)
    where = layout(functions, mesh)
    z = start_of(problem, mesh)
    if fill is not None:
        z = fill(where, z.copy())
    return functions, where, z, find_scales(functions, where, z, before)


def test_sizes_are_the_largest_values():
    problem = stated(endpoints=["x(0) = -7", "x(1) = 3"])
    _, _, _, scales = scales_of(problem)
    assert scales.states == pytest.approx([7])
    assert scales.places == pytest.approx([1, 1])


def test_a_slope_that_vanishes_does_not_get_the_size_of_its_noise():
    problem = stated(unknowns={"x": {}, "u": {}}, dynamics=["x'' = u"], endpoints=["x(0) = 2"])

    def still(where, z):
        z[where.nodes], z[where.inner], z[where.controls] = [2.0, 1e-12], [2.0, 1e-12], 1e-12
        return z

    functions, _, _, scales = scales_of(problem, still)
    assert functions.lowered.states == (("x", 0), ("x", 1))
    assert scales.states == pytest.approx([2, FAINT * 2])


def test_what_is_zero_takes_its_size_from_bounds_else_from_its_neighbours():
    problem = stated(
        independent={"name": "t", "from": 0, "to": 100},
        unknowns={"x": {}, "u": {"within": [-5, 2]}},
        dynamics=["x'' = u"],
        endpoints=["x(0) = 0"],
    )

    def still(where, z):
        z[where.nodes] = z[where.inner] = 0
        z[where.controls] = 0
        return z

    _, _, _, scales = scales_of(problem, still)
    assert scales.controls == pytest.approx([5])
    assert scales.states[0] == pytest.approx(100 * scales.states[1])  # a span of 100 lies between them


@pytest.mark.parametrize("gain", (1e-6, 1.0, 1e6))
def test_a_control_of_which_nothing_is_known_is_sized_by_what_it_moves(gain):
    """Else its unit would decide how the first mesh is scaled."""
    problem = stated(constants={"k": gain}, dynamics=["x' = k*u"], endpoints=["x(0) = 3", "x(1) = 0"])
    *_, scales = scales_of(problem)
    assert scales.controls == pytest.approx([3 / gain])


def test_an_integral_that_cancels_is_not_small():
    problem = stated(constraints=["integral(t - 1/2 + 0*x) <= 1"], endpoints=["x(0) = 0"])
    _, _, _, scales = scales_of(problem)
    assert scales.integrals == pytest.approx([1 / 4], rel=0.1)


def test_a_size_does_not_collapse_from_one_mesh_to_the_next():
    problem = stated(endpoints=["x(0) = 0", "x(1) = 1"])
    *_, before = scales_of(problem)

    def nearly_still(where, z):
        z[where.nodes], z[where.inner], z[where.controls] = 1e-12, 1e-12, 1e-12
        return z

    *_, after = scales_of(problem, nearly_still, before)
    assert np.all(after.states >= 1e-3 * before.states)
    assert np.all(after.controls >= 1e-3 * before.controls)


def test_the_rounding_of_zero_is_no_size():
    problem = stated()
    *_, before = scales_of(problem)

    def zero(where, z):
        z[where.nodes], z[where.inner], z[where.controls] = 1e-17, -1e-17, 1e-16
        return z

    *_, after = scales_of(problem, zero, before)
    np.testing.assert_array_equal(after.states, before.states)
    np.testing.assert_array_equal(after.controls, before.controls)


def test_row_sizes_are_changes_over_the_scales():
    problem = stated(endpoints=["x(0) = 10", "x(0)*x(1) = 20"], constraints=["3*x + u <= 1000"])
    functions, where, z, scales = scales_of(problem)
    sizes = find_row_sizes(functions, where, scales, z)
    assert sizes.pointwise == pytest.approx([3 * scales.states[0] + scales.controls[0]])
    ends = z[where.nodes[[0, -1], 0]]
    assert sizes.conditions == pytest.approx([np.abs(ends).sum() * scales.states[0]])


def test_sizes_are_positive_and_finite_whatever_the_values():
    """An integrand that is infinite at the start must not make the functional's size infinite."""
    problem = stated(functional={"integrand": "1/x + u^2"}, endpoints=["x(0) = 0", "x(1) = 1"])

    def flat(where, z):
        z[where.nodes] = z[where.inner] = 0
        return z

    functions, where, z, scales = scales_of(problem, flat)
    sizes = find_row_sizes(functions, where, scales, z)
    for values in (scales.states, scales.controls, scales.places, sizes.value):
        assert np.all(np.isfinite(values))
        assert np.all(np.asarray(values) > 0)


def test_a_functional_that_vanishes_keeps_a_size():
    """Along y = 1 all slopes of (y^2 - 1)^2 + y'^2 are zero: only the mesh before tells how large the functional is."""
    problem = shape(functional={"integrand": "(y^2 - 1)^2 + y'^2"})
    functions = compiled(problem)
    where = layout(functions, MESH)
    z = np.zeros(where.size)
    z[where.places], z[where.nodes], z[where.inner] = [0, 3], 1 + 1e-9, 1 + 1e-9
    scales = find_scales(functions, where, z)
    assert find_row_sizes(functions, where, scales, z).value < 1e-6
    assert find_row_sizes(functions, where, scales, z, 2.0).value == pytest.approx(2e-3)
    z[where.nodes], z[where.inner] = 3, 3
    alone = find_row_sizes(functions, where, scales, z).value
    assert alone > 2
    assert find_row_sizes(functions, where, scales, z, 2.0).value == alone


def test_a_spike_is_as_large_as_each_interval_has_it():
    """u = 1e9 up to a millionth of the range and 1 beyond, so 1e3 in the mean; with limits it keeps one size."""
    edges = [0.0, 1e-6, 0.5, 1.0]
    mesh = Mesh(tuple(interval(0, left, right, Family.RADAU, 4) for left, right in pairwise(edges)))
    for limits, beyond in (({}, 1e3), ({"within": [-2e9, 2e9]}, 1e9)):
        functions = compiled(stated(unknowns={"x": {}, "u": limits}))
        where = layout(functions, mesh)
        z = np.ones(where.size)
        z[where.controls[:4]] = 1e9
        along = sizes_along(functions, where, find_scales(functions, where, z), z)[:, 0]
        np.testing.assert_allclose(along, np.repeat([1e9, beyond], [4, 8]), rtol=2e-3)
