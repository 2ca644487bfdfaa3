"""From switch to switch: what controls do, and where states and constraints lie on a limit, by closed forms."""

import math

import pytest

from solvers.solution import Course
from solvers.solve import solve
from tests.unit.solvers.forms.test_cut import legs
from tests.unit.solvers.problems import stated
from tests.unit.solvers.test_solve import CHATTERING

LOWER, UPPER, SINGULAR, INSIDE, CHATTERS = Course

HARVEST = {
    "independent": {"name": "t", "unit": "h", "from": 0, "to": 10},
    "constants": {"r": "1 1/h"},
    "unknowns": {"x": {}, "u": {"within": [0, 1], "unit": "1/h"}},
    "dynamics": ["x' = r*x*(1 - x) - u"],
    "functional": {"seek": "maximum", "integrand": "u"},
    "endpoints": ["x(0) = 0.1", "x(10) = 0.5"],
}
"""No catch until the logistic growth has reached 1/2, at t = ln 9; then it is held there with u = 1/4."""

TRAPEZOID = {
    "independent": {"name": "t", "from": 0, "to": "T"},
    "parameters": {"T": {"within": [0.1, 10]}},
    "unknowns": {"x": {}, "u": {"within": [-1, 1]}},
    "dynamics": ["x'' = u"],
    "functional": {"endpoint": "T"},
    "endpoints": ["x(0) = 0", "x'(0) = 0", "x(T) = 1", "x'(T) = 0"],
    "constraints": ["-0.5 <= x' <= 0.5"],
}
"""Least time with a limit of speed: it is reached at t = 1/2 and left at t = 2; T = 5/2."""

LEAST_FUEL = {
    "independent": {"name": "t", "from": 0, "to": 3},
    "unknowns": {"x": {}, "u": {"within": [-1, 1]}},
    "dynamics": ["x'' = u"],
    "functional": {"integrand": "abs(u)"},
    "endpoints": ["x(0) = 0", "x'(0) = 0", "x(3) = 1", "x'(3) = 0"],
}
"""Burn, coast, burn, each burn for a with a (3 - a) = 1.  On the coast the kink of |u| holds u at zero."""


def _told(solution, of):
    """The stretches of one quantity."""
    return [(s.course, s.start, s.end) for s in solution.stretches if s.of == of]


def _like(*expected):
    return [(course, pytest.approx(start, abs=1e-5), pytest.approx(end, abs=1e-5)) for course, start, end in expected]


def test_a_singular_arc_is_said_in_the_users_unit():
    solution = solve(stated(**HARVEST))
    hour = 3600.0
    reached = math.log(9) * hour
    assert _told(solution, "u") == [
        (LOWER, 0, pytest.approx(reached, rel=1e-7)),
        (SINGULAR, pytest.approx(reached, rel=1e-7), pytest.approx(10 * hour)),
    ]
    assert "u runs singular from t = 2.1972 to 10 h." in solution.notes


def test_a_control_that_a_state_on_its_limit_determines_is_not_singular():
    solution = solve(stated(**TRAPEZOID))
    assert _told(solution, "u") == _like((UPPER, 0, 0.5), (INSIDE, 0.5, 2), (LOWER, 2, 2.5))
    assert _told(solution, "x'") == _like((UPPER, 0.5, 2))
    assert "x' is at its upper limit from t = 0.5 to 2." in solution.notes


def test_a_control_that_a_kink_holds_is_not_singular():
    solution = solve(stated(**LEAST_FUEL))
    burn = (3 - math.sqrt(5)) / 2
    assert _told(solution, "u") == _like((UPPER, 0, burn), (INSIDE, burn, 3 - burn), (LOWER, 3 - burn, 3))
    assert {s.of for s in solution.stretches} == {"u"}  # no auxiliary unknown, no condition of ours


def test_chattering_is_not_called_singular_before_the_switches_crowd():
    solution = solve(stated(**CHATTERING))
    courses = [course for course, _, _ in _told(solution, "u")]
    assert courses[:2] == [LOWER, UPPER] and CHATTERS in courses
    after = courses[courses.index(CHATTERS) + 1 :]
    assert after in ([], [SINGULAR])


def test_on_arcs_each_has_its_own():
    solution = solve(legs("-1 <= u <= 1", "-2 <= u <= 1"))
    told = [(s.of, s.arc, s.course) for s in solution.stretches]
    assert told == [("u", arc, course) for arc in ("first leg", "second leg") for course in (UPPER, LOWER)]
    ends = [s.end for s in solution.stretches]
    assert ends[1] == pytest.approx(solution.stretches[2].start)


def test_a_control_that_is_singular_all_along_is_said_to_be():
    """The stock begins and ends where it grows fastest, at 1/2: it stays there, with u = 1/4 all along."""
    solution = solve(stated(**{**HARVEST, "endpoints": ["x(0) = 0.5", "x(10) = 0.5"]}))
    assert solution.value == pytest.approx(2.5, rel=1e-7)
    assert _told(solution, "u") == [(SINGULAR, 0, 36_000)]
    assert "u runs singular from t = 0 to 10 h." in solution.notes


def test_a_control_that_is_on_its_limit_all_along_is_said_to_be():
    """Too little time to let the stock grow before the catch: with the end free everything is taken."""
    hasty = {**HARVEST, "independent": {"name": "t", "unit": "h", "from": 0, "to": 0.5}, "endpoints": ["x(0) = 1"]}
    assert _told(solve(stated(**hasty)), "u") == [(UPPER, 0, 1800)]


def test_without_switches_there_is_nothing_to_say():
    smooth = {**LEAST_FUEL, "functional": {"integrand": "u^2"}, "unknowns": {"x": {}, "u": {}}}
    assert solve(stated(**smooth)).stretches == ()


def test_a_constraint_that_binds_is_named_and_its_control_is_not_singular():
    """x' = u with u <= x and u <= 2: growth as e^t up to x = 2, at t = ln 4, then the control's own limit."""
    problem = stated(
        independent={"name": "t", "from": 0, "to": 3},
        unknowns={"x": {}, "u": {"within": [0, 2]}},
        dynamics=["x' = u"],
        constraints=["u <= x"],
        functional={"seek": "maximum", "endpoint": "x(3)"},
        endpoints=["x(0) = 0.5"],
    )
    solution = solve(problem)
    full = math.log(4)
    assert [course for course, _, _ in _told(solution, "u")] == [INSIDE, UPPER]
    ((course, start, end),) = _told(solution, "u <= x")
    assert (course, start, end) == (UPPER, 0, pytest.approx(full, abs=1e-2))
