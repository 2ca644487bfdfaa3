"""Problems whose switches, arcs on limits and touches are unknown places: right ones pass, wrong ones are found out.

The structures are those that `solvers.search.sharpen` would find; here they are written down, right or deliberately
wrong, and the structured problem is solved as such: it has a solution of its own, to full accuracy, that is no
extremal of the problem that was asked.
"""

from dataclasses import replace
from functools import lru_cache

import pytest

from solvers import checks
from solvers.checks.redundancy import unambiguous
from solvers.deadline import FOREVER
from solvers.formula.nodes import Name
from solvers.problem import Calm, Held, Parameter, Place, Touch
from solvers.search.pursuit import pursue
from solvers.solution import Status
from solvers.transcription.collocation import Family
from solvers.transcription.mesh import Mesh, interval
from tests.unit.solvers.checks.conftest import problem_of

# least time from 0 to 1 at rest with |u| <= 1: full ahead, from t = 1 full astern, T = 2
LEAST_TIME = {
    "independent": {"name": "t", "from": 0, "to": "T"},
    "parameters": {"T": {"within": [0.1, 10]}},
    "unknowns": {"x": {}, "u": {"within": [-1, 1]}},
    "dynamics": ["x'' = u"],
    "functional": {"seek": "minimum", "endpoint": "T"},
    "endpoints": ["x(0) = 0", "x'(0) = 0", "x(T) = 1", "x'(T) = 0"],
}
# the same with a limit of speed: trapezoid, T = 2.5
TRAPEZOID = {**LEAST_TIME, "constraints": ["-0.5 <= x' <= 0.5"]}
# Bryson, Ho (1975), section 3.11 (from memory): on the ceiling for limits below 1/6 (value 4/(9 l)), touching it up to
# 1/4 (value 2 + 6 (1 - 4 l)^2)
CEILING = {
    "independent": {"name": "t", "from": 0, "to": 1},
    "unknowns": {"x": {"within": [None, 0.125]}, "u": {}},
    "dynamics": ["x'' = u"],
    "functional": {"seek": "minimum", "integrand": "u^2/2"},
    "endpoints": ["x(0) = 0", "x'(0) = 1", "x(1) = 0", "x'(1) = -1"],
}
TOUCHING = {**CEILING, "unknowns": {"x": {"within": [None, 0.2]}, "u": {}}}
# least integral of x^2 from x(0) = 1 with |u| <= 1: down to zero, then singular with u = 0; value 1/3
SINGULAR = {
    "independent": {"name": "t", "from": 0, "to": 2},
    "unknowns": {"x": {}, "u": {"within": [-1, 1]}},
    "dynamics": ["x' = u"],
    "functional": {"seek": "minimum", "integrand": "x^2"},
    "endpoints": ["x(0) = 1"],
}
# fuel m is used up by the thrust u: on the coast that follows u >= 0 and m >= 0 say the same
COAST = {
    "independent": {"name": "t", "from": 0, "to": 2},
    "unknowns": {"v": {}, "m": {"within": [0, 1]}, "u": {"within": [0, 1]}},
    "dynamics": ["v' = u - v^2/4", "m' = -u"],
    "functional": {"seek": "maximum", "integrand": "v"},
    "endpoints": ["v(0) = 0", "m(0) = 1", "m(2) = 0"],
}


def structured(document, switches, held=(), touches=(), calm=()):
    """The problem with switches (guess, or a number to stay at) as places between its ends."""
    problem = problem_of(document)
    names = [f"switch {k + 1}" for k in range(len(switches))]
    parameters = [
        Parameter(name, *((0.02, 9.0, at) if free else (at, at, at)))
        for name, (at, free) in zip(names, switches, strict=True)
    ]
    places = (problem.places[0], *(Place(Name(name), name) for name in names), problem.places[-1])
    return replace(problem, places=places, parameters=(*problem.parameters, *parameters), held=tuple(held),
                   touches=tuple(touches), calm=tuple(calm))  # fmt: skip


def mesh_of(stretches, pieces=3, degree=5):
    kinds = [(s, k, s == stretches - 1 and k == pieces - 1) for s in range(stretches) for k in range(pieces)]
    return Mesh(
        tuple(
            interval(s, k / pieces, (k + 1) / pieces, Family.GAUSS if last else Family.RADAU, degree)
            for s, k, last in kinds
        )
    )


def free(*places):
    return tuple((place, True) for place in places)


