"""A wave of infections kept below a limit by measures that have a limit too (Kermack, McKendrick, 1927; from memory).

S' = -0.4 (1 - u) S I, I' = 0.4 (1 - u) S I - 0.1 I over 60 days from S = 0.99, I = 0.01, with I <= 0.1.  On its limit
I stays where u = 1 - 0.25/S, so that S falls by 0.01 a day.  Where u <= 0.6 that is possible below S = 0.625 only: full
measures have to begin so early that the wave's peak is just there.
"""

import json

import numpy as np
import pytest
from scipy.integrate import solve_ivp
from scipy.optimize import brentq

from service.assemble import assemble
from service.spec import read
from solvers.solution import Verdict
from solvers.solve import solve

LIMIT, END = 0.1, 60.0


def found(most, integrand):
    document = {
        "format": 1,
        "independent": {"name": "t", "from": 0, "to": END},
        "constants": {"most": most},
        "unknowns": {"S": {}, "I": {"within": [None, LIMIT]}, "u": {"within": [0, None]}},
        "dynamics": ["S' = -0.4*(1 - u)*S*I", "I' = 0.4*(1 - u)*S*I - 0.1*I"],
        "functional": {"seek": "minimum", "integrand": integrand},
        "constraints": ["u <= most"],
        "endpoints": ["S(0) = 0.99", "I(0) = 0.01"],
    }
    return solve(assemble(read(json.dumps(document).encode())))


def wave(time, start, u, stop=None):
    """The wave under constant measures up to a time, or to where `stop` vanishes: when and where it ends."""

    def rates(_, y):
        new = 0.4 * (1 - u) * y[0] * y[1]
        return [-new, new - 0.1 * y[1]]

    if stop is not None:
        stop.terminal = True
    run = solve_ivp(rates, (0, time), start, events=stop, method="DOP853", rtol=1e-12, atol=1e-14)
    return run.t[-1], run.y[:, -1]


def measures_on_the_limit(since, s):
    """The integral of 1 - 0.25/S from then on."""
    return END - since + 25 * np.log((s - 0.01 * (END - since)) / s)


def test_measures_that_suffice_begin_at_the_limit():
    at, (s, _) = wave(END, [0.99, 0.01], 0.0, lambda t, y: y[1] - LIMIT)
    solution = found(0.9, "u")
    assert abs(solution.value - measures_on_the_limit(at, s)) <= solution.value_error < 1e-6
    assert [switch.place for switch in solution.switches] == pytest.approx([at], abs=1e-9)
    assert solution.verdict is Verdict.LOCAL_MINIMUM


def test_measures_that_hardly_suffice_begin_before():
    def peak(begin):
        _, start = wave(begin, [0.99, 0.01], 0.0)
        time, there = wave(END, start, 0.6, lambda t, y: y[0] - 0.625)
        return begin + time, there[1]

    begin = brentq(lambda t: peak(t)[1] - LIMIT, 1.0, 8.0, xtol=1e-12)
    full, _ = peak(begin)
    solution = found(0.6, "u")
    exact = 0.6 * (full - begin) + measures_on_the_limit(full, 0.625)
    assert abs(solution.value - exact) <= solution.value_error < 1e-6
    assert [switch.place for switch in solution.switches] == pytest.approx([begin, full], abs=1e-6)
    assert solution.verdict is Verdict.LOCAL_MINIMUM


def test_measures_that_cost_their_square_come_to_the_limit_where_they_just_suffice():
    """Before, they grow: the more there are to infect, the more they prevent."""
    solution = found(0.6, "u^2")
    _, full = (switch.place for switch in solution.switches)
    s, i = (solution.curve.evaluate(name, np.array([full]))[0] for name in "SI")
    assert (s, i) == pytest.approx((0.625, LIMIT), abs=1e-8)
    assert solution.value_error < 1e-6
    assert solution.verdict is Verdict.LOCAL_MINIMUM


def test_where_measures_just_suffice_depends_on_how_strong_they_may_be():
    (slope,) = found(0.6, "u").slopes
    step = 1e-4
    apart = (found(0.6 + step, "u").value - found(0.6 - step, "u").value) / (2 * step)
    assert slope.slope == pytest.approx(apart, rel=1e-4)
