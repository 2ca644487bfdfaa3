"""Derivatives are right (against differences) and readable (as text)."""

import math

import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from solvers.formula.algebra import bare
from solvers.formula.derivative import derivative, total_derivative
from solvers.formula.evaluate import REAL, evaluate
from solvers.formula.nodes import FUNCTIONS, Call, Name, Negative, Number, Power, Product, Sum
from solvers.formula.parser import parse_expression
from solvers.formula.printer import text
from solvers.formula.substitute import substitute
from tests.unit.solvers.measured import TABLES

POINT = {("y", 0): 0.37, ("y", 1): -0.81, ("k", 0): 1.3, ("x", 0): 0.6}

# one formula per function, and the shapes of products and powers
FORMULAS = [
    "sqrt(y + k)", "exp(-k*y)", "log(y*x)", "sin(k*y)", "cos(y^2)", "tan(y)", "asin(y)", "acos(y/2)", "atan(k*y)",
    "atan2(y, x)", "atan2(x, y)", "sinh(y)", "cosh(k*y)", "tanh(3*y)^2", "abs(y - 1)", "min(y, x)", "max(y, x, y'*y)",
    "hypot(y, y')", "sign(y)*y", "y*sqrt(1 + y'^2)", "sqrt((1 + y'^2)/(2*k*y))", "y^k", "k^y", "y^y", "y^-2",
    "-y^3/y'^2",
    "(y - x)^3/(y + x)", "1/y/y'/k", "sqrt(y)*sqrt(y)*y'", "(y*k)^2/sqrt(y*k)", "0.3*y^1.5/7", "(x^2)^(1/2)*y",
    "(-y)^3*(-k)",
    "2^3*y - y*2^-1", "sqrt(2)*y", "1e-3*y*1e3", "(y^2)^1.5", "2^40*y", "pi*y/4",
]  # fmt: skip


def value(tree, point):
    return evaluate(tree, lambda name, order: point[name, order], REAL)


def difference(tree, quantity, step):
    above, below = ({**POINT, quantity: POINT[quantity] + s} for s in (step, -step))
    return (value(tree, above) - value(tree, below)) / (2 * step)


@pytest.mark.parametrize("formula", FORMULAS)
@pytest.mark.parametrize("quantity", [("y", 0), ("y", 1), ("k", 0)])
def test_agrees_with_central_differences(formula, quantity):
    tree = parse_expression(formula)
    slope = value(derivative(tree, Name(*quantity)), POINT)
    assert slope == pytest.approx(difference(tree, quantity, 1e-6), rel=1e-7, abs=1e-8)


def test_every_function_is_among_the_formulas():
    used = {f for f in FUNCTIONS for formula in FORMULAS if f"{f}(" in formula}
    assert used == set(FUNCTIONS)


leaves = st.sampled_from([Name("y"), Name("y", 1), Name("k"), *(Number(float(t), t) for t in ("2", "0.5", "3"))])


def compound(parts):
    pairs = st.lists(st.tuples(parts, st.booleans()), min_size=2, max_size=3)
    flags = pairs.map(lambda p: (tuple(t for t, _ in p), (False, *(f for _, f in p[1:]))))
    return st.one_of(
        flags.map(lambda p: Sum(*p)),
        flags.map(lambda p: Product(*p)),
        st.builds(Negative, parts),
        st.builds(Power, parts, st.one_of(parts, st.sampled_from([Number(2.0, "2"), Number(1.5, "1.5")]))),
        st.builds(lambda f, a: Call(f, (a,)), st.sampled_from(["sin", "exp", "sqrt", "log", "tanh", "atan"]), parts),
    )


@given(st.recursive(leaves, compound, max_leaves=8))
def test_agrees_with_differences_on_random_formulas(tree):
    quantity = ("y", 0)
    try:
        coarse, fine = difference(tree, quantity, 2e-4), difference(tree, quantity, 1e-4)
    except (ValueError, ZeroDivisionError, OverflowError):
        assume(False)
    assume(math.isclose(coarse, fine, rel_tol=1e-5, abs_tol=1e-6) and abs(fine) < 1e6)
    try:
        slope = value(derivative(tree, Name(*quantity)), POINT)
    except (ValueError, ZeroDivisionError):
        assume(False)  # the formula is constant where its derivative is singular: (y - y)^y, 0*sqrt(y - y)
    assert slope == pytest.approx(fine, rel=1e-4, abs=1e-5)


