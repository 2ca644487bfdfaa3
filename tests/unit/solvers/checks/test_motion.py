"""Motion: a curve that does not obey its dynamics is found out, one that does passes."""

from dataclasses import replace

import numpy as np
import pytest

from solvers.checks import motion
from solvers.solution import Status

# rest to rest in unit time with least energy: u = 6 - 12 t (Bryson, Ho 1975, section 2.7, from memory)
REST_TO_REST = {
    "independent": {"name": "t", "from": 0, "to": 1},
    "unknowns": {"x": {}, "u": {}},
    "dynamics": ["x'' = u"],
    "functional": {"seek": "minimum", "integrand": "u^2/2"},
    "endpoints": ["x(0) = 0", "x'(0) = 0", "x(1) = 1", "x'(1) = 0"],
}
# closed form: a pendulum driven by a torque; nonlinear, so that polynomials do not solve it exactly
PENDULUM = {
    "independent": {"name": "t", "from": 0, "to": 3},
    "unknowns": {"q": {}, "u": {}},
    "dynamics": ["q'' = u - sin(q)"],
    "functional": {"seek": "minimum", "integrand": "u^2"},
    "endpoints": ["q(0) = 0", "q'(0) = 0", "q(3) = 2", "q'(3) = 0"],
}
STIFF = {
    "independent": {"name": "t", "from": 0, "to": 1},
    "unknowns": {"x": {}, "u": {}},
    "dynamics": ["x' = -2000*(x - u)"],
    "functional": {"seek": "minimum", "integrand": "(x - 1)^2 + u^2"},
    "endpoints": ["x(0) = 0.5"],
}
IMPLICIT = {
    "independent": {"name": "t", "from": 0, "to": 1},
    "unknowns": {"v": {}, "F": {}},
    "dynamics": ["2*v' + 3*v = F"],
    "functional": {"seek": "minimum", "integrand": "F^2"},
    "endpoints": ["v(0) = 0", "v(1) = 1"],
}


@pytest.mark.parametrize(
    "document", [REST_TO_REST, PENDULUM, STIFF, IMPLICIT], ids=["rest", "pendulum", "stiff", "implicit"]
)
def test_a_solved_curve_passes(solved, examine, document):
    check = examine(motion.check, solved(document))
    assert check.status is Status.PASSED, check
    assert check.figure < check.threshold


@pytest.mark.parametrize("relative", [1e-3, 1e-4])
def test_a_displaced_node_fails_at_its_place(solved, examine, relative):
    path = solved(PENDULUM)
    nodes = path.nodes.copy()
    nodes[3, 0] += relative * np.abs(nodes[:, 0]).max()
    check = examine(motion.check, replace(path, nodes=nodes))
    assert check.status is Status.FAILED
    assert path.breaks[2] <= check.place <= path.breaks[4]
    assert check.subject == "q"


def test_another_control_fails(solved, examine):
    path = solved(PENDULUM)
    check = examine(motion.check, replace(path, controls=path.controls * 1.001))
    assert check.status is Status.FAILED


def test_a_line_that_is_an_equality_has_to_hold(solved, examine):
    path = solved(IMPLICIT)
    controls = path.controls.copy()
    force = [name for name, _ in path.program.compiled.lowered.controls].index("F")
    controls[:, force] *= 1.001
    check = examine(motion.check, replace(path, controls=controls))
    assert check.status is Status.FAILED
    assert check.subject == "2*v' + 3*v = F"


def test_the_control_is_taken_as_clipped(solved, examine):
    """What is handed over is clipped, so an overshoot of the stored polynomial must not be what drives the states."""
    bounded = {**REST_TO_REST, "unknowns": {"x": {}, "u": {"within": [-6.0, 6.0]}}}
    path = solved(bounded)
    assert examine(motion.check, path).status is Status.PASSED
    check = examine(motion.check, replace(path, controls=path.controls * 1.5))
    assert check.status is Status.FAILED


def test_dynamics_that_blow_up_small_changes_are_looked_at_along_the_curve(sketched, examine):
    """Fifty e-foldings: integrated anew, rounding alone misses the end; a rate that is off by little is found out."""
    unstable = {
        "independent": {"name": "t", "from": 0, "to": 1},
        "unknowns": {"x": {}, "u": {}},
        "dynamics": ["x' = 200*(x - t) + u"],
        "functional": {"seek": "minimum", "integrand": "u^2"},
        "endpoints": ["x(0) = 0"],
    }
    check = examine(motion.check, sketched(unstable, [lambda t: t], [lambda t: 1 + 1e-11 * t], intervals=2))
    assert check.status is Status.PASSED
    assert "blow up small changes" in check.sentence
    check = examine(motion.check, sketched(unstable, [lambda t: t], [lambda t: 1 + 1e-3 * t], intervals=2))
    assert check.status is Status.FAILED


def test_an_end_that_is_not_the_curves_own_is_found_out_by_the_rates_too(sketched, examine):
    """Where the dynamics blow up small changes only the curve itself is looked at, and that must go on to its end."""
    unstable = {
        "independent": {"name": "t", "from": 0, "to": 1},
        "unknowns": {"x": {}, "u": {}},
        "dynamics": ["x' = 200*(x - t) + u"],
        "functional": {"seek": "minimum", "integrand": "u^2"},
        "endpoints": ["x(0) = 0"],
    }
    path = sketched(unstable, [lambda t: t], [lambda t: 1.0 + 0 * t], intervals=2)
    nodes = path.nodes.copy()
    nodes[-1] += 1e-3
    assert examine(motion.check, path).status is Status.PASSED
    assert examine(motion.check, replace(path, nodes=nodes)).status is Status.FAILED
