"""What `solvers.problem` promises holds for every sample and every published problem."""

from pathlib import Path

import pytest

from service.assemble import assemble
from service.spec import read
from solvers.formula.nodes import At, Call, Name, walk

ROOT = Path(__file__).parents[4]
DOCUMENTS = sorted([*(ROOT / "service/samples").glob("*.json"), *(ROOT / "tests/acceptance/problems").glob("*.json")])


@pytest.fixture(params=DOCUMENTS, ids=lambda path: path.stem)
def problem(request):
    return assemble(read(request.param.read_bytes()))


def _names(tree):
    return {node.name for node in walk(tree) if isinstance(node, Name | At)} - {"pi"}


def _stretches(problem):
    """The laws of every arc; those of the problem itself where it has none."""
    return [problem.along(arc) for arc in problem.arcs] or [problem]


def _along(problem):
    """Every tree that holds along the curve."""
    for part in _stretches(problem):
        yield from (tree for _, tree in part.where)
        yield from (condition.body for condition in part.constraints)
        yield from (side for line in part.dynamics for side in (line.left, line.right))
        if part.integrand is not None:
            yield part.integrand


def test_there_are_documents():
    assert len(DOCUMENTS) > 20


def test_limits_hold_constants_and_numbers_only(problem):
    constants = {constant.name for constant in problem.constants}
    for condition in problem.conditions:
        limits = [limit for limit in (condition.lower, condition.upper) if limit is not None]
        assert limits
        assert all(_names(limit) <= constants for limit in limits)


def test_places_of_values_are_those_of_the_problem(problem):
    bodies = [condition.body for condition in (*problem.endpoints, *problem.integrals)]
    bodies += [problem.endpoint] if problem.endpoint is not None else []
    for node in (node for body in bodies for node in walk(body) if isinstance(node, At)):
        assert any(node.place is place.tree for place in problem.places)


def test_formulas_along_the_curve_hold_no_values_at_places_and_no_integrals(problem):
    for node in (node for tree in _along(problem) for node in walk(tree)):
        assert not isinstance(node, At)
        assert not (isinstance(node, Call) and node.function == "integral")


def test_endpoint_conditions_hold_values_at_places_parameters_and_constants_only(problem):
    given = {one.name for one in (*problem.constants, *problem.parameters)}
    for condition in problem.endpoints:
        bare = {node.name for node in walk(condition.body) if isinstance(node, Name)} - {"pi"}
        assert bare <= given


def test_an_order_is_reached_and_never_passed(problem):
    orders = {unknown.name: unknown.order for unknown in problem.unknowns}
    reached = dict.fromkeys(orders, 0)
    trees = [*_along(problem), *(condition.body for condition in problem.conditions)]
    trees += [problem.endpoint] if problem.endpoint is not None else []
    for node in (node for tree in trees for node in walk(tree)):
        if isinstance(node, Name | At) and node.name in orders:
            reached[node.name] = max(reached[node.name], node.order)
    assert reached == orders


def test_explicit_lines_are_explicit(problem):
    for part in _stretches(problem):
        orders = {unknown.name: unknown.order for unknown in part.unknowns}
        for line in part.dynamics:
            if line.determines is not None:
                name, order = line.determines
                assert isinstance(line.left, Name)
                assert (line.left.name, line.left.order) == (name, order) == (name, orders[name])
                assert (name, order) not in {(n.name, n.order) for n in walk(line.right) if isinstance(n, Name)}
