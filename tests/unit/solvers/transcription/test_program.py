"""The program: its layout, and its hand-made derivatives against CasADi's automatic ones of the same functions."""

import casadi as ca
import numpy as np
import pytest

from solvers.forms.gauge import in_parametric_form
from solvers.transcription.collocation import Family
from solvers.transcription.layout import layout
from solvers.transcription.mesh import uniform
from tests.unit.solvers.problems import LEAST_TIME, compiled, mixed_mesh, program_of, shape, stated

FALL = shape(
    unknowns={"y": {"unit": "m", "within": [0, None]}},
    functional={"integrand": "sqrt((1 + y'^2)/y)"},
    endpoints=["y(0) = 0", "y(3) = 1"],
)
"""The curve of quickest descent: in parametric form it starts at rest."""

PROBLEMS = {
    "free end place": lambda: stated(**LEAST_TIME | {"functional": {"integrand": "u^2 + x*x'", "endpoint": "T^2"}}),
    "way points": lambda: stated(
        endpoints=["x(0) = 0", "x(0.3) = 1/2", "x(1) = 1", "x(0.3)*x(1) >= -2", "x(0.7)^2 <= 4"],
        functional={"integrand": "u^2 + t*x^3"},
    ),
    "pointwise constraints": lambda: stated(
        constraints=["x^2 + u^2 <= 4", "x*u = sin(t)", "u >= -3"],
        unknowns={"x": {"within": [-5, 5]}, "u": {}},
        endpoints=["x(0) = 0"],
    ),
    "integral conditions": lambda: shape(
        functional={"integrand": "y*sqrt(1 + y'^2)"},
        constraints=["integral(sqrt(1 + y'^2)) = 4.2", "integral(y^2)*y(0) <= 30"],
        endpoints=["y(0)*y(3) >= 0.1"],
    ),
    "several integrals in one condition": lambda: shape(
        functional={"integrand": "x*y"}, constraints=["integral(y'^2)/integral(y^2) <= 2"]
    ),
    "parameters": lambda: stated(
        parameters={"k": {}, "q": {"within": [0, 3]}},
        constants={"c": 2.5},
        dynamics=["x' = k*u - q*x^2*c"],
        functional={"integrand": "u^2*q + k^2", "endpoint": "k*q*x(1)"},
        endpoints=["x(0) = 0", "x(1) + k^2 = q"],
    ),
    # An end place that is a parameter of the dynamics too: two inputs of one function are the same variable, so that
    # mixed second derivatives fall on the diagonal, where they count twice.
    "end place in the dynamics": lambda: stated(
        **LEAST_TIME
        | {
            "dynamics": ["x'' = u*T^2 - x*t/T"],
            "functional": {"integrand": "u^2*T^3 + T*t^2", "endpoint": "T*x'(T)"},
            "constraints": ["x*T <= 9", "u*t*T >= -50"],
            "endpoints": ["x(0) = 1", "x'(0) = 1", "x(T)*T^2 = 0"],
        }
    ),
    "both ends free": lambda: stated(
        independent={"name": "t", "from": "a", "to": "b"},
        parameters={"a": {"within": [-1, 0.4]}, "b": {"within": [0.5, 3]}},
        dynamics=["x' = u + a*b*x + t^2"],
        functional={"integrand": "u^2*b/(1 + a^2)", "endpoint": "(b - a)^2"},
        endpoints=["x(a) = a^2", "x(b)*a = 1 - b"],
    ),
    "free place inside": lambda: stated(
        parameters={"m": {"within": [0.2, 0.8]}},
        dynamics=["x' = u*m + t*x"],
        functional={"integrand": "u^2*t*m", "endpoint": "x(m)^2*m"},
        endpoints=["x(0) = 0", "x(m) = m^2", "x(1) = 1"],
    ),
    "control at an end": lambda: in_parametric_form(FALL, dict, squared=True).problem,
    "maximum": lambda: stated(functional={"seek": "maximum", "integrand": "x*u - u^2", "endpoint": "x(1)^3"}),
    "implicit dynamics": lambda: stated(dynamics=["x'*exp(x') = u*x"]),
    "no functional along the curve": lambda: stated(functional={"endpoint": "x(1)^2"}),
    "no constraint at all": lambda: shape(functional={"integrand": "(y - x)^2*(1 + y'^2)"}, endpoints=[]),
}


@pytest.fixture(scope="module", params=PROBLEMS)
def program(request):
    problem = PROBLEMS[request.param]()
    mesh = mixed_mesh(len(problem.places) - 1)
    rng = np.random.default_rng(7)
    where = layout(compiled(problem), mesh)
    z = rng.uniform(0.5, 1.5, where.size)  # sizes that differ from variable to variable
    z[where.places] = np.sort(z[where.places])
    return program_of(problem, mesh, z)


