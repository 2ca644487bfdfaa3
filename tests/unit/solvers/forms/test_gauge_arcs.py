"""Arcs in parametric form: curves that stand upright, and integrals that fix no parametrisation."""

from dataclasses import replace

import numpy as np
import pytest

from solvers.forms.beside import side_by_side
from solvers.forms.gauge_arcs import SHARE, in_parametric_form_by_arcs
from solvers.problem import Seek
from solvers.solution import Status, Verdict
from solvers.solve import solve
from tests.unit.service.assemble import stating
from tests.unit.solvers.arcs import refraction


def gauged(problem, squared=True):
    beside = side_by_side(problem)
    return in_parametric_form_by_arcs(beside, beside.problem, dict, squared)


def flat(to=1, **members):
    """Arcs above and below a place that is free, from x = 0 on."""
    given = {
        "independent": {"name": "x", "from": 0, "to": to},
        "parameters": {"a": {"within": [0, to]}},
        "unknowns": {"y": {"within": [0, None]}},
        "dynamics": None,
        "arcs": [{"name": "upper", "from": 0, "to": "a"}, {"name": "lower", "from": "a", "to": to}],
    }
    return stating.stated(**given | members)


def media(*points, surface, indices=(1, 1.5), **members):
    """The quickest way in two media from one point to another across a surface, without a parametrisation."""
    names = "xyz"[: len(points[0])]
    ends = [f"{name}({at}) = {value}" for at, point in zip((0, 2), points, strict=True)
            for name, value in zip(names, point, strict=True)]  # fmt: skip
    squares = " + ".join(f"{name}'^2" for name in names)
    return stating.stated(**{
        "independent": {"name": "s", "from": 0, "to": 2},
        "unknowns": {name: {} for name in names},
        "dynamics": None,
        "functional": {"seek": "minimum", "integrand": f"n*sqrt({squares})"},
        "endpoints": [*ends, surface],
        "arcs": [
            {"name": "first", "from": 0, "to": 1, "where": {"n": str(indices[0])}},
            {"name": "second", "from": 1, "to": 2, "where": {"n": str(indices[1])}},
        ],
    } | members)  # fmt: skip


def direction(arc, end):
    """The unit tangent of a curve in parametric form at one of its ends."""
    at = arc.curve.breaks[[0, -1]][end]
    slope = np.array([arc.curve.evaluate(name, [at], 1)[0] for name in "xyz" if name in arc.curve.functions])
    return slope / np.linalg.norm(slope)


FALL = {"functional": {"seek": "minimum", "integrand": "n*sqrt((1 + y'^2)/y)"}, "endpoints": ["y(0) = 0", "y(1) = 1"]}


def layered_fall(height, lower, width):
    """The least n ds/sqrt(y) from the origin down to (width, 1), n = 1 above `height` and `lower` below.

    In each layer a cycloid of radius n^2/(2 c^2); n sin(a)/sqrt(y) = c all along.  Johann Bernoulli (1697), Acta
    Eruditorum, who takes the fall for light through layers (from memory).
    """

    def angles(c):
        return [2 * np.arcsin(c * np.sqrt(y) / n) for y, n in ((height, 1.0), (height, lower), (1.0, lower))]

    def turned(c):
        first, second, third = angles(c)
        return ((first - np.sin(first)) + lower**2 * (third - np.sin(third) - second + np.sin(second))) / (2 * c**2)

    low, high = 1e-6, min(1 / np.sqrt(height), lower)
    for _ in range(200):
        middle = (low + high) / 2
        low, high = (middle, high) if turned(middle) < width else (low, middle)
    first, second, third = angles(low)
    return (first + lower**2 * (third - second)) / low


def test_a_fall_through_two_layers_is_two_cycloids():
    arcs = [
        {"name": "upper", "from": 0, "to": "a", "where": {"n": "1"}},
        {"name": "lower", "from": "a", "to": 1, "where": {"n": "1.5"}},
    ]
    found = solve(flat(arcs=arcs, **FALL | {"endpoints": [*FALL["endpoints"], "y(a) = 0.5"]}))
    assert found.verdict is Verdict.LOCAL_MINIMUM
    value = layered_fall(0.5, 1.5, 1.0)
    assert found.value == pytest.approx(value, rel=1e-6)
    assert abs(found.value - value) <= found.value_error
    upper, lower = (arc.curve for arc in found.arcs)
    slopes = upper.evaluate("y'", upper.breaks[-1:])[0], lower.evaluate("y'", lower.breaks[:1])[0]
    above, below = (1 / np.hypot(1, slope) for slope in slopes)
    assert above == pytest.approx(1.5 * below, rel=1e-5)
    assert upper.evaluate("y'", np.array([1e-4]))[0] > 15  # it starts upright
    assert "On upper, lower the integrand grows linearly" in found.notes[0]


