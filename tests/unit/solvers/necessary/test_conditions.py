"""Necessary conditions: known extremals satisfy them, other curves do not, and they read as in a textbook."""

import math
import time

import pytest

from solvers.formula.evaluate import REAL, evaluate
from solvers.formula.nodes import Call, Name, Number
from solvers.formula.parser import parse_expression, parse_relation
from solvers.formula.substitute import substitute
from solvers.necessary.conditions import necessary_conditions
from solvers.problem import Condition, Constant, Equation, Parameter, Place, Problem, Seek, Unknown


def condition(text):
    """One condition of a relation with a number or a constant on its right."""
    relation = parse_relation(text)
    body, limit = relation.sides
    lower = limit if relation.signs[0] in ("=", ">=") else None
    upper = limit if relation.signs[0] in ("=", "<=") else None
    return Condition(body, lower, upper, text, "")


def equation(text):
    left, right = parse_relation(text).sides
    return Equation(left, right, (left.name, left.order) if isinstance(left, Name) else None, text, "")


def problem(unknowns, integrand=None, *, ends=("0", "1"), independent="x", **given):
    listed = {"endpoints": condition, "constraints": condition, "integrals": condition, "dynamics": equation}
    listed |= {"parameters": Parameter, "constants": lambda name: Constant(name, 1.0)}
    parts = {name: tuple(map(listed[name], given[name])) for name in listed if name in given}
    trees = {"endpoint": parse_expression(given["endpoint"])} if "endpoint" in given else {}
    if integrand is not None:
        trees["integrand"] = parse_expression(integrand)
    return Problem(
        independent=independent,
        places=tuple(Place(parse_expression(place), place) for place in (ends[0], *given.get("inner", ()), ends[1])),
        unknowns=tuple(Unknown(name, order) for name, order in unknowns.items()),
        seek=given.get("seek", Seek.MINIMUM),
        where=tuple((name, parse_expression(tree)) for name, tree in given.get("where", ())),
        **trees,
        **parts,
    )


def texts(result, kind=None):
    return [f"{c.subject}: {c.text}" for c in result.conditions if kind in (None, c.kind)]


# ---- as mathematics ----


def residual(found, functions, x, numbers=None):
    """Left less right side at x; `functions` gives (order, x) -> value for each name."""

    def value(tree, x):
        def look_up(name, order):
            if name in functions:
                return functions[name](order, x)
            return {"x": x, "t": x, **(numbers or {})}[name]

        if isinstance(tree, Call) and tree.function in ("d/dx", "d/dt"):
            above, below = (value(tree.arguments[0], x + step) for step in (1e-4, -1e-4))
            return (above - below) / 2e-4
        return evaluate(_without_rates(tree, value, x), look_up, REAL)

    left, right = found.relation.sides
    return value(left, x) - value(right, x)


def _without_rates(tree, value, x):
    """The tree with every d/dx inside of it replaced by its number."""

    def number(node):
        if isinstance(node, Call) and node.function in ("d/dx", "d/dt"):
            return Number(value(node, x), "")
        return None

    return substitute(tree, number)


def catenary(order, x, a=0.7):
    return (a * math.cosh(x / a), math.sinh(x / a), math.cosh(x / a) / a)[order]


def parabola(order, x):
    return (1 + x * x, 2 * x, 2.0)[order]


@pytest.mark.parametrize("kind", ["Euler-Lagrange", "first integral"])
def test_the_catenary_is_extremal_and_a_parabola_is_not(kind):
    # y = a cosh(x/a): Euler (1744), in any textbook (from memory)
    result = necessary_conditions(problem({"y": 1}, "y*sqrt(1 + y'^2)", endpoints=["y(0) = 1", "y(1) = 2"]))
    (found,) = [c for c in result.conditions if c.kind == kind]
    for x in (0.1, 0.5, 0.9):
        assert residual(found, {"y": catenary}, x, {"C": 0.7}) == pytest.approx(0, abs=1e-6)
    assert max(abs(residual(found, {"y": parabola}, x, {"C": 0.7})) for x in (0.1, 0.5, 0.9)) > 0.1


