"""Units inside formulas: what is converted, what clashes, what is left alone."""

import math

import pytest

from service.complaints import Refused
from solvers.formula.evaluate import REAL, evaluate
from solvers.units import Unit
from tests.unit.service.assemble.stating import shape, stated

SLOPE = {"constants": {"s": "1 m/m"}, "constraints": ["y' <= s"]}
MILLIMETRES = {"unknowns": {"y": {"unit": "mm"}}}


def _value(tree, **names):
    return evaluate(tree, lambda name, order: names[name], REAL)


@pytest.mark.parametrize(
    ("relation", "value", "unit"),
    [
        ("y <= 80", 0.080, "mm"),
        ("y >= -80", -0.080, "mm"),
        ("y' <= 80", 80e-3, "mm/s"),
        ("y''' <= 80", 80e-3, "mm/s^3"),
        ("y <= 160/2", 0.080, "mm"),
        ("y <= 0", 0.0, "mm"),
        ("y^2 <= 9", 9e-6, "mm^2"),
        ("y <= c", 2.0, "mm"),  # a constant with its own unit
        ("y <= n", 3e-3, "mm"),  # a constant without unit is a bare number
        ("integral(y) <= 5", 5e-3, "mm*s"),
        ("sqrt(abs(y)) <= 2", 2 * math.sqrt(1e-3), "mm^(1/2)"),
    ],
)
def test_a_bare_number_alone_on_a_side_is_in_the_declared_units(relation, value, unit):
    problem = shape(
        independent={"name": "t", "unit": "s", "from": 0, "to": 3},
        functional={"seek": "minimum", "integrand": "y''''^2"},
        unknowns={"y": {"unit": "mm"}},
        constants={"c": "2 m", "n": 3},
        constraints=[relation],
    )
    (condition,) = [*problem.constraints, *problem.integrals]
    limit = condition.lower or condition.upper
    assert _value(limit, c=2.0, n=3.0) == pytest.approx(value)
    assert condition.unit.text == unit


def test_angles_are_in_radians_inside():
    problem = stated(
        unknowns={"x": {"unit": "deg", "within": [-12, 120]}, "u": {"unit": "deg/s"}},
        independent={"name": "t", "unit": "s", "from": 0, "to": 1},
        endpoints=["x(1) = 90"],
        constraints=["u <= 180"],
        functional={"seek": "minimum", "integrand": "u^2"},
    )
    assert problem.unknowns[0].lower == pytest.approx(-math.pi / 15)
    assert _value(problem.endpoints[0].lower) == pytest.approx(math.pi / 2)
    assert _value(problem.constraints[0].upper) == pytest.approx(math.pi)


@pytest.mark.parametrize(
    ("members", "unit"),
    [
        ({"functional": {"seek": "minimum", "integrand": "y*sqrt(1 + y'^2)"}}, Unit("m^2")),
        ({"functional": {"seek": "minimum", "integrand": "y*sqrt(1 + y'^2)"}, **MILLIMETRES}, Unit("mm*m")),
        ({"functional": {"seek": "minimum", "endpoint": "y(3)"}, **MILLIMETRES, **SLOPE}, Unit("mm", 1e-3)),
        ({"functional": {"seek": "minimum", "endpoint": "0"}, "endpoints": ["y(0) = 1"], **SLOPE}, Unit("")),
    ],
)
def test_the_unit_of_the_value(members, unit):
    found = shape(**members).value_unit
    if unit.text == "mm*m":  # two sizes of one kind: told in the SI unit
        unit = Unit("m^2")
    assert found == unit


def test_degrees_are_not_told_beside_lengths():
    problem = shape(
        independent={"name": "p", "unit": "deg", "from": 0, "to": 140},
        constants={"R": "1.4 m"},
        functional={"seek": "minimum", "integrand": "sqrt(R^2 + y'^2)"},
    )
    assert problem.value_unit == Unit("m")


def test_places_and_bounds_are_converted():
    problem = shape(
        independent={"name": "x", "unit": "km", "from": 1, "to": 2}, unknowns={"y": {"unit": "cm", "within": [3, None]}}
    )
    assert [_value(place.tree) for place in problem.places] == [1000.0, 2000.0]
    assert [place.label for place in problem.places] == ["1", "2"]
    assert problem.unknowns[0].lower == pytest.approx(0.03)


