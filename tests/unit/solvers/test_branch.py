"""A branch followed around its folds, against published values and closed forms."""

import json
from dataclasses import replace

import numpy as np
import pytest
from scipy.optimize import brentq

from service import samples
from service.assemble import assemble
from service.spec import read
from solvers.problem import Continuation
from solvers.solve import solve
from tests.unit.solvers.problems import shape, stated
from tests.unit.solvers.search.test_contacts import RAMP


def film(**members):
    """The film between hoops of the radius 1 at the distance h: y = a cosh((x - h/2)/a)."""
    given = {
        "independent": {"name": "x", "from": 0, "to": "h"},
        "constants": {"h": 1.0},
        "unknowns": {"y": {"within": [0, None]}},
        "functional": {"integrand": "y*sqrt(1 + y'^2)"},
        "endpoints": ["y(0) = 1", "y(h) = 1"],
    }
    return shape(**given | members)


def area(a):
    """h and the value (area over 2 pi) of the catenary y = a cosh((x - h/2)/a) with y(0) = 1."""
    half = a * np.arccosh(1 / a)
    return 2 * half, a * (half + a * np.sinh(2 * half / a) / 2)


def followed(problem, constant, to):
    return solve(replace(problem, continuation=Continuation(constant, to))).branch


def test_the_film_between_equal_hoops_lets_go_at_the_published_distance():
    # Greatest distance over radius 1.325487 (from Bliss 1925, chapter IV, and later books; from memory).
    branch = followed(film(), "h", 2.0)
    (fold,) = branch.folds
    assert fold.at == pytest.approx(1.325487, abs=5e-6)
    assert branch.end == "The branch has come back."
    assert [point.leg for point in branch.points] == sorted(point.leg for point in branch.points)


def test_both_legs_are_the_two_catenaries():
    branch = followed(film(), "h", 2.0)
    a = np.linspace(0.05, 0.99999, 200_001)
    distances, values = area(a)
    fold = int(np.argmax(distances))
    for point in branch.points:
        side = slice(fold, None) if point.leg == 0 else slice(None, fold + 1)
        order = np.argsort(distances[side])
        expected = np.interp(point.at, distances[side][order], values[side][order])
        assert point.value == pytest.approx(expected, rel=1e-5)


def test_unequal_hoops_let_go_where_the_limit_problem_says():
    # The sleeve of Hollin Bench, radii 60 and 80 mm: two conditions on y = a cosh((x - s)/a), dh/da = 0, solved here.
    problem = film(constants={"h": 50.0}, endpoints=["y(0) = 60", "y(h) = 80"])
    a = np.linspace(1.0, 59.999, 2_000_001)
    greatest = (a * (np.arccosh(60 / a) + np.arccosh(80 / a))).max()
    branch = followed(problem, "h", 120.0)
    assert branch.folds[0].at == pytest.approx(greatest, rel=1e-6)


def test_without_a_fold_the_branch_reaches_the_value_asked_for():
    # The chain of length 2.4 between (-b, 0) and (b, 0) moves without a fold; x' = u to D costs D^2.
    problem = stated(constants={"D": 1.0}, endpoints=["x(0) = 0", "x(1) = D"])
    branch = followed(problem, "D", -2.0)
    assert branch.folds == ()
    assert branch.end == "The branch reaches the value asked for."
    assert [point.value for point in branch.points] == pytest.approx([point.at**2 for point in branch.points])
    assert branch.points[0].at == 1.0


def test_where_a_limit_begins_to_bind_the_branch_ends_and_says_so():
    problem = stated(constants={"D": 1.0}, endpoints=["x(0) = 0", "x(1) = D"], constraints=["u <= 2"])
    branch = followed(problem, "D", 3.0)
    assert 1.9 < branch.points[-1].at <= 2.0
    assert branch.end.startswith("No further point was found")


