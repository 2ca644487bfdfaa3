"""What was found in parametric form, told in the problem's own terms."""

import numpy as np
import pytest
from numpy.polynomial import legendre

from solvers.curve import Curve
from solvers.forms.gauge import in_parametric_form
from solvers.forms.graph import as_graph, checks_on_graph, prices_of_original, uprights
from solvers.solution import Check, Finding, Price, Status
from tests.unit.solvers.problems import shape

GAUGED = in_parametric_form(shape(endpoints=["y(0) = 0", "y(3) = 1"]), lambda: {"x": 1.0, "y": 1.0}, squared=True)


def fitted(**functions):
    """Functions of s on 0 to 1/2 to 1 as a curve."""
    nodes = legendre.leggauss(8)[0]
    pieces = ((0.0, 0.5), (0.5, 1.0))
    return Curve(
        np.array([0.0, 0.5, 1.0]),
        {
            name.replace("_", "'"): tuple(legendre.legfit(nodes, function((a + b) / 2 + nodes * (b - a) / 2) +
                                                          0 * nodes, 7) for a, b in pieces)
            for name, function in functions.items()
        },
    )  # fmt: skip


PARABOLA = fitted(x=lambda s: 3 * s**2, x_=lambda s: 6 * s, y=lambda s: s**2, y_=lambda s: 2 * s)


def test_the_curve_as_functions_of_x_with_slopes():
    shown, costates, _ = as_graph(GAUGED, PARABOLA, fitted(y=lambda s: s), 0.5)
    x = np.linspace(0.1, 3, 20)
    np.testing.assert_allclose(shown.evaluate("y", x), x / 3, atol=1e-10)
    np.testing.assert_allclose(shown.evaluate("y'", x), 1 / 3, atol=1e-8)
    np.testing.assert_allclose(costates.evaluate("y", np.array([3.0])), 0.5, atol=1e-10)  # times the factor
    assert set(shown.functions) == {"y", "y'"}
    assert set(costates.functions) == {"y"}


def test_checks_move_to_x():
    here = Check("motion", Status.PASSED, "", place=0.5)
    nowhere = Check("convexity", Status.PASSED, "")
    moved = checks_on_graph(GAUGED, PARABOLA, (here, nowhere))
    assert moved[0].place == pytest.approx(0.75)
    assert moved[1] is nowhere


def test_only_what_the_user_stated_has_a_price():
    prices = (Price("y(0) = 0", "/endpoints/0", 3.0), Price("constant speed along the curve", "", 9.0))
    assert prices_of_original(prices, 0.5) == (Price("y(0) = 0", "/endpoints/0", 1.5),)


def test_upright_pieces_are_jumps_of_the_function():
    """Down beside x = 0, along the axis, up beside x = 3: the film that tears (Goldschmidt, 1831; from memory)."""
    stairs = {"x": lambda s: np.where(s < 0.5, 0 * s, 6 * s - 3), "x_": lambda s: np.where(s < 0.5, 0 * s, 6 + 0 * s)}
    torn = fitted(**stairs, y=lambda s: np.where(s < 0.5, 1 - 2 * s, 0 * s), y_=lambda s: np.where(s < 0.5, -2.0, 0.0))
    assert uprights(GAUGED, torn) == (Finding("y", "", None, 0.0, "jumps"),)


def test_a_vertical_tangent_is_no_jump():
    assert uprights(GAUGED, PARABOLA) == ()
    flat = fitted(x=lambda s: 3 * s**3, x_=lambda s: 9 * s**2, y=lambda s: s, y_=lambda s: 1 + 0 * s)
    assert uprights(GAUGED, flat) == ()
