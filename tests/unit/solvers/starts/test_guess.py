"""First guesses: each rule with the case that needs it."""

import numpy as np
import pytest

from solvers.starts.guess import guesses
from solvers.starts.sketch import Bend, Sketch, _slopes
from solvers.transcription.layout import layout
from solvers.transcription.mesh import uniform
from tests.unit.solvers.problems import LEAST_TIME, compiled, shape, stated


class Guessed:
    """The guesses of a problem on a mesh, with the best one's values by quantity."""

    def __init__(self, problem, count=4, degree=4):
        self.compiled = compiled(problem)
        self.mesh = uniform(len(problem.places) - 1, count, degree)
        self.where = layout(self.compiled, self.mesh)
        self.all = list(guesses(self.compiled, self.mesh, self.where))
        self.best = self.all[0]

    @property
    def places(self):
        return self.best.z[self.where.places]

    @property
    def points(self):
        starts, ends = self.places[self.where.stretch], self.places[self.where.stretch + 1]
        return starts + self.where.fractions * (ends - starts)

    def __getitem__(self, quantity):
        lowered, name, order = self.compiled.lowered, quantity.rstrip("'"), quantity.count("'")
        if (name, order) in lowered.states:
            return self.best.z[self.where.inner[:, lowered.states.index((name, order))]]
        return self.best.z[self.where.controls[:, lowered.controls.index((name, order))]]

    @property
    def parameters(self):
        return self.best.z[self.where.parameters]


def test_a_line_through_both_ends():
    found = Guessed(shape(endpoints=["y(0) = 1", "y(3) = 7"]))
    np.testing.assert_allclose(found["y"], 1 + 2 * found.points, rtol=1e-12)
    np.testing.assert_allclose(found["y'"], 2, rtol=1e-12)
    assert found.best.violation == 0
    assert not found.best.bend.size
    assert len(found.all) == 1  # nothing to repair: no bend is tried


def test_one_known_value_stands_for_all():
    np.testing.assert_allclose(Guessed(shape(endpoints=["y(0) = 5"]))["y"], 5)


def test_lines_go_through_way_points():
    found = Guessed(shape(functional={"integrand": "y''^2"}, endpoints=["y(0) = 0", "y(1) = 2", "y(3) = 1"]))
    np.testing.assert_allclose(found["y"], np.interp(found.points, [0, 1, 3], [0, 2, 1]), atol=1e-12)


def test_where_slopes_are_known_too_one_polynomial_goes_through_all():
    """4 x - 43/18 x^2 + 7/18 x^3 is the one cubic through 0, 2, 1 at 0, 1, 3 with the slope 4 at 0."""
    ends = ["y(0) = 0", "y(1) = 2", "y(3) = 1", "y'(0) = 4"]
    found = Guessed(shape(functional={"integrand": "y''^2"}, endpoints=ends))
    x = found.points
    np.testing.assert_allclose(found["y"], 4 * x - 43 / 18 * x**2 + 7 / 18 * x**3, atol=1e-12)
    np.testing.assert_allclose(found["y'"], 4 - 43 / 9 * x + 7 / 6 * x**2, atol=1e-12)


def test_where_many_values_are_known_lines_stay_calm():
    ends = [f"y({x}) = {x % 2}" for x in range(7)] + ["y'(0) = 1"]
    found = Guessed(shape(functional={"integrand": "y''^2"}, endpoints=ends, independent={
        "name": "x", "from": 0, "to": 6}))  # fmt: skip
    assert 0 <= found["y"].min() <= found["y"].max() <= 1


def test_nothing_known_lies_between_the_bounds():
    found = Guessed(stated(unknowns={"x": {"within": [2, 4]}, "u": {"within": [-1, 5]}}, endpoints=["x(0) = x(1)"]))
    np.testing.assert_allclose(found["x"], 3)
    np.testing.assert_allclose(found["u"], 2)


@pytest.mark.parametrize("bounds, inside", [([3, None], 6), ([None, -3], -6), ([0, None], 1), ([None, 5], 0)])
def test_one_sided_bounds_are_kept_with_room(bounds, inside):
    found = Guessed(stated(unknowns={"x": {"within": bounds}, "u": {}}, endpoints=["x(0) = x(1)"]))
    np.testing.assert_allclose(found["x"], inside)


