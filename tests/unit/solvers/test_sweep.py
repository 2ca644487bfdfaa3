"""A sweep: the values and verdicts of single solves, from neighbour to neighbour, against closed forms."""

from dataclasses import replace

import numpy as np
import pytest

from service import samples
from service.assemble import assemble
from service.spec import read
from solvers import solve as single
from solvers.problem import Sweep
from solvers.solution import Verdict
from solvers.solve import solve
from tests.unit.solvers.problems import LEAST_TIME, shape, stated, swing

CHAIN = {
    "independent": {"name": "x", "from": -1, "to": 1},
    "constants": {"w": 1, "l": 2.4},
    "functional": {"integrand": "w*y*sqrt(1 + y'^2)"},
    "endpoints": ["y(-1) = 0", "y(1) = 0"],
    "constraints": ["integral(sqrt(1 + y'^2)) = l"],
}


def swept(problem, **values):
    return replace(problem, sweeps=tuple(Sweep(name, tuple(map(float, given))) for name, given in values.items()))


def hanging(length):
    """Gelfand, Fomin (1963), section 12: y = a cosh(x/a) - a cosh(1/a) with 2 a sinh(1/a) the length."""
    low, high = 0.05, 50.0
    for _ in range(200):
        middle = (low + high) / 2
        low, high = (middle, high) if 2 * middle * np.sinh(1 / middle) > length else (low, middle)
    a = low
    return a + a**2 * np.sinh(2 / a) / 2 - a * np.cosh(1 / a) * length


def test_every_value_of_a_chain_of_many_lengths_is_that_of_the_catenary():
    lengths = np.linspace(2.1, 3.5, 15)
    points = solve(swept(shape(**CHAIN), l=lengths)).sweep
    assert [point.at[0] for point in points] == pytest.approx(lengths)
    for point in points:
        assert abs(point.value - hanging(point.at[0])) <= point.value_error <= 1e-5
        assert point.verdict is Verdict.LOCAL_MINIMUM, point.failed
    assert [index for index, point in enumerate(points) if point.curve is not None] == [0, 2, 5, 7, 9, 12, 14]


def test_two_constants_make_a_grid_whose_last_runs_fastest():
    points = solve(swept(shape(**CHAIN), w=[1, 2], l=[2.3, 2.5, 2.7])).sweep
    assert [point.at for point in points] == [(1, 2.3), (1, 2.5), (1, 2.7), (2, 2.3), (2, 2.5), (2, 2.7)]
    assert [point.value for point in points] == pytest.approx([p.at[0] * hanging(p.at[1]) for p in points])


def test_switches_move_with_the_constant():
    # Pontryagin et al. (1962), section 5 (from memory): T = 1 + 2 sqrt(1/2 + D) from x = D at the speed 1.
    problem = stated(
        **LEAST_TIME | {"constants": {"D": 1}, "endpoints": ["x(0) = D", "x'(0) = 1", "x(T) = 0", "x'(T) = 0"]}
    )
    points = solve(swept(problem, D=np.linspace(0.5, 2, 7))).sweep
    for point in points:
        assert abs(point.value - 1 - 2 * np.sqrt(0.5 + point.at[0])) <= point.value_error
        assert point.parameters == {"T": pytest.approx(point.value)}
        assert point.verdict is Verdict.LOCAL_MINIMUM


def test_the_verdict_is_that_of_each_point():
    # Jacobi (1837): x'^2 - x^2 is least along x = 0 only up to the length pi; beyond, nothing is least.
    problem = stated(constants={"L": 2.0}, independent={"name": "t", "from": 0, "to": "L"},
                     functional={"integrand": "u^2 - x^2"}, endpoints=["x(0) = 0", "x(L) = 1"])  # fmt: skip
    points = solve(swept(problem, L=[1.0, 2.0, 2.5, 3.0, 3.3, 4.0])).sweep
    good = {Verdict.LOCAL_MINIMUM, Verdict.GLOBAL_MINIMUM}
    assert [point.verdict in good for point in points] == [True] * 4 + [False] * 2
    assert {point.verdict for point in points[4:]} == {Verdict.NO_OPTIMUM}  # what a single solve says
    for point in points[:4]:
        assert abs(point.value - 1 / np.tan(point.at[0])) <= point.value_error


def test_beyond_its_critical_load_a_strut_is_bent():
    # Euler (1744): up to the load pi^2 it stays straight, with the value P.
    problem = stated(constants={"P": 5.0}, functional={"integrand": "u^2/2 + P*cos(x)"},
                     endpoints=["x(0) = 0", "x(1) = 0"])  # fmt: skip
    points = solve(swept(problem, P=[5.0, 9.0, 11.0, 15.0])).sweep
    assert {point.verdict for point in points} <= {Verdict.LOCAL_MINIMUM, Verdict.GLOBAL_MINIMUM}
    for point in points[:2]:
        assert abs(point.value - point.at[0]) <= point.value_error
    for point in points[2:]:
        assert abs(point.value - swing(point.at[0], 2)) <= point.value_error


def test_a_point_whose_curve_runs_away_says_so():
    # The least integral of x'^2 + r over a free time T, from 0 to 1, is 2 sqrt(r), at T = 1/sqrt(r).
    problem = stated(
        constants={"r": 1.0},
        independent={"name": "t", "from": 0, "to": "T"},
        parameters={"T": {"within": [0.1, None]}},
        functional={"integrand": "u^2 + r"},
        endpoints=["x(0) = 0", "x(T) = 1"],
    )
    far, near, _ = solve(swept(problem, r=[0.0, 0.25, 1.0])).sweep
    assert far.verdict is Verdict.NO_OPTIMUM
    assert abs(near.value - 1) <= near.value_error and near.verdict is Verdict.LOCAL_MINIMUM


