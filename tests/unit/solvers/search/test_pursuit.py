"""One form of a problem pursued over meshes: its limits, its signs of life, its ways to end."""

import time
from itertools import pairwise

import numpy as np
import pytest

from solvers.deadline import in_seconds
from solvers.minimise.ipopt import WARM, Minimum, Outcome
from solvers.search.attempt import FIRST_DEGREE, first_mesh
from solvers.search.effort import Minimiser
from solvers.search.pursuit import gentle_barrier, go_on, pursue
from solvers.search.record import End
from solvers.transcription.collocation import Family
from solvers.transcription.lowering import lower
from solvers.transcription.mesh import Mesh, interval
from tests.unit.solvers.problems import compiled, regulator, shape, solved_on, stated

CORNER = {
    "functional": {"integrand": "(u - abs(t - 1/3))^2"},
    "endpoints": ["x(0) = 0"],
}
"""The control has a corner at 1/3: meshes have to gather there."""


def far(seconds=30.0):
    return in_seconds(seconds)


def test_a_smooth_problem_converges_with_an_honest_error():
    pursuit = pursue(regulator(), None, far())
    root = np.sqrt(2)
    exact = np.sinh(root) / (root * np.cosh(root) - np.sinh(root)) / 2  # Riccati
    assert pursuit.end is End.CONVERGED
    assert abs(pursuit.paths[-1].value - exact) <= pursuit.value_error < 1e-6
    assert pursuit.curve_error <= 1e-6
    assert len(pursuit.steps) == len(pursuit.paths) >= 2


def test_errors_bound_the_truth_mesh_by_mesh():
    problem = stated(functional={"integrand": "(u - exp(3*t))^2 + (x - sin(5*t))^2"}, endpoints=["x(0) = 0"])
    exact = pursue(stated(functional={"integrand": "(u - exp(3*t))^2 + (x - sin(5*t))^2"}, endpoints=["x(0) = 0"],
                          solve={"tolerance": 1e-11}), None, far()).paths[-1].value  # fmt: skip
    for meshes in (2, 3):
        pursuit = pursue(problem, None, far(), meshes=meshes)
        assert abs(pursuit.paths[-1].value - exact) <= pursuit.value_error


def test_meshes_gather_at_a_corner():
    pursuit = pursue(stated(**CORNER), None, far())
    assert pursuit.paths[-1].value == pytest.approx(0, abs=1e-9)
    breaks = pursuit.paths[-1].breaks
    widths = np.diff(breaks)
    holder = np.searchsorted(breaks, 1 / 3) - 1
    assert widths[holder] < 0.02 < widths.max()


def test_the_first_mesh_touches_neither_end():
    for stretches in (1, 2, 5):
        mesh = first_mesh(stretches)
        assert mesh.stretches == stretches
        assert mesh.intervals[0].scheme.family is mesh.intervals[-1].scheme.family is Family.GAUSS
        assert {piece.scheme.family for piece in mesh.intervals[1:-1]} <= {Family.RADAU}
        assert mesh.degrees() == (FIRST_DEGREE, FIRST_DEGREE)


def test_nor_kinks_between_the_ends():
    """Their points would be where the integrand vanishes: a jump there would cost nothing."""
    mesh = first_mesh(3, kinks=frozenset({2}))
    gauss = [k for k, piece in enumerate(mesh.intervals) if piece.scheme.family is Family.GAUSS]
    assert [mesh.stretch[k] for k in gauss] == [0, 1, 2]
    assert mesh.intervals[gauss[1]].start + mesh.intervals[gauss[1]].width == pytest.approx(1)


def test_signs_of_life_are_in_order():
    signs = []
    pursuit = pursue(stated(**CORNER), lambda sign: signs.append(sign) or False, far(), meshes=4)
    assert [sign.kind for sign in signs].count("mesh") == len(pursuit.steps)
    assert signs[-1].kind == "mesh"
    for before, after in pairwise(signs):
        assert after.mesh >= before.mesh
        assert after.iteration >= before.iteration
        if before.kind == "mesh":
            assert after.mesh == before.mesh + 1
    assert signs[-1].iteration == pursuit.iterations
    for sign in signs:
        if sign.kind == "mesh":
            assert sign.error is not None
            assert len(sign.breaks) == sign.intervals + 1
            assert np.all(np.diff(sign.breaks) > 0)
        else:
            assert sign.infeasibility >= 0
            assert sign.breaks is None


@pytest.mark.parametrize("stop_at", (1, 3, 12))
def test_a_stop_is_heard_at_once(stop_at):
    signs = []

    def watch(sign):
        signs.append(sign)
        return len(signs) >= stop_at

    pursuit = pursue(stated(**CORNER | {"functional": {"integrand": "exp((u - abs(t - 1/3))^2) + u^4"}}), watch, far())
    assert pursuit.end is End.STOPPED
    assert len(signs) <= stop_at + 1


def test_the_time_limit_holds():
    """Each sign of life takes its time here, so that the limit falls into a mesh."""

    def slow(sign):
        time.sleep(0.05)
        return False

    began = time.perf_counter()
    pursuit = pursue(stated(**CORNER, solve={"tolerance": 1e-12}), slow, far(0.6))
    assert pursuit.end is End.TIME
    assert time.perf_counter() - began < 20  # the machine may be busy


def test_no_time_at_all_is_out_of_time():
    pursuit = pursue(regulator(), None, far(-1.0))
    assert pursuit.end is End.TIME


