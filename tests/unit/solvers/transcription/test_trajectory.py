"""Trajectories: states and costates against closed forms, and what is carried from mesh to mesh.

Sources: Kwakernaak, Sivan (1972), Linear Optimal Control Systems, section 3.3 (Riccati equation); Bryson, Ho (1975),
Applied Optimal Control, section 3.11 (double integrator with a limit on the state).  (From memory.)
"""

from dataclasses import replace

import numpy as np
import pytest

from solvers.minimise.ipopt import Minimum, Outcome, Start, minimise
from solvers.transcription.collocation import Family
from solvers.transcription.layout import layout
from solvers.transcription.mesh import Mesh, interval, uniform
from solvers.transcription.trajectory import at_points, carry, costate_curve, curve, distance, related, trajectory
from tests.unit.solvers.problems import (
    LEAST_TIME,
    compiled,
    mixed_mesh,
    program_of,
    regulator,
    solved_on,
    start_of,
    stated,
)

ROOT = np.sqrt(2)


def riccati(t):
    """State and costate of the regulator: with s = 1 - t, P = sinh(rs)/(r cosh(rs) - sinh(rs)), costate P x."""
    left = ROOT * np.cosh(ROOT) - np.sinh(ROOT)
    s = ROOT * (1 - t)
    return (ROOT * np.cosh(s) - np.sinh(s)) / left, np.sinh(s) / left


@pytest.mark.parametrize("family", (Family.RADAU, Family.GAUSS))
def test_the_regulator_follows_riccati(family):
    path = solved_on(regulator(), uniform(1, 4, 7, family))
    state, costate = riccati(path.points)
    np.testing.assert_allclose(path.states[:, 0], state, rtol=1e-10)
    np.testing.assert_allclose(path.costates[:, 0], costate, atol=2e-8)
    np.testing.assert_allclose(path.controls[:, 0], -costate, atol=1e-8)
    assert path.value == pytest.approx(riccati(0.0)[1] / 2, rel=1e-12)


@pytest.mark.parametrize("family, order", ((Family.RADAU, 5), (Family.GAUSS, 6)))
def test_the_value_converges_with_the_order_of_the_nodes(family, order):
    """Value of the regulator with 3 points per interval: 2K - 1 or 2K."""
    exact = riccati(0.0)[1] / 2
    errors = [abs(solved_on(regulator(), uniform(1, count, 3, family)).value - exact) for count in (2, 4)]
    assert np.log2(errors[0] / errors[1]) > order - 0.5


def test_costates_are_in_the_users_sense_of_better():
    """The costate is the change of the value per change of the state, for a minimum and for a maximum."""
    least = solved_on(regulator(), uniform(1, 4, 6))
    greatest = solved_on(regulator(functional={"seek": "maximum", "integrand": "-(x^2 + u^2)/2"}), uniform(1, 4, 6))
    assert least.value == pytest.approx(-greatest.value, rel=1e-10)
    start = np.array([0.0])
    assert costate_curve(least).evaluate("x", start)[0] == pytest.approx(riccati(0.0)[1], rel=1e-6)
    assert costate_curve(greatest).evaluate("x", start)[0] == pytest.approx(-riccati(0.0)[1], rel=1e-6)


def test_a_limit_on_the_state_pushes_through_the_costate():
    """x'' = a, x <= l = 1/9: value 4/(9l), a = -(2/3l)(1 - t/3l) up to 3l, costates 2/9l^2 and -a, zero in between."""
    problem = stated(
        unknowns={"x": {"within": [None, 1 / 9]}, "a": {}},
        dynamics=["x'' = a"],
        functional={"integrand": "a^2/2"},
        endpoints=["x(0) = 0", "x'(0) = 1", "x(1) = 0", "x'(1) = -1"],
    )
    path = solved_on(problem, uniform(1, 3, 4))
    assert path.value == pytest.approx(4, rel=1e-7)
    early, amid = path.points < 0.33, (path.points > 0.34) & (path.points < 0.66)
    np.testing.assert_allclose(path.controls[early, 0], -6 * (1 - 3 * path.points[early]), atol=1e-4)
    np.testing.assert_allclose(path.costates[early, 0], 18, rtol=1e-4)
    np.testing.assert_allclose(path.costates[early, 1], 6 * (1 - 3 * path.points[early]), atol=1e-4)
    np.testing.assert_allclose(path.controls[amid, 0], 0, atol=1e-4)
    np.testing.assert_allclose(path.costates[amid, 1], 0, atol=1e-4)


