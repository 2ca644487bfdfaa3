"""Tables in CasADi's expressions: the same numbers as outside of them, derivatives included."""

import casadi as ca
import numpy as np
import pytest

from solvers.formula.derivative import derivative
from solvers.formula.evaluate import REAL, evaluate
from solvers.formula.nodes import Name
from solvers.formula.parser import parse_expression
from solvers.tables.lookups import Lookups
from solvers.tables.table import Between, Outside
from solvers.transcription.functions import OPERATIONS
from tests.unit.solvers.measured import TABLES, curve, surface

RNG = np.random.default_rng(3)
KNOTS = np.sort(RNG.uniform(-1, 2, 6))
POINTS = RNG.normal(size=(6, 6))
PLACES = RNG.uniform(-2, 3, (40, 2))


def settled(formula, tables):
    """Value, gradient and Hessian of a formula in x and y as a function of both."""
    v = ca.SX.sym("v", 2)
    lookups = Lookups()
    tree = parse_expression(formula, tables)
    symbols = {"x": v[0], "y": v[1]}
    value = evaluate(tree, lambda name, order: symbols[name], OPERATIONS | {"table": lookups.value})
    hessian, gradient = ca.hessian(value, v)
    return tree, ca.Function("f", [v], lookups.settled([value, ca.densify(gradient), ca.densify(hessian)]))


@pytest.mark.parametrize("outside", Outside)
@pytest.mark.parametrize("between", Between)
@pytest.mark.parametrize("formula", ["f(x*y)", "x*f'(y - x)", "g(x, y)*f(f(x)/3)", "g_u(y, x*y) - g_u_v(x, x)"])
def test_values_and_derivatives_are_those_of_the_formula(formula, between, outside):
    tables = {"f": curve(KNOTS, POINTS[0], between, outside), "g": surface(KNOTS, KNOTS, POINTS, between, outside)}
    tree, function = settled(formula, tables)
    names = [Name("x"), Name("y")]
    gradient = [derivative(tree, name) for name in names]
    hessian = [[derivative(slope, name) for name in names] for slope in gradient]
    real = REAL | {"table": lambda table, orders, *arguments: float(table.value(*arguments, orders=orders))}
    for x, y in PLACES:
        point = {"x": x, "y": y}

        def number(tree, point=point):
            return evaluate(tree, lambda name, order: point[name], real)

        value, slopes, curvatures = (np.asarray(part) for part in function([x, y]))
        expected = np.array([[number(part) for part in row] for row in hessian])
        scale = 1 + np.abs(expected).max()
        assert value.item() == pytest.approx(number(tree), rel=1e-12, abs=1e-12 * scale)
        np.testing.assert_allclose(slopes.ravel(), [number(part) for part in gradient], rtol=1e-11, atol=1e-11 * scale)
        np.testing.assert_allclose(curvatures, expected, rtol=1e-10, atol=1e-10 * scale)


def test_the_last_point_belongs_to_the_range():
    _, function = settled("f(x)", TABLES)
    np.testing.assert_allclose(float(function([2.0, 0.0])[2][0, 0]), TABLES["f"].value(2.0, orders=(2,)), rtol=1e-12)
    assert TABLES["f"].value(2.0, orders=(2,)) > 1


def test_what_is_no_number_stays_none():
    _, function = settled("f(x) + g(x, y)", TABLES)
    assert np.isnan(float(function([np.nan, 0.5])[0]))


def test_a_piece_is_found_once_for_all_uses_of_it():
    v = ca.SX.sym("v")
    lookups = Lookups()
    total = sum(lookups.value(TABLES["f"], (order,), v) for order in (0, 1, 2))
    (found,) = lookups.settled([total])
    assert str(found).count("find(") == 1