def test_a_cut_of_an_upright_curve_changes_nothing():
    whole = flat(**FALL | {"functional": {"seek": "minimum", "integrand": "sqrt((1 + y'^2)/(2*9.81*y))"}})
    whole = replace(
        whole, places=(whole.places[0], whole.places[-1]), arcs=(), parameters=(), integrand=whole.arcs[0].integrand
    )
    at = [{"name": "one", "from": 0, "to": 0.3}, {"name": "two", "from": 0.3, "to": 1}]
    cut = flat(
        parameters={}, arcs=at, **FALL | {"functional": {"seek": "minimum", "integrand": "sqrt((1 + y'^2)/(2*9.81*y))"}}
    )
    one, two = solve(whole), solve(cut)
    assert two.value == pytest.approx(0.5828954631547426, rel=1e-7)  # the cycloid; catalogue A06
    assert two.verdict is one.verdict
    for arc in two.arcs:
        start, end = arc.curve.breaks[[0, -1]]
        inside = np.linspace(start, end, 31)[1:]
        assert arc.curve.evaluate("y", inside) == pytest.approx(one.curve.evaluate("y", inside), abs=1e-5)
        assert arc.costates.evaluate("y", inside) == pytest.approx(one.costates.evaluate("y", inside), abs=1e-4)


@pytest.mark.parametrize("width", [1.0, 0.01])
def test_refraction_of_steep_rays(width):
    """sin a1 = 1.5 sin a2 (law of refraction, common practice), as steep as one likes."""
    members = {"independent": {"name": "x", "from": 0, "to": width}, "parameters": {"a": {"within": [0, width]}},
               "endpoints": ["y(0) = 1", "y(a) = 0", f"y({width}) = -1"],
               "arcs": [{"name": "air", "from": 0, "to": "a", "where": {"n": "1"}},
                        {"name": "glass", "from": "a", "to": width, "where": {"n": "1.5"}}]}  # fmt: skip
    found = solve(refraction(**members))
    x = found.parameters["a"]
    assert x / np.hypot(x, 1) == pytest.approx(1.5 * (width - x) / np.hypot(width - x, 1), rel=1e-3)  # it hardly counts
    assert found.value == pytest.approx(np.hypot(x, 1) + 1.5 * np.hypot(width - x, 1), rel=1e-9)


@pytest.mark.parametrize("last", [(1, -1), (0, -1)], ids=["oblique", "straight through"])
def test_refraction_without_a_parametrisation(last):
    found = solve(media((0, 1), last, surface="y(1) = 0"))
    assert found.verdict is Verdict.GLOBAL_MINIMUM
    first, second = found.arcs
    assert direction(first, 1)[0] == pytest.approx(1.5 * direction(second, 0)[0], abs=1e-7)
    if last == (0, -1):
        assert found.value == pytest.approx(2.5, rel=1e-9)


def test_refraction_at_a_curved_surface():
    """n t is continuous along the surface: Born, Wolf, Principles of Optics, section 3.2.2 (from memory)."""
    found = solve(
        media((-1, 0.6), (2, -0.4), surface="x(1)^2 + y(1)^2 = 0.5^2", guess={"x": [[0, -1], [1, -0.5], [2, 2]]})
    )
    assert found.verdict in (Verdict.LOCAL_MINIMUM, Verdict.GLOBAL_MINIMUM)
    first, second = found.arcs
    x, y = (first.curve.evaluate(name, np.array([1.0]))[0] for name in "xy")
    along = np.array([-y, x]) / 0.5
    assert direction(first, 1) @ along == pytest.approx(1.5 * direction(second, 0) @ along, abs=1e-6)
    assert all(check.status is not Status.FAILED for check in found.checks)


