"""Where integrands have one sign, and where they have values at all."""

import pytest

from solvers.forms.gauge import in_parametric_form
from solvers.forms.signs import one_signed, where_defined
from solvers.solve import solve
from tests.unit.solvers.problems import shape


def held(integrand):
    given = shape(functional={"integrand": integrand}, endpoints=["y(0) = 1", "y(3) = 1"])
    gauged = in_parametric_form(given, lambda: {"x": 1.0, "y": 1.0}, squared=True)
    before = len(gauged.problem.constraints)
    return [condition.body.name for condition in where_defined(gauged).problem.constraints[before:]]


@pytest.mark.parametrize("integrand, names", [
    ("sqrt((1 + y'^2)/(19.62*y))", ["y"]),
    ("sqrt(1 + y'^2)/sqrt(y)", ["y"]),
    ("sqrt(x*y)*sqrt(1 + y'^2)", []),  # x may be negative, for all that is known along a curve
    ("y*sqrt(1 + y'^2)", []),
    ("sqrt(1 + y + y'^2)", []),
])  # fmt: skip
def test_unknowns_are_held_where_roots_that_are_squared_have_values(integrand, names):
    assert held(integrand) == names


def test_a_root_is_nowhere_negative():
    assert one_signed(shape(functional={"integrand": "sqrt((1 + y'^2)/y)"}))
    assert not one_signed(shape(functional={"integrand": "y*sqrt(1 + y'^2)"}))


def test_a_fall_to_a_vertical_wall_keeps_to_the_side_where_it_has_a_time():
    """From rest at 0 to x = 3 with free height: half a cycloid's arch, sqrt(pi 3/g) with 2 g = 1.  Bliss (1925),
    Calculus of Variations, chapter III (from memory)."""
    found = solve(shape(functional={"integrand": "sqrt((1 + y'^2)/y)"}, endpoints=["y(0) = 0"]))
    assert found.value == pytest.approx((6 * 3.141592653589793) ** 0.5, rel=1e-6)
