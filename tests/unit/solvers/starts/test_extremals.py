"""Several starts: the known extremals of textbook problems are found, told apart and ranked."""

import dataclasses

import numpy as np
import pytest

from solvers.curve import Curve
from solvers.solution import Check, Solution, Status, Verdict
from solvers.solve import solve
from solvers.starts.extremals import NAME, distance, same, solve_from_starts
from tests.unit.solvers.problems import shape, stated

RINGS = {
    "independent": {"name": "x", "from": -0.5, "to": 0.5},
    "unknowns": {"y": {"within": [0, None]}},
    "endpoints": ["y(-0.5) = 1", "y(0.5) = 1"],
}
AREA = "2*pi*y*sqrt(1 + y'^2)"
PENDULUM = {
    "independent": {"name": "t", "from": 0, "to": 7},
    "dynamics": None,
    "unknowns": {"q": {}},
    "endpoints": ["q(0) = 0", "q(7) = 0"],
}


def other_starts(solution) -> Check:
    return next(check for check in solution.checks if check.name == NAME)


def values(solution):
    return [extremal.solution.value for extremal in solution.extremals]


def test_one_start_tells_of_no_others():
    solution = solve(shape(endpoints=["y(0) = 0", "y(3) = 1"]))
    assert solution.extremals == ()
    assert NAME not in [check.name for check in solution.checks]


def test_both_catenoids_between_two_rings():
    """Necks 0.848338 and 0.235095 with areas 5.991796975802282 and 6.84565539431063.

    Closed form: y = c cosh(x/c), c cosh(1/(2c)) = 1, area pi (c + c^2 sinh(1/c)).
    """
    solution = solve(shape(**RINGS, functional={"seek": "stationary", "integrand": AREA}, solve={"starts": 3}))
    assert sorted(values(solution)) == pytest.approx([5.991796975802282, 6.84565539431063], rel=1e-9)
    unstable = next(e for e in solution.extremals if e.solution.value > 6)
    assert unstable.starts == ("y with 1 half wave down",)
    np.testing.assert_allclose(unstable.solution.curve.evaluate("y", [0.0]), 0.2350949902345327, rtol=1e-6)
    assert other_starts(solution).status is Status.NOT_APPLICABLE
    assert "6.845655" in other_starts(solution).sentence


def test_an_elastica_bends_to_either_side():
    """Clamped and shortened by a fifth: energy 2 * 8.322939529861928; closed form by elliptic integrals, 2E/K = 1.8."""
    problem = stated(
        independent={"name": "s", "from": 0, "to": 1},
        dynamics=None,
        unknowns={"th": {}},
        functional={"seek": "minimum", "integrand": "th'^2/2"},
        endpoints=["th(0) = 0", "th(1) = 0"],
        constraints=["integral(cos(th)) = 0.8", "integral(sin(th)) = 0"],
        solve={"starts": 4},
    )
    solution = solve(problem)
    assert values(solution) == pytest.approx([8.322939529861928] * 2, rel=1e-8)
    one, other = (extremal.solution.curve.evaluate("th", [0.25])[0] for extremal in solution.extremals)
    assert one == pytest.approx(-other, rel=1e-6)
    assert abs(one) == pytest.approx(0.914057537443938, rel=1e-6)  # the largest angle
    assert other_starts(solution).status is Status.PASSED
    assert sum(len(extremal.starts) for extremal in solution.extremals) == 4


def test_a_pendulum_has_better_ways_than_rest():
    """Action over 7 > 2 pi: beyond two conjugate points rest is no minimum (Jacobi), and the swings of half a period 7
    and of 7/2 are extremals too.  Their amplitudes: K(sin(a/2)) = 7/2 and 7/4.
    """
    integrand = "q'^2/2 + cos(q) - 1"
    solution = solve(stated(**PENDULUM, functional={"seek": "minimum", "integrand": integrand}, solve={"starts": 3}))
    assert solution.verdict is Verdict.LOCAL_MINIMUM
    rest = solution.extremals[-1]
    assert rest.starts[0] == "default guess"
    assert rest.solution.value == pytest.approx(0, abs=1e-9)
    assert rest.solution.verdict is Verdict.NOT_A_MINIMUM
    assert other_starts(rest.solution).status is Status.FAILED
    assert "better" in other_starts(rest.solution).sentence
    top = abs(solution.curve.evaluate("q", [3.5])[0])
    assert elliptic_k(np.sin(top / 2)) == pytest.approx(3.5, rel=1e-6)

    every = solve(stated(**PENDULUM, functional={"seek": "stationary", "integrand": integrand}, solve={"starts": 6}))
    tops = {
        round(float(np.abs(e.solution.curve.evaluate("q", np.linspace(0, 7, 57))).max()), 6) for e in every.extremals
    }
    assert len(every.extremals) == 5
    swings = sorted(tops)[1:]
    assert [elliptic_k(np.sin(swing / 2)) for swing in swings] == pytest.approx([1.75, 3.5], rel=1e-5)


def test_what_satisfies_no_condition_is_no_extremal():
    """y = 0, worth -10/2, is stationary; downhill from a wave there is nothing but ever larger values."""
    problem = stated(
        independent={"name": "x", "from": 0, "to": 10},
        dynamics=None,
        unknowns={"y": {}},
        functional={"seek": "stationary", "integrand": "y'^2/2 - (y^2 - 1)^2/2"},
        endpoints=["y(0) = 0", "y(10) = 0"],
        solve={"starts": 3},
    )
    solution = solve(problem)
    assert solution.verdict is Verdict.STATIONARY
    assert values(solution) == pytest.approx([-5], rel=1e-9)
    assert "2 led nowhere" in other_starts(solution).sentence


