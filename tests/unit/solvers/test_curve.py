"""The exact curve, evaluated without the solver."""

import numpy as np
import pytest

from solvers.curve import Curve

# x(t) = t^2 on 0 to 2, then 8 - 2t (a jump of slope) on 2 to 3; u jumps from 1 to 5 at 2.
# On 0 to 2 with t = 1 + s: t^2 = 4/3 + 2 s + 2/3 P2(s); on 2 to 3 with t = 5/2 + s/2: 8 - 2t = 3 - s.
CURVE = Curve(
    np.array([0.0, 2.0, 3.0]),
    {
        "x": (np.array([4 / 3, 2.0, 2 / 3]), np.array([3.0, -1.0])),
        "u": (np.array([1.0]), np.array([5.0])),
    },
)


def test_values():
    np.testing.assert_allclose(CURVE.evaluate("x", np.array([0, 0.5, 2, 2.5, 3])), [0, 0.25, 4, 3, 2], atol=1e-14)


def test_at_a_break_the_interval_on_its_left_speaks():
    np.testing.assert_array_equal(CURVE.evaluate("u", np.array([0.0, 2.0, np.nextafter(2.0, 3.0)])), [1, 1, 5])


def test_derivatives_are_by_the_independent_variable():
    np.testing.assert_allclose(CURVE.evaluate("x", np.array([0.5, 1.5, 2.5]), 1), [1, 3, -2], atol=1e-14)
    np.testing.assert_allclose(CURVE.evaluate("x", np.array([0.5, 1.5, 2.5]), 2), [2, 2, 0], atol=1e-14)
    np.testing.assert_array_equal(CURVE.evaluate("u", np.array([0.5, 2.5]), 1), [0, 0])


def test_beyond_the_ends_the_outermost_interval_goes_on():
    assert CURVE.evaluate("x", np.array([-1.0]))[0] == pytest.approx(1)
    assert CURVE.evaluate("x", np.array([4.0]))[0] == pytest.approx(0)


def test_places_come_in_any_order_and_number():
    assert CURVE.evaluate("x", np.array([])).shape == (0,)
    np.testing.assert_allclose(CURVE.evaluate("x", [3, 0, 2]), [2, 0, 4], atol=1e-14)
