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


def test_there_are_documents():
    assert len(DOCUMENTS) > 20


def test_limits_hold_constants_and_numbers_only(problem):
    constants = {constant.name for constant in problem.constants}
    for condition in (*problem.endpoints, *problem.constraints, *problem.integrals):
        limits = [limit for limit in (condition.lower, condition.upper) if limit is not None]
        assert limits
        assert all(_names(limit) <= constants for limit in limits)


def test_places_of_values_are_those_of_the_problem(problem):
    bodies = [condition.body for condition in (*problem.endpoints, *problem.integrals)]
    bodies += [problem.endpoint] if problem.endpoint is not None else []
    for node in (node for body in bodies for node in walk(body) if isinstance(node, At)):
        assert any(node.place is place.tree for place in problem.places)


def test_formulas_along_the_curve_hold_no_values_at_places_and_no_integrals(problem):
    trees = [tree for _, tree in problem.where] + [condition.body for condition in problem.constraints]
    trees += [side for line in problem.dynamics for side in (line.left, line.right)]
    trees += [problem.integrand] if problem.integrand is not None else []
    for node in (node for tree in trees for node in walk(tree)):
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
    trees = [tree for _, tree in problem.where]
    trees += [condition.body for condition in (*problem.endpoints, *problem.constraints, *problem.integrals)]
    trees += [side for line in problem.dynamics for side in (line.left, line.right)]
    trees += [tree for tree in (problem.integrand, problem.endpoint) if tree is not None]
    for node in (node for tree in trees for node in walk(tree)):
        if isinstance(node, Name | At) and node.name in orders:
            reached[node.name] = max(reached[node.name], node.order)
    assert reached == orders


def test_explicit_lines_are_explicit(problem):
    orders = {unknown.name: unknown.order for unknown in problem.unknowns}
    for line in problem.dynamics:
        if line.determines is not None:
            name, order = line.determines
            assert isinstance(line.left, Name)
            assert (line.left.name, line.left.order) == (name, order) == (name, orders[name])
            assert all((node.name, node.order) != (name, order) for node in walk(line.right) if isinstance(node, Name))
