"""How the arcs of a document are understood: orders, abbreviations, sides, jumps, what holds where."""

import pytest

from service.complaints import Refused
from solvers.formula.nodes import At, walk
from solvers.formula.printer import text
from solvers.problem import Jump
from tests.unit.service.assemble import stating

TWO = [{"name": "one", "from": 0, "to": 0.5}, {"name": "two", "from": 0.5, "to": 1}]


def stated(one=None, two=None, **members):
    """x' = u from 0 to 1 on two arcs, each with members of its own."""
    arcs = [TWO[0] | (one or {}), TWO[1] | (two or {})]
    return stating.stated(**({"arcs": arcs} | members))


def orders(problem):
    return [{unknown.name: unknown.order for unknown in arc.unknowns} for arc in problem.arcs]


def sides(problem):
    """name(place side) of every value in the endpoint conditions."""
    nodes = (node for c in problem.endpoints for node in walk(c.body) if isinstance(node, At))
    return [f"{node.name}{chr(39) * node.order}({text(node.place)}{node.side})" for node in nodes]


def test_what_stands_outside_holds_on_all_arcs():
    problem = stated(one={"constraints": ["u <= 2"]}, constraints=["x >= -1"])
    assert problem.dynamics == problem.constraints == ()
    assert [[line.label for line in arc.dynamics] for arc in problem.arcs] == [["x' = u"]] * 2
    assert [[c.label for c in arc.constraints] for arc in problem.arcs] == [["x >= -1", "u <= 2"], ["x >= -1"]]
    assert [text(arc.integrand) for arc in problem.arcs] == ["u^2", "u^2"]


def test_an_integrand_of_an_arc_is_added():
    problem = stated(two={"integrand": "x^2"})
    assert [text(arc.integrand) for arc in problem.arcs] == ["u^2", "u^2 + x^2"]
    alone = stated(two={"integrand": "x^2"}, functional={"seek": "minimum"})
    assert [arc.integrand and text(arc.integrand) for arc in alone.arcs] == [None, "x^2"]


def test_each_arc_has_its_own_formula_for_an_abbreviation():
    problem = stated(one={"where": {"k": "2"}}, two={"where": {"k": "3*x"}}, dynamics=["x' = k*u"])
    assert [text(dict(arc.where)["k"]) for arc in problem.arcs] == ["2", "3*x"]


def test_the_order_of_an_unknown_may_differ_from_arc_to_arc():
    problem = stated(one={"dynamics": ["x'' = u"]}, two={"dynamics": ["x' = u"]}, dynamics=[])
    assert orders(problem) == [{"x": 2, "u": 0}, {"x": 1, "u": 0}]
    assert {unknown.name: unknown.order for unknown in problem.unknowns} == {"x": 2, "u": 0}


def test_what_is_in_no_law_of_an_arc_does_not_exist_there():
    problem = stated(two={"dynamics": ["x' = -x"]}, one={"dynamics": ["x' = u"], "integrand": "u^2"}, dynamics=[],
                     functional={"seek": "minimum"}, endpoints=["x(0) = 0", "x(0.5) = 1"])  # fmt: skip
    assert orders(problem) == [{"x": 1, "u": 0}, {"x": 1}]


def test_a_value_at_a_junction_is_taken_where_it_is_known():
    problem = stated(
        unknowns={"x": {}, "u": {}, "w": {}}, two={"dynamics": ["w' = x"]}, endpoints=["x(0) = 0", "w(0.5) = 0"]
    )
    assert sides(problem) == ["x(0+)", "w(0.5+)"]


def test_a_value_after_a_junction_lets_it_jump():
    problem = stated(endpoints=["x(0) = 0", "x(0.5+) = x(0.5-) - 2", "x(1) = 0"])
    assert problem.jumps == {Jump("x", 0, 1)}
    assert stated(endpoints=["x(0) = 0", "x(0.5-) = 1"]).jumps == frozenset()


def test_a_jump_of_an_abbreviation_is_one_of_all_behind_it():
    """Two bodies stick together: their momentum is carried over, mass and speed are not."""
    problem = stating.stated(
        unknowns={"v": {}, "m": {}}, dynamics=["v' = -v", "m' = 0"], where={"p": "m*v"},
        functional={"seek": "minimum", "endpoint": "v(1)"},
        endpoints=["v(0) = 1", "m(0) = 1", "m(0.5+) = m(0.5-) + 2", "p(0.5+) = p(0.5-)"], arcs=TWO,
    )  # fmt: skip
    assert problem.jumps == {Jump("v", 0, 1), Jump("m", 0, 1)}


def test_a_place_within_an_arc_is_no_junction():
    problem = stated(endpoints=["x(0) = 0", "x(0.2) = 1", "x(1) = 0"])
    assert [place.label for place in problem.places] == ["0", "0.2", "0.5", "1"]
    assert [(arc.first, arc.last) for arc in problem.arcs] == [(0, 2), (2, 3)]


def test_integrals_outside_run_over_all_arcs_and_those_of_an_arc_over_it():
    problem = stated(one={"constraints": ["integral(x) = 1"]}, constraints=["integral(u) = 2"])
    assert [c.label for c in problem.integrals] == ["integral(u) = 2"]
    assert [[c.label for c in arc.integrals] for arc in problem.arcs] == [["integral(x) = 1"], []]


def test_a_limit_on_what_is_a_number_on_one_arc_says_nothing_there():
    problem = stated(one={"where": {"f": "u"}}, two={"where": {"f": "0"}}, constraints=["f <= 1"])
    assert [len(arc.constraints) for arc in problem.arcs] == [1, 0]


@pytest.mark.parametrize(
    ("members", "code"),
    [
        pytest.param({"endpoints": ["u(0.5) = 1"]}, "which-side", id="a control where arcs meet"),
        pytest.param({"endpoints": ["x(0+) = 1"]}, "no-junction", id="a side at an end"),
        pytest.param({"endpoints": ["x(0.2-) = 1", "x(0) = 0"]}, "no-junction", id="a side within an arc"),
        pytest.param({"where": {"f": "x + u"}, "endpoints": ["f(0.5) = 1"]}, "which-side", id="of an abbreviation"),
    ],
)
def test_values_with_or_without_a_side_are_refused_where_they_mean_nothing(members, code):
    with pytest.raises(Refused) as refusal:
        stated(**members)
    assert [complaint.code for complaint in refusal.value.complaints] == [code]


def test_complaints_speak_of_the_document_and_not_of_the_equivalent_problem():
    with pytest.raises(Refused) as refusal:
        stated(unknowns={"x": {"within": [None, 0.5]}, "u": {}})
    (complaint,) = refusal.value.complaints
    assert (complaint.pointer, complaint.code) == ("/unknowns/x/within", "excluded")
    assert complaint.message == "By “x(1) = 1”, x(1) is 1: outside of the bounds -inf to 0.5."


def test_hints_name_no_copies_either():
    with pytest.raises(Refused) as refusal:
        stated(endpoints=["x(0) = 0", "u(0.5-) = 2*u(0.5+)"])
    for complaint in refusal.value.complaints:
        assert " on " not in complaint.message + complaint.hint
