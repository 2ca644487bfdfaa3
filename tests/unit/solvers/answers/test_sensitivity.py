"""Slopes of the optimal value with constants: closed forms of the literature, and the problem solved again nearby."""

from dataclasses import replace

import numpy as np
import pytest

from service.assemble import assemble
from service.samples import text
from service.spec import read
from solvers.solve import solve
from tests.unit.solvers.problems import shape, stated


def slopes_of(problem):
    return {slope.constant: slope.slope for slope in solve(problem).slopes}


def changed(problem, name, value):
    constants = tuple(replace(c, value=value) if c.name == name else c for c in problem.constants)
    return replace(problem, constants=constants)


def quotient(problem, name, step=1e-3):
    """The difference quotient of the values of two neighbours, each solved from its own first guess."""
    value = next(c.value for c in problem.constants if c.name == name)
    above, below = (solve(changed(problem, name, value * (1 + share))).value for share in (step, -step))
    return (above - below) / (2 * step * value)


def test_the_time_of_quickest_descent_falls_with_the_root_of_gravity():
    # Johann Bernoulli (1696): the cycloid; its time is sqrt(R/g) times the angle, so dT/dg = -T/(2g).
    problem = stated(
        independent={"name": "x", "from": 0, "to": 2},
        unknowns={"y": {"within": [0, None]}},
        dynamics=None,
        constants={"g": 9.80665},
        functional={"integrand": "sqrt((1 + y'^2)/(2*g*y))"},
        endpoints=["y(0) = 0", "y(2) = 1"],
    )
    solution = solve(problem)
    assert [s.slope for s in solution.slopes] == pytest.approx([-solution.value / (2 * 9.80665)], rel=1e-6)


def test_the_least_time_grows_with_the_root_of_the_distance():
    # Pontryagin et al. (1962), section 5 (from memory): T = v/a + 2 sqrt(v^2/(2 a^2) + D/a), |u| <= a binds everywhere.
    problem = stated(
        independent={"name": "t", "from": 0, "to": "T"},
        parameters={"T": {"within": [0.1, 100]}},
        constants={"D": 2, "a": 3, "v": 1},
        unknowns={"x": {}, "u": {}},
        dynamics=["x'' = u"],
        functional={"endpoint": "T"},
        endpoints=["x(0) = D", "x'(0) = v", "x(T) = 0", "x'(T) = 0"],
        constraints=["-a <= u <= a"],
    )
    distance, limit, speed = 2, 3, 1
    root = np.sqrt(speed**2 / (2 * limit**2) + distance / limit)
    expected = {
        "D": 1 / (limit * root),
        "v": 1 / limit + speed / (limit**2 * root),
        "a": -speed / limit**2 - (speed**2 / limit**3 + distance / limit**2) / root,
    }
    assert slopes_of(problem) == pytest.approx(expected, rel=1e-6)


def test_the_energy_of_a_hanging_chain_grows_with_its_length_by_its_multiplier():
    # Gelfand, Fomin (1963), section 12: y = cosh(x) - cosh(1) hangs from (-1, 0) and (1, 0) with the length 2 sinh(1);
    # the multiplier of the length is the height of the directrix, -cosh(1), times the weight.
    problem = shape(
        independent={"name": "x", "from": -1, "to": 1},
        constants={"w": 2, "l": 2 * np.sinh(1)},
        functional={"integrand": "w*y*sqrt(1 + y'^2)"},
        endpoints=["y(-1) = 0", "y(1) = 0"],
        constraints=["integral(sqrt(1 + y'^2)) = l"],
    )
    solution = solve(problem)
    assert {s.constant: s.slope for s in solution.slopes} == pytest.approx(
        {"w": solution.value / 2, "l": -2 * np.cosh(1)}, rel=1e-6
    )


def test_the_area_under_a_cord_grows_with_its_length_by_the_radius():
    # Dido's problem (Bliss 1925, chapter IV; from memory): the arc of a circle of radius 1 over the chord 1; a maximum.
    problem = shape(
        independent={"name": "x", "from": 0, "to": 1},
        constants={"l": np.pi / 3},
        functional={"seek": "maximum", "integrand": "y"},
        endpoints=["y(0) = 0", "y(1) = 0"],
        constraints=["integral(sqrt(1 + y'^2)) <= l"],
    )
    assert slopes_of(problem) == pytest.approx({"l": 1.0}, rel=1e-5)


