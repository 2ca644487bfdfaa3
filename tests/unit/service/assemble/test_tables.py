"""Tables in documents: converted to SI, used in formulas, and their ranges kept."""

import numpy as np
import pytest

from service.complaints import Refused
from solvers.formula.evaluate import REAL, evaluate
from solvers.formula.nodes import Lookup, walk
from tests.unit.service.assemble.stating import stated

N = {"of": {"r": "mm"}, "points": [[-2, 1.5], [0, 1.6], [2, 1.4]], "unit": "1"}
G = {"of": {"T": "K", "p": "bar"}, "unit": "kJ/kg", "points": [[None, 1, 2, 5], [300, 10, 11, 12], [400, 20, 22, 24]]}


def lens(**members):
    given = {
        "independent": {"name": "z", "unit": "mm", "from": 0, "to": 12},
        "unknowns": {"r": {"unit": "mm"}},
        "tables": {"n": N},
        "dynamics": None,
        "functional": {"seek": "minimum", "integrand": "n(r)*sqrt(1 + r'^2)"},
        "endpoints": ["r(0) = 0.8", "r(12) = -0.5"],
    }
    return stated(**given | members)


def ranges(problem):
    return {
        c.label: (c.lower.value, c.upper.value)
        for c in (*problem.constraints, *problem.endpoints)
        if c.pointer.startswith("/tables/")
    }


def test_points_are_converted_to_si():
    (table,) = lens().tables
    np.testing.assert_allclose(table.knots[0], [-2e-3, 0, 2e-3], rtol=1e-15)
    np.testing.assert_allclose(table.value([-2e-3, 0, 2e-3]), [1.5, 1.6, 1.4], rtol=1e-14)
    assert (table.argument_units[0].text, table.unit.text) == ("mm", "1")


def test_a_grid_is_read_with_its_head_and_its_first_column():
    problem = stated(tables={"g": G}, constants={"T0": "350 K", "p0": "200 kPa"}, functional={
        "seek": "minimum", "integrand": "u^2", "endpoint": "x(1)*g(T0, p0)/g(T0, 2)"})  # fmt: skip
    (table,) = problem.tables
    np.testing.assert_allclose(table.knots[0], [300, 400])
    np.testing.assert_allclose(table.knots[1], [1e5, 2e5, 5e5])
    np.testing.assert_allclose(table.values, np.array([[10, 11, 12], [20, 22, 24]]) * 1e3)
    assert table.value(350, 2e5) == pytest.approx(16.5e3)


def test_the_trees_hold_the_table():
    problem = lens()
    (use,) = [node for node in walk(problem.integrand) if isinstance(node, Lookup)]
    assert use.table is problem.tables[0]
    assert evaluate(use, lambda name, order: 1e-3, REAL) == pytest.approx(problem.tables[0].value(1e-3))


def test_a_bare_number_is_in_the_unit_of_the_argument():
    problem = lens(functional={"seek": "minimum", "integrand": "(n(r) - n(-2))*r'^2"})
    given = [node for node in walk(problem.integrand) if isinstance(node, Lookup)][1]
    assert evaluate(given, {}.get, REAL) == pytest.approx(1.5)


@pytest.mark.parametrize(
    ("members", "expected"),
    [
        pytest.param({}, {"r in the range of n": (-2e-3, 2e-3)}, id="an unknown is bounded along the curve"),
        pytest.param({"unknowns": {"r": {"unit": "mm", "within": [-1, 1]}}}, {}, id="unless its own bounds do"),
        pytest.param({"tables": {"n": N | {"outside": "hold"}}}, {}, id="or nothing is refused"),
        pytest.param(
            {"where": {"d": "r^2"}, "constants": {"k": "1 mm"}, "functional": {"integrand": "n(d/k)*r'^2"}},
            {"d/k in the range of n": (-2e-3, 2e-3)},
            id="so is a formula",
        ),
        pytest.param(
            {"functional": {"integrand": "n(r)*r'^2 + n(r)"}, "constraints": ["n(r) >= 1"]},
            {"r in the range of n": (-2e-3, 2e-3)},
            id="only once",
        ),
        pytest.param(
            {"functional": {"endpoint": "n(r(12))"}, "constraints": ["r' <= 1"], "endpoints": []},
            {"r(12) in the range of n": (-2e-3, 2e-3)},
            id="a value at a place is bounded there",
        ),
        pytest.param(
            {"parameters": {"p": {"unit": "mm"}}, "functional": {"endpoint": "n(p)"}, "constraints": ["r' <= 1"]},
            {"p in the range of n": (-2e-3, 2e-3)},
            id="a parameter by itself",
        ),
        pytest.param(
            {
                "parameters": {"L": {"unit": "mm"}},
                "independent": {"name": "z", "unit": "mm", "from": 0, "to": "L"},
                "functional": {"integrand": "n(z)*r'^2"},
                "endpoints": ["r(0) = 0", "r(L) = 1"],
            },
            {"z in the range of n": (-2e-3, 2e-3)},
            id="the independent variable by its free end",
        ),
    ],
)
def test_arguments_are_kept_in_the_range(members, expected):
    members = {**members}
    if "functional" in members:
        members["functional"] = {"seek": "minimum"} | members["functional"]
    assert ranges(lens(**members)) == expected


@pytest.mark.parametrize(
    ("members", "message"),
    [
        pytest.param({"functional": {"integrand": "n(z)*r'^2"}}, "“z” is 2.04 mm: outside", id="a run beyond"),
        pytest.param({"functional": {"integrand": "n(z/4)*r'^2"}}, "“z/4” at z = 8.04 mm is 2.01 mm", id="a formula"),
        pytest.param(
            {"constants": {"a": "3 mm"}, "where": {"b": "2*a"}, "functional": {"integrand": "n(b)*r'^2"}},
            "“b” is 6 mm: outside of the range of n, -2 to 2 mm.",
            id="a number",
        ),
    ],
)
def test_what_nothing_can_bring_inside_is_refused(members, message):
    with pytest.raises(Refused, match=message) as refusal:
        lens(**members | {"functional": {"seek": "minimum"} | members["functional"]})
    (complaint,) = refusal.value.complaints
    assert (complaint.code, complaint.pointer) == ("outside-range", "/functional/integrand")


def test_the_unit_of_a_value_and_of_a_slope():
    members = {"tables": {"g": G}, "unknowns": {"x": {"unit": "K"}, "u": {"unit": "K/s"}},
               "independent": {"name": "t", "unit": "s", "from": 0, "to": 1}, "constants": {"p": "2 bar"}}  # fmt: skip
    problem = stated(**members, functional={"seek": "minimum", "integrand": "g_T(x, p)*u", "endpoint": "g(x(1), p)"},
                     endpoints=["x(0) = 300"])  # fmt: skip
    assert problem.value_unit.factor == pytest.approx(1e3)  # kJ/kg