@pytest.mark.parametrize(
    ("formula", "name", "printed"),
    [
        ("y*sqrt(1 + y'^2)", "y", "sqrt(1 + y'^2)"),
        ("y*sqrt(1 + y'^2)", "y'", "y*y'/sqrt(1 + y'^2)"),
        ("sqrt((1 + y'^2)/(2*g*y))", "y'", "y'/(2*g*y*sqrt((1 + y'^2)/(2*g*y)))"),
        ("0.5*u^2", "u", "u"),
        ("0.3*u^2", "u", "0.6*u"),
        ("0.3*u/7", "u", "3/70"),
        ("m/2*(x'^2 + y'^2) - m*g*y", "x'", "m*x'"),
        ("m/2*(x'^2 + y'^2) - m*g*y", "y", "-m*g"),
        ("n*y + 2*y + y*n", "y", "2*n + 2"),
        ("sin(y)*exp(-k*y)", "y", "cos(y)*exp(-k*y) - sin(y)*exp(-k*y)*k"),
        ("y^n", "y", "n*y^(n - 1)"),
        ("max(y, a, b)", "y", "(1 + sign(y - max(a, b)))/2"),
        ("x(T)^2*k + y", "x", "0"),  # a value at a place moves with no name
        ("integral(y)*y", "y", "integral(y)"),
        ("x(T)^2*k", "x(T)", "2*x(T)*k"),
        ("T*integral(y)^2", "integral(y)", "2*T*integral(y)"),
    ],
)
def test_looks_as_on_paper(formula, name, printed):
    assert text(derivative(parse_expression(formula), parse_expression(name))) == printed


def test_a_converted_number_is_not_folded_with_others():
    tree = parse_expression("12*y*2")
    degrees = substitute(tree, lambda n: Number(0.209, "12") if isinstance(n, Number) and n.text == "12" else None)
    slope = derivative(degrees, Name("y"))
    assert value(slope, POINT) == pytest.approx(0.418)


def test_the_total_derivative_follows_the_functions():
    total = total_derivative(parse_expression("k*x*y'^2 + x(0)"), "x", {"y"})
    assert text(total) == "k*y'^2 + 2*k*x*y'*y''"


@pytest.mark.parametrize(
    ("formula", "by", "expected"),
    [
        ("f(y)", "y", "f'(y)"),
        ("f'(k*y)", "y", "f''(k*y)*k"),
        ("f(y)*f(x)", "x", "f(y)*f'(x)"),
        ("g(x, y)", "y", "g_v(x, y)"),
        ("g(y, y)", "y", "g_u(y, y) + g_v(y, y)"),
        ("g_u(x, sin(y))", "y", "g_u_v(x, sin(y))*cos(y)"),
        ("f(k)", "y", "0"),
    ],
)
def test_the_derivative_of_a_table_is_a_table(formula, by, expected):
    slope = derivative(parse_expression(formula, TABLES), Name(by))
    assert text(slope) == expected
    assert slope == bare(parse_expression(expected, TABLES))


@settings(deadline=None)
@given(st.floats(0.1, 1.9), st.floats(0.1, 0.9))
def test_derivatives_of_tables_agree_with_differences(y, x):
    tree = parse_expression("f(y*x)*g(x, y^2/2) + g_u(x, y/2)", TABLES)
    step = 1e-6

    def value(tree, y):
        return evaluate(tree, lambda name, order: {"x": x, "y": y}[name], REAL)

    slope = value(derivative(tree, Name("y")), y)
    assert slope == pytest.approx((value(tree, y + step) - value(tree, y - step)) / (2 * step), rel=1e-4, abs=1e-6)


def test_the_caller_can_end_a_derivation():
    def check():
        raise TimeoutError

    with pytest.raises(TimeoutError):
        derivative(parse_expression("y^2"), Name("y"), check)
