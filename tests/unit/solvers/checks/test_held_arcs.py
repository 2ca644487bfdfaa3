"""What wrong pushes along held arcs could gain, by problems whose switching functions are chosen first."""

import pytest

from solvers.checks import held_arcs
from solvers.checks.sampling import Sampler
from solvers.deadline import in_seconds
from solvers.search.given import solve_as_given
from solvers.solve import solve
from tests.unit.solvers.problems import stated


def chosen(switches, end, gauge=1.0):
    """x'' = u, |u| <= 1 from rest with the least integral of Q'' x for Q = (t - T)^2 times all (t - switch).

    By parts that is the integral of Q u: u is -1 where Q > 0 and 1 where Q < 0 (closed form).
    """
    import numpy as np
    from numpy.polynomial import Polynomial

    q = gauge * Polynomial.fromroots([*switches, end, end])
    g = q.deriv(2)
    whole = q.integ()
    value = -sum(abs(whole(b) - whole(a)) for a, b in zip([0, *switches], [*switches, end], strict=True))
    written = " + ".join(f"({float(c)!r})*t^{k}" for k, c in enumerate(np.asarray(g.coef)))
    return stated(
        independent={"name": "t", "from": 0, "to": end},
        unknowns={"x": {}, "v": {}, "u": {"within": [-1, 1]}},
        dynamics=["x' = v", "v' = u"],
        functional={"integrand": f"({written})*x"},
        endpoints=["x(0) = 0", "v(0) = 0"],
    ), value


def test_where_all_switches_are_found_nothing_is_left():
    problem, _ = chosen([0.6, 1.2], 2)
    pursuit = solve_as_given(problem, None, in_seconds(30))
    assert pursuit.problem.held
    assert held_arcs.gain(Sampler(pursuit.paths[-1])) == 0


def test_an_arc_that_no_mesh_shows_counts_in_the_stated_error():
    """Between 0.2488 and 0.2522 the other limit would be better, by some 1e-8 of the value."""
    problem, value = chosen([0.2488, 0.2522, 0.5603], 2.06)
    found = solve(problem)
    assert 1e-9 < abs(found.value - value) <= found.value_error < 1e-6


@pytest.mark.parametrize("switches, end", [([0.59967, 1.93893, 2.13552], 2.81), ([0.3, 0.9, 1.1, 1.6], 2.2)])
def test_a_leap_within_a_calm_arc_is_a_switch(switches, end):
    """The last two switches are close to each other: a coarse mesh takes one of them for its own break."""
    problem, value = chosen(switches, end)
    found = solve(problem)
    assert abs(found.value - value) <= found.value_error
    assert [switch.place for switch in found.switches] == pytest.approx(switches, abs=1e-6)
