"""The value of a tree over floats, and over anything else that computes."""

from fractions import Fraction

import pytest

from solvers.formula.evaluate import REAL, evaluate
from solvers.formula.nodes import FUNCTIONS, SIDE, Name
from solvers.formula.parser import parse_expression


@pytest.mark.parametrize(
    ("formula", "value"),
    [
        ("-2^2", -4),
        ("2^-1", 0.5),
        ("2^3^2", 512),
        ("1 - 2 - 3", -4),
        ("12/3/2*4", 8),
        ("a - -b*2", 11),
        ("cos(pi)", -1),
        ("max(a, b, 7) + min(a, b)", 10),
        ("sign(-a) + sign(0)", -1),
        ("hypot(3, 4)", 5),
        ("x''*10", 20),
    ],
)
def test_computes(formula, value):
    names = {("a", 0): 3.0, ("b", 0): 4.0, ("x", 2): 2.0}
    assert evaluate(parse_expression(formula), lambda name, order: names[name, order], REAL) == pytest.approx(value)


def test_there_is_an_operation_for_every_function():
    assert set(REAL) == {*FUNCTIONS, SIDE, "power", "table"}


def test_a_value_at_a_place_comes_from_the_caller():
    seen = []

    def value_at(name, order, place, side):
        seen.append((name, order, place.name, side))
        return 5.0

    assert evaluate(parse_expression("2*x'(T-)"), lambda name, order: None, REAL, value_at) == 10
    assert seen == [("x", 1, "T", "-")]
    with pytest.raises(LookupError, match="no value of 'x' at a place"):
        evaluate(parse_expression("x(0)"), lambda name, order: None, REAL)


def test_computes_with_other_numbers():
    tree = parse_expression("(a + a/a)*a^2")
    power = {"power": lambda base, exponent: base ** int(exponent)}
    assert evaluate(tree, lambda name, order: Fraction(1, 3), power) == Fraction(4, 27)


def test_a_deep_tree_needs_no_recursion():
    tree = Name("a")
    for _ in range(5000):
        tree = type(parse_expression("-a"))(tree)
    assert evaluate(tree, lambda name, order: 2.0, REAL) == 2.0


@pytest.mark.parametrize("formula", ["sqrt(-1)", "log(0)", "(-8)^(1/3)", "asin(2)"])
def test_outside_of_the_domain_is_an_error_never_a_number(formula):
    with pytest.raises(ValueError):
        evaluate(parse_expression(formula), lambda name, order: None, REAL)