def test_a_hanging_hose_has_a_multiplier_for_its_length():
    # w (y + λ/w) = w a cosh(x/a): the catenary moved by λ/w (from memory)
    given = problem(
        {"y": 1}, "w*y*sqrt(1 + y'^2)", constants=["w", "l"], endpoints=["y(0) = 1", "y(1) = 2"],
        integrals=["integral(sqrt(1 + y'^2)) = l"],
    )  # fmt: skip
    result = necessary_conditions(given)
    assert texts(result) == [
        "L: L = (w*y + λ)*sqrt(1 + y'^2)",
        "y: d/dx((w*y + λ)*y'/sqrt(1 + y'^2)) = w*sqrt(1 + y'^2)",
        "x: (w*y + λ)/sqrt(1 + y'^2) = C",
    ]
    assert result.notes == ("λ is the multiplier of integral(sqrt(1 + y'^2)) = l.",)

    def moved(order, x):
        return catenary(order, x) - (0.3 if order == 0 else 0)

    assert residual(result.conditions[1], {"y": moved}, 0.4, {"w": 2.0, "λ": 0.6}) == pytest.approx(0, abs=1e-6)


def test_a_cantilever_bends_as_in_the_handbook():
    # EI = 1, load q per length, force F at the tip: y'''' = q, y''(1) = 0, y'''(1) = -F for energy - work (from memory)
    given = problem(
        {"y": 2}, "y''^2/2 - q*y", endpoint="-F*y(1)", constants=["q", "F"], endpoints=["y(0) = 0", "y'(0) = 0"]
    )
    result = necessary_conditions(given)
    assert texts(result, "Euler-Lagrange") == ["y: -q + y'''' = 0"]
    assert texts(result, "natural boundary") == ["y: y''' = -F at x = 1", "y': y'' = 0 at x = 1"]


def test_a_high_order_alternates_its_signs():
    result = necessary_conditions(problem({"y": 3}, "y'''^2 + a*y''^2 + b*y'^2 + c*y^2", constants=["a", "b", "c"]))
    assert texts(result, "Euler-Lagrange") == ["y: c*y - b*y'' + a*y'''' - y'''''' = 0"]
    # momenta of order 3, as in Gelfand and Fomin, section 11, formula (for n derivatives) (from memory)
    assert texts(result, "natural boundary")[3:] == [
        "y: b*y' - a*y''' + y''''' = 0 at x = 1",
        "y': a*y'' - y'''' = 0 at x = 1",
        "y'': y''' = 0 at x = 1",
    ]


def test_the_regulator_has_the_costates_that_its_solution_has():
    # minimise the integral of x^2 + u^2, x' = u, x(0) = 1, x(1) free: x = cosh(1 - t)/cosh(1), p = -2 u (from memory)
    given = problem({"x": 1, "u": 0}, "x^2 + u^2", independent="t", dynamics=["x' = u"], endpoints=["x(0) = 1"])
    result = necessary_conditions(given)
    assert texts(result) == [
        "H: H = x^2 + u^2 + p_x*u",
        "x: p_x' = -2*x",
        "u: 2*u + p_x = 0",
        "x: p_x = 0 at t = 1",
        "t: H = C",
    ]
    functions = {
        "x": lambda order, t: math.cosh(1 - t) / math.cosh(1),
        "u": lambda order, t: -math.sinh(1 - t) / math.cosh(1),
        "p_x": lambda order, t: (2 * math.sinh(1 - t), -2 * math.cosh(1 - t))[order] / math.cosh(1),
    }
    for found in result.conditions[1:3]:
        assert residual(found, functions, 0.3) == pytest.approx(0, abs=1e-12)
    assert residual(result.conditions[3], functions, 1.0) == 0
    assert result.notes == ("Of all allowed values of u, those of the optimum make the Hamiltonian least.",)


def test_the_shortest_way_to_a_curve_meets_it_at_a_right_angle():
    given = problem(
        {"y": 1}, "sqrt(1 + y'^2)", ends=("0", "b"), parameters=["b"], constants=["k"],
        endpoints=["y(0) = 0", "y(b) - k/b = 0"],
    )  # fmt: skip
    result = necessary_conditions(given)
    assert texts(result, "natural boundary") == [
        "y: y'/sqrt(1 + y'^2) = -ν at x = b",
        "b: 1/sqrt(1 + y'^2) = -ν*k/b^2 at x = b",
    ]
    # divided by each other: y' = b^2/k, and the slope of k/x at b is -k/b^2: their product is -1


# ---- every kind of problem ----


