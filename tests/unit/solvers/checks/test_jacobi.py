"""The first conjugate point, against closed forms (Gelfand, Fomin 1963, chapter 5, and Milnor 1963, section 14)."""

import numpy as np
import pytest

from solvers.checks import curvature
from solvers.solution import Status
from solvers.solve import solve
from tests.unit.solvers.checks.conftest import problem_of


def document(end, integrand, names, **more):
    """Stationary curves that begin and end in the zero of all unknowns."""
    ends = [f"{name}({place}) = 0" for name in names for place in (0, end)]
    return {
        "independent": {"name": "t", "from": 0, "to": end},
        "unknowns": {name: {} for name in names},
        "functional": {"seek": "stationary", "integrand": integrand},
        "endpoints": ends,
    } | more


def conjugate(given):
    """The check of a solved problem."""
    return next(check for check in solve(problem_of(given)).checks if check.name == curvature.NAME)


@pytest.mark.parametrize(("given", "place"), [
    (document(4, "3*y'^2 - 12*y^2", "y"), np.pi / 2),  # frequency 2
    (document(4, "sqrt(cos(y)^2 + y'^2)", "y"), np.pi),  # along the equator of a sphere: the other pole of the start
    (document(4, "sqrt(cos(y)^2*cos(z)^2 + cos(z)^2*y'^2 + z'^2)", "yz"), np.pi),  # in space, where two come at once
    (document(2, "sqrt((3 + cos(y))^2 + y'^2)", "y"), np.pi / 2),  # on a torus: curvature 1/4 at radius 4
    (document(1.2, "y'^2 - 36*(1 + t)^-4*y^2", "y"), np.pi / (6 - np.pi)),  # y = (1 + t) sin(6 t/(1 + t))
    (document(7, "y''^2 - y'^2", "y", endpoints=["y(0) = 0", "y'(0) = 0", "y(7) = 0", "y'(7) = 0"]),
     2 * np.pi),  # a clamped column: 2 (1 - cos t) = t sin t
], ids=["oscillator", "sphere", "sphere in space", "torus", "varying", "column"])  # fmt: skip
def test_closed_forms(given, place):
    check = conjugate(given)
    assert check.status is Status.FAILED
    assert check.place == pytest.approx(place, rel=1e-5)


@pytest.mark.parametrize("given", [
    document(1, "y'^2 - z'^2 + y*z", "yz"),  # a saddle in the slopes: the shortest piece can be bettered
    document(2, "y'^2 - y^2", "y", endpoints=["y(0) = y(2)"]),  # a constant betters it
    document(7, "y'^2 - y^2", "y", constraints=["integral(y) = 0"]),
    document(4, "y'^2 - y^2", "y", constraints=["y' - z = 0"], unknowns={"y": {}, "z": {}}),
], ids=["not convex in the slopes", "periodic", "integral condition", "equation"])  # fmt: skip
def test_where_no_conjugate_point_is_meant_none_is_told(given):
    check = conjugate(given)
    assert (check.status, check.place) == (Status.FAILED, None)
    assert "better curves lie in that direction" in check.sentence