@pytest.mark.parametrize("seek, sign", (("minimum", 1.0), ("maximum", -1.0)))
@pytest.mark.parametrize("mesh", (uniform(1, 3, 3), mixed_mesh()), ids=("uniform", "mixed"))
def test_multipliers_of_pointwise_conditions_are_densities(seek, sign, mesh):
    """Least integral of (u - 2)^2/2 with u^2 <= 1 over 0 to 4: u - 2 + 2 m u = 0 at u = 1 gives m = 1/2 all along."""
    problem = stated(
        independent={"name": "t", "from": 0, "to": 4},
        functional={"seek": seek, "integrand": f"{sign}*(u - 2)^2/2"},
        constraints=["u^2 <= 1"],
        endpoints=["x(0) = 0"],
    )
    path = solved_on(problem, mesh)
    np.testing.assert_allclose(path.multipliers, 0.5, rtol=1e-5)
    shown = costate_curve(path).evaluate("u^2 <= 1", np.array([0.5, 3.5]))
    np.testing.assert_allclose(shown, sign * 0.5, rtol=1e-5)


def test_what_does_not_bind_has_no_multiplier_to_show():
    path = solved_on(stated(constraints=["u^2 <= 9", "x*u >= 0"]))
    assert set(costate_curve(path).functions) == {"x"}


def test_the_curve_goes_through_the_points_and_its_derivatives_fit():
    problem = stated(unknowns={"x": {}, "u": {}}, dynamics=["x'' = u"], endpoints=["x(0) = 0", "x'(0) = 1"],
                     functional={"integrand": "u^2 + x^2"})  # fmt: skip
    path = solved_on(problem, mixed_mesh())
    shown = curve(path)
    assert set(shown.functions) == {"x", "x'", "x''", "u"}
    np.testing.assert_allclose(shown.evaluate("x", path.points), path.states[:, 0], atol=1e-13)
    np.testing.assert_allclose(shown.evaluate("u", path.points), path.controls[:, 0], atol=1e-12)
    np.testing.assert_allclose(shown.evaluate("x''", path.points), path.controls[:, 0], atol=1e-8)  # collocated
    np.testing.assert_allclose(shown.evaluate("x'", path.breaks), path.nodes[:, 1], atol=1e-12)


def arbitrary(problem, mesh, seed=5):
    """Any continuous curve with any multipliers: nothing of what is carried may depend on their being right."""
    program = program_of(problem, mesh)
    where = program.layout
    rng = np.random.default_rng(seed)
    z = rng.uniform(0.5, 1.5, where.size) * program.scale
    z[where.places] = start_of(problem, mesh)[where.places]
    for k, piece in enumerate(mesh.intervals):
        if piece.scheme.family is Family.GAUSS:
            inside = where.inner[where.first[k] : where.first[k + 1]]
            z[where.nodes[k + 1]] = piece.scheme.extrapolate @ z[np.vstack([where.nodes[k], inside])]
    minimum = Minimum(Outcome.SOLVED, z / program.scale, 1.0, rng.normal(size=where.size),
                      rng.normal(size=program.rows.count), 0, 0.0, 0.0, "")  # fmt: skip
    return trajectory(program, minimum), minimum


CARRIED = {
    "plain": (lambda: stated(), mixed_mesh()),
    "tenths": (lambda: stated(), uniform(1, 10, 3)),
    "elevenths": (lambda: stated(), uniform(1, 11, 4)),
    "way points": (lambda: stated(endpoints=["x(0) = 0", "x(0.3) = 1", "x(0.7) = 0"]), mixed_mesh(3)),
    "thirds of three": (lambda: stated(endpoints=["x(0) = 0", "x(0.3) = 1", "x(0.7) = 0"]), uniform(3, 7, 3)),
    "free end": (lambda: stated(**LEAST_TIME), uniform(1, 6, 4)),
    "conditions": (
        lambda: stated(constraints=["x*u >= 0", "u + x = 1", "integral(u^2) <= 1"], endpoints=["x(0) + x(1) = 1"]),
        mixed_mesh(),
    ),
}


@pytest.fixture(params=CARRIED)
def carried_case(request):
    build, mesh = CARRIED[request.param]
    return build(), mesh