@pytest.fixture
def at(program):
    """A random point (scaled) with multipliers."""
    rng = np.random.default_rng(11)
    z = rng.uniform(0.5, 1.5, program.layout.size) / program.scale
    return z, rng.normal(), rng.normal(size=program.rows.count)


def written_out(program):
    """f and g as expressions of z, one point and one interval after the other, as the guide to `Program` says."""
    compiled, where, scale = program.compiled, program.layout, program.scale
    z, constants, n = ca.SX.sym("z", where.size), list(program.compiled.constants), program.compiled.point.states
    physical = z * ca.DM(scale)
    defects, ends, bodies, totals = [], [], [], 0
    for k, piece in enumerate(program.mesh.intervals):
        points = range(where.first[k], where.first[k + 1])
        support = ca.horzcat(*(physical[indices.tolist()] for indices in (where.nodes[k], *where.inner[points])))
        for local, point in enumerate(points):
            places = physical[where.places[piece.stretch : piece.stretch + 2].tolist()]
            v = ca.vertcat(support[:, local + 1], physical[where.controls[point].tolist()], places,
                           physical[where.parameters.tolist()])  # fmt: skip
            outputs = compiled.point.value(v, [where.fractions[point], *constants])
            slope = ca.mtimes(support, ca.DM(piece.scheme.differentiate[local]))
            defects.append(slope - piece.width * outputs[:n])
            bodies.append(outputs[n : n + compiled.point.constraints])
            totals += where.measures[point] * outputs[n + compiled.point.constraints :]
        if piece.scheme.family is Family.GAUSS:
            ends.append(ca.mtimes(support, ca.DM(piece.scheme.extrapolate)) - physical[where.nodes[k + 1].tolist()])
    rims = []
    for control, place, _ in compiled.rims:
        owner = int(where.at_place[place]) - (1 if place else 0)
        modes = program.mesh.intervals[owner].scheme.control_modes
        values = physical[where.controls[where.first[owner] : where.first[owner + 1], control].tolist()]
        signs = [1.0 if place else (-1.0) ** k for k in range(len(modes))]
        rims.append(ca.mtimes(ca.DM(signs).T, ca.mtimes(ca.DM(modes), values)))
    integrals = ca.vertcat(*(physical[int(k)] for k in where.integrals))
    outside = compiled.end.value(physical[program.layout.end_gather.tolist()], constants)
    g = ca.vertcat(
        *defects, *ends, *bodies, *rims, integrals - ca.vertcat(*ca.vertsplit(totals)[:-1]), *ca.vertsplit(outside)[:-1]
    ) / ca.DM(program.row_scale)
    return z, (totals[-1] + outside[-1]) / program.value_scale, g


def at_point(symbols, expression, values):
    return np.asarray(ca.densify(ca.Function("written_out", [symbols], [expression])(values)))


def close(found, wanted):
    np.testing.assert_allclose(np.asarray(found), np.asarray(wanted), rtol=1e-9, atol=1e-9)


def moving(program):
    """The variables that are not fixed: what is fixed, the minimiser takes out, and needs no derivatives by it."""
    return np.flatnonzero(program.lower < program.upper)


def test_value_and_gradient(program, at):
    z, f, _ = written_out(program)
    close(program.numbers.value(at[0]), at_point(z, f, at[0])[0, 0])
    wanted = at_point(z, ca.gradient(f, z), at[0]).ravel()
    close(program.numbers.gradient(at[0])[moving(program)], wanted[moving(program)])


def test_constraints_and_jacobian(program, at):
    z, _, g = written_out(program)
    close(program.numbers.constraints(at[0]), at_point(z, g, at[0]).ravel())
    found = program.numbers.jacobian_pattern.filled(program.numbers.jacobian(at[0])).toarray()
    free = moving(program)
    close(found[:, free], at_point(z, ca.jacobian(g, z), at[0])[:, free])


def test_hessian_of_the_lagrangian_is_its_upper_triangle(program, at):
    values, weight_f, weights = at
    z, f, g = written_out(program)
    found = program.numbers.hessian_pattern.filled(program.numbers.hessian(values, weight_f, weights)).toarray()
    wanted = at_point(z, ca.hessian(weight_f * f + ca.dot(ca.DM(weights), g), z)[0], values)
    free = np.ix_(moving(program), moving(program))
    assert np.all(np.tril(found, -1) == 0)
    close(found[free], np.triu(wanted)[free])