def at(*places):
    return tuple((place, False) for place in places)


RIGHT = {
    "bang-bang": (structured(LEAST_TIME, free(1.1), [Held(0, "u", 0, 1), Held(1, "u", 0, -1)]), 2.0),
    "trapezoid": (structured(TRAPEZOID, free(0.4, 2.1), [Held(0, "u", 0, 1), Held(1, "x", 1, 1), Held(2, "u", 0, -1)]),
                  2.5),
    "ceiling": (structured(CEILING, free(0.3, 0.7), [Held(1, "x", 0, 1)]), 4 / (9 * 0.125)),
    "touch": (structured(TOUCHING, free(0.4), touches=[Touch("switch 1", "x", 0, 1)]), 2 + 6 * 0.04),
    "singular": (structured(SINGULAR, free(0.8), [Held(0, "u", 0, -1)], calm=[Calm(1, "u", 0)]), 1 / 3),
    "coast": (structured(COAST, free(0.9), [Held(0, "u", 0, 1), Held(1, "u", 0, -1)]), None),
}  # fmt: skip

WRONG = {
    # the switch stays where it is not wanted, and the rest adjusts: another switch has to bring it to rest
    "a switch at a wrong place": structured(SINGULAR, at(0.7), [Held(0, "u", 0, -1), Held(1, "u", 0, 1)]),
    "one switch too many": structured(LEAST_TIME, (*at(0.5, 0.7), *free(1.2)), [
        Held(0, "u", 0, 1), Held(1, "u", 0, -1), Held(2, "u", 0, 1), Held(3, "u", 0, -1)]),
    "an arc on the wrong limit": structured(SINGULAR, free(0.8), [Held(0, "u", 0, 1)], calm=[Calm(1, "u", 0)]),
    "a singular arc that is missing": structured(SINGULAR, free(1.0), [Held(0, "u", 0, -1), Held(1, "u", 0, 1)]),
    "a ceiling left too early": structured(CEILING, at(0.375, 0.55), [Held(1, "x", 0, 1)]),
    "a ceiling reached too early": structured(CEILING, at(0.3, 0.625), [Held(1, "x", 0, 1)]),
    "a ceiling that is only touched": structured(CEILING, free(0.5), touches=[Touch("switch 1", "x", 0, 1)]),
    "a touch at a wrong place": structured(TOUCHING, at(0.4), touches=[Touch("switch 1", "x", 0, 1)]),
    "a touch that is not wanted": structured(
        {**CEILING, "unknowns": {"x": {"within": [None, 0.3]}, "u": {}}}, free(0.5),
        touches=[Touch("switch 1", "x", 0, 1)]),
    "a speed limit left too early": structured(TRAPEZOID, (*free(0.5), *at(1.6), *free(1.87, 2.15)), [
        Held(0, "u", 0, 1), Held(1, "x", 1, 1), Held(2, "u", 0, -1), Held(3, "u", 0, 1), Held(4, "u", 0, -1)]),
    "thrust after a coast": structured(COAST, free(0.5, 1.5), [
        Held(0, "u", 0, 1), Held(1, "u", 0, -1), Held(2, "u", 0, 1)]),
    "a coast before the thrust": structured(COAST, free(1.0), [Held(0, "u", 0, -1), Held(1, "u", 0, 1)]),
}  # fmt: skip


@lru_cache
def solved(name):
    problem = {**{k: p for k, (p, _) in RIGHT.items()}, **WRONG}[name]
    pursuit = pursue(problem, None, FOREVER, meshes=4, mesh=mesh_of(len(problem.places) - 1))
    assert pursuit.solved, pursuit.end
    return pursuit.paths[-1]


def examined(path):
    return {check.name: check for check in checks.run(path, value_error=1e-9, curve_error=1e-9)}


@pytest.mark.parametrize("name", RIGHT)
def test_the_right_structure_passes_every_check(name):
    path = unambiguous(solved(name))
    value = RIGHT[name][1]
    assert value is None or path.value == pytest.approx(value, rel=1e-7)
    failed = [check for check in examined(path).values() if check.status is Status.FAILED]
    assert not failed


@pytest.mark.parametrize("name", WRONG)
def test_a_wrong_structure_fails(name):
    found = examined(unambiguous(solved(name)))
    failed = [check.name for check in found.values() if check.status is Status.FAILED]
    assert set(failed) & {*checks.FEASIBLE, *checks.FIRST_ORDER}, found
