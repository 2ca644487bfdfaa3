"""A store that is filled while it is cheap and emptied while it is dear, and idle while it is full or empty.

The price is 1.2 + sin(pi t/12) over a day, the store holds 10 and takes or gives up to 3 an hour, and is half full at
both ends.  It is dearest at 6 and cheapest at 18: the store is emptied and filled for 10/3 hours around these, and
filled and emptied by half at the ends of the day.  While it is idle more limits bind than there are controls.
"""

import json

import numpy as np
import pytest

from service.assemble import assemble
from service.spec import read
from solvers.solution import Verdict
from solvers.solve import solve

FLOWS = ((0, 5 / 3, 3), (6 - 5 / 3, 6 + 5 / 3, -3), (18 - 5 / 3, 18 + 5 / 3, 3), (24 - 5 / 3, 24, -3))


def paid(first, last):
    """The integral of the price."""
    return 1.2 * (last - first) - 12 / np.pi * (np.cos(np.pi * last / 12) - np.cos(np.pi * first / 12))


@pytest.mark.parametrize("wear", [0.0, 0.05])
def test_a_day(wear):
    document = {
        "format": 1,
        "independent": {"name": "t", "from": 0, "to": 24},
        "unknowns": {"E": {"within": [0, 10]}, "u": {"within": [-3, 3]}},
        "dynamics": ["E' = u"],
        "functional": {"seek": "minimum", "integrand": f"(1.2 + sin(pi*t/12))*u + {wear}*abs(u)"},
        "endpoints": ["E(0) = 5", "E(24) = 5"],
    }
    solution = solve(assemble(read(json.dumps(document).encode())))
    exact = sum(flow * paid(first, last) + wear * abs(flow) * (last - first) for first, last, flow in FLOWS)
    assert abs(solution.value - exact) <= solution.value_error < 1e-4
    places = sorted({place for first, last, _ in FLOWS for place in (first, last)} - {0, 24})
    assert [switch.place for switch in solution.switches] == pytest.approx(places, abs=1e-6)
    assert solution.verdict is Verdict.GLOBAL_MINIMUM  # the problem is convex


def test_a_day_with_losses_on_the_way_in_and_out():
    """95 in 100 of what flows arrive: it takes longer to fill, and less comes out."""
    document = {
        "format": 1,
        "independent": {"name": "t", "from": 0, "to": 24},
        "unknowns": {"E": {"within": [0, 10]}, "c": {"within": [0, 3]}, "d": {"within": [0, 3]}},
        "dynamics": ["E' = 0.95*c - d/0.95"],
        "functional": {"seek": "minimum", "integrand": "(1.2 + sin(pi*t/12))*(c - d)"},
        "endpoints": ["E(0) = 5", "E(24) = 5"],
    }
    solution = solve(assemble(read(json.dumps(document).encode())))
    half_in, half_out = 5 / 2.85, 5 * 0.95 / 3
    flows = (
        (0, half_in, 3),
        (6 - half_out, 6 + half_out, -3),
        (18 - half_in, 18 + half_in, 3),
        (24 - half_out, 24, -3),
    )
    exact = sum(flow * paid(first, last) for first, last, flow in flows)
    assert abs(solution.value - exact) <= min(solution.value_error, 1e-6)
    assert [switch.place for switch in solution.switches] == pytest.approx(
        sorted({place for first, last, _ in flows for place in (first, last)} - {0, 24}), abs=1e-6
    )
