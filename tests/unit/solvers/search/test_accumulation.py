"""Touches that accumulate before an arc on a limit of third order, and values that replace others only if not worse.

Problem after Robbins (1980), Journal of Optimization Theory and Applications 31 (from memory): integral of
x + x'''^2/2, x >= 0.  Between touches Euler's equation is x^(6) = 1: the pieces are polynomials that their ends
determine, with x = x' = 0 at touches and nothing but zero on the arc; the times and x'' at the touches are found here
by a minimiser of few variables.
"""

from itertools import pairwise

import numpy as np
import pytest
from numpy.polynomial import Polynomial
from scipy.optimize import minimize

from solvers.deadline import in_seconds
from solvers.search.accumulation import accumulation, one_touch_more
from solvers.search.given import solve_as_given
from solvers.search.pursuit import pursue
from solvers.search.sharpen import worse
from solvers.solve import solve
from tests.unit.solvers.problems import regulator, stated

ROBBINS = {
    "independent": {"name": "t", "from": 0, "to": 8},
    "unknowns": {"x": {}},
    "functional": {"seek": "minimum", "integrand": "x + x'''^2/2"},
    "endpoints": ["x(0) = 1", "x'(0) = -2", "x''(0) = 0"],
    "constraints": ["x >= 0"],
    "dynamics": [],
}


def piece(start, end, length):
    """The cost between two ends (x, x', x'')."""
    own = Polynomial([0, 0, 0, 0, 0, 0, 1 / 720])
    rows, right = [], []
    for at, given in ((0.0, start), (length, end)):
        for order, value in enumerate(given):
            basis = [Polynomial.basis(k).deriv(order)(at) if order else Polynomial.basis(k)(at) for k in range(6)]
            rows.append(basis)
            right.append(value - (own.deriv(order)(at) if order else own(at)))
    x = own + Polynomial(np.linalg.solve(np.array(rows), np.array(right)))
    total = (x + x.deriv(3) ** 2 / 2).integ()
    return total(length) - total(0)


def by_pieces(times, bends):
    """The cost with touches at all but the last of the times, with such x'' there, and zero from the last one on."""
    ends = [(1.0, -2.0, 0.0), *((0.0, 0.0, bend) for bend in bends), (0.0, 0.0, 0.0)]
    return sum(piece(*pair, length) for pair, length in zip(pairwise(ends), np.diff([0.0, *times]), strict=True))


def least(touches):
    """The least cost with so many touches before the arc."""
    times, bends = [0.9433, 5.5286, 6.99][:touches], [1.4554, 0.0152, 1.6e-4][:touches]
    first = np.array([*times, {2: 7.05, 3: 7.46}[touches], *bends])
    sizes = np.maximum(np.abs(first), 1e-6)

    def cost(relative):
        return by_pieces(relative[: touches + 1] * sizes[: touches + 1], relative[touches + 1 :] * sizes[touches + 1 :])

    return minimize(cost, first / sizes, method="BFGS", options={"gtol": 1e-6}).fun


@pytest.fixture(scope="module")
def resting():
    return solve_as_given(stated(**ROBBINS), None, in_seconds(60))


def test_an_arc_that_cannot_be_entered_has_touches_before_it(resting):
    found = accumulation(resting.paths[-1])
    assert (found.state, found.side, found.order) == (("x", 0), -1, 3)
    assert len(found.places) == 3  # the start of the range is the first
    assert found.places[1:] == pytest.approx((0.9433, 5.5286), abs=1e-3)


def test_its_value_is_that_of_pieces_between_touches(resting):
    """Each touch takes the value down: what another one would is part of the stated error."""
    two, three = least(2), least(3)
    assert two > three
    assert resting.paths[-1].value == pytest.approx(two, abs=1e-8)
    assert abs(resting.paths[-1].value - three) <= resting.value_error <= 1e-6 * three


def test_one_touch_more_follows_in_the_series(resting):
    path = resting.paths[-1]
    before, after = path.program.compiled.lowered.problem, one_touch_more(path)
    assert len(after.places) == len(before.places) + 1
    assert len(after.touches) == len(before.touches) + 1
    assert {held.stretch for held in after.held} == {held.stretch + 1 for held in before.held}
    guesses = {parameter.name: parameter.guess for parameter in after.parameters}
    assert guesses[after.touches[-1].place] == pytest.approx(6.99, abs=0.1)


def test_an_arc_of_second_order_is_entered_at_once():
    """x'' = u, u^2, x <= 0.1 (Bryson, Ho, 1975, section 3.11; from memory)."""
    members = {
        "unknowns": {"x": {"within": [None, 0.1]}, "u": {}}, "dynamics": ["x'' = u"],
        "functional": {"integrand": "u^2/2"}, "endpoints": ["x(0) = 0", "x'(0) = 1", "x(1) = 0", "x'(1) = -1"],
    }  # fmt: skip
    path = solve_as_given(stated(**members), None, in_seconds(60)).paths[-1]
    assert path.program.compiled.lowered.problem.held
    assert accumulation(path) is None
    assert one_touch_more(path) is None


def test_it_is_said():
    assert any(note.startswith("Touches accumulate: x cannot") for note in solve(stated(**ROBBINS)).notes)


def test_a_value_is_worse_only_beyond_both_errors():
    here, there = (pursue(regulator(), None, in_seconds(30)) for _ in range(2))
    assert not worse(here, there)
    object.__setattr__(there.paths[-1], "value", here.paths[-1].value - 1e-3)
    assert worse(here, there)
    assert not worse(there, here)
    there.value_error = 2e-3
    assert not worse(here, there)
