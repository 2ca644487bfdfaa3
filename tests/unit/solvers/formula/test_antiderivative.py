"""Antiderivatives against the derivative, which is tested by itself."""

import math

import pytest

from solvers.formula.antiderivative import antiderivative
from solvers.formula.derivative import derivative
from solvers.formula.evaluate import REAL, evaluate
from solvers.formula.identity import vanishes
from solvers.formula.nodes import Name, Negative, Sum
from solvers.formula.parser import parse_expression

Y = Name("y")


def value(tree, **names):
    return evaluate(tree, lambda name, order: names[name], REAL)


@pytest.mark.parametrize(
    "formula",
    ["0", "3", "x", "2*y", "-y^2/x", "(x + y)^3*x", "-(y + x)*3/2", "y*sin(x*y)", "exp(-y)*(y^2 + 1)",
     "y^2*cosh(2*y + x)", "x*cos(x*y) - y/3", "sqrt(x)*y"],
)  # fmt: skip
def test_its_derivative_is_the_formula(formula):
    tree = parse_expression(formula)
    found = antiderivative(tree, Y)
    assert found is not None
    assert vanishes(Sum((tree, derivative(found, Y)), (False, True)))


def test_it_is_that_of_the_tables():
    """The integral of y^2*exp(-y) is -(y^2 + 2*y + 2)*exp(-y), that of x*cos(x*y) is sin(x*y): elementary."""
    found = antiderivative(parse_expression("y^2*exp(-y)"), Y)
    assert value(found, y=1.5) == pytest.approx(-(1.5**2 + 3 + 2) * math.exp(-1.5))
    assert value(antiderivative(parse_expression("x*cos(x*y)"), Y), x=0.0, y=2.0) == 0.0


@pytest.mark.parametrize("formula", ["1/y", "sqrt(y)", "exp(y^2)", "sin(y)*cos(y)", "abs(y)", "log(x + y)", "y^0.5"])
def test_where_the_rules_do_not_reach_there_is_none(formula):
    assert antiderivative(parse_expression(formula), Y) is None


@pytest.mark.parametrize(
    ("formula", "expected"),
    [("sin(x)^2 + cos(x)^2 - 1", True), ("(x + y)^2 - x^2 - 2*x*y - y^2", True), ("cosh(x)^2 - sinh(x)^2 - 1", True),
     ("log(x*x) - 2*log(x)", True), ("x - 0.999999*x", False), ("sin(x)^2 + cos(x)^2", False), ("0*x", True),
     ("sqrt(-x^2 - 1)", False)],
)  # fmt: skip
def test_a_formula_that_vanishes_is_told_from_one_that_does_not(formula, expected):
    """The last has no value anywhere: of that nothing is claimed."""
    assert vanishes(parse_expression(formula)) is expected


def test_a_sum_under_a_sign_vanishes_too():
    assert vanishes(Negative(parse_expression("(x + 1)^2 - x^2 - 2*x - 1")))
