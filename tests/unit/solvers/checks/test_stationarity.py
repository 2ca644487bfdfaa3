"""Stationarity: feasible curves that are not extremal, and wrong multipliers, are found out."""

from dataclasses import replace

import numpy as np
import pytest

from solvers.checks import stationarity
from solvers.checks.sampling import Sampler
from solvers.deadline import FOREVER
from solvers.forms.gauge import in_parametric_form
from solvers.search.pursuit import pursue
from solvers.solution import Status
from tests.unit.solvers.checks.conftest import problem_of

# closed form: x = 3 t^2 - 2 t^3, u = 6 - 12 t, costates p1 = -12, p2 = 12 t - 6
REST_TO_REST = {
    "independent": {"name": "t", "from": 0, "to": 1},
    "unknowns": {"x": {}, "u": {}},
    "dynamics": ["x'' = u"],
    "functional": {"seek": "minimum", "integrand": "u^2/2"},
    "endpoints": ["x(0) = 0", "x'(0) = 0", "x(1) = 1", "x'(1) = 0"],
}
CHAIN = {
    "independent": {"name": "x", "from": 0, "to": 1},
    "unknowns": {"y": {}},
    "functional": {"seek": "minimum", "integrand": "y*sqrt(1 + y'^2)"},
    "endpoints": ["y(0) = 0", "y(1) = 0"],
    "constraints": ["integral(sqrt(1 + y'^2)) = 1.5"],
}
CEILING = {  # Bryson, Ho (1975), section 3.11 (from memory): x rests on a bound below 1/6
    "independent": {"name": "t", "from": 0, "to": 1},
    "unknowns": {"x": {"within": [None, 0.15]}, "u": {}},
    "dynamics": ["x'' = u"],
    "functional": {"seek": "minimum", "integrand": "u^2/2"},
    "endpoints": ["x(0) = 0", "x'(0) = 1", "x(1) = 0", "x'(1) = -1"],
}
BOUNDED = {  # the control rests on its bound at both ends
    **REST_TO_REST,
    "unknowns": {"x": {}, "u": {"within": [-4.5, 4.5]}},
}
MIXED = {  # a limit on state and control together, active over the middle
    "independent": {"name": "t", "from": 0, "to": 1},
    "unknowns": {"x": {}, "u": {}},
    "dynamics": ["x' = u"],
    "functional": {"seek": "minimum", "integrand": "u^2 + x^2"},
    "endpoints": ["x(0) = 0", "x(1) = 1"],
    "constraints": ["u - x/2 >= 0.75"],
}
# the cycloid, Johann Bernoulli 1696: infinite slope and infinite costate at the start
QUICKEST = {
    "independent": {"name": "x", "from": 0, "to": 1},
    "constants": {"g": 9.81},
    "unknowns": {"y": {"within": [0, None]}},
    "functional": {"seek": "minimum", "integrand": "sqrt((1 + y'^2)/(2*g*y))"},
    "endpoints": ["y(0) = 0", "y(1) = 1"],
}
ALL = {
    "rest": REST_TO_REST,
    "chain": CHAIN,
    "ceiling": CEILING,
    "bounded": BOUNDED,
    "mixed": MIXED,
    "quickest": QUICKEST,
}


@pytest.mark.parametrize("document", ALL.values(), ids=ALL)
def test_a_solved_curve_passes(solved, examine, document):
    check = examine(stationarity.check, solved(document))
    assert check.status is Status.PASSED, check


def test_the_costates_are_those_of_the_closed_form(solved):
    path = solved(REST_TO_REST)
    found = Sampler(path).continued.values
    places = Sampler(path).halves.places
    assert found == pytest.approx(np.column_stack([-12 + 0 * places, 12 * places - 6]), abs=1e-6)


def test_a_feasible_curve_that_is_not_the_best_fails(solved, examine, drawn):
    """Rest to rest along the polynomial of degree five: it meets all conditions and needs more energy."""
    path = solved(REST_TO_REST)
    smooth = drawn(path, [lambda t: t**3 * (10 - 15 * t + 6 * t**2), lambda t: 30 * t**2 * (1 - t) ** 2],
                   [lambda t: 60 * t * (1 - t) * (1 - 2 * t)])  # fmt: skip
    assert examine(stationarity.check, smooth).status is Status.FAILED


@pytest.mark.parametrize("share", [0.1, 0.01])
def test_a_slightly_worse_curve_fails_too(solved, examine, drawn, share):
    path = solved(REST_TO_REST)

    def mixed(best, other):
        return lambda t: (1 - share) * best(t) + share * other(t)

    worse = drawn(
        path,
        [mixed(lambda t: 3 * t**2 - 2 * t**3, lambda t: t**3 * (10 - 15 * t + 6 * t**2)),
         mixed(lambda t: 6 * t * (1 - t), lambda t: 30 * t**2 * (1 - t) ** 2)],
        [mixed(lambda t: 6 - 12 * t, lambda t: 60 * t * (1 - t) * (1 - 2 * t))],
    )  # fmt: skip
    check = examine(stationarity.check, worse)
    assert (check.status, check.subject) == (Status.FAILED, "u")


