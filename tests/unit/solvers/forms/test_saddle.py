"""Symmetrical guesses lead to saddles, and from there the search goes on to what is sought."""

import numpy as np
import pytest

from solvers.deadline import FOREVER
from solvers.forms.choice import Found
from solvers.forms.saddle import off_saddle, on_saddle
from solvers.search.pursuit import pursue
from solvers.solution import Check, Solution, Status, Verdict
from solvers.solve import solve
from tests.unit.solvers.problems import shape, swing

GOOD = (Verdict.LOCAL_MINIMUM, Verdict.GLOBAL_MINIMUM)
LEFT = "it was left along a falling direction"


def between(end, integrand, seek="minimum", **members):
    """An unknown y over 0 to `end`, by default zero at both ends."""
    given = {"endpoints": ["y(0) = 0", f"y({end}) = 0"]} | members
    return shape(independent={"name": "x", "from": 0, "to": end},
                 functional={"seek": seek, "integrand": integrand}, **given)  # fmt: skip


@pytest.mark.parametrize("problem, value", [
    # Two half walls between the wells, each of half of 2 sqrt(2) (1 - y^2) over -1 to 1 (Modica, Mortola, 1977, from
    # memory); that the ends are not infinitely far apart changes no more than exp(-2 sqrt(8) 5).
    (between(10, "y'^2/2 + (y^2 - 1)^2"), 4 * np.sqrt(2) / 3),
    (between(1, "y'^2 + (y^2 - 1)^2", endpoints=[]), 0.0),  # y = 1 and y = -1
    # Constant curves in the lower of two wells, at the zeros of y^2 + 0.3 y - 1.
    (between(1, "y'^2/2 + y^4/4 + y^3/10 - y^2/2", endpoints=[]),
     np.polyval([1 / 4, 1 / 10, -1 / 2, 0, 0], (-0.3 - np.sqrt(4.09)) / 2)),
    (between(1, "y'^2/2 + 15*cos(y)"), swing(15, 2)),  # beyond Euler's load pi^2
    (between(1, "y'^2/2 + 15e-8*cos(1e4*y)"), 1e-8 * swing(15, 2)),  # the same, 10000 times smaller
    (between(1, "y'^2/2 + 60*cos(y)", constraints=["integral(sin(y)) = 0"]), swing(60, 4)),  # beyond 4 pi^2
], ids=("wells", "free ends", "unlike wells", "strut", "small strut", "clamped strut"))  # fmt: skip
def test_a_saddle_is_left_for_a_minimum(problem, value):
    found = solve(problem)
    assert found.verdict in GOOD
    assert abs(found.value - value) <= found.value_error < 1e-7 * max(abs(value), 1.0)
    assert sum(LEFT in note for note in found.notes) == 1


def test_a_loop_around_a_torus_slips_inside():
    """Closed form: of all curves once around, the inner equator of radius 2 - 1 is the shortest; the outer one is a
    geodesic too."""
    problem = shape(
        independent={"name": "s", "from": 0, "to": 1},
        unknowns={"u": {}, "v": {}},
        functional={"integrand": "sqrt((2 + cos(v))^2*u'^2 + v'^2)"},
        endpoints=["u(0) = 0", "u(1) = 2*pi", "v(0) = v(1)"],
    )
    found = solve(problem)
    assert found.verdict is Verdict.LOCAL_MINIMUM
    assert abs(found.value - 2 * np.pi) <= found.value_error < 1e-6
    assert any(LEFT in note and "18.8495559" in note for note in found.notes)  # 6 pi


def test_where_several_starts_lead_to_saddles_only_these_are_left():
    """A bent strut beside a curve u that stays zero: the first two starts vary u only."""
    problem = between(1, "u'^2/2 + y'^2/2 + 15*cos(y)", unknowns={"u": {}, "y": {}}, solve={"starts": 2},
                      endpoints=["u(0) = 0", "u(1) = 0", "y(0) = 0", "y(1) = 0"])  # fmt: skip
    found = solve(problem)
    assert found.verdict is Verdict.LOCAL_MINIMUM
    assert abs(found.value - swing(15, 2)) <= found.value_error < 1e-6
    assert [extremal.solution.verdict for extremal in found.extremals] == [found.verdict, Verdict.NOT_A_MINIMUM]


def test_a_saddle_is_left_for_a_maximum():
    found = solve(between(1, "-y'^2/2 - 15*cos(y)", seek="maximum"))
    assert found.verdict is Verdict.LOCAL_MAXIMUM
    assert abs(found.value + swing(15, 2)) <= found.value_error < 1e-6
    assert any("is no maximum" in note for note in found.notes)


def test_where_it_falls_without_end_there_is_no_optimum():
    """Jacobi (1837), from memory: beyond the length pi the action a^2 (pi^2/L - L)/2 of a sine has no least value."""
    found = solve(between(4, "y'^2 - y^2"))
    assert found.verdict is Verdict.NO_OPTIMUM
    assert found.diagnosis.reason == "unbounded"


def test_what_is_stationary_is_not_left():
    found = solve(between(1, "y'^2/2 + 15*cos(y)", seek="stationary"))
    assert found.verdict is Verdict.STATIONARY
    assert found.value == pytest.approx(15, rel=1e-9)


@pytest.mark.parametrize("bends, left", [(Status.PASSED, True), (Status.NOT_APPLICABLE, True), (Status.FAILED, False)])
def test_where_faster_wiggles_do_better_no_curve_is_looked_for(bends, left):
    checks = Check("conjugate points", Status.FAILED, ""), Check("Legendre", bends, "")
    assert on_saddle(Solution(Verdict.NOT_A_MINIMUM, value=1.0, checks=checks)) is left


def test_a_minimum_is_not_left():
    problem = between(1, "y'^2/2 + 5*cos(y)")
    pursuit = pursue(problem, None, FOREVER)
    assert off_saddle(problem, Found(pursuit, None), None, FOREVER) is None