def test_bounds_cut_the_lines():
    found = Guessed(shape(endpoints=["y(0) = 0", "y(3) = 3"], constraints=["y' <= 1/2"]))
    assert not found.best.bend.size
    np.testing.assert_allclose(found["y'"], 0.5)


def test_a_value_held_away_from_zero_is_known():
    found = Guessed(shape(endpoints=["y(0) = 0", "y(3) >= 6"]))
    np.testing.assert_allclose(found["y"], 2 * found.points, atol=1e-12)


def test_a_hose_longer_than_the_distance_hangs():
    """On the straight line the length is 3 m and cannot give: its slope by every bend is zero."""
    found = Guessed(shape(functional={"integrand": "y*sqrt(1 + y'^2)"}, endpoints=["y(0) = 2", "y(3) = 2"],
                          constraints=["integral(sqrt(1 + y'^2)) = 4.2"]))  # fmt: skip
    straight = next(guess for guess in found.all if not guess.bend.size)
    assert found.best.bend.size
    assert found.best.violation < straight.violation
    length = found.best.z[found.where.integrals[0]]
    assert abs(length - 4.2) < abs(3 - 4.2)


@pytest.mark.parametrize("seek, sign", [("minimum", -1), ("maximum", 1)])
def test_of_two_bends_alike_the_better_one_comes_first(seek, sign):
    """A chain of 4.2 over 3 may as well rise as sag."""
    functional = {"seek": seek, "integrand": "y*sqrt(1 + y'^2)"}
    found = Guessed(shape(functional=functional, endpoints=["y(0) = 9", "y(3) = 9"],
                          constraints=["integral(sqrt(1 + y'^2)) = 4.2"]))  # fmt: skip
    assert found.best.bend.size * sign > 0
    assert found.best.z[found.where.integrals[0]] == pytest.approx(4.2, rel=0.1)


def test_an_integral_that_shall_vanish_is_measured_by_what_it_could_be():
    """Two half waves shorten the way and end at the height where they began: the rounding of zero does not count."""
    found = Guessed(shape(functional={"integrand": "y'^2"}, endpoints=["y(0) = 0", "y(3) = 0"],
                          constraints=["integral(cos(y)) = 2.4", "integral(sin(y)) = 0"]))  # fmt: skip
    assert found.best.bend.waves == 2
    assert found.best.violation < 0.2


def test_a_bend_keeps_what_is_known_at_the_ends():
    functions = compiled(shape(functional={"integrand": "y''^2"}, endpoints=["y(0) = 2", "y'(0) = 0", "y(3) = 2"]))
    mesh = uniform(1, 4, 4)
    where = layout(functions, mesh)
    z = Sketch(functions, mesh, where, np.array([0.0, 3.0]), np.zeros(0)).bent(Bend(0.3))
    assert z[where.nodes[[0, -1], 0]] == pytest.approx([2, 2])
    assert z[where.nodes[:, 0]].max() == pytest.approx(2 * 1.3)


def test_an_undefined_integrand_is_left_by_a_bend():
    """log(y) has no value anywhere on the line y = 0; with a bend it has, but at the end itself."""
    found = Guessed(shape(functional={"integrand": "log(y)*(1 + y'^2)"}, endpoints=["y(0) = 0", "y(3) = 0"]))
    straight = next(guess for guess in found.all if not guess.bend.size)
    assert straight.violation > 1
    assert found.best.bend.size
    assert np.all(found["y"][:-1] > 0)


def test_a_broken_constraint_is_left_by_a_bend_to_the_right_side():
    """A disc lies on the straight way."""
    found = Guessed(shape(endpoints=["y(0) = 0", "y(3) = 0"], constraints=["(x - 1.5)^2 + (y + 1/4)^2 >= 0.5"]))
    assert found.best.bend.size
    assert found["y"].max() > 0.4


