"""A document becomes the problem that a reader of it would write down."""

import math
import pickle

import pytest

from solvers.formula.nodes import At, Name, walk
from solvers.formula.printer import text
from solvers.problem import Role, Seek
from solvers.units import Unit
from tests.unit.service.assemble.stating import shape, stated


def _limits(condition):
    return tuple(None if limit is None else text(limit) for limit in (condition.lower, condition.upper))


@pytest.mark.parametrize(
    ("members", "orders"),
    [
        ({}, {"x": 1, "u": 0}),
        ({"dynamics": ["x'' = u"]}, {"x": 2, "u": 0}),
        ({"constraints": ["-1 <= u' <= 1"]}, {"x": 1, "u": 1}),
        ({"where": {"jerk": "x'''"}, "constraints": ["jerk <= 1"]}, {"x": 3, "u": 0}),
        ({"where": {"never": "x'''"}}, {"x": 3, "u": 0}),
        ({"dynamics": ["x''' = u"], "endpoints": ["x''(0) = 0"]}, {"x": 3, "u": 0}),
    ],
)
def test_the_order_is_the_highest_derivative_anywhere(members, orders):
    problem = stated(**members)
    assert {unknown.name: unknown.order for unknown in problem.unknowns} == orders
    assert [unknown.role for unknown in problem.unknowns] == [
        Role.STATE if order else Role.CONTROL for order in orders.values()
    ]


@pytest.mark.parametrize(
    ("line", "determines"),
    [
        ("x' = u", ("x", 1)),
        ("u = x'", ("x", 1)),  # sides turned
        ("x' = u - x", ("x", 1)),
        ("2*x' = u", None),
        ("x' + x = u", None),
        ("x' = u*sin(x')", None),  # the right side needs it too
        ("u = 2*x", None),  # nothing moves here
        ("x' = speed", ("x", 1)),
        ("x' = loop", None),  # through an abbreviation
    ],
)
def test_explicit_lines_are_recognised(line, determines):
    problem = stated(dynamics=[line], where={"speed": "u/2", "loop": "u + x'"}, endpoints=["x(0) = 0"])
    (equation,) = problem.dynamics
    assert equation.determines == determines
    if determines:
        assert equation.left == Name("x", 1, equation.left.span)
    assert equation.label == line


def test_a_line_below_the_highest_order_holds_as_an_equality():
    problem = stated(constraints=["x'' <= 3"])
    assert problem.dynamics[0].determines is None


@pytest.mark.parametrize(
    ("relation", "expected"),
    [
        ("x <= 3", [("x", None, "3")]),
        ("3 >= x", [("x", None, "3")]),
        ("x >= 3", [("x", "3", None)]),
        ("-1 <= x <= 2*c", [("x", "-1", "2*c")]),
        ("2 >= x >= c", [("x", "c", "2")]),
        ("x <= u", [("x - u", None, "0")]),
        ("x >= u", [("x - u", "0", None)]),
        ("x = u", [("x - u", "0", "0")]),
        ("x = c", [("x", "c", "c")]),
        ("x <= u <= 3", [("u - x", "0", None), ("u", None, "3")]),  # the middle is what is limited
        ("0 <= x <= u", [("x", "0", None), ("x - u", None, "0")]),
        ("0 <= x <= u <= 1", [("x", "0", None), ("u - x", "0", None), ("u", None, "1")]),
        ("x <= c*x", [("x - c*x", None, "0")]),
    ],
)
def test_relations_become_conditions(relation, expected):
    problem = stated(constraints=[relation], constants={"c": 1.5}, endpoints=[])
    assert [(text(one.body), *_limits(one)) for one in problem.constraints] == expected
    assert all(one.label == relation and one.pointer == "/constraints/0" for one in problem.constraints)


def test_an_equality_has_one_tree_for_both_limits_also_after_the_way_to_a_worker():
    problem = pickle.loads(pickle.dumps(stated(dynamics=[], constraints=["x + x' = 2*u", "u <= 3"])))
    equality, limit = problem.constraints
    assert equality.equality
    assert not limit.equality
    assert all(one.equality for one in problem.endpoints)


def test_constraints_are_sorted_by_what_they_depend_on():
    problem = stated(
        parameters={"p": {}},
        constraints=["u <= 9", "x(0.3) = 0.2", "integral(x) <= 1", "p >= 0.1", "integral(u^2) = p", "p*x(1) <= 4"],
    )
    assert [one.label for one in problem.constraints] == ["u <= 9"]
    assert [one.label for one in problem.integrals] == ["integral(x) <= 1", "integral(u^2) = p"]
    assert [one.label for one in problem.endpoints[2:]] == ["x(0.3) = 0.2", "p >= 0.1", "p*x(1) <= 4"]


def test_places_come_in_order_and_conditions_name_the_very_trees():
    problem = stated(
        constants={"c": 0.25, "one": 1.0},
        endpoints=["x(0.5) = 1", "x(c) = 0.2", "x(0) = 0", "x(one) = 2", "x(2*c) <= 9"],
    )
    assert [place.label for place in problem.places] == ["0", "c", "0.5", "1"]
    trees = [place.tree for place in problem.places]
    for condition in problem.endpoints:
        for node in walk(condition.body):
            if isinstance(node, At):
                assert any(node.place is tree for tree in trees)


