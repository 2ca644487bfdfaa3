"""Limits: a curve that leaves its limits between the nodes is found out."""

from dataclasses import replace

import numpy as np

from solvers.checks import limits
from solvers.solution import Status

# the double integrator with a ceiling: Bryson, Ho (1975), section 3.11 (from memory); l = 0.15 is touched at a point
CEILING = {
    "independent": {"name": "t", "from": 0, "to": 1},
    "unknowns": {"x": {"within": [None, 0.2]}, "u": {}},
    "dynamics": ["x'' = u"],
    "functional": {"seek": "minimum", "integrand": "u^2/2"},
    "endpoints": ["x(0) = 0", "x'(0) = 1", "x(1) = 0", "x'(1) = -1"],
}
MIXED = {
    "independent": {"name": "t", "from": 0, "to": 1},
    "unknowns": {"x": {}, "u": {}},
    "dynamics": ["x' = u"],
    "functional": {"seek": "minimum", "integrand": "u^2"},
    "endpoints": ["x(0) = 0", "x(1) = 1"],
    "constraints": ["x + u <= 1.9", "x^2 <= 4"],
}


def test_a_solved_curve_passes(solved, examine):
    for document in (CEILING, MIXED):
        check = examine(limits.check, solved(document))
        assert check.status is Status.PASSED, check


def test_a_state_beyond_its_bound_between_the_nodes_fails(solved, examine):
    """All nodes and all points lie on or below the bound; only the polynomial between them does not."""
    path = solved(CEILING)
    k = len(path.breaks) // 2
    nodes, states = path.nodes.copy(), path.states.copy()
    states[:, 0] = np.minimum(states[:, 0], 0.2)
    nodes[:, 0] = np.minimum(nodes[:, 0], 0.2)
    inside = slice(*path.program.layout.first[k : k + 2])
    states[inside, 0], nodes[k + 1, 0] = 0.2, 0.2
    nodes[k, 0] = 0.1
    check = examine(limits.check, replace(path, nodes=nodes, states=states))
    assert check.status is Status.FAILED
    assert check.subject == "x"
    assert path.breaks[k] < check.place < path.breaks[k + 1]


def test_a_constraint_that_is_exceeded_fails_by_its_label(solved, examine, drawn):
    path = solved(MIXED)
    steep = drawn(path, [lambda t: 2.5 * t], [lambda t: 2.5 + 0 * t])
    check = examine(limits.check, steep)
    assert check.status is Status.FAILED
    assert check.subject in MIXED["constraints"]


def test_controls_are_clipped_but_constraints_that_hold_them_are_not_forgiven(solved, examine, drawn):
    path = solved(MIXED)
    slightly = drawn(path, [lambda t: t], [lambda t: 0.92 + 0 * t])  # x + u reaches 1.92 over the last part
    check = examine(limits.check, slightly)
    assert check.status is Status.FAILED
    assert check.subject == "x + u <= 1.9"


def test_without_limits_it_does_not_apply(solved, examine):
    document = {key: value for key, value in MIXED.items() if key != "constraints"}
    assert examine(limits.check, solved(document)).status is Status.NOT_APPLICABLE
