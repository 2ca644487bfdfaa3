"""Values that run away, and those that only seem to."""

import pytest

from solvers.deadline import in_seconds
from solvers.search.attempt import first_mesh
from solvers.search.effort import Minimiser
from solvers.search.record import End, Pursuit
from solvers.search.unbounded import in_growing_boxes
from solvers.starts.guess import first_guess
from solvers.transcription.functions import compile_problem
from solvers.transcription.layout import layout
from solvers.transcription.lowering import lower
from tests.unit.solvers.problems import shape, stated


def in_boxes(problem):
    compiled = compile_problem(lower(problem))
    pursuit, mesh = Pursuit(problem, compiled), first_mesh(1)
    where = layout(compiled, mesh)
    z = first_guess(compiled, mesh, where).z
    return pursuit, in_growing_boxes(pursuit, mesh, where, z, Minimiser(pursuit, None, in_seconds(60)))


RUN_AWAY = {
    "a square with the wrong sign": stated(functional={"integrand": "-u^2"}),
    "beyond the conjugate point": shape(
        functional={"integrand": "y'^2 - 2*y^2 - y"}, endpoints=["y(0) = 0", "y(3) = 0"]
    ),
    "slowly": stated(functional={"integrand": "-log(1 + u^2)"}),
    "a free end": stated(functional={"endpoint": "x(1)"}, endpoints=["x(0) = 0"]),
    "upwards": stated(functional={"seek": "maximum", "endpoint": "x(1)"}, endpoints=["x(0) = 0"]),
}


@pytest.mark.parametrize("problem", RUN_AWAY.values(), ids=RUN_AWAY)
def test_what_is_better_in_every_larger_box_runs_away(problem):
    pursuit, begun = in_boxes(problem)
    assert begun is None
    assert pursuit.end is End.UNBOUNDED


def test_a_solution_that_no_box_holds_back_is_one():
    pursuit, begun = in_boxes(shape(functional={"integrand": "y'^2 - 2*y"}, endpoints=["y(0) = 0", "y(3) = 0"]))
    program, minimum = begun
    assert minimum.value * program.value_scale == pytest.approx(-(3.0**3) / 12)  # y = x (3 - x)/2
    assert pursuit.end is not End.UNBOUNDED


def test_what_only_nears_a_value_does_not_run_away():
    pursuit, begun = in_boxes(stated(functional={"endpoint": "exp(-x(1))"}, endpoints=["x(0) = 0"]))
    assert begun is None or begun[1].value >= 0
    assert pursuit.end is not End.UNBOUNDED


def test_a_curve_that_no_box_can_hold_shows_nothing():
    pursuit, begun = in_boxes(stated(functional={"integrand": "-u"}, constraints=["u^2 + x^2 <= -1"]))
    assert begun is None
    assert pursuit.end is End.FAILED