def test_the_swinging_load_has_costates_of_second_order_states():
    given = problem(
        {"x": 2, "q": 2, "a": 0},
        independent="t", ends=("0", "T"), endpoint="T", parameters=["T"], constants=["g", "l"],
        dynamics=["x'' = a", "q'' = -(g*sin(q) + a*cos(q))/l"], constraints=["x' <= 1.5"],
        endpoints=["x(0) = 0", "x'(0) = 0", "q(0) = 0", "q'(0) = 0", "x(T) = 3", "x'(T) = 0", "q(T) = 0", "q'(T) = 0"],
    )  # fmt: skip
    result = necessary_conditions(given)
    assert texts(result) == [
        "H: H = p_x*x' + p_x_1*a + p_q*q' - p_q_1*(g*sin(q) + a*cos(q))/l",
        "x: p_x' = 0",
        "x': p_x_1' = -p_x",
        "q: p_q' = p_q_1*(g*cos(q) - a*sin(q))/l",
        "q': p_q_1' = -p_q",
        "a: p_x_1 - p_q_1*cos(q)/l = 0",
        "T: H = -1 at t = T",
        "t: H = C",
    ]
    assert result.notes == (
        "The equations hold where no limit binds (x' <= 1.5); where one binds, its multiplier joins.",
        "Of all allowed values of a, those of the optimum make the Hamiltonian least.",
    )


def test_a_climbing_vehicle_has_an_endpoint_term_and_abbreviations():
    given = problem(
        {"h": 1, "v": 1, "m": 1, "u": 0}, independent="t", ends=("0", "T"), endpoint="h(T)", parameters=["T"],
        constants=["g", "c", "k", "s"], where=[("drag", "k*v^2*exp(-h/s)")], seek=Seek.MAXIMUM,
        dynamics=["h' = v", "v' = (u - drag)/m - g", "m' = -u/c"],
        endpoints=["h(0) = 0", "v(0) = 0", "m(0) = 1", "m(T) = 0.6"],
    )  # fmt: skip
    result = necessary_conditions(given)
    assert texts(result, "costate")[0] == "h: p_h' = -p_v*k*v^2*exp(-h/s)/(s*m)"
    assert texts(result, "natural boundary") == ["h: p_h = 1 at t = T", "v: p_v = 0 at t = T", "T: H = 0 at t = T"]
    assert "greatest" in result.notes[-1]


def test_dynamics_that_need_each_other_are_put_in():
    given = problem({"y": 2, "z": 1, "u": 0}, "u^2/2", dynamics=["y'' = u - z", "z' = y'' + u"])
    assert texts(necessary_conditions(given))[:5] == [
        "H: H = u^2/2 + p_y*y' + p_y_1*(u - z) + p_z*(2*u - z)",
        "y: p_y' = 0",
        "y': p_y_1' = -p_y",
        "z: p_z' = p_y_1 + p_z",
        "u: u + p_y_1 + 2*p_z = 0",
    ]


def test_a_closed_curve_has_the_same_momenta_at_both_ends():
    given = problem({"y": 1}, "y'^2", endpoints=["y(0) - y(1) = 0"])
    result = necessary_conditions(given)
    assert texts(result, "natural boundary") == ["y: 2*y' = ν at x = 0", "y: 2*y' = ν at x = 1"]


def test_both_ends_may_be_free_and_used_inside():
    given = problem(
        {"y": 1}, "x*y'^2 + R*y + b*y", ends=("a", "b"), parameters=["a", "b", "R"], endpoint="R^2 + a^2",
        endpoints=["y(a) = 0", "y(b) - b^2 = 0"],
    )  # fmt: skip
    assert texts(necessary_conditions(given))[1:] == [
        "y: 2*x*y' = -ν at x = b",
        "a: -x*y'^2 + R*y + b*y = 2*a at x = a",
        "b: -x*y'^2 + R*y + b*y = 2*ν*b - integral(y) at x = b",
        "R: 2*R + integral(y) = 0",
    ]


def test_a_pointwise_equality_has_a_multiplier_that_varies():
    given = problem({"x": 1, "y": 1}, "x*y' - y*x'", independent="s", constraints=["x'^2 + y'^2 = 1"])
    result = necessary_conditions(given)
    assert texts(result, "Euler-Lagrange")[0] == "x: -y' + 2*x'*μ' + 2*μ*x'' = y'"
    assert result.notes == ("μ is the multiplier of x'^2 + y'^2 = 1; it varies along the curve.",)