def elliptic_k(k):
    """K(k) by the arithmetic-geometric mean (Gauss)."""
    a, b = 1.0, np.sqrt(1 - k * k)
    for _ in range(8):
        a, b = (a + b) / 2, np.sqrt(a * b)
    return np.pi / 2 / a


def line(slope, value=1.0, verdict=Verdict.LOCAL_MINIMUM, error=1e-9):
    """A made-up solution y = slope x."""
    curve = Curve(np.array([0.0, 1.0]), {"y": (np.array([slope / 2, slope / 2]),), "y'": (np.array([slope]),)})
    return Solution(verdict, value=value, value_error=error, curve=curve, curve_error=1e-9)


def test_curves_are_the_same_only_where_value_and_shape_agree():
    assert same(line(1.0), line(1.0 + 1e-6), {}, 1e-6)
    assert not same(line(1.0), line(-1.0), {}, 1e-6)
    assert not same(line(1.0), line(1.0, value=1.01), {}, 1e-6)
    assert same(line(1e-14), line(-1e-14), {"y": 1.0}, 1e-6)  # two zeros
    assert distance(line(1.0).curve, line(1.1).curve, {}) == pytest.approx(0.1 / 1.1, rel=1e-2)


def from_list(*found):
    """What `solve_from_starts` makes of solutions that the starts lead to, in order."""
    left = list(found)
    seen = []

    def solve_one(problem, watch):
        seen.append(problem.start.label)
        return left.pop(0)

    problem = shape(endpoints=["y(0) = 0", "y(3) = 1"], solve={"starts": len(found)})
    return solve_from_starts(problem, None, solve_one, solve_one, {"y": 1.0})


def test_a_better_curve_takes_back_what_convexity_claims():
    """Two that contradict each other: one calls itself global, the other, merely feasible, is better."""
    solution = from_list(line(1.0, 2.0, Verdict.GLOBAL_MINIMUM), line(2.0, 1.0, Verdict.BEST_FOUND))
    assert solution.value == 2.0
    assert solution.verdict is Verdict.LOCAL_MINIMUM
    check = other_starts(solution)
    assert check.status is Status.FAILED and check.figure == pytest.approx(0.5)


def test_a_value_that_does_not_stand_is_no_rival():
    solution = from_list(line(1.0, 2.0), line(2.0, 1.0, Verdict.NOT_VERIFIED), Solution(Verdict.INFEASIBLE))
    assert solution.value == 2.0
    assert [e.solution.value for e in solution.extremals] == [2.0]
    assert other_starts(solution).status is Status.PASSED
    assert "2 led nowhere" in other_starts(solution).sentence


def test_where_starts_lead_to_saddles_only_these_are_left():
    problem = shape(endpoints=["y(0) = 0", "y(3) = 1"], solve={"starts": 2})
    saddles = {"default guess": line(1.0, 3.0, Verdict.NOT_A_MINIMUM), "else": line(2.0, 2.0, Verdict.NOT_A_MINIMUM)}
    left = []

    def solve_one(problem, watch):
        return saddles.get(problem.start.label, saddles["else"])

    def leave_saddle(problem, watch):
        left.append(problem.start.label)
        return line(3.0, 1.0)

    solution = solve_from_starts(problem, None, solve_one, leave_saddle, {"y": 1.0})
    assert left == ["y with 1 half wave up"]  # the better one
    assert solution.verdict is Verdict.LOCAL_MINIMUM
    assert [(e.starts[0], e.solution.value) for e in solution.extremals] == [
        ("beside a saddle", 1.0), ("y with 1 half wave up", 2.0), ("default guess", 3.0)]  # fmt: skip


def test_a_better_value_that_is_only_approached_is_told():
    solution = from_list(line(1.0, 2.0, Verdict.GLOBAL_MINIMUM), line(2.0, 1.0, Verdict.NO_OPTIMUM))
    assert [e.solution.value for e in solution.extremals] == [2.0, 1.0]
    assert solution.verdict is Verdict.LOCAL_MINIMUM


def test_where_no_start_leads_to_an_extremal_the_best_curve_is_told():
    found = line(1.0, 2.0, Verdict.NOT_VERIFIED), line(2.0, 1.0, Verdict.NOT_VERIFIED)
    solution = from_list(*found)
    assert solution.verdict is Verdict.NOT_VERIFIED
    assert [e.solution.value for e in solution.extremals] == [1.0]
    assert "1 led nowhere" in other_starts(solution).sentence


def test_where_no_start_leads_anywhere_the_first_one_is_told():
    first = Solution(Verdict.INFEASIBLE, times={"solve": 1.0})
    solution = from_list(first, Solution(Verdict.NO_OPTIMUM))
    assert dataclasses.replace(solution, times=first.times) == first


def test_a_stop_ends_all_starts():
    problem = shape(endpoints=["y(0) = 0", "y(3) = 1"], solve={"starts": 5})
    count = []

    def stop(progress):
        count.append((progress.start, progress.mesh))
        return True

    solve(problem, stop)
    assert {start for start, _ in count} == {1}


def test_meshes_are_counted_on_from_start_to_start():
    seen = []
    problem = shape(endpoints=["y(0) = 0", "y(3) = 1"], solve={"starts": 3})
    solve(problem, lambda progress: bool(seen.append((progress.start, progress.mesh, progress.iteration))))
    assert seen == sorted(seen)
    assert {start for start, _, _ in seen} == {1, 2, 3}