def test_the_limit_on_points_holds():
    pursuit = pursue(stated(**CORNER, solve={"tolerance": 1e-12, "points": 70}), None, far())
    assert pursuit.end is End.POINTS
    assert max(step.points for step in pursuit.steps) <= 70
    assert pursuit.solved


def test_meshes_grow_by_a_factor_at_most():
    pursuit = pursue(
        stated(functional={"integrand": "(u - sin(200*t))^2"}, endpoints=["x(0) = 0"]), None, far(), meshes=5
    )
    for before, after in pairwise(pursuit.steps):
        assert after.points <= 2.5 * before.points + 40


def test_a_mesh_that_could_not_be_solved_is_not_tried_again(monkeypatch):
    pursuit = pursue(stated(**CORNER), None, far(), meshes=2)
    tried = []

    def stuck(minimiser, program, start, options=None):
        tried.append(program.mesh)
        size = len(program.lower)
        return Minimum(Outcome.FAILED, start.z, 0.0, np.zeros(size), np.zeros(program.rows.count), 0, 0.0, 0.0, "")

    monkeypatch.setattr(Minimiser, "__call__", stuck)
    monkeypatch.setattr(Minimiser, "nearby", lambda *_: None)
    go_on(pursuit, None, far())
    assert pursuit.end is End.FAILED
    count = len(tried)
    assert count > 0
    go_on(pursuit, None, far())
    assert (pursuit.end, len(tried)) == (End.FAILED, count)


def test_going_on_is_the_same_as_not_stopping():
    whole = pursue(stated(**CORNER), None, far())
    parts = go_on(pursue(stated(**CORNER), None, far(), meshes=2), None, far())
    assert parts.end is whole.end
    assert [step.points for step in parts.steps] == [step.points for step in whole.steps]
    assert parts.paths[-1].value == whole.paths[-1].value


def test_a_start_from_a_related_problem():
    path = solved_on(regulator())
    pursuit = pursue(regulator(dynamics=["x' = 1.1*x + u"]), None, far(), start=path)
    assert pursuit.end is End.CONVERGED
    assert pursuit.paths[-1].value == pytest.approx(pursue(regulator(dynamics=["x' = 1.1*x + u"]), None, far())
                                                    .paths[-1].value, rel=1e-8)  # fmt: skip


@pytest.mark.parametrize(
    "problem, end",
    [
        (stated(unknowns={"x": {}, "u": {"within": [-1, 1]}}, endpoints=["x(0) = 0", "x(1) = 3"]), End.INFEASIBLE),
        (stated(functional={"integrand": "-u^2"}), End.UNBOUNDED),
        (stated(functional={"integrand": "u^2 + log(-1 - x^2)"}), End.UNDEFINED),
    ],
    ids=("infeasible", "unbounded", "undefined"),
)
def test_where_there_is_no_optimum(problem, end):
    pursuit = pursue(problem, None, far())
    assert pursuit.end is end
    assert not pursuit.solved
    if end is End.INFEASIBLE:
        assert pursuit.findings
        assert pursuit.nearest is not None
    if end is End.UNDEFINED:
        assert pursuit.findings[0].label == "log(-1 - x^2)"


def test_a_problem_without_any_state_has_a_mesh_too():
    pursuit = pursue(shape(functional={"integrand": "(y - sin(x))^2"}), None, far())
    assert lower(pursuit.problem).states == ()
    assert pursuit.paths[-1].value == pytest.approx(0, abs=1e-8)
    assert compiled(pursuit.problem).point.controls == 1


def test_the_barrier_of_a_warm_start_is_smaller_where_intervals_are_narrow():
    wide = first_mesh(1)
    assert gentle_barrier(wide) == WARM["ipopt.mu_init"]
    first, *rest = wide.intervals
    cut = [
        interval(0, start, end, Family.RADAU, 4)
        for start, end in ((0.0, first.width / 1e4), (first.width / 1e4, first.width))
    ]
    assert gentle_barrier(Mesh((*cut, *rest))) == pytest.approx(WARM["ipopt.mu_init"] * 9 / 8e4)


def test_close_to_its_end_a_warm_start_needs_few_iterations():
    """A string from rim to rim over the arch y = 1 - x^2 touches it at 2 - sqrt(3) from the middle: closed form."""
    over = shape(independent={"name": "x", "from": -2, "to": 2}, endpoints=["y(-2) = 0", "y(2) = 0"],
                 constraints=["y >= 1 - x^2"])  # fmt: skip
    pursuit = pursue(over, None, far())
    touch = 2 - np.sqrt(3)
    arch = touch * np.sqrt(1 + 4 * touch**2) + np.arcsinh(2 * touch) / 2
    assert pursuit.paths[-1].value == pytest.approx(arch + 2 * np.hypot(2 - touch, 1 - touch**2), abs=1e-6)
    assert max(step.iterations for step in pursuit.steps[2:]) <= 10
    assert not pursuit.astray


def test_a_mesh_that_cannot_be_solved_takes_nothing_back(monkeypatch):
    """What two meshes have shown stays shown, but what only one has found does not become a result by that."""

    def fails(path, mesh, minimise_):
        minimise_.pursuit.end = End.FAILED

    corner = CORNER | {"functional": {"integrand": "1 + (u - abs(t - 1/3))^2"}}
    for meshes, end in ((1, End.FAILED), (5, End.SETTLED)):
        pursuit = pursue(stated(**corner), None, far(), meshes=meshes)
        pursuit.value_met_before = pursuit.shown
        with monkeypatch.context() as patched:
            patched.setattr("solvers.search.pursuit._next", fails)
            assert go_on(pursuit, None, far()).end is end
