"""From a problem to its solution: every way to end, the same each time."""

from dataclasses import asdict

import numpy as np
import pytest

from solvers.solution import Verdict
from solvers.solve import solve
from tests.unit.solvers.problems import LEAST_TIME, regulator, shape, stated

CHATTERING = LEAST_TIME | {
    "functional": {"integrand": "x^2"},
    "endpoints": ["x(0) = 1", "x'(0) = 0", "x(T) = 0", "x'(T) = 0"],
}
"""Infinitely many switches before the end (Fuller, 1963; from memory): no mesh is ever enough."""


def test_a_smooth_problem():
    solution = solve(regulator())
    root = np.sqrt(2)
    assert solution.verdict is Verdict.GLOBAL_MINIMUM
    exact = np.sinh(root) / (root * np.cosh(root) - np.sinh(root)) / 2  # Riccati
    assert abs(solution.value - exact) <= solution.value_error < 1e-7
    assert solution.curve_error <= 1e-6
    assert solution.diagnosis is None
    assert solution.iterations >= sum(mesh.iterations for mesh in solution.meshes)
    assert set(solution.curve.functions) == {"x", "x'", "u"}
    np.testing.assert_allclose(solution.curve.evaluate("u", [0.0]), -2 * exact, rtol=1e-6)
    np.testing.assert_allclose(solution.costates.evaluate("x", [0.0]), 2 * exact, rtol=1e-6)


def test_switches_are_told():
    solution = solve(stated(**LEAST_TIME))
    assert solution.verdict is Verdict.LOCAL_MINIMUM
    assert solution.value == pytest.approx(1 + np.sqrt(6), rel=1e-9)
    assert solution.parameters == {"T": pytest.approx(1 + np.sqrt(6), rel=1e-9)}  # no switch among them
    assert np.abs(solution.curve.breaks - (1 + np.sqrt(3 / 2))).min() < 1e-9
    assert any("t = 2.2247448" in note for note in solution.notes)


def test_least_time_needs_no_bound_on_the_time():
    """With x' = u the way could as well be run backwards: T = -1, -2, ..."""
    members = {
        "independent": {"name": "t", "from": 0, "to": "T"},
        "parameters": {"T": {}},
        "unknowns": {"x": {}, "u": {"within": [-1, 1]}},
        "functional": {"endpoint": "T"},
        "endpoints": ["x(0) = 0", "x(T) = 1"],
    }
    solution = solve(stated(**members))
    assert solution.value == pytest.approx(1, rel=1e-8)
    assert all(price.pointer for price in solution.prices)  # the order of places is no condition of the user


def test_linear_growth_is_solved_in_parametric_form_and_told_in_x():
    """The soap film y = 3 cosh((x - 3/2)/3) between two rings; costate -F_y' = -3 sinh((x - 3/2)/3)."""
    ring = {"h": 3 * float(np.cosh(0.5))}
    film = {"functional": {"integrand": "y*sqrt(1 + y'^2)"}, "endpoints": ["y(0) = h", "y(3) = h"]}
    solution = solve(shape(**film, constants=ring))
    x = np.linspace(0, 3, 50)
    s = (x - 1.5) / 3
    assert solution.value == pytest.approx(4.5 * (1 + np.sinh(1.0)), rel=1e-8)
    np.testing.assert_allclose(solution.curve.evaluate("y", x), 3 * np.cosh(s), rtol=1e-6)
    np.testing.assert_allclose(solution.curve.evaluate("y'", x), np.sinh(s), atol=1e-5)
    np.testing.assert_allclose(solution.costates.evaluate("y", x), -3 * np.sinh(s), atol=1e-4)
    assert set(solution.curve.functions) == {"y", "y'"}
    assert "parametric form" in solution.notes[0]


@pytest.mark.parametrize("seek", ["minimum", "maximum"])
def test_the_user_reads_of_his_functional_whatever_form_was_solved(seek):
    """The soap film between rings of height 3 cosh(1/2): 9/2 (1 + sinh 1).  Its square is what was minimised."""
    sign = 1 if seek == "minimum" else -1
    film = {
        "functional": {"seek": seek, "integrand": f"{sign}*y*sqrt(1 + y'^2)"},
        "endpoints": ["y(0) = h", "y(3) = h"],
    }
    signs = []
    solution = solve(shape(**film, constants={"h": 3 * float(np.cosh(0.5))}),
                     lambda progress: signs.append(progress.value) or False)  # fmt: skip
    told = {check.name: check.sentence for check in solution.checks}
    value = sign * 4.5 * (1 + float(np.sinh(1.0)))
    assert solution.value == pytest.approx(value)
    assert f"is {value:.5g}" in told["conditions"]
    assert [mesh.value for mesh in solution.meshes] == pytest.approx([value] * len(solution.meshes), rel=1e-2)
    assert signs[-1] == pytest.approx(value)
    assert told["Legendre"].count("convex") == (sign > 0)


