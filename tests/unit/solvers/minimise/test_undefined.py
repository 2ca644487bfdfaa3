"""Where a formula has no value: the smallest part, its place, what goes into it."""

import numpy as np
import pytest

from solvers.minimise.undefined import undefined_places
from solvers.transcription.layout import layout
from solvers.transcription.mesh import uniform
from tests.unit.solvers.problems import compiled, shape, start_of, stated


def findings(problem):
    mesh = uniform(1, 4, 4)
    functions = compiled(problem)
    return undefined_places(functions, layout(functions, mesh), start_of(problem, mesh))


def line(integrand, **members):
    """y = 1 - x along 0 to 3: it crosses zero at 1."""
    return findings(shape(functional={"integrand": integrand}, endpoints=["y(0) = 1", "y(3) = -2"],
                          guess={"y": "1 - x"}, **members))  # fmt: skip


def test_the_smallest_part_and_the_first_place_are_named():
    (found,) = line("y'^2 + 2*sqrt(exp(x)*y)/(1 + x)")
    assert found.label == "sqrt(exp(x)*y)"
    assert found.pointer == "/functional/integrand"
    assert found.place == pytest.approx(1.0, abs=0.3)
    assert found.place > 1
    assert found.note.startswith("with exp(x)*y = -")


def test_what_goes_in_is_told_with_its_values():
    (found,) = line("y'^2 + y^x")
    assert found.label == "y^x"
    base, exponent = found.note.removeprefix("with ").split(", ")
    assert float(base.split(" = ")[1]) == pytest.approx(1 - found.place, rel=1e-4)
    assert float(exponent.split(" = ")[1]) == pytest.approx(found.place, rel=1e-4)


def test_division_by_zero():
    (found,) = findings(shape(functional={"integrand": "y'^2/(y - 1)"}, endpoints=["y(0) = 1", "y(3) = 1"]))
    assert found.label == "y'^2/(y - 1)"
    assert "y - 1 = 0" in found.note


def test_parts_of_abbreviations_are_found_where_they_are_written():
    (found,) = line("y'^2 + w", where={"w": "log(y)"})
    assert (found.label, found.pointer) == ("log(y)", "/where/w")


def test_dynamics_and_constraints_are_looked_at():
    problem = stated(dynamics=["x' = u + asin(x + 2)"], constraints=["acos(x + 3) <= 9"], endpoints=["x(0) = 0"])
    found = {(one.label, one.pointer) for one in findings(problem)}
    assert found == {("asin(x + 2)", "/dynamics/0"), ("acos(x + 3)", "/constraints/0")}


def test_each_part_is_named_once():
    assert [one.label for one in line("sqrt(y) + 3*sqrt(y)*y'^2")] == ["sqrt(y)"]


def test_a_sound_problem_has_none():
    assert findings(shape(endpoints=["y(0) = 1", "y(3) = 2"])) == ()


def test_no_warning_leaves_the_search():
    with np.errstate(all="raise"):
        assert line("y'^2 + log(y)")


FLAT = {"functional": {"integrand": "(y'^2)^0.75 - y"}, "endpoints": ["y(0) = 0", "y(3) = 0"]}


def test_what_has_a_value_but_no_derivative_is_found():
    """(y'^2)^0.75 is |y'|^1.5, told so that its slope is an infinite number times zero where y' is zero."""
    (found,) = findings(shape(**FLAT))
    assert found.label == "(y'^2)^0.75"
    assert found.pointer == "/functional/integrand"
    assert found.note == "no finite derivatives by its parts, with y'^2 = 0"


def test_a_second_derivative_counts_too():
    (found,) = findings(shape(**FLAT | {"functional": {"integrand": "y'^2 + sqrt(y)^3*(1 + x)^p + x^1.5"}},
                              parameters={"p": {}}))  # fmt: skip
    assert found.label == "sqrt(y)"
    (found,) = findings(shape(**FLAT | {"functional": {"integrand": "y'^2 + (x*y)^1.5"}}))
    assert found.label == "(x*y)^1.5"


@pytest.mark.parametrize("integrand", ["y'^2 + y^3/2 + abs(y)", "y'^2 + hypot(y, 1) + max(y, x)", "y'^2 + c^y + y^c"])
def test_what_can_be_differentiated_twice_is_not_named(integrand):
    assert findings(shape(**FLAT | {"functional": {"integrand": integrand}}, constants={"c": 1})) == ()
