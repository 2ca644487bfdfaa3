"""Arcs beside each other are the same problem: cutting a curve anywhere changes nothing but where it is told."""

import numpy as np
import pytest

from solvers.forms.beside import side_by_side
from solvers.formula.nodes import At, Name, walk
from solvers.solution import Verdict
from solvers.solve import solve
from tests.unit.service.assemble import stating
from tests.unit.solvers.arcs import refraction, stages, wall


def _cut(place, **members):
    arcs = [{"name": "one", "from": 0, "to": place}, {"name": "two", "from": place, "to": 1}]
    return solve(stating.stated(**members)), solve(stating.stated(**members, arcs=arcs))


REGULATOR = {"dynamics": ["x' = x + u"], "functional": {"seek": "minimum", "integrand": "(x^2 + u^2)/2"},
             "endpoints": ["x(0) = 1"]}  # fmt: skip
SNAP = {
    "unknowns": {"x": {}}, "dynamics": None, "functional": {"seek": "minimum", "integrand": "x''''^2"},
    "endpoints": [f"x{chr(39) * k}({t}) = {float(t == 1 and k == 0)}" for k in range(4) for t in (0, 1)],
}  # fmt: skip
LENGTH = {"constraints": ["integral(x) = 0.3"]}
EXPLICIT_IN_TIME = {"dynamics": ["x' = t*u - x"], "endpoints": ["x(0) = 1", "x(1) = 0.2"]}


@pytest.mark.parametrize("place", [0.5, 0.13])
@pytest.mark.parametrize(
    "members",
    [
        pytest.param(REGULATOR, id="a regulator"),
        pytest.param(SNAP, id="a curve of order 4"),
        pytest.param(LENGTH, id="an integral over both arcs"),
        pytest.param(EXPLICIT_IN_TIME, id="dynamics that hold t"),
    ],
)
def test_a_cut_changes_nothing(members, place):
    whole, cut = _cut(place, **members)
    assert cut.verdict is whole.verdict
    assert cut.value == pytest.approx(whole.value, rel=1e-7)
    places = np.linspace(0.0, 1.0, 41)
    for name in whole.curve.functions:
        for arc in cut.arcs:
            inside = places[(places >= arc.curve.breaks[0]) & (places <= arc.curve.breaks[-1])]
            size = np.abs(whole.curve.evaluate(name, places)).max()
            assert arc.curve.evaluate(name, inside) == pytest.approx(
                whole.curve.evaluate(name, inside), abs=1e-4 * size
            )
    for state in whole.costates.functions:
        for arc in cut.arcs:
            middle = np.array([(arc.curve.breaks[0] + arc.curve.breaks[-1]) / 2])
            there = whole.costates.evaluate(state, middle)
            assert arc.costates.evaluate(state, middle) == pytest.approx(there, rel=1e-4, abs=1e-6)
    assert {(p.label, p.pointer) for p in cut.prices} == {(p.label, p.pointer) for p in whole.prices}
    for price in whole.prices:
        same = next(p for p in cut.prices if (p.label, p.pointer) == (price.label, price.pointer))
        assert same.price == pytest.approx(price.price, rel=1e-4, abs=1e-6)


@pytest.mark.parametrize("problem", [refraction(), stages(), wall()], ids=["refraction", "stages", "wall"])
def test_every_name_of_the_equivalent_problem_is_declared_in_it(problem):
    equivalent = side_by_side(problem).problem
    known = {equivalent.independent, "pi", *(name for name, _ in equivalent.where)}
    for records in (equivalent.unknowns, equivalent.constants, equivalent.parameters):
        known |= {record.name for record in records}
    trees = [condition.body for condition in equivalent.conditions] + [tree for _, tree in equivalent.where]
    trees += [side for line in equivalent.dynamics for side in (line.left, line.right)]
    trees += [tree for tree in (equivalent.integrand, equivalent.endpoint) if tree is not None]
    assert {node.name for tree in trees for node in walk(tree) if isinstance(node, Name | At)} <= known


def test_copies_are_told_by_their_name_and_arc():
    beside = side_by_side(stages())
    assert beside.parted("v on first")[0] == "v"
    assert beside.parted("v on second(end)")[0] == "v(end)"
    assert beside.parted("/unknowns/m on first/within")[0] == "/unknowns/m/within"
    assert beside.parted("t1")[1] is None
    names = {beside.parted(unknown.name)[0] for unknown in beside.problem.unknowns}
    assert names == {"v", "m"}


def test_texts_name_arcs_and_not_their_pieces():
    endpoints = ["x(0) = 0", *(f"x({k}/24) <= 9" for k in range(1, 12)), "x(1) = 1"]
    arcs = [{"name": "one", "from": 0, "to": 0.5}, {"name": "two", "from": 0.5, "to": 1}]
    beside = side_by_side(stating.stated(endpoints=endpoints, arcs=arcs))
    assert beside.pieces[11].label == "one, part 12"
    assert beside.by_arc("x on one, part 12 misses") == "x on one misses"
    assert beside.by_arc("x on one, part 1(end)") == "x(1/24-)"
    assert beside.by_arc("x on two") == "x on two"


def test_an_arc_whose_name_begins_like_another_keeps_its_own_copies():
    arcs = [{"name": "up", "from": 0, "to": 0.5}, {"name": "up again", "from": 0.5, "to": 1}]
    beside = side_by_side(stating.stated(arcs=arcs))
    assert beside.parted("x on up again")[1] is beside.pieces[1]
    assert beside.parted("x on up")[1] is beside.pieces[0]


def test_an_unknown_is_continuous_as_far_as_both_arcs_have_derivatives():
    labels = [condition.label for condition in side_by_side(wall()).problem.endpoints]
    assert "x is continuous at h" in labels
    assert "x' is continuous at h" not in labels  # the endpoints say otherwise
    assert not any(label.startswith("u ") for label in labels)  # a control may jump


def test_free_junctions_are_kept_in_order_only_where_their_bounds_do_not():
    assert [c.label for c in side_by_side(refraction()).problem.endpoints if " before " in c.label] == []
    found = [c.label for c in side_by_side(stages()).problem.endpoints if " before " in c.label]
    assert found == ["0 before t1", "t1 before T"]


def test_an_arc_that_only_costs_vanishes_and_is_said_to():
    """The second stage burns nothing worth while: gravity takes more than it gives."""
    arcs = [
        {"name": "cheap", "from": 0, "to": "s", "integrand": "u^2"},
        {"name": "dear", "from": "s", "to": 1, "integrand": "3*u^2 + 1"},
    ]
    found = solve(
        stating.stated(parameters={"s": {"within": [0, 1]}}, functional={"seek": "minimum", "endpoint": "0"}, arcs=arcs)
    )
    assert found.value == pytest.approx(1.0, rel=1e-6)
    assert [arc.name for arc in found.arcs] == ["cheap"]
    assert "The arc dear has no length in this result." in found.notes
    assert found.verdict in (Verdict.LOCAL_MINIMUM, Verdict.STATIONARY)