def test_no_error_is_stated_that_is_smaller_than_rounding():
    """A straight line is exact on any mesh, as far as numbers go: half their spacing is what is lost at the least."""
    solution = solve(shape(functional={"integrand": "y'^2"}, endpoints=["y(0) = 0", "y(3) = 1"]))
    eps = float(np.finfo(float).eps)
    assert solution.curve_error >= eps
    assert solution.value_error >= eps * solution.value


def test_unknowns_of_our_own_have_no_multipliers_to_show():
    """abs(y') is written with an unknown that bounds it; its multipliers, up to one, are nothing of the user's."""
    total = {"functional": {"integrand": "abs(y') + (y - x)^2"}, "endpoints": ["y(0) = 1", "y(3) = 0"]}
    solution = solve(shape(**total))
    assert set(solution.costates.functions) == {"y"}


def test_a_curve_without_length_is_said_to_have_none():
    """Nothing has to be done, and everything costs: it is best to end at once."""
    free = {
        "independent": {"name": "x", "from": 0, "to": "T"},
        "parameters": {"T": {"within": [0, 10]}},
        "functional": {"integrand": "1 + y'^2"},
    }
    point = solve(shape(**free, endpoints=["y(0) = 0", "y(T) = 0"]))
    assert point.parameters["T"] == pytest.approx(0, abs=1e-9)
    assert any("has no length" in note for note in point.notes)
    line = solve(shape(**free, endpoints=["y(0) = 0", "y(T) = 1"]))  # value T + 1/T
    assert line.parameters["T"] == pytest.approx(1, rel=1e-5)
    assert not any("has no length" in note for note in line.notes)


def test_of_two_soap_films_the_stable_one_is_found():
    """Between rings of height cosh(3/2) the film y = cosh(x - 3/2) is an extremal too, but not a minimum."""
    ring = {"h": float(np.cosh(1.5))}
    film = {"functional": {"integrand": "y*sqrt(1 + y'^2)"}, "endpoints": ["y(0) = h", "y(3) = h"]}
    solution = solve(shape(**film, constants=ring))
    assert solution.verdict is Verdict.LOCAL_MINIMUM
    assert solution.value < 1.5 + np.sinh(3.0) / 2 - 0.04


def test_rings_too_far_apart_let_the_film_go():
    """No film beyond the distance 1.32549 of rings of radius one; two discs, 2 pi, the infimum (Goldschmidt, 1831)."""
    rings = {
        "independent": {"name": "x", "from": -0.7, "to": 0.7},
        "unknowns": {"y": {"within": [0, None]}},
        "functional": {"integrand": "2*pi*y*sqrt(1 + y'^2)"},
        "endpoints": ["y(-0.7) = 1", "y(0.7) = 1"],
    }
    solution = solve(shape(**rings))
    assert solution.verdict is Verdict.NO_OPTIMUM
    assert solution.value == pytest.approx(2 * np.pi, rel=1e-7)
    assert solution.diagnosis.reason == "degenerates"
    assert [(f.label, round(f.place, 3)) for f in solution.diagnosis.findings] == [("y", -0.7), ("y", 0.7)]


def test_a_curve_that_tends_to_a_jump_has_no_optimum():
    """x^2 y'^2 (Weierstrass, 1870; from memory): the value tends to 0 as y tends to a step at 0."""
    step = {
        "independent": {"name": "x", "from": -1, "to": 1},
        "functional": {"integrand": "x^2*y'^2"},
        "endpoints": ["y(-1) = -1", "y(1) = 1"],
    }
    solution = solve(shape(**step))
    assert solution.verdict is Verdict.NO_OPTIMUM
    (finding,) = solution.diagnosis.findings
    assert finding.label == "y"
    assert abs(finding.place) < 1e-3


