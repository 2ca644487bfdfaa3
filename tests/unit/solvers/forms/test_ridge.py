"""Curves that begin on a ridge leave it, to the better side."""

import pytest

from solvers.deadline import FOREVER
from solvers.forms.ridge import off_ridge
from solvers.search.pursuit import pursue
from solvers.solution import Verdict
from solvers.solve import solve
from tests.unit.solvers.problems import shape


def between_zeros(integrand, seek="minimum"):
    return shape(
        independent={"name": "x", "from": 0, "to": 1},
        functional={"seek": seek, "integrand": integrand},
        endpoints=["y(0) = 0", "y(1) = 0"],
    )


@pytest.mark.parametrize("integrand, seek, value", [
    ("y'^2 - abs(y)", "minimum", -1 / 48),
    ("y'^2 + min(y, -y)", "minimum", -1 / 48),
    ("max(y, -2*y) - y'^2", "maximum", 4 / 48),  # the steeper side is the better one
])  # fmt: skip
def test_a_ridge_is_left_to_the_better_side(integrand, seek, value):
    """Least integral of y'^2 - a y between zeros: y'' = -a/2, worth -a^2/48."""
    found = solve(between_zeros(integrand, seek))
    assert found.verdict in (Verdict.LOCAL_MINIMUM, Verdict.LOCAL_MAXIMUM)
    assert abs(found.value - value) <= found.value_error < 1e-8


@pytest.mark.parametrize("integrand, seek", [
    ("y'^2 + y^2", "minimum"),  # no kink
    ("y'^2 + y*sign(y)", "minimum"),  # a valley
    ("y'^2 - abs(y)", "stationary"),  # what is better is not asked for
    ("y'^2 - abs(y - x + 0.3)", "minimum"),  # a ridge that is crossed
])  # fmt: skip
def test_who_lies_on_no_ridge_stays(integrand, seek):
    base = pursue(between_zeros(integrand, seek), None, FOREVER, meshes=8)
    assert base.solved
    assert off_ridge(base, None, FOREVER) is None