@pytest.mark.parametrize("name", ["rest", "chain", "mixed"])
def test_wrong_costates_fail(solved, examine, name):
    path = solved(ALL[name])
    assert examine(stationarity.check, replace(path, costates=1.01 * path.costates)).status is Status.FAILED


def test_a_wrong_multiplier_of_an_integral_fails(solved, examine):
    path = solved(CHAIN)
    rows = path.row_multipliers.copy()
    rows[path.program.rows.integrals :] *= 1.05
    assert examine(stationarity.check, replace(path, row_multipliers=rows)).status is Status.FAILED


def test_a_costate_that_jumps_without_a_cause_fails(solved, examine):
    path = solved(CHAIN)
    costates = path.costates.copy()
    costates[path.points > 0.5] *= 1.02
    assert examine(stationarity.check, replace(path, costates=costates)).status is Status.FAILED


def test_an_infinite_costate_at_a_fixed_end_is_treated_fairly(examine):
    """And yet a costate that is wrong elsewhere, or a curve that is not the cycloid, fails there too."""
    gauged = in_parametric_form(problem_of(QUICKEST), lambda: {"x": 1.0, "y": 1.0}, True)
    path = pursue(gauged.problem, None, FOREVER).paths[-1]
    assert np.sqrt(path.value) == pytest.approx(0.5828954631547426, rel=1e-6)
    assert examine(stationarity.check, path).status is Status.PASSED
    later = np.where(path.points[:, None] > 0.5, 1.02, 1.0)
    assert examine(stationarity.check, replace(path, costates=path.costates * later)).status is Status.FAILED
    height = [name for name, _ in path.program.compiled.lowered.states].index("y")
    states, nodes, controls = path.states.copy(), path.nodes.copy(), path.controls.copy()
    states[:, height] += 0.02 * np.sin(np.pi * path.points) ** 2
    nodes[:, height] += 0.02 * np.sin(np.pi * path.breaks) ** 2
    controls[:, height] += 0.02 * np.pi * np.sin(2 * np.pi * path.points)
    other = replace(path, states=states, nodes=nodes, controls=controls)
    assert examine(stationarity.check, other).status is Status.FAILED


def test_a_control_off_its_bound_where_the_bound_is_what_holds_it_fails(solved, examine, refreshed):
    path = solved(BOUNDED)
    eased = refreshed(replace(path, controls=np.clip(path.controls, -4.3, 4.3)))
    assert examine(stationarity.check, eased).status is Status.FAILED


def test_a_multiplier_off_its_limit_fails(solved, examine):
    """A push against a ceiling that the curve does not touch."""
    path = solved(CEILING)
    pushes = path.bound_multipliers.copy()
    early = path.program.layout.inner[path.points < 0.2, 0]
    pushes[early] += 0.2 * pushes[path.program.layout.inner].max()
    check = examine(stationarity.check, replace(path, bound_multipliers=pushes))
    assert check.status is Status.FAILED


def test_a_multiplier_that_pulls_fails(solved, examine):
    path = solved(MIXED)
    rows = path.row_multipliers.copy()
    pointwise = slice(path.program.rows.pointwise, path.program.rows.integrals)
    rows[pointwise] *= -1
    wrong = replace(path, row_multipliers=rows, multipliers=-path.multipliers)
    assert examine(stationarity.check, wrong).status is Status.FAILED


def test_the_figure_does_not_depend_on_the_units(solved, examine):
    """Lengths in millimetres, times in hours: the same problem, the same figure but for rounding."""
    scaled = {
        "independent": {"name": "t", "from": 0, "to": 1 / 3600},
        "unknowns": {"x": {}, "u": {}},
        "dynamics": ["x'' = u"],
        "functional": {"seek": "minimum", "integrand": "u^2/2 + 1e12*x^2"},
        "endpoints": ["x(0) = 0", "x'(0) = 0", "x(1/3600) = 1000", "x'(1/3600) = 0"],
    }
    path = solved({**scaled, "endpoints": [e.replace("1/3600", str(1 / 3600)) for e in scaled["endpoints"]]})
    assert examine(stationarity.check, path).status is Status.PASSED
    assert examine(stationarity.check, replace(path, costates=1.01 * path.costates)).status is Status.FAILED


def test_what_a_way_point_puts_on_a_state_is_no_multiplier_of_its_limits(solved, examine):
    """Least integral of x^2 + x'^2 by way of 1/2 in the middle: two arcs of sinh, the value is coth(1)/2."""
    path = solved({
        "independent": {"name": "t", "from": 0, "to": 2},
        "unknowns": {"x": {"within": [-5, 0.65]}},
        "functional": {"seek": "minimum", "integrand": "x'^2 + x^2"},
        "endpoints": ["x(0) = 0", "x(1) = 0.5", "x(2) = 0"],
    })  # fmt: skip
    assert path.value == pytest.approx(0.5 / np.tanh(1), rel=1e-6)
    assert examine(stationarity.check, path).status is Status.PASSED
