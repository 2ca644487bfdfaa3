"""Arcs along pointwise constraints: read off coarse meshes, held, judged, priced; against closed forms."""

from dataclasses import replace

import numpy as np
import pytest

from solvers.deadline import in_seconds
from solvers.problem import Held
from solvers.search.contacts import contacts, well_begun
from solvers.search.early import sharpened_early
from solvers.search.given import solve_as_given
from solvers.search.holding import surely_held_rightly, wrongly_held
from solvers.search.pursuit import pursue
from solvers.search.record import End
from solvers.search.refinement import Estimate, refine
from solvers.search.signals import jumps_at_breaks, switches
from solvers.search.structure import determined_by, present_switches, smooth_contacts, with_switches
from solvers.solution import Course, Verdict
from solvers.solve import solve
from solvers.transcription import limits
from solvers.transcription.collocation import Family
from solvers.transcription.layout import layout
from solvers.transcription.mesh import Mesh, interval, uniform
from tests.unit.solvers.problems import compiled, solved_on, stated

OVER = "y >= h - x^2"
STRING = {
    "independent": {"name": "x", "from": -1, "to": 1},
    "constants": {"h": "0.5 +/- 0.01"},
    "unknowns": {"y": {}},
    "dynamics": None,
    "functional": {"integrand": "y'^2"},
    "endpoints": ["y(-1) = 0", "y(1) = 0"],
    "constraints": [OVER],
}
"""A string over a parabola: straight to where it touches, at x = -r and r with r = 1 - sqrt(1 - h) (the tangent through
the end), along the parabola between."""
REACH = 1 - np.sqrt(0.5)

RAMP = {
    "unknowns": {"x": {}, "u": {}},
    "dynamics": ["x' = u"],
    "functional": {"integrand": "u^2"},
    "endpoints": ["x(0) = 0", "x(1) = 8/5*exp(2/5) - 1"],
    "constraints": ["u - x <= 1"],
}
"""A control and a state together: x = exp(t) - 1 on the limit until t = 2/5, then u stays at exp(2/5)."""


def string(h):
    """The least value over a parabola of height h."""
    r = 1 - np.sqrt(1 - h)
    return 2 * (4 * r**2 * (1 - r) + 4 * r**3 / 3)


@pytest.fixture(scope="module")
def plain():
    """The first mesh over the parabola, as it is solved."""
    return pursue(stated(**STRING), None, in_seconds(40), meshes=1)


def test_a_constraint_is_on_its_limit_where_its_push_outweighs_the_distance(plain):
    (contact,) = contacts(plain.paths[0])
    assert contact.quantity == (OVER, 0)
    assert contact.state
    points = plain.paths[0].points
    sure = np.abs(np.abs(points) - REACH) > 0.15  # the first mesh has eight intervals
    assert np.array_equal(contact.labels[sure], np.where(np.abs(points) < REACH, -1, 0)[sure])


def test_what_pushes_up_is_a_lower_limit_and_down_an_upper_one(plain):
    (contact,) = contacts(plain.paths[0])
    turned = replace(contact, values=-contact.values, lower=-np.inf, upper=-contact.lower, pushes=-contact.pushes)
    assert np.array_equal(turned.labels, -contact.labels)


@pytest.mark.parametrize(
    "constraints, dynamics",
    [
        (["x - t/9 <= 1/9"], ["x'' = u"]),  # the control moves its second derivative
        (["x + t <= 1"], ["x' = -x", "y' = u"]),  # no control does
    ],
)
def test_only_what_determines_a_control_at_once_or_by_its_first_derivative_can_be_held(constraints, dynamics):
    unknowns = {"x": {}, "y": {}, "u": {}} if len(dynamics) > 1 else {"x": {}, "u": {}}
    problem = stated(unknowns=unknowns, dynamics=dynamics, constraints=constraints,
                     endpoints=["x(0) = 0"], functional={"integrand": "u^2 - x"})  # fmt: skip
    assert contacts(pursue(problem, None, in_seconds(40), meshes=1).paths[0]) == []


def test_an_arc_neither_begins_beside_its_limit_nor_ends_where_the_states_are_given(plain):
    path = plain.paths[0]
    (contact,) = contacts(path)
    assert well_begun(path, contact, -0.3, 0.3)
    assert well_begun(path, contact, -1.0, 0.3)  # y(-1) is given
    assert not well_begun(path, contact, -0.3, 1.0)
    free = pursue(stated(**STRING | {"endpoints": ["y(1) = 0"]}), None, in_seconds(40), meshes=1).paths[0]
    assert not well_begun(free, *contacts(free), -1.0, 0.3)


def test_its_junctions_are_unknown_places_and_it_is_held_between_them(plain):
    path = plain.paths[0]
    changed = with_switches(plain.problem, switches(path, []), path, [])
    assert changed.held == (Held(1, OVER, 0, -1),)
    assert len(changed.places) == 4


def test_a_constraint_on_states_alone_is_held_where_its_arc_begins_too():
    problem = compiled(stated(**STRING))
    mesh = uniform(1, 2, 3)
    where = layout(problem, mesh)
    sides = limits.contacts(problem, where, (Held(0, OVER, 0, -1),))
    assert sides.T.tolist() == [[-1] * 6]  # the problem's first node is no point


@pytest.mark.parametrize("members, controls", [(STRING, {("y", 1)}), (RAMP, {("u", 0)})])
def test_what_is_held_determines_the_control_that_first_moves_it(members, controls):
    problem = compiled(stated(**members))
    assert determined_by(Held(0, problem.pointwise[0].label, 0, 1), problem) == controls


