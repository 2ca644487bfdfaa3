"""What is free that nothing determines, told by the formulas alone: never where something might determine it."""

import pytest

from service.assemble import assemble
from service.spec import read
from solvers.undetermined import undetermined
from tests.acceptance.catalogue import CATALOGUE
from tests.unit.solvers.problems import stated

ENDS = ["x(0) = 0", "x(1) = 1"]
CARRIED = {"unknowns": {"x": {}, "u": {}, "z": {}}, "dynamics": ["x' = u", "z' = x"]}
SWING = {"unknowns": {"x": {}, "u": {}, "z": {}}, "dynamics": ["x' = u", "z'' = -z"]}
APART = {
    "unknowns": {"x": {}, "u": {}, "z": {}, "w": {"within": [-1, 1]}},
    "dynamics": ["x' = u", "z' = w"],
}
PAIR = {"parameters": {"k": {}, "m": {}}}


def names(**members):
    return [found.name for found in undetermined(stated(**members))]


@pytest.mark.parametrize(
    "members, loose",
    [
        (CARRIED | {"endpoints": ENDS}, ["z"]),
        (CARRIED | {"endpoints": [*ENDS, "z(0) = 0"]}, []),
        (CARRIED | {"endpoints": ["x(0) = 0", "z(0) = 0", "z(1) = 1"]}, []),
        (CARRIED | {"endpoints": ENDS, "constraints": ["z <= 2"]}, []),
        (CARRIED | {"endpoints": ENDS, "functional": {"integrand": "u^2", "endpoint": "z(1)"}}, []),
        (SWING | {"endpoints": [*ENDS, "z(0) = 0"]}, ["z"]),
        (SWING | {"endpoints": [*ENDS, "z(0) = 0", "z(1) = 1"]}, []),
        (APART | {"endpoints": [*ENDS, "z(0) = 0", "z(1) = 1/2"]}, ["w"]),
        (APART | {"endpoints": [*ENDS, "z(0) = 0", "z(1) = x(1)"]}, []),
        (PAIR | {"endpoints": [*ENDS, "k + m = 3"]}, ["k", "m"]),
        (PAIR | {"endpoints": [*ENDS, "k + m = 3", "k - m = 1"]}, []),
        (PAIR | {"endpoints": [*ENDS, "k + m = 3", "k = x(0)"]}, []),
    ],
)
def test_what_has_nothing_to_do_with_the_functional_is_free(members, loose):
    assert names(**members) == loose


def test_a_chain_that_is_only_carried_along_is_found_link_by_link():
    chain = {"unknowns": {"x": {}, "u": {}, "z": {}, "s": {}}, "dynamics": ["x' = u", "z' = x", "s' = z"]}
    assert names(**chain, endpoints=[*ENDS, "z(0) = 0"]) == ["s"]
    assert names(**chain, endpoints=[*ENDS, "s(0) = 0"]) == ["z"]
    assert names(**chain, endpoints=[*ENDS, "z(0) = 0", "s(0) = 0"]) == []


def test_a_free_end_belongs_to_all_that_runs_along_the_curve():
    members = APART | {
        "independent": {"name": "t", "from": 0, "to": "T"},
        "parameters": {"T": {"within": [0.1, 10]}},
        "functional": {"endpoint": "T"},
        "endpoints": ["x(0) = 0", "x(T) = 1", "z(0) = 0", "z(T) = 1"],
    }
    assert names(**members) == []


def test_it_is_said_where_and_how_much_is_missing():
    (found,) = undetermined(stated(**SWING, endpoints=ENDS))
    assert found.pointer == "/unknowns/z"
    assert "room for 2 more conditions" in found.sentence


@pytest.mark.parametrize("case", CATALOGUE.values(), ids=CATALOGUE)
def test_no_published_problem_is_said_to_leave_something_open(case):
    assert undetermined(assemble(read(case.document.read_bytes()))) == ()