def test_a_constant_may_be_a_place_an_end_value_and_a_weight():
    # x' = u without a limit: u is constant (Euler); J = k D^2/(k L + 1) for x(0) = 0 and the cost k (x(L) - D)^2.
    problem = stated(
        independent={"name": "t", "from": 0, "to": "L"},
        constants={"L": 2, "k": 3, "D": 5, "unused": 1},
        functional={"integrand": "u^2", "endpoint": "k*(x(L) - D)^2"},
        endpoints=["x(0) = 0"],
    )
    k, length, goal = 3, 2, 5
    whole = k * length + 1
    assert slopes_of(problem) == pytest.approx(
        {"L": -((k * goal / whole) ** 2), "k": (goal / whole) ** 2, "D": 2 * k * goal / whole, "unused": 0}, rel=1e-8
    )


def test_a_constant_without_unit_that_is_an_end_is_in_the_unit_of_the_way():
    # The shortest way from (0, 0) to (L, 1 m), L = 2000 mm: dJ/dL = L/J; L is a bare number, so its slope is m per mm.
    problem = shape(
        independent={"name": "x", "unit": "mm", "from": 0, "to": "L"},
        constants={"L": 2000},
        unknowns={"y": {"unit": "mm"}},
        endpoints=["y(0) = 0", "y(L) = 1000"],
    )
    assert slopes_of(problem) == pytest.approx({"L": 2 / np.sqrt(5) / 1e3}, rel=1e-8)


def test_a_limit_that_binds_on_an_arc_counts_with_its_whole_multiplier():
    # Bryson, Denham, Dreyfus (1963): J = 4/(9 h) for h <= 1/6; here h = 0.11.
    problem = stated(
        constants={"h": 0.11},
        unknowns={"x": {}, "u": {}},
        dynamics=["x'' = u"],
        functional={"integrand": "u^2/2"},
        endpoints=["x(0) = 0", "x'(0) = 1", "x(1) = 0", "x'(1) = -1"],
        constraints=["x <= h"],
    )
    assert slopes_of(problem) == pytest.approx({"h": -4 / (9 * 0.11**2)}, rel=1e-5)


@pytest.mark.parametrize("constant", ["g", "l", "D"])
def test_the_slopes_of_a_moved_load_are_those_of_its_neighbours(constant):
    problem = assemble(read(text("crucible").encode()))
    assert slopes_of(problem)[constant] == pytest.approx(quotient(problem, constant), rel=1e-4)


def test_tolerances_add_up_as_squares():
    problem = stated(
        constants={"a": "3 +/- 0.1", "b": "1 +/- 0.2", "c": 2},
        functional={"integrand": "c*u^2", "endpoint": "a*x(0) + b"},
        endpoints=["x(0) = 1", "x(1) = 2"],
    )
    solution = solve(problem)
    assert [s.contribution for s in solution.slopes] == pytest.approx([0.1, 0.2, None])
    assert solution.value_band == pytest.approx(np.sqrt(0.05))


def test_without_an_optimum_there_are_no_slopes():
    problem = stated(constants={"D": 1}, endpoints=["x(0) = 0", "x(1) = D"], constraints=["u <= 0.5"])
    solution = solve(problem)
    assert solution.verdict.value == "infeasible"
    assert solution.slopes == ()
    assert solution.value_band is None


def test_a_value_without_a_slope_is_said_and_not_made_up():
    # The value is sqrt(b) at b = 0 from an end condition: the slope is infinite there.
    problem = stated(constants={"b": "0 +/- 1"}, functional={"integrand": "u^2", "endpoint": "sqrt(b)"},
                     endpoints=["x(0) = 0", "x(1) = 1"])  # fmt: skip
    solution = solve(problem)
    assert not np.isfinite(solution.slopes[0].slope)
    assert not np.isfinite(solution.value_band)
