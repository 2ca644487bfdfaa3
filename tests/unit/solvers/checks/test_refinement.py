"""Refinement: the stated errors decide."""

import pytest

from solvers.checks import refinement
from solvers.solution import Status


@pytest.mark.parametrize(
    ("value_error", "size", "curve_error", "status", "subject"),
    [
        (1e-8, 1.0, 1e-7, Status.PASSED, "the value"),
        (1e-9, 1.0, 5e-4, Status.PASSED, "the curve"),
        (1e-9, 1.0, 2e-3, Status.FAILED, "the curve"),
        (1e-5, 100.0, 0.0, Status.PASSED, "the value"),
        (1e-5, 1.0, 0.0, Status.FAILED, "the value"),
        (0.0, 1.0, float("nan"), Status.FAILED, "the curve"),
        (0.0, 0.0, 0.0, Status.PASSED, "the value"),
        (1e-9, 0.0, 0.0, Status.FAILED, "the value"),
        (float("nan"), 1.0, 0.0, Status.FAILED, "the value"),
        (None, 1.0, 0.0, Status.FAILED, ""),
    ],
)
def test_the_worse_of_both_errors_decides(value_error, size, curve_error, status, subject):
    check = refinement.check(value_error, size, curve_error, 1e-6)
    assert (check.status, check.subject) == (status, subject)


def test_a_curve_known_less_well_than_its_value_says_so():
    check = refinement.check(1e-8, 1.0, 5e-5, 1e-6)
    assert check.sentence == ("The value is known to 1.0e-08 (relative), the curve to 5.0e-05: less exactly than the "
                              "value, which hardly depends on it at an extremum.")  # fmt: skip
