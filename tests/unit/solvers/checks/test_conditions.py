"""Conditions: values at places, integrals and the value itself are computed anew."""

from dataclasses import replace

import numpy as np
import pytest

from solvers.checks import conditions
from solvers.checks.quadrature import integrate
from solvers.checks.sampling import Sampler
from solvers.solution import Status

# hanging chain of length 1.5 between points at distance 1: closed form c cosh(x/c), 2c sinh(1/(2c)) = 1.5
CHAIN = {
    "independent": {"name": "x", "from": 0, "to": 1},
    "unknowns": {"y": {}},
    "functional": {"seek": "minimum", "integrand": "y*sqrt(1 + y'^2)"},
    "endpoints": ["y(0) = 0", "y(1) = 0"],
    "constraints": ["integral(sqrt(1 + y'^2)) = 1.5"],
}
WAYPOINT = {
    "independent": {"name": "t", "from": 0, "to": 1},
    "unknowns": {"x": {}},
    "functional": {"seek": "minimum", "integrand": "x''^2"},
    "endpoints": ["x(0) = 0", "x'(0) = 0", "x(1) = 1", "x'(1) = 0", "x(0)^2 + x'(1)^2 <= 1"],
    "constraints": ["x(0.3) = 0.5"],
}


@pytest.mark.parametrize("document", [CHAIN, WAYPOINT], ids=["chain", "way point"])
def test_a_solved_curve_passes(solved, examine, document):
    check = examine(conditions.check, solved(document))
    assert check.status is Status.PASSED, check


def test_a_missed_end_fails(solved, examine):
    path = solved(WAYPOINT)
    nodes = path.nodes.copy()
    nodes[-1, 0] += 1e-4
    check = examine(conditions.check, replace(path, nodes=nodes))
    assert (check.status, check.subject, check.place) == (Status.FAILED, "x(1) = 1", 1.0)


def test_a_missed_way_point_fails(solved, examine):
    path = solved(WAYPOINT)
    nodes = path.nodes.copy()
    nodes[path.program.layout.at_place[1], 0] += 1e-3
    check = examine(conditions.check, replace(path, nodes=nodes))
    assert (check.status, check.subject) == (Status.FAILED, "x(0.3) = 0.5")
    assert check.place == pytest.approx(0.3)


def test_a_curve_of_another_length_fails(solved, examine, refreshed):
    path = solved(CHAIN)
    flat = refreshed(replace(path, states=0.99 * path.states, nodes=0.99 * path.nodes, controls=0.99 * path.controls))
    check = examine(conditions.check, flat)
    assert (check.status, check.subject) == (Status.FAILED, "integral(sqrt(1 + y'^2)) = 1.5")


def test_a_wrong_value_fails(solved, examine):
    path = solved(CHAIN)
    check = examine(conditions.check, replace(path, value=path.value * 1.001))
    assert (check.status, check.subject) == (Status.FAILED, "the value")


def test_a_wrong_value_within_its_stated_error_is_not_the_conditions_fault(solved, examine):
    path = solved(CHAIN)
    off = 1e-4 * abs(path.value)
    assert examine(conditions.check, replace(path, value=path.value + off), 2 * off).status is Status.PASSED


@pytest.mark.parametrize(
    ("integrand", "exact"),
    [("y^2", 1 / 3), ("1/sqrt(y)", 2.0), ("y^0.3", 1 / 1.3), ("abs(y - 0.37)", (0.37**2 + 0.63**2) / 2)],
)  # fmt: skip
def test_the_quadrature_reaches_infinite_integrands_and_kinks(sketched, integrand, exact):
    """Along y = x.  Closed forms."""
    document = {**CHAIN, "functional": {"seek": "minimum", "integrand": integrand + " + 0*y'"}}
    sampler = Sampler(sketched(document, [lambda x: x], [lambda x: 1 + 0 * x]))
    with np.errstate(all="ignore"):
        (value,) = integrate(sampler, 1e-9, lambda sample: sampler.outputs(sample)[:, -1:])
    assert value == pytest.approx(exact, rel=1e-6)
