"""Prices: what the optimal value does when a limit is raised, found by raising it and solving again."""

import json

import pytest

from service.assemble import assemble
from service.spec import read
from solvers.answers.prices import prices
from solvers.deadline import FOREVER
from solvers.search.pursuit import pursue
from solvers.solution import Verdict
from solvers.solve import solve


def path_of(document):
    problem = assemble(read(json.dumps({"format": 1, "title": "test", **document}).encode()))
    pursuit = pursue(problem, None, FOREVER, meshes=8)
    assert pursuit.solved
    return pursuit.paths[-1]


def put(document, member, index, text):
    changed = list(document[member])
    changed[index] = text
    return {**document, member: changed}


REST = {
    "independent": {"name": "t", "from": 0, "to": 1},
    "unknowns": {"x": {}, "u": {}},
    "dynamics": ["x'' = u"],
    "functional": {"seek": "minimum", "integrand": "u^2/2"},
    "endpoints": ["x(0) = 0", "x'(0) = 0", "x(1) = 1", "x'(1) = 0"],
}
CHAIN = {
    "independent": {"name": "x", "from": 0, "to": 1},
    "unknowns": {"y": {}},
    "functional": {"seek": "minimum", "integrand": "y*sqrt(1 + y'^2)"},
    "endpoints": ["y(0) = 0", "y(1) = 0.1"],
    "constraints": ["integral(sqrt(1 + y'^2)) = 1.5"],
}
DIDO = {
    **CHAIN,
    "functional": {"seek": "maximum", "integrand": "y"},
    "endpoints": ["y(0) = 0", "y(1) = 0"],
    "constraints": ["integral(sqrt(1 + y'^2)) <= 1.0471975511965976"],
}
CORRIDOR = {
    **REST,
    "endpoints": ["x(0) = 0", "x'(0) = 1", "x(1) = 0", "x'(1) = -1"],
    "constraints": ["x <= 0.15"],
}
BAND = {**REST, "constraints": ["-4.8 <= u <= 4.7"]}
WAY = {**REST, "constraints": ["x(0.3) = 0.5"]}
SUM = {
    "independent": {"name": "t", "from": 0, "to": 1},
    "unknowns": {"x": {}, "u": {}},
    "dynamics": ["x' = u"],
    "functional": {"seek": "minimum", "integrand": "u^2 + x^2"},
    "endpoints": ["x(0) = 0", "x(1)^2 + x(1) >= 2"],
    "constraints": ["u - x/2 >= 0.75"],
}

# document, member, index, text with the limit as {}, the limit, which label
RAISED = [
    (REST, "endpoints", 2, "x(1) = {}", 1.0, ""),
    (REST, "endpoints", 1, "x'(0) = {}", 0.0, ""),
    (CHAIN, "constraints", 0, "integral(sqrt(1 + y'^2)) = {}", 1.5, ""),
    (CHAIN, "endpoints", 1, "y(1) = {}", 0.1, ""),
    (DIDO, "constraints", 0, "integral(sqrt(1 + y'^2)) <= {}", 1.0471975511965976, ""),
    (CORRIDOR, "constraints", 0, "x <= {}", 0.15, ""),
    (BAND, "constraints", 0, "-4.8 <= u <= {}", 4.7, "(upper)"),
    (BAND, "constraints", 0, "{} <= u <= 4.7", -4.8, "(lower)"),
    (WAY, "constraints", 0, "x(0.3) = {}", 0.5, ""),
    (SUM, "endpoints", 1, "x(1)^2 + x(1) >= {}", 2.0, ""),
    (SUM, "constraints", 0, "u - x/2 >= {}", 0.75, ""),
]  # fmt: skip


@pytest.mark.parametrize(("document", "member", "index", "text", "limit", "side"), RAISED, ids=[r[3] for r in RAISED])
def test_a_price_is_the_slope_of_the_value(document, member, index, text, limit, side):
    pointer = f"/{member}/{index}"
    found = [p for p in prices(path_of(document)) if p.pointer == pointer and p.label.endswith(side)]
    assert len(found) == 1, found
    step = 1e-3
    above, below = (path_of(put(document, member, index, text.format(limit + s))).value for s in (step, -step))
    assert found[0].price == pytest.approx((above - below) / (2 * step), rel=2e-3, abs=1e-5)