@pytest.mark.parametrize(
    "members, value, places, precision",
    [
        (STRING, string(0.5), [-REACH, REACH], 1e-4),  # the value hardly depends on where arcs meet smoothly
        (RAMP, 1.1 * np.exp(0.8) - 0.5, [0.4], 1e-4),
    ],
    ids=("state", "control and state"),
)
def test_arcs_along_constraints_converge_like_smooth_curves(members, value, places, precision):
    base = pursue(stated(**members), None, in_seconds(40), meshes=1)
    found = sharpened_early(base, None, in_seconds(40))
    path = found.paths[-1]
    assert found.end is End.CONVERGED
    assert abs(path.value - value) <= found.value_error < 1e-7
    assert [switch.place for switch in present_switches(path)] == pytest.approx(places, abs=precision)
    assert surely_held_rightly(path)
    assert len(smooth_contacts(path)) == len(places)
    assert all(switch.of == {members["constraints"][0]} for switch in present_switches(path))


def test_a_limit_that_pulls_is_held_wrongly():
    base = pursue(stated(**RAMP), None, in_seconds(40), meshes=1)
    path = sharpened_early(base, None, in_seconds(40)).paths[-1]
    against = replace(path, row_multipliers=-path.row_multipliers)
    assert wrongly_held(path) == []
    assert wrongly_held(against) == [Held(0, "u - x <= 1", 0, 1)]


@pytest.fixture(scope="module")
def solved():
    return solve(stated(**STRING))


def test_a_string_over_a_parabola_is_shown_to_be_the_shortest(solved):
    assert solved.verdict is Verdict.GLOBAL_MINIMUM
    assert abs(solved.value - string(0.5)) <= solved.value_error
    (stretch,) = [s for s in solved.stretches if s.of == OVER]
    assert stretch.course is Course.LOWER
    assert [stretch.start, stretch.end] == pytest.approx([-REACH, REACH], abs=1e-4)


def test_the_price_of_a_constraint_that_is_held_is_the_slope_of_the_value(solved):
    (price,) = [p.price for p in solved.prices if p.label == OVER]
    assert price == pytest.approx((string(0.501) - string(0.499)) / 0.002, rel=1e-5)
    (slope,) = [s.slope for s in solved.slopes if s.constant == "h"]
    assert slope == pytest.approx(price, rel=1e-6)


def test_the_change_of_the_curve_needs_no_place_of_a_smooth_junction(solved):
    """On the parabola y rises like h; on the straight part y = 2 r (1 - |x|) with dr/dh = 1/(2 sqrt(1 - h))."""
    (change,) = solved.changes
    places = np.array([-0.8, -0.5, 0.0, 0.1, 0.6])
    rises = np.where(np.abs(places) < REACH, 1.0, (1 - np.abs(places)) / np.sqrt(0.5))
    assert change.curve.evaluate("y", places) == pytest.approx(0.01 * rises, rel=1e-4)


@pytest.mark.parametrize("constraints, middle", [([OVER], 0.55), (["y >= -5 - x^2"], 0.1 + 0.12 * 0.9)])
def test_along_a_constraint_trouble_is_not_looked_for_beside_a_narrow_interval_that_is_good(constraints, middle):
    """Elsewhere it may be a corner just beyond the end, which is closed in upon."""
    mesh = Mesh((interval(0, 0.0, 0.1, Family.RADAU, 6), interval(0, 0.1, 1.0, Family.GAUSS, 6)))
    path = solved_on(stated(**STRING | {"constraints": constraints}), mesh)
    flat, bent_at_the_left = np.ones(7), np.array([0.0, 1, -1, 1, -1, 1, -1])
    found = Estimate(np.array([1e-9, 1e-2]), (flat, flat), (flat, bent_at_the_left))
    assert refine(path, found, 1e-6).starts == pytest.approx([0.0, 0.1, middle])


PEAK = {
    "unknowns": {"x": {}},
    "parameters": {"M": {"within": [0, 100]}},
    "dynamics": None,
    "functional": {"endpoint": "M"},
    "endpoints": ["x(0) = 0", "x'(0) = 0", "x(1) = 1", "x'(1) = 0"],
    "constraints": ["-M <= x'' <= M"],
}
"""The least peak acceleration from rest to rest: M up to the middle, then -M, a way of M/4: the farthest that
a motion with a limited acceleration comes in time 1 (Bryson, Ho, 1975, section 3.9; from memory)."""


def test_a_switch_between_limits_that_are_sought_is_found_also_at_a_break_of_the_first_mesh():
    found = solve(stated(**PEAK))
    assert found.verdict is Verdict.GLOBAL_MINIMUM
    assert abs(found.value - 4) <= found.value_error <= 4e-6
    held = sorted((s.start, s.end, s.course) for s in found.stretches)
    assert [course for *_, course in held] == [Course.UPPER, Course.LOWER]
    assert [place for *places, _ in held for place in places] == pytest.approx([0, 0.5, 0.5, 1], abs=1e-9)


def test_a_leap_of_a_constraint_at_a_break_is_an_accident_that_a_place_is_not():
    path = pursue(stated(**PEAK), None, in_seconds(40), meshes=1).paths[-1]
    assert jumps_at_breaks(path)
    assert not jumps_at_breaks(solve_as_given(stated(**PEAK), None, in_seconds(40)).paths[-1])