def test_carrying_onto_the_same_mesh_changes_nothing(carried_case):
    problem, mesh = carried_case
    path, minimum = arbitrary(problem, mesh)
    program, rows = path.program, path.program.rows
    found = carry(path, mesh, program.layout)
    back = found.onto(program)
    np.testing.assert_allclose(back.z, minimum.z, rtol=1e-9, atol=1e-9)
    own = np.concatenate([np.arange(rows.ends), np.arange(rows.pointwise, rows.count)])
    np.testing.assert_allclose(back.multipliers[own], minimum.multipliers[own], rtol=1e-9, atol=1e-9)
    where = program.layout
    wanted = np.where(program.lower == program.upper, 0.0, minimum.bound_multipliers)  # fixed values have none to carry
    for index in (where.inner.ravel(), where.controls.ravel(), where.parameters):
        np.testing.assert_allclose(back.bound_multipliers[index], wanted[index], rtol=1e-9)


def test_the_same_problem_is_related_to_itself_by_the_identity(carried_case):
    problem, mesh = carried_case
    path, _ = arbitrary(problem, mesh)
    functions = path.program.compiled
    again = related(path, functions, path.program.mesh, path.program.layout)
    np.testing.assert_allclose(again, path.z, rtol=1e-9, atol=1e-9)


def test_nothing_is_lost_on_a_finer_mesh(carried_case):
    problem, mesh = carried_case
    path, _ = arbitrary(problem, mesh)
    halves = Mesh(
        tuple(
            interval(i.stretch, start, start + i.width / 2, i.scheme.family, i.scheme.degree)
            for i in mesh.intervals
            for start in (i.start, i.start + i.width / 2)
        )
    )
    where = layout(path.program.compiled, halves)
    z = carry(path, halves, where).z
    fine = program_of(problem, halves, z)
    none = Minimum(Outcome.SOLVED, z / fine.scale, 0.0, np.zeros(where.size), np.zeros(fine.rows.count), 0, 0, 0, "")
    before, after = curve(path), curve(trajectory(fine, none))
    places = path.breaks[0] + np.linspace(0.003, 0.997, 101) * np.ptp(path.breaks)
    for name in ("x", "u"):
        np.testing.assert_allclose(after.evaluate(name, places), before.evaluate(name, places), rtol=1e-8, atol=1e-9)


def test_a_warm_start_on_the_same_mesh_is_done_at_once():
    path = solved_on(regulator(), uniform(1, 4, 4))
    start = carry(path, path.program.mesh, path.program.layout).onto(path.program)
    assert minimise(path.program, start).iterations <= 3
    assert minimise(path.program, Start(start.z * 0 + 1)).outcome is Outcome.SOLVED


def test_related_fills_new_parameters_from_their_guesses_and_moves_places():
    path = solved_on(stated(functional={"integrand": "u^2 + x^2"}), uniform(1, 5, 4))
    other = stated(
        parameters={"m": {"within": [0.2, 0.8]}},
        guess={"m": 0.4},
        endpoints=["x(0) = 0", "x(m) >= -9", "x(1) = 1"],
        functional={"integrand": "u^2 + x^2"},
    )
    functions = compiled(other)
    mesh = uniform(2, 3, 4)
    where = layout(functions, mesh)
    z = related(path, functions, mesh, where)
    assert z[where.places] == pytest.approx([0, 0.4, 1])
    breaks = mesh.breaks(z[where.places])
    np.testing.assert_allclose(z[where.nodes[:, 0]], curve(path).evaluate("x", breaks), atol=1e-12)


def test_distance_is_relative_to_the_size_of_each_state():
    path, minimum = arbitrary(stated(), mixed_mesh())
    assert distance(path, path) < 1e-12
    twice = trajectory(path.program, replace(minimum, z=np.where(np.isin(np.arange(len(minimum.z)),
                       path.program.layout.places), 1.0, 2.0) * minimum.z))  # fmt: skip
    assert distance(twice, path) == pytest.approx(0.5, rel=1e-12)


def test_points_of_tiny_intervals_are_found_in_them():
    """A constant for each of intervals that shrink by 1e5 towards zero."""
    breaks = np.array([0.0, 1e-25, 1e-20, 1e-15, 1e-10, 1.0])
    values = np.arange(5.0)
    middles = (breaks[1:] + breaks[:-1]) / 2
    np.testing.assert_array_equal(at_points(breaks, values[:, None, None], middles)[:, 0], values)
    ends = at_points(breaks, values[:, None, None], breaks[1:] * (1 + 1e-16))
    np.testing.assert_array_equal(ends[:, 0], values)
