"""Families of equally good curves are found by moving along them, and nothing that is determined is called free."""

import pytest

from solvers.answers.flat import flat_directions
from solvers.deadline import in_seconds
from solvers.search.pursuit import pursue
from solvers.solution import Verdict
from solvers.solve import solve
from tests.unit.solvers.problems import LEAST_TIME, shape, stated

CLOSED = {
    "independent": {"name": "s", "from": 0, "to": 1},
    "unknowns": {"x": {}, "y": {}},
    "functional": {"seek": "maximum", "integrand": "(x*y' - y*x')/2"},
    "endpoints": ["x(0) = x(1)", "y(0) = y(1)"],
    "constraints": ["x'^2 + y'^2 = 1"],
    "guess": {"x": "cos(2*pi*s)/6", "y": "sin(2*pi*s)/6"},
}
"""The greatest area in a closed curve of length 1: a circle, anywhere (closed form)."""


def found_in(problem):
    solution = solve(problem)
    assert solution.verdict is not None
    return {one.name: one for one in solution.undetermined}


def test_a_closed_curve_may_be_anywhere():
    found = found_in(shape(**CLOSED))
    assert set(found) == {"x", "y"}
    assert "together with y" in found["x"].sentence
    assert found["x"].pointer == "/unknowns/x"


def test_a_closed_curve_that_is_pinned_at_one_point_may_be_turned_about_it():
    """The length as an integral, no guess: the curve is found in parametric form."""
    pinned = {**CLOSED, "endpoints": [*CLOSED["endpoints"], "x(0) = 0", "y(0) = 0"], "guess": {}}
    length = {"constraints": ["integral(sqrt(x'^2 + y'^2)) = 1"]}
    assert set(found_in(shape(**pinned | length))) == {"x", "y"}


def test_what_only_enters_as_a_sum_is_free_apart():
    problem = stated(
        parameters={"a": {"within": [-10, 10]}, "b": {"within": [-10, 10]}, "c": {"within": [-10, 10]}},
        functional={"integrand": "u^2 + (x - a - b)^2 + (c - 1)^2"},
        endpoints=["x(0) = 0", "x(1) = 1"],
    )
    assert set(found_in(problem)) == {"a", "b"}


def test_a_control_without_effect_is_free():
    problem = stated(
        unknowns={"x": {}, "u": {}, "w": {}}, dynamics=["x' = u + 0*w"], endpoints=["x(0) = 0", "x(1) = 1"]
    )
    assert set(found_in(problem)) == {"w"}


def test_an_amplitude_that_changes_nothing_is_free():
    """y = c sin(pi x) is worth the same for every c (closed form); meshes need not agree about c."""
    problem = shape(
        independent={"name": "x", "from": 0, "to": 1},
        functional={"integrand": "1 + y'^2 - pi^2*y^2"},
        endpoints=["y(0) = 0", "y(1) = 0"],
        guess={"y": "x*(1 - x)"},
    )
    assert set(found_in(problem)) == {"y"}


@pytest.mark.parametrize("power", [4, 6])
def test_a_flat_minimum_is_a_minimum(power):
    """The second variation in a vanishes at a = 1, and yet nothing but 1 is right."""
    problem = stated(
        parameters={"a": {"within": [-10, 10]}},
        guess={"a": 1},
        functional={"integrand": f"u^2 + 100*(a - 1)^{power}"},
        endpoints=["x(0) = 0", "x(1) = 1"],
    )
    pursuit = pursue(problem, None, in_seconds(60))
    assert flat_directions(pursuit.paths[-1], {"x", "u", "a"}, 1e-9) == ()


RIM = {"endpoints": ["x(0) = 0"], "constraints": ["-1 <= u <= 1"], "functional": {"endpoint": "x(1)"}}


@pytest.mark.parametrize("members", [LEAST_TIME, RIM], ids=["switch", "rim"])
def test_controls_on_their_limits_are_determined(members):
    problem = stated(**members)
    pursuit = pursue(problem, None, in_seconds(60), meshes=2)
    names = {unknown.name for unknown in problem.unknowns} | {p.name for p in problem.parameters}
    assert flat_directions(pursuit.paths[-1], names, 1e-9) == ()


def test_where_the_second_variation_is_positive_nothing_is_looked_for():
    solution = solve(stated(endpoints=["x(0) = 0", "x(1) = 1"]))
    assert solution.verdict is Verdict.GLOBAL_MINIMUM
    assert solution.undetermined == ()