def test_implicit_dynamics_are_an_equality():
    given = problem({"x": 1, "u": 0}, "u^2", independent="t", constants=["m", "k"], dynamics=["m*x' + k*x = u"])
    assert texts(necessary_conditions(given), "Euler-Lagrange") == ["x: m*μ' = μ*k", "u: 2*u - μ = 0"]


def test_a_free_number_inside_has_its_own_condition():
    given = problem({"y": 1}, "y'^2 + (y - c)^2", endpoint="c^2", parameters=["c"])
    assert texts(necessary_conditions(given), "stationarity") == ["c: c - integral(y - c) = 0"]


def test_letters_of_the_problem_are_not_taken_twice():
    given = problem({"y": 1}, "y'^2", constants=["λ", "lambda1", "L", "C"], integrals=["integral(y) = 1"])
    assert texts(necessary_conditions(given)) == [
        "ℒ: ℒ = y'^2 + Λ*y",
        "y: 2*y'' = Λ",
        "y: y' = 0 at x = 0",
        "y: y' = 0 at x = 1",
        "x: -y'^2 + Λ*y = E",
    ]


def test_limits_on_derivatives_alone_ask_for_the_hamiltonian():
    given = problem(
        {"y": 2}, independent="t", ends=("0", "T"), endpoint="T", parameters=["T"], constraints=["y'' <= 1"],
        endpoints=["y(0) = 0", "y'(0) = 0", "y(T) = 1", "y'(T) = 0"],
    )  # fmt: skip
    assert texts(necessary_conditions(given)) == [
        "H: H = p_y*y' + p_y_1*y''",
        "y: p_y' = 0",
        "y': p_y_1' = -p_y",
        "y'': p_y_1 = 0",
        "T: H = -1 at t = T",
        "t: H = C",
    ]


def test_what_depends_on_the_independent_variable_has_no_first_integral():
    assert not texts(necessary_conditions(problem({"y": 1}, "x*y'^2")), "first integral")
    assert not texts(necessary_conditions(problem({"y": 1}, "y'^2", constraints=["y - x >= 0"])), "first integral")
    assert texts(necessary_conditions(problem({"y": 1}, "y'^2")), "first integral") == ["x: y'^2 = C"]


def test_way_points_are_mentioned():
    result = necessary_conditions(problem({"y": 2}, "y''^2", inner=["0.5"], endpoints=["y(0.5) = 1"]))
    assert result.notes == ("At 0.5 the momenta or costates may jump.",)


# ---- limits ----


def test_what_is_too_large_is_left_out_with_a_note():
    doubling = [("a0", "y + y'"), *((f"a{i + 1}", f"a{i}*a{i}") for i in range(20))]
    result = necessary_conditions(problem({"y": 1}, "a20", where=doubling))
    assert result.conditions == ()
    assert "written out, the formula has" in result.notes[0] and "the limit is 4,000" in result.notes[0]


def test_a_long_condition_is_left_out_alone():
    terms = " + ".join(f"sin({i}*y')*y" for i in range(1, 80))
    result = necessary_conditions(problem({"y": 1, "z": 1}, f"{terms} + z'^2", endpoints=["y(0) = 0", "y(1) = 0"]))
    assert texts(result, "Euler-Lagrange") == ["z: z'' = 0"]
    assert any(note.startswith("The Euler-Lagrange condition of y is left out: ") for note in result.notes)


def test_a_deadline_ends_the_derivation_with_a_note():
    result = necessary_conditions(problem({"y": 1}, "y'^2"), deadline=time.monotonic() - 1)
    assert result.conditions == ()
    assert result.notes == ("Some necessary conditions are left out: deriving them takes too long.",)


def test_a_condition_prints_as_mathml_with_its_place():
    (found,) = [
        c
        for c in necessary_conditions(problem({"y": 1}, "y'^2", endpoints=["y(0) = 0"])).conditions
        if c.kind == "natural boundary"
    ]
    assert found.mathml == (
        '<math display="block"><semantics><mrow><msup><mi>y</mi><mrow><mo>′</mo></mrow></msup><mo>=</mo><mn>0</mn>'
        "<mtext>\u2002at\u2002</mtext><mi>x</mi><mo>=</mo><mn>1</mn></mrow>"
        '<annotation encoding="text/plain">y\' = 0 at x = 1</annotation></semantics></math>'
    )