def test_user_guesses_are_kept_as_they_are():
    formula = Guessed(shape(endpoints=["y(0) = 0", "y(3) = 9"], constants={"c": 1}, guess={"y": "c*x^2"}), degree=8)
    np.testing.assert_allclose(formula["y"], formula.points**2, rtol=1e-12)
    points = Guessed(shape(endpoints=["y(0) = 0", "y(3) = 9"], guess={"y": [[0, 0], [1, 5], [3, 9]]}))
    np.testing.assert_allclose(points["y"], np.interp(points.points, [0, 1, 3], [0, 5, 9]), atol=1e-12)
    control = Guessed(stated(guess={"u": "3*t"}))
    np.testing.assert_allclose(control["u"], 3 * control.points, rtol=1e-12)


@pytest.mark.parametrize(
    "within, value",
    [
        ([2, 4], 3),
        ([0.1, 1000], 10),  # far apart and positive: the geometric mean
        ([-1, 1000], 499.5),
        ([7, None], 14),
        ([None, -3], -6),
        ([None, None], 1),
    ],
)
def test_parameters_lie_inside_their_bounds(within, value):
    found = Guessed(stated(parameters={"k": {"within": within}}, functional={"integrand": "u^2 + k^2*x^2"}))
    assert found.parameters == pytest.approx([value])


def test_a_parameters_own_guess_counts():
    members = {"parameters": {"k": {"within": [0, 9]}}, "functional": {"integrand": "u^2 + k^2*x^2"}}
    assert Guessed(stated(**members, guess={"k": 8.5})).parameters == pytest.approx([8.5])


def test_an_open_parameter_gets_the_size_at_which_the_dynamics_fit():
    """x goes from 0 to 1e6 with x' = k u and |u| <= 1: k is a million rather than one."""
    found = Guessed(
        stated(
            parameters={"k": {"within": [0, None]}},
            dynamics=["x' = k*u"],
            unknowns={"x": {}, "u": {"within": [0, 2]}},
            endpoints=["x(0) = 0", "x(1) = 1e6"],
            functional={"endpoint": "k"},
        )
    )
    assert 1e5 <= found.parameters[0] <= 1e7


def test_free_places_are_spread_between_their_neighbours():
    found = Guessed(
        stated(
            independent={"name": "t", "from": 0, "to": 6},
            parameters={"a": {"within": [0, 6]}, "b": {"within": [0, 6]}},
            endpoints=["x(0) = 0", "x(a) = 1", "x(b) = -1", "x(6) = 0", "a <= b"],
        )
    )
    assert found.places == pytest.approx([0, 2, 4, 6])
    assert found.parameters == pytest.approx([2, 4])


def test_an_end_never_lies_before_the_start():
    members = {
        "independent": {"name": "t", "from": 5, "to": "T"},
        "parameters": {"T": {"within": [None, 8]}},
        "endpoints": ["x(5) = 1", "x'(5) = 1", "x(T) = 0", "x'(T) = 0"],
    }
    found = Guessed(stated(**LEAST_TIME | members))
    assert found.places[0] == 5
    assert found.places[1] > 5


def test_integrals_have_the_values_of_the_curve():
    found = Guessed(shape(endpoints=["y(0) = 1", "y(3) = 7"], constraints=["integral(y) <= 99"]))
    assert found.best.z[found.where.integrals] == pytest.approx([12])


def test_everything_is_finite_even_where_the_problem_is_not():
    found = Guessed(shape(functional={"integrand": "1/(y - y)*y'^2"}, endpoints=["y(0) = 0", "y(3) = 1"]))
    assert all(np.all(np.isfinite(guess.z)) for guess in found.all)


def test_the_slopes_of_given_points_are_those_of_their_lines():
    """At a corner the line before it speaks, as Radau points stand at right ends."""
    slopes = _slopes(((0.0, 0.0), (1.0, 2.0), (3.0, 1.0)), np.array([-1.0, 0.0, 0.5, 1.0, 1.5, 3.0, 4.0]))
    np.testing.assert_allclose(slopes, [0.0, 2.0, 2.0, 2.0, -0.5, -0.5, 0.0])
    np.testing.assert_allclose(_slopes(((0.0, 5.0),), np.array([0.0, 1.0])), 0.0)