def test_an_end_may_be_a_formula_of_constants():
    problem = stated(independent={"name": "t", "from": 0, "to": "pi/2"}, endpoints=["x(pi/2) = 1", "x(0) = 0"])
    assert len(problem.places) == 2


def test_names_of_one_place_differ_by_rounding_only():
    problem = stated(constants={"c": 0.1}, endpoints=["x(3*c) = 1", "x(0.3) <= 2", "x(1e-15) = 0"])
    assert [place.label for place in problem.places] == ["0", "3*c", "1"]


def test_a_free_end_needs_no_bounds():
    problem = stated(
        independent={"name": "t", "from": 0, "to": "T"}, parameters={"T": {}}, endpoints=["x(0.3) = 1", "x(T) = 2"]
    )
    assert [place.label for place in problem.places] == ["0", "0.3", "T"]


def test_free_places_are_parameters():
    problem = stated(
        independent={"name": "t", "from": 0, "to": "T"},
        parameters={"T": {"within": [3, 9]}, "s": {"within": [1, 2]}},
        endpoints=["x(s) = 1", "x(T) = 2", "x(2.5) = 1.5"],
    )
    assert [text(place.tree) for place in problem.places] == ["0", "s", "2.5", "T"]


def test_abbreviations_that_run_stay_names_and_others_are_written_out():
    problem = stated(
        parameters={"p": {"within": [0, 9]}},
        constants={"c": 2},
        where={"power": "u*x", "start": "x(0)", "twice": "2*c", "more": "start + twice", "half": "p/2"},
        constraints=["power <= twice", "x(1) - more <= half"],
        endpoints=["x(1) = 1"],
    )
    running, placed = problem.constraints[0], problem.endpoints[1]
    assert [name for name, _ in problem.where] == ["power", "twice", "half"]
    assert (text(running.body), *_limits(running)) == ("power", None, "2*c")
    assert text(placed.body) == "(x(1) - (x(0) + 2*c)) - p/2"


def test_abbreviations_come_in_an_order_in_which_each_uses_earlier_ones():
    problem = stated(
        where={"a": "b*c", "b": "x + d", "c": "d^2", "d": "u"}, functional={"seek": "minimum", "integrand": "a"}
    )
    order = [name for name, _ in problem.where]
    for name, tree in problem.where:
        used = {node.name for node in walk(tree) if isinstance(node, Name)} & set(order)
        assert all(order.index(other) < order.index(name) for other in used)


def test_a_long_chain_of_abbreviations_stays_small():
    where = {"a0": "x + u"} | {f"a{n}": f"a{n - 1}*a{n - 1}" for n in range(1, 99)}
    problem = stated(where=where, constraints=["a98 <= 1e300", "a50*a51 >= 0"])
    assert len(problem.where) == 99


@pytest.mark.parametrize(
    ("word", "seek"), [("minimum", Seek.MINIMUM), ("maximum", Seek.MAXIMUM), ("stationary", Seek.STATIONARY)]
)
def test_what_is_sought(word, seek):
    problem = stated(functional={"seek": word, "endpoint": "x(1)^2", "integrand": "u^2"})
    assert problem.seek is seek
    assert text(problem.endpoint) == "x(1)^2"


def test_a_boundary_value_problem_seeks_nothing():
    # Flow in a channel: a fourth-order equation with four conditions.
    problem = stated(
        unknowns={"u": {}},
        dynamics=["u'''' = 10*(u'*u'' - u*u''')"],
        functional={"seek": "minimum", "endpoint": "0"},
        endpoints=["u(0) = 0", "u'(0) = 0", "u(1) = 1", "u'(1) = 0"],
    )
    assert problem.integrand is None
    assert problem.dynamics[0].determines == ("u", 4)


def test_options_and_guesses():
    problem = stated(
        independent={"name": "t", "unit": "ms", "from": 0, "to": "T"},
        parameters={"T": {"unit": "ms", "within": [1, None]}},
        unknowns={"x": {"unit": "mm"}, "u": {"unit": "mm/ms"}},
        endpoints=["x(0) = 0", "x(T) = 4"],
        guess={"T": 500, "x": [[0, 0], [500, 4]], "u": "2 + t/T"},
        solve={"tolerance": 1e-4, "time_limit": 5, "starts": 3, "points": 400},
    )
    assert (problem.options.tolerance, problem.options.time_limit) == (1e-4, 5)
    assert (problem.options.starts, problem.options.points) == (3, 400)
    assert problem.parameters[0].guess == pytest.approx(0.5)
    assert problem.parameters[0].lower == pytest.approx(1e-3)
    assert problem.parameters[0].upper == math.inf
    x, u = problem.unknowns
    assert x.guess == ((0, 0), pytest.approx((0.5, 0.004)))
    assert text(u.guess) in ("1.0*(2 + t/T)", "2 + t/T")


def test_derivatives_of_all_orders_up_to_six():
    problem = shape(functional={"seek": "minimum", "integrand": "y''''''^2"}, endpoints=["y'''''(3) = 0"])
    assert problem.unknowns[0].order == 6
    assert problem.value_unit == Unit("1/m^9")