SOUND = [
    # zero fits everything; an unknown without unit is not checked; a pure number is told by "1"
    {"constraints": ["y >= 0", "y' <= 3"]},
    {"functional": {"seek": "minimum", "integrand": "y + 0 + max(y, 0)"}},
    {"unknowns": {"y": {}}, "functional": {"seek": "minimum", "integrand": "y + y^3 + sin(y)"}},
    {"constants": {"n": 3}, "functional": {"seek": "minimum", "integrand": "(y/n)^n"}},
    {"constants": {"nu": 0.2}, "functional": {"seek": "minimum", "integrand": "y^2*(1 - nu)"}, **MILLIMETRES},
    {"constants": {"k": "2 1/m"}, "functional": {"seek": "minimum", "integrand": "sin(k*y) + exp(-k*y)"}},
    {"constants": {"c": "2 ft"}, "functional": {"seek": "minimum", "integrand": "hypot(y, c)*atan2(y, c)"}},
    {"functional": {"seek": "minimum", "integrand": "y^(3/2)*sqrt(y)"}},
    {"functional": {"seek": "minimum", "integrand": "y + y'*y", "endpoint": "y(3)^2"}},
]  # fmt: skip


@pytest.mark.parametrize("members", SOUND)
def test_what_fits_is_taken(members):
    shape(**members)


@pytest.mark.parametrize(
    "relation", ["y + D <= 3", "D - y <= 3", "2*sqrt((y + D)*y) <= 3", "(x - D)^2 + y^2 >= 4", "integral(y + D) = 4"]
)
def test_a_bare_number_beside_a_mixture_of_sizes_is_refused(relation):
    with pytest.raises(Refused) as refusal:
        shape(constraints=[relation], constants={"D": "1 m"}, **MILLIMETRES)
    assert [one.code for one in refusal.value.complaints] == ["bare-number"]
    shape(constraints=[relation], constants={"D": "1 m"})


def test_a_slope_of_millimetres_per_metre_is_a_pure_number_beside_another():
    problem = shape(constraints=["integral(sqrt(1 + y'^2)) = 4.2"], **MILLIMETRES)
    assert _value(problem.integrals[0].lower) == 4.2
    assert problem.integrals[0].unit == Unit("m")


def test_a_clash_names_the_place_both_units_and_what_would_fit():
    with pytest.raises(Refused) as refusal:
        shape(functional={"seek": "minimum", "integrand": "y^2 + 3*y"})
    (complaint,) = refusal.value.complaints
    assert complaint.code == "unit-clash"
    assert complaint.span == (6, 9)
    assert complaint.message == "“y^2” is in m^2 and “3*y” is in m."
    assert complaint.hint == "Both have to be of one kind, for instance m^2."


def test_every_clash_of_a_document_is_told_at_once():
    with pytest.raises(Refused) as refusal:
        shape(functional={"seek": "minimum", "integrand": "sin(y) + y"}, constraints=["y + 1 <= 3", "y' <= y"])
    pointers = [one.pointer for one in refusal.value.complaints]
    assert pointers.count("/functional/integrand") == 2
    assert {"/constraints/0", "/constraints/1"} <= set(pointers)


@pytest.mark.parametrize("factor", ["m", "mm", "km", "inch"])
def test_the_problem_does_not_depend_on_the_units_of_the_document(factor):
    size = {"m": 1.0, "mm": 1e-3, "km": 1e3, "inch": 0.0254}[factor]
    problem = shape(
        unknowns={"y": {"unit": factor, "within": [1 / size, 4 / size]}},
        independent={"name": "x", "unit": factor, "from": 0, "to": 3 / size},
        endpoints=[f"y(0) = {2 / size!r}"],
        constraints=[f"integral(sqrt(1 + y'^2)) = {4.2 / size!r}"],
    )
    assert problem.unknowns[0].upper == pytest.approx(4.0)
    assert _value(problem.endpoints[0].lower) == pytest.approx(2.0)
    assert _value(problem.integrals[0].lower) == pytest.approx(4.2)
    assert _value(problem.places[1].tree) == pytest.approx(3.0)
