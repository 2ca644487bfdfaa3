"""A value that no curve can better proves the global minimum, by interval arithmetic."""

import pytest

from solvers.checks import lower_bound
from solvers.solution import Check, Status

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


def test_the_gap_is_told_only_where_it_is_proved():
    passed = Check(lower_bound.NAME, Status.PASSED, "", 1e-9)
    assert lower_bound.gap([passed]) == 1e-9
    assert lower_bound.gap([Check(lower_bound.NAME, Status.NOT_APPLICABLE, "", 1.0)]) is None
