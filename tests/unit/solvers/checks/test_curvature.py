"""Conjugate points: the second variation, its sign, and where it first loses it."""

from dataclasses import replace

import numpy as np
import pytest

from solvers.checks import curvature, inertia
from solvers.checks.sampling import Sampler
from solvers.checks.second_order import smooth_junctions
from solvers.checks.variation import second_variation
from solvers.deadline import in_seconds
from solvers.minimise.newton import stationary_point
from solvers.search.pursuit import pursue
from solvers.search.sharpen import sharpen
from solvers.solution import Status
from solvers.transcription.trajectory import as_start
from tests.unit.solvers.checks.conftest import problem_of


def action(length, *, seek="minimum"):
    """The action of an oscillator of frequency one over some time: the first conjugate point lies at pi."""
    sign = "" if seek == "minimum" else "-"
    return {
        "independent": {"name": "t", "from": 0, "to": length},
        "unknowns": {"y": {}},
        "functional": {"seek": seek, "integrand": f"{sign}(y'^2 - y^2)"},
        "endpoints": ["y(0) = 0", f"y({length}) = 1"],
    }


FREE_END = {**action(2.0), "endpoints": ["y(0) = 0"]}  # closed form: the focal point lies at pi/2
PERIODIC = {**action(2.0), "endpoints": ["y(0) = y(2)"]}
STRING = {  # stationary at every mode; only the first is a minimum (Rayleigh)
    "independent": {"name": "x", "from": 0, "to": 1},
    "unknowns": {"y": {}},
    "functional": {"seek": "minimum", "integrand": "y'^2"},
    "endpoints": ["y(0) = 0", "y(1) = 0"],
    "constraints": ["integral(y^2) = 1"],
}
LEAST_TIME = {
    "independent": {"name": "t", "from": 0, "to": "T"},
    "parameters": {"T": {"within": [0.1, 10]}},
    "unknowns": {"x": {}, "u": {"within": [-1, 1]}},
    "dynamics": ["x'' = u"],
    "functional": {"seek": "minimum", "integrand": "1 + u^2/10"},
    "endpoints": ["x(0) = 0", "x'(0) = 0", "x(T) = 1", "x'(T) = 0"],
}
TURNED = {  # a closed curve that may be turned about the origin: equally good curves
    "independent": {"name": "s", "from": 0, "to": 1},
    "unknowns": {"x": {}, "y": {}},
    "functional": {"seek": "minimum", "integrand": "x'^2 + y'^2"},
    "endpoints": ["x(0) = 0", "y(0) = 0", "x(1)^2 + y(1)^2 = 1"],
    "guess": {"x": "s/2", "y": "s"},
}


@pytest.mark.parametrize("seek", ["minimum", "maximum"])
@pytest.mark.parametrize("length", [1.0, 3.0])
def test_before_the_conjugate_point_the_action_is_least(stationary, examine, length, seek):
    assert examine(curvature.check, stationary(action(length, seek=seek))).status is Status.PASSED


@pytest.mark.parametrize("seek", ["minimum", "maximum"])
@pytest.mark.parametrize("length", [3.3, 4.0, 7.0])
def test_beyond_it_the_action_is_not_least_and_the_point_is_found(stationary, examine, length, seek):
    path = stationary(action(length, seek=seek))
    check = examine(curvature.check, path)
    assert check.status is Status.FAILED
    assert check.place == pytest.approx(np.pi, rel=1e-9)
    assert ("lowers" if seek == "minimum" else "raises") in check.sentence


@pytest.mark.parametrize("seek", ["minimum", "maximum"])
@pytest.mark.parametrize("length, least", [(1.0, True), (3.0, True), (3.3, False), (7.0, False)])
def test_the_program_alone_tells_its_minimum_from_a_saddle(stationary, length, seek, least):
    """Between points of a sweep that are looked at closely; the conjugate point lies at pi."""
    path = stationary(action(length, seek=seek))
    program = path.program
    found = stationary_point(program, as_start(path), lambda iterate: False)
    assert inertia.minimum_of_program(program, found) is least


def test_the_focal_point_of_a_free_end_comes_earlier(stationary, examine):
    """No point is conjugate to the beginning before pi: what is told is a direction."""
    check = examine(curvature.check, stationary(FREE_END))
    assert (check.status, check.place) == (Status.FAILED, None)
    assert "better curves lie in that direction" in check.sentence
    earlier = {**action(1.5), "endpoints": ["y(0) = 0"]}
    assert examine(curvature.check, stationary(earlier)).status is Status.PASSED


def test_a_periodic_curve_is_judged_with_its_condition(stationary, examine):
    """A constant variation lowers the action."""
    assert examine(curvature.check, stationary(PERIODIC)).status is Status.FAILED


def test_integral_conditions_count(solved, examine):
    """Without the condition the same second variation vanishes along the curve itself."""
    assert examine(curvature.check, solved(STRING)).status is Status.PASSED


