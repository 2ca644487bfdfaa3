"""A value that no curve can better proves the global minimum, by interval arithmetic."""

import json

import pytest

from service.assemble import assemble
from service.spec import read
from solvers.checks import lower_bound
from solvers.solution import Check, Status, Verdict
from solvers.solve import solve

STEP = {
    "independent": {"name": "x", "from": -1, "to": 1},
    "unknowns": {"y": {}},
    "functional": {"seek": "minimum", "integrand": "y^2*(1 - y')^2"},
    "endpoints": ["y(-1) = -1", "y(1) = 1"],
}


def curve(slope):
    return [lambda x: slope * x], [lambda x: slope + 0 * x]


def test_a_curve_that_reaches_the_bound_passes(sketched, examine):
    check = examine(lower_bound.check, sketched(STEP, *curve(1.0)))
    assert check.status is Status.PASSED
    assert "value below 0" in check.sentence


def test_a_curve_that_does_not_reach_it_proves_nothing(sketched, examine):
    path = sketched(STEP, *curve(0.5))
    check = examine(lower_bound.check, path)
    assert check.status is Status.NOT_APPLICABLE  # its stored value is 0, but integrated anew it is not
    assert check.figure > 0.1


def test_a_maximum_has_an_upper_bound(sketched, examine):
    upside_down = {**STEP, "functional": {"seek": "maximum", "integrand": "3 - y^2*(1 - y')^2"}}
    check = examine(lower_bound.check, sketched(upside_down, *curve(1.0)))
    assert check.status is Status.NOT_APPLICABLE  # the stored value 0 is not the bound 6
    assert "value above 6" in check.sentence


@pytest.mark.parametrize("integrand", ["y'^2 - y", "y^3 + y'^2", "x*y'"])
def test_no_bound_says_nothing(sketched, examine, integrand):
    document = {**STEP, "functional": {"seek": "minimum", "integrand": integrand}}
    check = examine(lower_bound.check, sketched(document, *curve(1.0)))
    assert check.status is Status.NOT_APPLICABLE
    assert "no bound" in check.sentence


@pytest.mark.parametrize(
    ("members", "bound"),
    [
        ({}, 0.0),
        ({"functional": {"seek": "minimum", "integrand": "y'^2 + 3"}}, 6.0),
        ({"functional": {"seek": "minimum", "integrand": "y'^2 - 3"}}, -6.0),
        ({"functional": {"seek": "minimum", "integrand": "y'^2 + x"}}, -2.0),
        ({"functional": {"seek": "maximum", "integrand": "3 - y'^2"}}, 6.0),
        ({"functional": {"seek": "minimum", "integrand": "sqrt(4 + y'^2)"}}, 4.0),
        ({"functional": {"seek": "maximum", "integrand": "sqrt(1 + y'^2)"},
          "constraints": ["0 <= y' <= sqrt(3)"]}, 4.0),
        ({"functional": {"seek": "minimum", "integrand": "y'^2 + 3", "endpoint": "y(1)^2 - 1"}}, 5.0),
        ({"functional": {"seek": "minimum", "integrand": "y'^2 + y"}, "unknowns": {"y": {"within": [-1.5, 2]}}}, -3.0),
        ({"functional": {"seek": "minimum", "integrand": "1 + y'^2"}, "parameters": {"b": {"within": [2, 5]}},
          "independent": {"name": "x", "from": 1, "to": "b"}, "endpoints": ["y(1) = 0", "y(b) = 1"]}, 1.0),
        ({"functional": {"seek": "minimum", "integrand": "y'^2 - 1"}, "parameters": {"b": {"within": [2, 5]}},
          "independent": {"name": "x", "from": 1, "to": "b"}, "endpoints": ["y(1) = 0", "y(b) = 1"]}, -4.0),
    ],
)  # fmt: skip
def test_the_bound(sketched, members, bound):
    path = sketched({**STEP, **members}, *curve(1.0))
    assert lower_bound.best_possible(path.program.compiled.lowered.problem) == pytest.approx(bound)


def test_what_looks_for_better_curves_does_not_apply_where_there_are_none():
    failed = [Check(name, Status.FAILED, f"The {name} is off.", 0.1, 1e-3) for name in ("motion", "stationarity")]
    fine = Check("free ends", Status.PASSED, "It is stationary.", 1e-9, 1e-3)
    motion, stationarity, ends = lower_bound.settled([*failed, fine], ["motion"])
    assert (motion, ends) == (failed[0], fine)
    assert stationarity.status is Status.NOT_APPLICABLE
    assert stationarity.figure == 0.1 and stationarity.sentence.endswith("The stationarity is off.")


@pytest.mark.parametrize("integrand", ["y^2*(1 - y')^2", "(y'^2 - 9)^2"])
def test_no_line_contradicts_the_proof(integrand):
    """Both functionals reach zero, on curves where second derivatives vanish or multipliers are not unique."""
    document = {**STEP, "format": 1, "functional": {"seek": "minimum", "integrand": integrand}}
    found = solve(assemble(read(json.dumps(document).encode())))
    assert found.verdict is Verdict.GLOBAL_MINIMUM
    assert not any(check.status is Status.FAILED for check in found.checks)


def test_the_gap_is_told_only_where_it_is_proved():
    passed = Check(lower_bound.NAME, Status.PASSED, "", 1e-9)
    assert lower_bound.gap([passed]) == 1e-9
    assert lower_bound.gap([Check(lower_bound.NAME, Status.NOT_APPLICABLE, "", 1.0)]) is None
