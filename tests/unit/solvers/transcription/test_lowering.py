"""Problems of any order as problems of first order."""

import pytest

from solvers.formula.parser import parse_expression
from solvers.formula.printer import text
from solvers.problem import Condition
from solvers.transcription.lowering import lower, primed, simple_bound
from tests.unit.solvers.problems import shape, stated


def given(lowered):
    return {primed(quantity): text(tree) for quantity, tree in lowered.given.items()}


def test_dynamics_make_states_of_all_orders_below_the_highest():
    lowered = lower(stated(unknowns={"x": {}, "u": {}}, dynamics=["x''' = u - x''"], endpoints=["x(0) = 0"]))
    assert lowered.states == (("x", 0), ("x", 1), ("x", 2))
    assert lowered.controls == (("u", 0),)
    assert given(lowered) == {"x'''": "u - x''"}
    assert lowered.equalities == ()


def test_without_dynamics_the_highest_derivative_is_free():
    lowered = lower(shape(functional={"seek": "minimum", "integrand": "y''^2"}, endpoints=["y(0) = 0", "y'(0) = 0"]))
    assert lowered.states == (("y", 0), ("y", 1))
    assert lowered.controls == (("y", 2),)
    assert lowered.given == {}


def test_an_implicit_line_is_an_equality_and_leaves_the_derivative_free():
    lowered = lower(stated(dynamics=["2*x' + x = u"]))
    assert lowered.states == (("x", 0),)
    assert lowered.controls == (("x", 1), ("u", 0))
    assert [line.label for line in lowered.equalities] == ["2*x' + x = u"]


def test_a_derivative_in_another_derivatives_formula_stays_explicit():
    lowered = lower(stated(unknowns={"x": {}, "y": {}, "u": {}}, dynamics=["x' = y' + u", "y' = x"]))
    assert given(lowered) == {"x'": "y' + u", "y'": "x"}
    assert lowered.equalities == ()


@pytest.mark.parametrize(
    "where, dynamics",
    [
        ({}, ["x' = y' + u", "y' = x' - x"]),
        ({"r": "y' + u"}, ["x' = r", "y' = x'/2"]),  # the circle goes through an abbreviation
        ({"q": "y'", "r": "q + u"}, ["x' = r", "y' = x'/2"]),  # ... and through an abbreviation of one
    ],
)
def test_a_circle_is_broken_by_one_equality(where, dynamics):
    lowered = lower(stated(unknowns={"x": {}, "y": {}, "u": {}}, where=where, dynamics=dynamics))
    assert len(lowered.given) == 1
    assert len(lowered.equalities) == 1
    free = [quantity for quantity in lowered.controls if quantity[1] == 1]
    assert len(free) == 1
    assert free[0] not in lowered.given


def test_a_derivative_that_needs_itself_through_an_abbreviation_is_an_equality():
    lowered = lower(stated(where={"r": "x'/2 + u"}, dynamics=["x' = r"]))
    assert lowered.given == {}
    assert len(lowered.equalities) == 1


def test_simple_bound_is_a_body_that_is_one_quantity():
    assert simple_bound(Condition(parse_expression("x'"), None, None, "", "")) == ("x", 1)
    assert simple_bound(Condition(parse_expression("2*x'"), None, None, "", "")) is None


def test_primed_reads_as_people_write():
    assert primed(("x", 0)) == "x"
    assert primed(("x", 3)) == "x'''"
