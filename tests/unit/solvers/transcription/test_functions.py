"""The two small functions of a problem: values against the formulas, and what each condition becomes."""

import casadi as ca
import numpy as np
import pytest

from solvers.formula.evaluate import REAL
from solvers.formula.nodes import SIDE
from solvers.transcription.functions import OPERATIONS, WITHIN, linear_controls
from tests.unit.solvers.problems import LEAST_TIME, compiled, shape, stated


def numeric(name, *values):
    return float(ca.DM(ca.evalf(ca.SX(OPERATIONS[name](*(ca.SX(value) for value in values))))))


def test_every_operation_is_that_of_the_formulas():
    within = {name for name in OPERATIONS if name.endswith(WITHIN)}
    assert {*OPERATIONS, "table"} - within == set(REAL)  # what a table is depends on the problem
    rng = np.random.default_rng(1)
    for name in {*OPERATIONS} - within:
        for _ in range(5):
            values = rng.uniform(0.1, 0.9, 2 if name in ("atan2", "hypot", "power", "min", "max", SIDE) else 1)
            assert numeric(name, *values) == pytest.approx(REAL[name](*values), rel=1e-12)
    assert numeric("min", 3, 1, 2) == pytest.approx(1, abs=1e-8)
    assert numeric("max", 3, 1, 2) == pytest.approx(3, abs=1e-8)


@pytest.mark.parametrize("name", ("abs", "sign", "min", "max"))
def test_corners_are_rounded_so_that_slopes_are_finite(name):
    x = ca.SX.sym("x")
    body = OPERATIONS[name](x, -x) if name in ("min", "max") else OPERATIONS[name](x)
    slopes = ca.Function("slopes", [x], [ca.jacobian(body, x), ca.hessian(body, x)[0]])
    for at in (-1.0, 0.0, 1e-12, 1.0):
        assert np.all(np.isfinite([float(value) for value in slopes(at)]))


def test_rates_and_integrands_are_per_fraction_of_the_stretch():
    functions = compiled(stated(dynamics=["x' = 3*t*u"], functional={"integrand": "x + u^2"}, endpoints=["x(0) = 0"]))
    v, d = [2.0, 5.0, 1.0, 3.0], [0.25]  # x, u, start, end; a quarter of the stretch: t = 1.5, length 2
    assert np.asarray(functions.point.value(v, d)).ravel() == pytest.approx([2 * 3 * 1.5 * 5, 2 * (2 + 25)])


def test_abbreviations_of_derivatives_are_written_out():
    functions = compiled(
        stated(where={"w": "x' - 1", "e": "w^2"}, dynamics=["x' = 2*u"], functional={"integrand": "e"})
    )
    assert np.asarray(functions.point.value([7, 3, 0, 1], [0.5])).ravel() == pytest.approx([6, 25])


def test_each_condition_becomes_what_it_costs_least_as():
    functions = compiled(
        shape(
            functional={"integrand": "y'^2"},
            endpoints=["y(0) = 0", "y(3) <= 2", "y(0) = y(1)", "y(2) = 1"],
            constraints=["y >= -1", "y' <= 5", "y + x <= 7", "integral(y) = 1"],
        )
    )
    labels = [condition.label for condition in functions.pointwise]
    assert labels == ["y + x <= 7"]
    assert [(quantity, condition.label) for quantity, condition in functions.bounds] == [
        (("y", 0), "y >= -1"), (("y", 1), "y' <= 5")
    ]  # fmt: skip
    assert [(state, place, condition.label) for state, place, condition in functions.fixed] == [
        (0, 0, "y(0) = 0"), (0, 3, "y(3) <= 2"), (0, 2, "y(2) = 1")
    ]  # fmt: skip
    assert [condition.label for condition in functions.conditions] == ["y(0) = y(1)", "integral(y) = 1"]


def test_an_equality_of_one_quantity_is_no_bound():
    """A variable fixed at every point would leave nothing for the multiplier of the condition."""
    functions = compiled(stated(constraints=["u = 1"], endpoints=["x(0) = 0"]))
    assert functions.bounds == ()
    assert [condition.label for condition in functions.pointwise] == ["u = 1"]


def test_an_endpoint_value_of_a_given_derivative_is_its_formula():
    functions = compiled(stated(dynamics=["x' = u", "u' = x*w"], unknowns={"x": {}, "u": {}, "w": {}},
                                endpoints=["x(0) = 0", "x'(1) = 4"], functional={"integrand": "w^2"}))  # fmt: skip
    y = [1, 2, 3, 4, 0, 1]  # x, u at 0; x, u at 1; places
    assert float(functions.end.value(y, [])[0]) == 4


@pytest.mark.parametrize(
    "members, found",
    [
        (LEAST_TIME, [0]),
        (LEAST_TIME | {"functional": {"integrand": "u^2"}}, []),  # quadratic in the integrand
        (LEAST_TIME | {"dynamics": ["x'' = u^3"]}, []),
        (LEAST_TIME | {"unknowns": {"x": {}, "u": {}}}, []),  # unbounded: nothing to switch between
        (LEAST_TIME | {"unknowns": {"x": {}, "u": {}}, "constraints": ["-1 <= u <= 2"]}, [0]),
        (LEAST_TIME | {"dynamics": ["x'' = u*x*exp(t)"]}, [0]),
    ],
)
def test_linear_controls(members, found):
    assert linear_controls(compiled(stated(**members))) == found


@pytest.mark.parametrize(
    "bounds, conditions",
    [
        ([None, None], ["0 before T"]),
        ([0.5, None], []),  # its own bound sees to it
        ([-1, 5], ["0 before T"]),
        ([None, 5], ["0 before T"]),
    ],
)
def test_a_free_end_stays_behind_the_start(bounds, conditions):
    functions = compiled(stated(**LEAST_TIME | {"parameters": {"T": {"within": bounds}}}))
    assert [condition.label for condition in functions.conditions] == conditions


def test_free_places_stay_in_order():
    functions = compiled(
        stated(
            independent={"name": "t", "from": 0, "to": 9},
            parameters={"a": {"within": [0, 4]}, "b": {"within": [3, 9]}},
            endpoints=["x(0) = 0", "x(a) = 1", "x(b) = -1", "x(9) = 0"],
        )
    )
    assert [condition.label for condition in functions.conditions] == ["a before b"]
    y = [0, 1, -1, 0, 0, 3.5, 3.25, 9, 3.5, 3.25]  # states and values of the places, then the parameters
    assert float(functions.end.value(y, [])[0]) == -0.25
