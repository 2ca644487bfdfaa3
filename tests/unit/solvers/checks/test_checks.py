"""All checks together: their order, their manners, and what becomes of one that breaks."""

import numpy as np
import pytest

from solvers import checks
from solvers.checks import curvature, stationarity
from solvers.deadline import in_seconds
from solvers.solution import Check, Status

LINE = {
    "independent": {"name": "x", "from": 0, "to": 1},
    "unknowns": {"y": {}},
    "functional": {"seek": "minimum", "integrand": "sqrt(1 + y'^2)"},
    "endpoints": ["y(0) = 0", "y(1) = 1"],
}


def test_all_are_made_in_order(solved):
    made = checks.run(solved(LINE), value_error=1e-9, curve_error=1e-9)
    assert tuple(check.name for check in made) == checks.NAMES
    assert all(check.status is not Status.FAILED for check in made), made
    assert all(check.sentence.endswith(".") for check in made)


def test_a_check_that_breaks_has_failed_and_says_why(solved, monkeypatch):
    def broken(sampler):
        raise ZeroDivisionError("oh")

    monkeypatch.setattr(stationarity, "check", broken)
    found = {check.name: check for check in checks.run(solved(LINE))}
    assert found["stationarity"].status is Status.FAILED
    assert "ZeroDivisionError: oh" in found["stationarity"].sentence
    assert found["motion"].status is Status.PASSED


def test_what_failed_checks_leave_open_counts_but_for_what_errors_say_already():
    def made(name, status, figure=None):
        return Check(name, status, "", figure, 1e-3)

    fine = [made("motion", Status.PASSED, 1e-9), made("corners", Status.NOT_APPLICABLE)]
    assert checks.left_open([*fine, made("refinement", Status.FAILED, 0.5), made("Legendre", Status.FAILED, 2.0)]) == 0
    assert checks.left_open([*fine, made("stationarity", Status.FAILED, 0.2)]) == 0.2
    assert checks.left_open(
        [made("motion", Status.FAILED, 0.1), made("free ends", Status.FAILED, 0.2)]
    ) == pytest.approx(0.3)
    assert checks.left_open([made("motion", Status.FAILED)]) == np.inf
    assert checks.left_open([made("stationarity", Status.FAILED, 1e3)]) == np.inf


def test_without_time_nothing_passes(solved):
    made = checks.run(solved(LINE), value_error=1e-9, curve_error=1e-9, budget=-1.0)
    missing = {check.name: check.status for check in made if check.sentence == "Not made: the time was over."}
    assert set(checks.NAMES) - set(missing) == set(checks.INSTANT)
    assert all(missing[name] is Status.FAILED for name in missing if name not in checks.OPTIONAL)


def test_the_second_variation_gives_up_when_its_time_is_over(solved, examine):
    check = examine(curvature.check, solved(LINE), in_seconds(0))
    assert check.status is Status.NOT_APPLICABLE
    assert "in the time there was" in check.sentence


def test_neighbours_of_a_curve_that_is_not_feasible_prove_nothing(solved, drawn):
    """A parabola whose slope is said to be one."""
    bent = drawn(solved(LINE), [lambda x: x**2], [lambda x: 1 + 0 * x])
    found = {check.name: check for check in checks.run(bent, value_error=0.0, curve_error=0.0)}
    assert found["motion"].status is Status.FAILED
    assert found["conjugate points"].status is Status.NOT_APPLICABLE
    assert found["conjugate points"].sentence == "Not made: the curve is not feasible."


def test_an_undefined_curve_passes_nothing_that_looks_at_it(sketched):
    """y = -x under a root: every figure that needs the integrand is undefined."""
    document = {**LINE, "functional": {"seek": "minimum", "integrand": "sqrt(y) + y'^2"}}
    path = sketched(document, [lambda x: -x], [lambda x: -1 + 0 * x])
    found = {check.name: check.status for check in checks.run(path, value_error=0.0, curve_error=0.0)}
    assert found["conditions"] is Status.FAILED
    assert found["stationarity"] is Status.FAILED
    assert found["conjugate points"] is not Status.PASSED


def test_numbers_are_plain(solved):
    """Results are sent and stored: no array scalars."""
    for check in checks.run(solved(LINE), value_error=1e-9, curve_error=1e-9):
        for value in (check.figure, check.threshold, check.place):
            assert value is None or type(value) is float


@pytest.mark.parametrize("name", checks.NAMES)
def test_names_are_unique(name):
    assert checks.NAMES.count(name) == 1