def test_a_curve_over_the_pole_turns_there_at_no_cost():
    """On the unit sphere, between places of the latitude 0.3 whose longitudes are told to differ by 4 > pi: over the
    pole it is pi - 0.6, whatever the turn there.  As a function of the longitude the latitude jumps at both ends."""
    members = {
        "independent": {"name": "ph", "from": 0, "to": 4},
        "unknowns": {"th": {}},
        "functional": {"integrand": "sqrt(th'^2 + cos(th)^2)"},
        "endpoints": ["th(0) = 0.3", "th(4) = 0.3"],
    }
    solution = solve(shape(**members))
    assert solution.verdict in (Verdict.NO_OPTIMUM, Verdict.NOT_VERIFIED)
    assert solution.diagnosis.reason == "degenerates"
    assert solution.value == pytest.approx(np.pi - 0.6, rel=1e-5)
    assert [finding.label for finding in solution.diagnosis.findings] == ["th", "th"]
    assert [finding.place for finding in solution.diagnosis.findings] == pytest.approx([0, 4], abs=0.2)


def test_a_value_that_no_curve_can_better_is_the_least_of_all():
    """y = max(0, x) has slopes 0 and 1 (Bolza, 1904; from memory); where y is zero the minimiser finds no rest."""
    broken = {
        "independent": {"name": "x", "from": -1, "to": 1},
        "functional": {"integrand": "y^2*(1 - y')^2"},
        "endpoints": ["y(-1) = 0", "y(1) = 1"],
    }
    solution = solve(shape(**broken))
    assert solution.verdict is Verdict.GLOBAL_MINIMUM
    assert 0 <= solution.value <= solution.value_error < 1e-6
    assert solution.diagnosis is None


@pytest.mark.parametrize(
    "members, verdict, reason",
    [
        ({"unknowns": {"x": {}, "u": {"within": [-1, 1]}}, "endpoints": ["x(0) = 0", "x(1) = 3"]},
         Verdict.INFEASIBLE, "infeasible"),
        ({"functional": {"integrand": "-u^2"}}, Verdict.NO_OPTIMUM, "unbounded"),
        ({"functional": {"integrand": "u^2 + log(-1 - x^2)"}}, None, "undefined"),
    ],
    ids=("infeasible", "unbounded", "undefined"),
)  # fmt: skip
def test_where_there_is_no_optimum(members, verdict, reason):
    solution = solve(stated(**members))
    assert solution.verdict is verdict
    assert solution.value is None
    assert solution.diagnosis.reason == reason
    if reason == "infeasible":
        amounts = {finding.label: finding.amount for finding in solution.diagnosis.findings}
        assert amounts == pytest.approx(dict.fromkeys(("x(0) = 0", "x(1) = 3", "u within its bounds"), 2), rel=1e-5)
        assert solution.curve is not None  # the curve that violates least
    if reason == "undefined":
        (finding,) = solution.diagnosis.findings
        assert finding.label == "log(-1 - x^2)"
        assert finding.pointer == "/functional/integrand"


def test_out_of_time_keeps_the_best_curve():
    solution = solve(stated(**CHATTERING, solve={"time_limit": 0.3, "tolerance": 1e-10}))
    assert solution.diagnosis.reason == "out of time"
    assert solution.curve is not None
    assert solution.value == pytest.approx(0.764, rel=0.05)
    assert solution.times["solve"] < 0.3 + 2.0  # the machine may be busy


def test_a_stop_keeps_the_best_curve():
    heard = []

    def watch(sign):
        heard.append(sign)
        return sum(sign.kind == "mesh" for sign in heard) == 2

    solution = solve(stated(**CHATTERING), watch)
    assert solution.diagnosis.reason == "stopped"
    assert solution.curve is not None
    assert len(solution.meshes) == 2
    assert sum(sign.kind == "mesh" for sign in heard) == 2


def same(first, second):
    """Whether two parts of solutions are equal, arrays included; times and seconds apart."""
    if isinstance(first, dict):
        keys = set(first) - {"times", "seconds"}
        return set(first) == set(second) and all(same(first[key], second[key]) for key in keys)
    if isinstance(first, list | tuple):
        return len(first) == len(second) and all(same(one, other) for one, other in zip(first, second, strict=True))
    if isinstance(first, np.ndarray):
        return np.array_equal(first, second, equal_nan=True)
    return first == second


@pytest.mark.parametrize(
    "problem",
    [
        stated(**LEAST_TIME),
        shape(functional={"integrand": "y*sqrt(1 + y'^2)"}, endpoints=["y(0) = 2", "y(3) = 2"],
              constraints=["integral(sqrt(1 + y'^2)) = 4.2"]),
    ],
    ids=("switches", "parametric form"),
)  # fmt: skip
def test_two_runs_are_identical(problem):
    assert same(asdict(solve(problem)), asdict(solve(problem)))