def test_a_branch_goes_on_where_limits_begin_to_bind():
    # Least squares at every t under u <= 1: u = min(D t, 1); the integral of (u - D t)^2 is (D - 1)^3/(3 D) for D > 1.
    problem = stated(constants={"D": 0.5}, endpoints=["x(0) = 0"], constraints=["u <= 1"],
                     functional={"integrand": "1 + (u - D*t)^2"})  # fmt: skip
    branch = followed(problem, "D", 2.0)
    assert branch.points[-1].at > 1.5
    assert branch.end.startswith("The branch reaches the value asked for. On the way limits began or ceased to bind")
    for point in branch.points:
        expected = 1 + max(point.at - 1, 0.0) ** 3 / (3 * point.at)
        assert point.value == pytest.approx(expected, abs=1e-5)


def test_a_branch_begins_where_limits_bind_already():
    problem = stated(constants={"D": 2.0}, endpoints=["x(0) = 0"], constraints=["u <= 1"],
                     functional={"integrand": "1 + (u - D*t)^2"})  # fmt: skip
    branch = followed(problem, "D", 0.5)
    assert branch.points[0].at == 2.0 and branch.points[-1].at < 0.8
    assert branch.end.startswith("The branch reaches the value asked for.")


def test_a_stop_ends_the_branch():
    problem = replace(film(), continuation=Continuation("h", 2.0))
    branch = solve(problem, lambda progress: progress.point is not None and progress.point[0] == 3).branch
    assert len(branch.points) == 3
    assert branch.end == "Stopped."


def test_a_branch_that_is_cut_short_says_how_to_follow_it_on(monkeypatch):
    monkeypatch.setattr("solvers.branch.POINTS", 2)
    branch = followed(film(), "h", 1.3)
    told = f"To follow it from here, give h the value {branch.points[-1].at:.6g} under `constants`."
    assert branch.end == f"The branch has 2 points; it may go on. {told}"


def test_a_branch_begins_from_an_arc_along_a_constraint():
    """u = x + c until t, then u stays: x(1) = c exp(t) (2 - t) - c; where the arc begins and ends moves with c."""
    members = RAMP | {"constants": {"c": 1.0}, "constraints": ["u - x <= c"]}
    branch = followed(stated(**members), "c", 1.1)
    assert branch.end.startswith("The branch reaches the value asked for.")
    end = 1.6 * np.exp(0.4) - 1
    for point in branch.points:
        c = point.at
        t = brentq(lambda t, c=c: c * np.exp(t) * (2 - t) - c - end, 0.0, 1.0)
        value = c**2 * ((np.exp(2 * t) - 1) / 2 + (1 - t) * np.exp(2 * t))
        assert point.value == pytest.approx(value, abs=1e-5)


def around_a_hatch(reach):
    """The shortest way between two points of the plane around a round obstacle: two tangents and an arc."""
    radius, (x, y) = 1.4, (1.4 * np.radians(70), 1.2)
    ends = [(-x, 0.5 - y), (radius * np.radians(140) - x, 2.3 - y)]
    distances = [np.hypot(*end) for end in ends]
    between = abs(np.arctan2(*ends[0][::-1]) - np.arctan2(*ends[1][::-1]))
    angle = min(between, 2 * np.pi - between) - sum(np.arccos(reach / d) for d in distances)
    return sum(np.sqrt(d**2 - reach**2) for d in distances) + reach * angle


@pytest.mark.parametrize("to", (0.5, 0.42))
def test_a_branch_whose_limits_bind_elsewhere_at_every_point(to):
    """The conduit around a hatch that grows or shrinks: it leaves the hatch elsewhere each time."""
    document = samples.load("conduit") | {"continuation": {"constant": "reach", "to": to}}
    branch = solve(assemble(read(json.dumps(document).encode()))).branch
    assert branch.end.startswith("The branch reaches the value asked for. On the way limits began or ceased to bind")
    assert (branch.points[0].at, branch.points[-1].at) == (0.45, to)
    assert len(branch.points) > 5
    for point in branch.points:
        assert point.value == pytest.approx(around_a_hatch(point.at), rel=1e-6)
