"""Bang-bang and singular problems with their switches as unknowns, against closed forms."""

import numpy as np
import pytest

from solvers.deadline import in_seconds
from solvers.search.pursuit import pursue
from solvers.search.record import End
from solvers.search.sharpen import sharpen
from solvers.search.structure import present_switches
from solvers.solution import Verdict
from solvers.solve import solve
from tests.unit.solvers.problems import LEAST_TIME, regulator, stated

CATALYST = {
    "unknowns": {"x1": {}, "x2": {}, "u": {"within": [0, 1]}},
    "dynamics": ["x1' = u*(10*x2 - x1)", "x2' = u*(x1 - 10*x2) - (1 - u)*x2"],
    "functional": {"endpoint": "x1(1) + x2(1) - 1"},
    "endpoints": ["x1(0) = 1", "x2(0) = 0"],
}
SPEED_LIMIT = LEAST_TIME | {
    "endpoints": ["x(0) = 0", "x'(0) = 0", "x(T) = 1", "x'(T) = 0"],
    "constraints": ["-1/2 <= x' <= 1/2"],
}


CLOSED_FORMS = pytest.mark.parametrize(
    "members, value, places, precision",
    [
        # Pontryagin et al. (1962), The Mathematical Theory of Optimal Processes, section 5 (from memory).
        (LEAST_TIME, 1 + np.sqrt(6), [1 + np.sqrt(3 / 2)], 1e-9),
        # Gunn, Thomas (1965); Dolan, More, Munson (2004), ANL/MCS-TM-273, problem 14; more digits as in the catalogue.
        (CATALYST, -0.0480556858608775, [0.1362990345945556, 0.7252301075916548], 1e-8),
        # Closed form: ramp, cruise, ramp.
        (SPEED_LIMIT, 2.5, [0.5, 2.0], 1e-9),
    ],
    ids=("bang-bang", "singular arc", "limit on a state"),
)


def sharpened(problem):
    deadline = in_seconds(40)
    base = pursue(problem, None, deadline, meshes=3)
    return sharpen(base, None, deadline)


@CLOSED_FORMS
def test_switches_and_value_are_those_of_the_closed_form(members, value, places, precision):
    found = sharpened(stated(**members))
    assert found.end is End.CONVERGED
    assert found.paths[-1].value == pytest.approx(value, rel=1e-9, abs=1e-10)
    assert [switch.place for switch in present_switches(found.paths[-1])] == pytest.approx(places, abs=precision)
    assert abs(found.paths[-1].value - value) <= found.value_error


def test_a_tank_that_stays_empty_leaves_the_minimiser_room():
    """A rocket that coasts with nothing left to burn: its least mass has no inner side on that arc.

    Dolan, More, Munson (2004), ANL/MCS-TM-273, problem 10; more digits by integrating the arcs, as in the catalogue.
    """
    rocket = stated(
        independent={"name": "t", "from": 0, "to": "T"},
        parameters={"T": {"within": [0.01, 1]}},
        unknowns={"h": {}, "v": {}, "m": {"within": [0.6, 1]}, "F": {"within": [0, 3.5]}},
        dynamics=["h' = v", "v' = (F - 310*v^2*exp(-500*(h - 1)))/m - 1/h^2", "m' = -2*F"],
        functional={"seek": "maximum", "endpoint": "h(T)"},
        endpoints=["h(0) = 1", "v(0) = 0", "m(0) = 1", "m(T) = 0.6"],
    )
    found = sharpened(rocket)
    assert found.done
    assert found.paths[-1].value == pytest.approx(1.01283691831751, abs=1e-11)
    assert [switch.place for switch in present_switches(found.paths[-1])] == pytest.approx(
        [0.0235096840414980, 0.0726707434414047], abs=1e-6
    )


def test_a_singular_control_that_comes_near_its_limit_is_not_held_there():
    """After the second switch the control runs singular to the end, and nearly vanishes on the way.

    Sager (2005), Numerical methods for mixed-integer optimal control problems: 1.34408 (from memory); more digits by
    collocation in three phases, as in the catalogue.
    """
    fishing = stated(
        independent={"name": "t", "from": 0, "to": 12},
        unknowns={"x1": {}, "x2": {}, "w": {"within": [0, 1]}},
        dynamics=["x1' = x1 - x1*x2 - 0.4*x1*w", "x2' = -x2 + x1*x2 - 0.2*x2*w"],
        functional={"integrand": "(x1 - 1)^2 + (x2 - 1)^2"},
        endpoints=["x1(0) = 0.5", "x2(0) = 0.7"],
    )
    found = sharpened(fishing)
    assert found.done
    assert found.paths[-1].value == pytest.approx(1.3440812, abs=1e-7)
    held = found.paths[-1].program.compiled.lowered.problem.held
    assert [(h.stretch, h.side) for h in held] == [(0, -1), (1, 1)]
    assert [switch.place for switch in present_switches(found.paths[-1])] == pytest.approx([2.4367, 3.942], abs=1e-3)


def test_the_singular_arc_is_smooth():
    """u = 0.2271420827084978 all along (catalogue B25)."""
    path = sharpened(stated(**CATALYST)).paths[-1]
    inside = (path.points > 0.15) & (path.points < 0.7)
    np.testing.assert_allclose(path.controls[inside, 0], 0.2271420827084978, atol=1e-5)


@pytest.mark.parametrize(
    "problem",
    [
        regulator(),  # no limits
        regulator(unknowns={"x": {}, "u": {"within": [-50, 50]}}),  # limits far away
    ],
    ids=("no limits", "far limits"),
)
def test_nothing_to_sharpen(problem):
    assert sharpened(problem) is None


def test_places_stay_in_order_while_the_end_is_free():
    """Chattering: switches crowd at the end, which must not run away in front of them (Fuller, 1963; from memory)."""
    members = LEAST_TIME | {
        "functional": {"integrand": "x^2"},
        "endpoints": ["x(0) = 1", "x'(0) = 0", "x(T) = 0", "x'(T) = 0"],
        "solve": {"points": 60},
    }
    problem = stated(**members)
    deadline = in_seconds(10)
    found = sharpen(pursue(problem, None, deadline, meshes=3), None, deadline)
    if found is not None:
        assert np.all(np.diff(found.paths[-1].places) > -1e-9)
        assert found.paths[-1].value == pytest.approx(0.7640, rel=1e-3)  # the value that plain meshes tend to


@pytest.mark.parametrize("size", [1.0, 1e-3, 1e3])
def test_a_film_meets_its_floor_where_the_catenary_touches_it(size):
    """x = a/2 cosh(2 c t/a) touches the floor a/2 from x(0) = 2 a: at t = acosh(4)/4 for c = 2 a (closed form).

    The place changes the value only to third order.
    """
    film = stated(
        independent={"name": "t", "from": 0, "to": 3},
        constants={"c": 2 * size},
        dynamics=None,
        unknowns={"x": {"within": [size / 2, None]}},
        functional={"seek": "minimum", "integrand": "x*sqrt(1 + (x'/c)^2)"},
        endpoints=[f"x(0) = {2 * size}", f"x(3) = {1.5 * size}"],
    )
    solution = solve(film)
    assert solution.verdict is Verdict.LOCAL_MINIMUM
    places = [switch.place for switch in solution.switches]
    assert places == pytest.approx([np.arccosh(4) / 4, 3 - np.arccosh(3) / 4], abs=3e-4)