def test_refraction_in_space_stays_in_a_plane():
    found = solve(media((0, 0, 1), (1, 0.5, -1), surface="z(1) = 0"))
    flat_one = solve(media((0, 1), (np.hypot(1, 0.5), -1), surface="y(1) = 0"))
    assert found.value == pytest.approx(flat_one.value, rel=1e-8)
    for arc in found.arcs:
        at = np.linspace(*arc.curve.breaks[[0, -1]], 9)
        assert arc.curve.evaluate("y", at) == pytest.approx(0.5 * arc.curve.evaluate("x", at), abs=1e-7)


def test_the_speed_is_constant_where_more_than_the_integral_counts():
    """The same ray as one that is only stationary: its square would be another problem."""
    problem = replace(refraction(), seek=Seek.STATIONARY)
    form = gauged(problem)
    assert not form.squared
    assert [p.name for p in form.problem.parameters] == ["a", "path speed on air", "path speed on glass"]
    found = solve(
        replace(refraction(), endpoint=stating.stated(functional={"seek": "minimum", "endpoint": "0"}).endpoint)
    )
    assert found.value == pytest.approx(solve(refraction()).value, rel=1e-9)
    assert "at constant speed" in found.notes[0]


def test_an_arc_of_other_growth_stays_as_it_is_beside_one_in_parametric_form():
    arcs = [{"name": "flat", "from": 0, "to": "a", "integrand": "y'^2"},
            {"name": "steep", "from": "a", "to": 1, "integrand": "sqrt(1 + y'^2)"}]  # fmt: skip
    problem = flat(
        functional={"seek": "minimum", "endpoint": "0"}, endpoints=["y(0) = 1", "y(1) = 0", "a = 0.5"], arcs=arcs
    )
    assert [way.x for way in gauged(problem).ways] == ["x on steep"]
    found = solve(problem)
    slope = np.float64(found.arcs[0].curve.evaluate("y'", np.array([0.2]))[0])
    after = np.float64(found.arcs[1].curve.evaluate("y'", np.array([0.8]))[0])
    assert 2 * slope == pytest.approx(after / np.hypot(1, after), rel=1e-6)  # the momentum is continuous


@pytest.mark.parametrize(
    "members",
    [
        {"functional": {"seek": "minimum", "integrand": "y'^2"}},
        {"functional": {"seek": "minimum", "integrand": "sqrt(1 + y''^2)"}},
    ],
    ids=("other growth", "second order"),
)
def test_where_it_does_not_apply(members):
    given = {"functional": {"seek": "minimum", "integrand": "sqrt(1 + y'^2)"}, "endpoints": ["y(0) = 1", "y(1) = 2"]}
    assert gauged(flat(**given | members)) is None


def test_the_shares_of_the_pieces_are_their_shares_in_the_cost():
    beside = side_by_side(refraction())
    form = in_parametric_form_by_arcs(beside, beside.problem, dict, True)
    shares = [p for p in form.problem.parameters if p.name.startswith(SHARE)]
    assert sum(share.guess for share in shares) == pytest.approx(1)
    assert "the shares of the pieces" in {c.label for c in form.problem.endpoints}


def test_a_sweep_keeps_the_parametric_form():
    arcs = [{"name": "air", "from": 0, "to": "a", "where": {"m": "1"}},
            {"name": "glass", "from": "a", "to": 1, "where": {"m": "n"}}]  # fmt: skip
    members = {
        "functional": {"seek": "minimum", "integrand": "m*sqrt(1 + y'^2)"},
        "arcs": arcs,
        "constants": {"n": 1.5},
    }
    swept = solve(refraction(**members, sweep={"n": {"values": [1.3, 1.5, 1.8]}}))
    for point, n in zip(swept.sweep, (1.3, 1.5, 1.8), strict=True):
        alone = solve(refraction(**members | {"constants": {"n": n}}))
        assert point.value == pytest.approx(alone.value, rel=1e-8)
        assert point.parameters["a"] == pytest.approx(alone.parameters["a"], rel=1e-6)
        assert [arc.name for arc in point.arcs] == ["air", "glass"]
    slope = next(slope.slope for slope in swept.slopes if slope.constant == "n")
    below = np.hypot(1 - swept.parameters["a"], 1)
    assert slope == pytest.approx(below, rel=1e-6)  # the way in the glass
