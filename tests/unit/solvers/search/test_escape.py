"""Curves that run away are told from those that only lie far out."""

import pytest

from solvers.deadline import in_seconds
from solvers.evidence import PROVED, with_evidence
from solvers.forms.choice import Found
from solvers.search.escape import escapes, may_escape
from solvers.search.pursuit import pursue
from solvers.search.record import End
from solvers.solution import Verdict
from solvers.solve import solve
from tests.unit.solvers.problems import shape, stated

FREE_TIME = {
    "independent": {"name": "t", "from": 0, "to": "T"},
    "parameters": {"T": {"within": [0.1, None]}},
    "unknowns": {"x": {}},
    "dynamics": [],
    "endpoints": ["x(0) = 0", "x(T) = 1"],
}


def test_a_motion_that_is_the_cheaper_the_longer_it_lasts_has_no_best_time():
    """The least integral of x'^2 in the time T is 1/T."""
    found = solve(stated(**FREE_TIME, functional={"integrand": "x'^2"}))
    assert found.verdict is Verdict.NO_OPTIMUM
    assert [(finding.label, finding.note) for finding in found.diagnosis.findings] == [("T", "grows without end")]


def test_a_value_that_falls_for_ever_has_no_least():
    found = solve(shape(functional={"endpoint": "exp(-y(3))"}, endpoints=["y(0) = 0"], constraints=["y'^2 >= 0"]))
    assert found.verdict is Verdict.NO_OPTIMUM


@pytest.mark.parametrize("slowness", [1.0, 1e-3, 1e-7])
def test_a_time_far_out_is_a_time(slowness):
    """x'^2 + w^2 over T is least at x' = w: T = 1/w, the value is 2 w."""
    found = solve(stated(**FREE_TIME, functional={"integrand": f"x'^2 + {slowness**2!r}"}))
    assert found.verdict in (Verdict.LOCAL_MINIMUM, Verdict.GLOBAL_MINIMUM)
    assert found.parameters["T"] == pytest.approx(1 / slowness, rel=1e-3)
    assert abs(found.value - 2 * slowness) <= found.value_error


def test_what_is_held_by_a_bound_stays():
    far = FREE_TIME | {"parameters": {"T": {"within": [0.1, 1e9]}}}
    pursuit = pursue(stated(**far, functional={"integrand": "x'^2"}), None, in_seconds(30))
    assert pursuit.solved
    assert escapes(pursuit, in_seconds(30)) == ()


def test_what_the_second_variation_holds_is_not_looked_for_farther_out(monkeypatch):
    """A time of 1000 where one of 1 was guessed: the curve of the value in T is all that is asked for."""
    problem = stated(**FREE_TIME, functional={"integrand": "x'^2 + 1e-6"})
    pursuit = pursue(problem, None, in_seconds(60))
    monkeypatch.setattr("solvers.search.escape.minimise", None)
    assert escapes(pursuit, in_seconds(60)) == ()


def test_out_of_time_a_bound_that_is_only_approached_proves_nothing():
    """exp(-y) underflows to the zero that it is above: 0 is no least value, with or without time to find that out."""
    problem = shape(functional={"endpoint": "exp(-y(3))"}, endpoints=["y(0) = 0"], constraints=["y'^2 >= 0"])
    pursuit = pursue(problem, None, in_seconds(30))
    assert may_escape(pursuit)
    pursuit.end = End.TIME
    told = with_evidence(problem, Found(pursuit, None), 0.0)
    assert told.verdict not in PROVED


def test_what_has_not_grown_cannot_escape():
    problem = shape(functional={"integrand": "y'^2"}, endpoints=["y(0) = 0", "y(3) = 1"])
    assert not may_escape(pursue(problem, None, in_seconds(30)))
