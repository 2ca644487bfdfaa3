"""Elimination against the rank of numpy, and the names of what contradicts what."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from service.assemble.linear import Form, System, linear
from solvers.formula.nodes import Name
from solvers.formula.parser import parse_expression

ROWS = st.integers(1, 6).flatmap(
    lambda width: st.lists(st.lists(st.integers(-3, 3), min_size=width, max_size=width), min_size=1, max_size=8)
)


def _form(row, constant):
    return Form({f"v{i}": float(weight) for i, weight in enumerate(row) if weight}, float(constant), abs(constant))


@settings(deadline=None)
@given(ROWS, st.data())
def test_as_many_rows_stay_as_numpy_finds_independent(rows, data):
    solution = np.array(data.draw(st.lists(st.integers(-4, 4), min_size=len(rows[0]), max_size=len(rows[0]))))
    system = System()
    for index, row in enumerate(rows):
        system.add(index, _form(row, -np.dot(row, solution)))
    assert len(system.rows) == np.linalg.matrix_rank(np.array(rows))
    assert not any(conflict.contradicts for conflict in system.conflicts)
    for variable, (value, _) in system.fixed().items():
        assert value == pytest.approx(solution[int(variable[1:])], abs=1e-9)


@settings(deadline=None)
@given(ROWS, st.integers(0, 7), st.integers(1, 9))
def test_a_row_that_was_disturbed_contradicts_exactly_where_the_rank_says(rows, which, shift):
    which %= len(rows)
    constants = [shift if index == which else 0 for index in range(len(rows))]
    system = System()
    for index, (row, constant) in enumerate(zip(rows, constants, strict=True)):
        system.add(index, _form(row, constant))
    matrix = np.array(rows, dtype=float)
    extended = np.column_stack([matrix, constants])
    contradictory = np.linalg.matrix_rank(extended) > np.linalg.matrix_rank(matrix)
    assert any(conflict.contradicts for conflict in system.conflicts) == contradictory


@settings(deadline=None)
@given(ROWS)
def test_a_conflict_names_rows_that_are_dependent_without_which_it_is_none(rows):
    system = System()
    for index, row in enumerate(rows):
        system.add(index, _form(row, 0))
    for conflict in system.conflicts:
        others = np.array([rows[other] for other in conflict.others] or [[0] * len(rows[0])])
        together = np.vstack([others, rows[conflict.condition]])
        assert np.linalg.matrix_rank(together) == np.linalg.matrix_rank(others) == len(conflict.others)


@pytest.mark.parametrize(
    ("formula", "terms", "constant"),
    [
        ("x", {"x": 1}, 0),
        ("2*x - y/4 + 3", {"x": 2, "y": -0.25}, 3),
        ("-(x - c)*2", {"x": -2}, 6),
        ("c^2 + sqrt(16)", {}, 13),
        ("x*c/2", {"x": 1.5}, 0),
        ("x - x", {}, 0),
        ("0*x", {}, 0),
        ("0.1*x + 0.2*x - 0.3*x", {}, 0),
    ],
)
def test_linear_forms(formula, terms, constant):
    form = linear(parse_expression(formula), {"c": 3.0}, _variable)
    assert form is not None
    assert form.terms == pytest.approx(terms)
    assert form.constant == pytest.approx(constant)


@pytest.mark.parametrize("formula", ["x*y", "x^2", "1/x", "sin(x)", "x/0", "x*(y + 1)", "integral(x)", "abs(x)"])
def test_what_is_not_linear(formula):
    assert linear(parse_expression(formula), {}, _variable) is None


def _variable(node):
    return node.name if isinstance(node, Name) and node.name in "xy" else None