def test_numbers_at_one_place_forget_those_at_another(program, at):
    numbers, z = program.numbers, at[0]
    before = numbers.value(z), numbers.constraints(z), numbers.jacobian(z)
    numbers.value(1.01 * z)
    numbers.jacobian(1.01 * z)
    for found, wanted in zip((numbers.value(z), numbers.constraints(z), numbers.jacobian(z)), before, strict=True):
        np.testing.assert_array_equal(found, wanted)


def test_the_hessian_counts_an_end_place_in_the_dynamics_on_the_diagonal():
    """The case above is not vacuous: the end place has curvature of its own."""
    program = program_of(PROBLEMS["end place in the dynamics"](), mixed_mesh())
    place = int(program.layout.places[-1])
    assert place in program.layout.parameters
    pattern = program.numbers.hessian_pattern
    assert place in pattern.rows[pattern.starts[place] : pattern.starts[place + 1]]


def test_indices_of_the_layout_are_a_partition(program):
    where = program.layout
    groups = [np.union1d(where.nodes, where.inner), where.controls.ravel(), np.union1d(where.places, where.parameters),
              where.integrals]  # fmt: skip
    np.testing.assert_array_equal(np.sort(np.concatenate(groups)), np.arange(where.size))


def test_points_at_the_right_end_of_radau_intervals_are_the_next_nodes(program):
    where = program.layout
    for k, piece in enumerate(program.mesh.intervals):
        shared = np.array_equal(where.inner[where.first[k + 1] - 1], where.nodes[k + 1])
        assert shared == (piece.scheme.family is Family.RADAU)


def test_measures_of_the_points_add_up_to_every_stretch(program):
    where = program.layout
    totals = np.bincount(where.stretch, weights=where.measures)
    np.testing.assert_allclose(totals, 1.0, rtol=1e-14)
    assert np.all((where.fractions > 0) & (where.fractions <= 1))


def test_nodes_at_the_places(program):
    where = program.layout
    assert where.at_place[0] == 0
    assert where.at_place[-1] == len(program.mesh.intervals)
    starts = [piece.stretch for piece in program.mesh.intervals]
    assert [starts[node] for node in where.at_place[:-1]] == list(range(program.mesh.stretches))


def test_every_row_has_its_limits(program):
    rows = program.rows
    assert len(program.row_lower) == len(program.row_upper) == len(program.row_scale) == rows.count
    assert np.all(program.row_lower <= program.row_upper)
    assert np.all(program.row_scale > 0)
    np.testing.assert_array_equal(program.row_lower[: rows.pointwise], 0)
    np.testing.assert_array_equal(program.row_upper[: rows.pointwise], 0)


def test_an_exact_polynomial_has_no_defect():
    """x = t^4, u = 4t^3 solves x' = u; degree 4 holds it, on Radau and on Gauss intervals."""
    program = program_of(stated(), uniform(1, 3, 4, Family.GAUSS))
    where = program.layout
    points, breaks = where.fractions, program.mesh.breaks(np.array([0.0, 1.0]))
    z = np.zeros(where.size)
    z[where.places] = [0, 1]
    z[where.nodes[:, 0]], z[where.inner[:, 0]], z[where.controls[:, 0]] = breaks**4, points**4, 4 * points**3
    np.testing.assert_allclose(program.numbers.constraints(z / program.scale), 0, atol=1e-13)
    assert program.numbers.value(z / program.scale) * program.value_scale == pytest.approx(16 / 7, rel=1e-13)


def test_a_maximum_is_the_minimum_of_the_opposite():
    least, greatest = (program_of(stated(functional={"seek": seek, "integrand": "u^2"})) for seek in
                       ("minimum", "maximum"))  # fmt: skip
    z = np.random.default_rng(3).normal(size=least.layout.size)
    f = [program.numbers.value(z / program.scale) for program in (least, greatest)]
    assert f[0] == -f[1]
    assert least.value_scale == -greatest.value_scale > 0


@pytest.mark.parametrize(
    ("members", "unlimited"),
    [
        ({}, True),
        ({"constraints": ["u <= 3"]}, False),
        ({"constraints": ["x^2 + u^2 <= 3"]}, False),
        ({"constraints": ["integral(u^2) <= 3"]}, False),
        ({"constraints": ["integral(u^2) = 3"]}, True),  # an equation is no limit, nor is an end that is given
    ],
)
def test_what_has_equations_only_is_unlimited(members, unlimited):
    assert program_of(stated(endpoints=["x(0) = 0", "x(1) = 1"], **members)).unlimited is unlimited