def test_where_nothing_is_feasible_the_point_says_so_and_the_others_go_on():
    problem = stated(constants={"D": 1}, endpoints=["x(0) = 0", "x(1) = D"], constraints=["u <= 2"])
    points = solve(swept(problem, D=[1.0, 1.5, 2.5, 3.0])).sweep
    assert [point.value for point in points[:2]] == pytest.approx([1.0, 2.25])
    assert [point.verdict for point in points[2:]] == [Verdict.INFEASIBLE] * 2
    assert all(point.value is None and "No curve satisfies" in point.note for point in points[2:])


def test_what_is_stationary_is_followed_as_such():
    problem = stated(constants={"L": 4.0}, independent={"name": "t", "from": 0, "to": "L"},
                     functional={"seek": "stationary", "integrand": "u^2 - x^2"},
                     endpoints=["x(0) = 0", "x(L) = 1"])  # fmt: skip
    points = solve(swept(problem, L=[3.5, 4.0, 4.5])).sweep
    assert {point.verdict for point in points} == {Verdict.STATIONARY}
    assert [point.value for point in points] == pytest.approx([1 / np.tan(point.at[0]) for point in points])


def test_a_stop_ends_the_sweep_and_the_points_say_so():
    seen = []

    def watch(progress):
        seen.append(progress)
        return progress.point == (2, 5)

    problem = stated(constants={"D": 1}, endpoints=["x(0) = 0", "x(1) = D"])
    points = solve(swept(problem, D=[1, 2, 3, 4, 5]), watch).sweep
    assert [point.value is None for point in points] == [False, False, True, True, True]
    assert points[-1].note == "The run was stopped before this point."
    assert [sign.point for sign in seen if sign.kind == "point"] == [(k, 5) for k in range(1, 6)]


def test_without_time_no_point_is_made_up():
    problem = swept(stated(constants={"D": 1}, endpoints=["x(0) = 0", "x(1) = D"]), D=[1, 2])
    points = solve(replace(problem, options=replace(problem.options, time_limit=1e-3))).sweep
    assert [point.value for point in points] == [None, None]
    assert points[0].note == "The time limit was reached before this point."


def test_where_a_limit_begins_to_bind_the_structure_is_repaired_near_the_neighbour(monkeypatch):
    # From the speed 0.3 to rest over D with |u| <= 1, v <= 1.2 (common practice of motion control): with the greatest
    # speed p = sqrt(D + 0.045) in the time 2 p - 0.3 up to p = 1.2; beyond, the rest of the way at that speed.
    problem = stated(
        **LEAST_TIME
        | {
            "constants": {"D": 1.25},
            "endpoints": ["x(0) = 0", "x'(0) = 0.3", "x(T) = D", "x'(T) = 0"],
            "constraints": ["x' <= 1.2"],
        }
    )
    from_nothing = []
    found = single.solve_in_best_form
    monkeypatch.setattr(single, "solve_in_best_form", lambda *given: from_nothing.append(given) or found(*given))
    points = solve(swept(problem, D=[1.2, 1.3, 1.45, 1.6, 1.7])).sweep
    for point in points:
        fastest = min(np.sqrt(point.at[0] + 0.045), 1.2)
        expected = 2 * fastest - 0.3 + (point.at[0] + 0.045 - fastest**2) / fastest
        assert abs(point.value - expected) <= point.value_error
        assert point.verdict is Verdict.LOCAL_MINIMUM, point.failed
    assert len(from_nothing) <= 2  # the problem as it stands, and perhaps a point just beyond the change


def test_between_points_looked_at_closely_no_structure_is_kept_that_another_betters():
    # The crucible loses two of its eight switches near 2.965 m; the old structure keeps a solution that is no minimum.
    problem = assemble(read(samples.text("crucible").encode()))
    values = [2.959, 2.961, 2.963, 2.97, 2.98, 2.99, 3.0]
    points = solve(swept(problem, D=values)).sweep
    constants = tuple(replace(c, value=2.961) if c.name == "D" else c for c in problem.constants)
    alone = solve(replace(problem, constants=constants))
    assert alone.verdict is points[1].verdict is Verdict.LOCAL_MINIMUM
    assert abs(points[1].value - alone.value) <= points[1].value_error + alone.value_error


def test_a_square_is_minimised_only_where_the_integrand_is_positive():
    # The integral of (c + y) ds has a least value while c + y > 0; where it is negative, a longer curve is less.
    problem = shape(
        independent={"name": "x", "from": 0, "to": 1},
        constants={"c": 1.0},
        unknowns={"y": {"within": [0, 2]}},
        functional={"integrand": "(c + y)*sqrt(1 + y'^2)"},
        endpoints=["y(0) = 1", "y(1) = 1"],
    )
    points = solve(swept(replace(problem, options=replace(problem.options, time_limit=20.0)), c=[-3.5, 0.5, 1.0])).sweep
    good = {Verdict.LOCAL_MINIMUM, Verdict.GLOBAL_MINIMUM}
    assert [point.verdict in good for point in points] == [False, True, True]