def test_the_price_of_the_length_is_the_radius():
    """Dido: a segment of opening 60 degrees of a circle of radius one gains one unit of area per unit of length."""
    (price,) = [p for p in prices(path_of(DIDO)) if p.pointer == "/constraints/0"]
    assert price.price == pytest.approx(1.0, rel=1e-5)


def test_bounds_of_unknowns_and_parameters_have_prices_too():
    document = {
        "independent": {"name": "t", "from": 0, "to": "T"},
        "parameters": {"T": {"within": [1.6, 10]}},
        "unknowns": {"x": {}, "u": {"within": [-6, 6]}},
        "dynamics": ["x'' = u"],
        "functional": {"seek": "minimum", "integrand": "u^2/100", "endpoint": "T"},
        "endpoints": ["x(0) = 0", "x'(0) = 0", "x(T) = 1", "x'(T) = 0"],
    }
    found = {p.pointer: p.price for p in prices(path_of(document))}
    wider = {**document, "parameters": {"T": {"within": [1.601, 10]}}}
    slope = (path_of(wider).value - path_of(document).value) / 1e-3
    assert found["/parameters/T/within"] == pytest.approx(slope, rel=1e-2)
    assert "/unknowns/u/within" not in found


def test_a_limit_that_does_not_bind_has_no_price():
    wide = {**CORRIDOR, "constraints": ["x <= 0.5"]}
    assert not [p for p in prices(path_of(wide)) if p.pointer == "/constraints/0"]


@pytest.mark.parametrize(
    ("within", "pointer", "price"),
    [
        ([None, None], "/endpoints/1", 2.0),
        ([None, 3], "/endpoints/1", 2.0),
        ([0, 1], "/endpoints/1", 2.0),  # its other side is limited as closely: what is stated for the place counts
    ],
)
def test_a_limit_at_a_place_is_no_bound_of_the_unknown(within, pointer, price):
    """The least integral of y'^2 from y(0) = 0 to y(1) = c is c^2, its slope 2 c."""
    line = {
        "independent": {"name": "x", "from": 0, "to": 1},
        "unknowns": {"y": {"within": within}},
        "functional": {"seek": "minimum", "integrand": "y'^2"},
        "endpoints": ["y(0) = 0", "y(1) >= 1"],
    }
    found = {p.pointer: p.price for p in prices(path_of(line))}
    assert found == {"/endpoints/0": pytest.approx(-price), pointer: pytest.approx(price)}


def test_a_bound_that_is_closer_than_a_limit_at_a_place_has_its_price():
    """min of the integral of y'^2 - 4 y with y(0) = 0 and y <= 1/2: y = 2 x (a - x/2) up to a with a^2 = 1/2."""
    reach = {
        "independent": {"name": "x", "from": 0, "to": 1},
        "unknowns": {"y": {"within": [None, 0.5]}},
        "functional": {"seek": "minimum", "integrand": "y'^2 - 4*y"},
        "endpoints": ["y(0) = 0", "y(1) <= 0.75"],
    }
    found = {p.pointer: p.price for p in prices(path_of(reach))}
    narrow = {**reach, "unknowns": {"y": {"within": [None, 0.499]}}}
    wide = {**reach, "unknowns": {"y": {"within": [None, 0.501]}}}
    slope = (path_of(wide).value - path_of(narrow).value) / 2e-3
    assert found["/unknowns/y/within"] == pytest.approx(slope, rel=1e-3)
    assert found["/endpoints/1"] == 0.0


def test_a_limit_that_is_a_parameter_is_told_by_its_sides():
    """The least p >= |x''| from rest to rest, x from 0 to 1 in 1, is 4; by symmetry half on each side."""
    least = {
        **REST,
        "parameters": {"p": {"within": [0, 100]}},
        "constraints": ["-p <= u <= p"],
        "functional": {"seek": "minimum", "endpoint": "p"},
    }
    solution = solve(assemble(read(json.dumps({"format": 1, "title": "test", **least}).encode())))
    assert solution.verdict is Verdict.GLOBAL_MINIMUM  # though the switch lies on a break of the first mesh
    assert solution.value == pytest.approx(4, rel=1e-8)
    sides = {p.label: p.price for p in solution.prices if p.pointer == "/constraints/0"}
    assert sides == {"-p <= u <= p (upper)": pytest.approx(-0.5), "-p <= u <= p (lower)": pytest.approx(0.5)}
