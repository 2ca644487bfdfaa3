"""The least greatest value: a parameter bounds something all along, and is to be small.

All from rest to rest over the length 1 in the time 1.  Closed forms: of the least greatest acceleration, full ahead and
full back, 1/4 of the way each time squared: 4; of the least greatest third derivative, over quarters of the time +, -,
-, +: 32; of the least greatest speed v with accelerations up to a: 1 = v - v^2/a.
"""

import json
import math

import pytest

from service.assemble import assemble
from service.spec import read
from solvers.solution import Verdict
from solvers.solve import solve

REST = ["x(0) = 0", "x'(0) = 0", "x(1) = 1", "x'(1) = 0"]
AT_EASE = [*REST, "x''(0) = 0", "x''(1) = 0"]


def least(constraints, endpoints, **members):
    document = {
        "format": 1,
        "independent": {"name": "t", "from": 0, "to": 1},
        "parameters": {"M": {"within": [0, 100]}},
        "unknowns": {"x": {}},
        "functional": {"seek": "minimum", "endpoint": "M"},
        "constraints": constraints,
        "endpoints": endpoints,
    }
    return solve(assemble(read(json.dumps(document | members).encode())))


@pytest.mark.parametrize(
    ("constraints", "endpoints", "value", "switches"),
    [
        (["-M <= x''", "x'' <= M"], REST, 4.0, [0.5]),
        (["abs(x'') <= M"], REST, 4.0, [0.5]),
        (["abs(x''') <= M"], AT_EASE, 32.0, [0.25, 0.75]),
        (["abs(x'') <= 10", "x' <= M"], REST, 5 - 15**0.5, [(5 - 15**0.5) / 10, 1 - (5 - 15**0.5) / 10]),
    ],
)
def test_closed_forms(constraints, endpoints, value, switches):
    found = least(constraints, endpoints)
    assert found.verdict is Verdict.GLOBAL_MINIMUM  # the problem is convex
    assert abs(found.value - value) <= found.value_error < 1e-6
    assert [switch.place for switch in found.switches] == pytest.approx(switches, abs=1e-8)


def test_a_switch_at_a_break_of_the_first_mesh_is_no_accident():
    """At x'(1) = 0.3 the switch lies anywhere; the closed form is of two parabolas: x and its slope fit at the end."""
    found = least(["abs(x'') <= M"], [*REST[:3], "x'(1) = 0.3"])
    (switch,) = found.switches
    s, m = switch.place, found.value
    assert m * (2 * s - 1) == pytest.approx(0.3, abs=1e-8)
    assert m * (s**2 / 2 + s * (1 - s) - (1 - s) ** 2 / 2) == pytest.approx(1.0, abs=1e-8)
    assert found.verdict is Verdict.GLOBAL_MINIMUM


def test_the_least_time_with_a_limit_on_an_absolute_value():
    """Full ahead and full back, a unit of time each (Pontryagin and others, 1962, section 1.5; from memory)."""
    found = least(["abs(x'') <= 1"], ["x(0) = 0", "x'(0) = 0", "x(M) = 1", "x'(M) = 0"],
                  independent={"name": "t", "from": 0, "to": "M"})  # fmt: skip
    assert found.value == pytest.approx(2.0, abs=1e-8)
    assert found.verdict is Verdict.LOCAL_MINIMUM
    assert not found.notes[0].startswith("abs")


def test_the_line_nearest_to_the_exponential_in_the_greatest_error():
    """The error is as large at both ends as between them, where exp has the slope of the chord (Chebyshev, 1859; from
    memory): a problem without any state."""
    found = least(["abs(e) <= M"], [], unknowns={"e": {}}, dynamics=["e = exp(t) - a - b*t"],
                  parameters={"M": {"within": [0, 10]}, "a": {}, "b": {}})  # fmt: skip
    chord = math.e - 1
    exact = (1 - chord + chord * math.log(chord)) / 2
    assert abs(found.value - exact) <= found.value_error < 1e-6
    assert found.parameters["b"] == pytest.approx(chord, abs=1e-6)
    assert found.verdict is Verdict.GLOBAL_MINIMUM