@pytest.mark.parametrize(("mode", "status"), [(1, Status.PASSED), (2, Status.FAILED), (3, Status.FAILED)])
def test_only_the_first_mode_of_a_string_is_a_minimum(sketched, examine, mode, status):
    """Mode k is stationary with the multiplier (k pi)^2; mode 2 has one negative direction, mode 3 two (Rayleigh)."""
    rate = mode * np.pi
    path = sketched(STRING, [lambda x: np.sqrt(2) * np.sin(rate * x)],
                    [lambda x: np.sqrt(2) * rate * np.cos(rate * x)], intervals=8, degree=6)  # fmt: skip
    rows = path.row_multipliers.copy()
    rows[path.program.rows.integrals], rows[path.program.rows.conditions] = rate**2, -(rate**2)
    check = examine(curvature.check, replace(path, row_multipliers=rows, value=rate**2))
    assert check.status is status
    assert check.place is None  # the integral condition holds the neighbours too


def test_controls_on_their_bounds_are_held(solved, examine):
    assert examine(curvature.check, solved(LEAST_TIME)).status is Status.PASSED


def test_equally_good_curves_leave_it_undecided(solved, examine):
    check = examine(curvature.check, solved(TURNED))
    assert check.status is Status.NOT_APPLICABLE
    assert "equally good" in check.sentence


def test_the_second_variation_is_the_programs_where_quadrature_is_exact(stationary):
    """Two ways to the same form: of low degree, so that both quadratures are exact."""
    bent = {"seek": "minimum", "integrand": "3*y'^2 + y", "endpoint": "y(1)^2 - y(0)*y(1)"}
    path = stationary({**action(1.0), "functional": bent, "endpoints": []}, 4, 3)
    program = path.program
    form, metric = second_variation(Sampler(path))
    rows = path.row_multipliers * program.row_scale / abs(program.value_scale)
    upper = program.numbers.hessian_pattern.filled(program.numbers.hessian(path.z / program.scale, 1.0, rows)).toarray()
    expected = np.triu(upper) + np.triu(upper, 1).T
    inside = np.concatenate(
        [program.layout.nodes[:1].ravel(), program.layout.inner.ravel(), program.layout.controls.ravel()]
    )
    change = np.random.default_rng(5).normal(size=len(inside))
    ours, theirs = (change @ m[np.ix_(inside, inside)] @ change for m in (form.dense(), expected))
    assert ours == pytest.approx(theirs, rel=1e-9)
    assert np.all(np.linalg.eigvalsh(metric.dense()) > -1e-14)


CAPPED = {
    "independent": {"name": "t", "from": 0, "to": 1},
    "unknowns": {"x": {}, "u": {"within": [-1, 1]}},
    "dynamics": ["x' = u"],
    "functional": {"seek": "minimum", "integrand": "x^2 + u^2/4 - x*u^2/100"},
    "endpoints": ["x(0) = 1"],
}
"""The control rests on its limit at first and leaves it smoothly (the small term only hinders a proof of convexity)."""
SWITCHING = {
    "independent": {"name": "t", "from": 0, "to": "T"},
    "parameters": {"T": {"within": [0.1, 10]}},
    "unknowns": {"x": {}, "u": {"within": [-1, 1]}},
    "dynamics": ["x'' = u"],
    "functional": {"seek": "minimum", "endpoint": "T"},
    "endpoints": ["x(0) = 0", "x'(0) = 0", "x(T) = 1", "x'(T) = 0"],
}
"""From full ahead to full astern at once."""


@pytest.mark.parametrize(("document", "smooth"), [(CAPPED, 1), (SWITCHING, 0)], ids=("smooth", "jump"))
def test_only_places_where_no_control_jumps_are_left_out(document, smooth, examine):
    deadline = in_seconds(60)
    path = sharpen(pursue(problem_of(document), None, deadline, meshes=3), None, deadline).paths[-1]
    assert len(smooth_junctions(Sampler(path))) == smooth
    assert examine(curvature.check, path).status is Status.PASSED


@pytest.mark.parametrize("count, doubled, dimension", [(0, 0, 9), (5, 0, 4), (5, 2, 6), (9, 0, 0), (12, 0, 0)])
def test_the_kernel_is_all_that_rows_do_not_see(count, doubled, dimension):
    """Also where some rows are (all but) copies of others, which must not pass for rows of their own."""
    rng = np.random.default_rng(1)
    rows = rng.normal(size=(count, 9))
    rows[:doubled] = rows[doubled : 2 * doubled] + 1e-13 * rng.normal(size=(doubled, 9))
    rows /= np.linalg.norm(rows, axis=1, keepdims=True)
    found = inertia.kernel(rows)
    assert found.shape == (9, dimension)
    np.testing.assert_allclose(rows @ found, 0.0, atol=1e-12)
    np.testing.assert_allclose(found.T @ found, np.eye(dimension), atol=1e-12)


SINGULAR = {
    "independent": {"name": "x", "from": 0, "to": 1},
    "unknowns": {"y": {}},
    "functional": {"seek": "minimum", "integrand": "y^2*y'^2"},
    "endpoints": ["y(0) = 0", "y(1) = 1"],
}


def test_what_a_mesh_does_at_a_singular_end_refutes_no_curve(solved, examine):
    """With w = y^2/2 the integrand is w'^2: the curve y = sqrt(x), with the value 1/4, is the best there is."""
    path = solved(SINGULAR)
    assert path.value == pytest.approx(0.25, rel=1e-8)
    assert examine(curvature.check, path).status is not Status.FAILED
