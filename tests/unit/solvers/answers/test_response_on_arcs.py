"""The first-order change of arcs with constants: closed forms, and neighbours solved again."""

from dataclasses import replace

import numpy as np
import pytest

from solvers.solve import solve
from tests.unit.service.assemble import stating
from tests.unit.solvers.arcs import refraction, stages, wall


def neighbour(problem, name, value):
    constants = tuple(replace(c, value=value) if c.name == name else c for c in problem.constants)
    return solve(replace(problem, constants=constants))


def staged():
    return stages(
        constants={
            "g": "9.81 m/s^2", "c": "2500 m/s +/- 2 m/s", "shell": "100 kg +/- 0.2 kg", "start": "1000 kg +/- 0.3 kg",
            "rate": "1 kg/s +/- 0.001 kg/s",
        }
    )  # fmt: skip


def thrown():
    """The wall at a place of its own, the end at a time that is a constant."""
    return wall(
        independent={"name": "t", "from": 0, "to": "2*L"},
        constants={"w": "0.1 +/- 0.001", "L": "1 +/- 0.001", "k": "0.9 +/- 0.001"},
        parameters={"h": {"within": [0.1, 1.9]}},
        endpoints=["x(0) = 1", "x'(0) = 0", "x(h) = w", "x'(h+) = -k*x'(h-)", "x(2*L) = 1", "x'(2*L) = 0"],
        arcs=[{"name": "there", "from": 0, "to": "h"}, {"name": "back", "from": "h", "to": "2*L"}],
    )


def refracted():
    arcs = [{"name": "air", "from": 0, "to": "a", "where": {"m": "1 + k*y"}},
            {"name": "glass", "from": "a", "to": 1, "where": {"m": "n"}}]  # fmt: skip
    return refraction(functional={"seek": "minimum", "integrand": "m*sqrt(1 + y'^2)"}, arcs=arcs,
                      constants={"n": "1.5 +/- 0.002", "k": "0.3 +/- 0.002", "d": "1 +/- 0.002"},
                      endpoints=["y(0) = d", "y(a) = 0", "y(1) = -1"])  # fmt: skip


def unparametrised():
    return stating.stated(
        independent={"name": "s", "from": 0, "to": 2},
        unknowns={"x": {}, "y": {}},
        dynamics=None,
        constants={"n": "1.5 +/- 0.002", "b": "0.3 +/- 0.002"},
        functional={"seek": "minimum", "integrand": "m*sqrt(x'^2 + y'^2)"},
        endpoints=["x(0) = 0", "y(0) = 1", "y(1) = b*x(1)^2", "x(2) = 1", "y(2) = -1"],
        arcs=[{"name": "air", "from": 0, "to": 1, "where": {"m": "1"}},
              {"name": "glass", "from": 1, "to": 2, "where": {"m": "n"}}],
    )  # fmt: skip


PROBLEMS = {"stages": staged, "a wall": thrown, "a graph": refracted, "no parametrisation": unparametrised}


@pytest.mark.parametrize("stated", PROBLEMS.values(), ids=PROBLEMS)
def test_the_change_is_the_difference_of_neighbours(stated):
    problem = stated()
    found = solve(problem)
    assert [change.constant for change in found.changes] == [c.name for c in problem.constants if c.tolerance]
    for change in found.changes:
        assert [arc.name for arc in change.arcs] == [arc.name for arc in found.arcs]
        constant = next(c for c in problem.constants if c.name == change.constant)
        above, below = (neighbour(problem, constant.name, constant.value + s * constant.tolerance) for s in (1, -1))
        for arc, own, up, down in zip(found.arcs, change.arcs, above.arcs, below.arcs, strict=True):
            start = max(part.curve.breaks[0] for part in (arc, up, down))
            end = min(part.curve.breaks[-1] for part in (arc, up, down))
            t = start + (end - start) * np.linspace(0.02, 0.98, 25)
            for name in own.curve.functions:
                expected = (up.curve.evaluate(name, t) - down.curve.evaluate(name, t)) / 2
                size = max(np.abs(expected).max(), 1e-3 * np.abs(arc.curve.evaluate(name, t)).max())
                assert own.curve.evaluate(name, t) == pytest.approx(expected, abs=2e-2 * size), (constant.name, name)


def test_the_ray_moves_as_the_law_of_refraction_says():
    """sin a1 = n sin a2, differentiated: what the place of the crossing does moves both straight pieces."""
    problem = replace(
        refracted(),
        constants=tuple(replace(c, value=0.0, tolerance=None) if c.name == "k" else c for c in refracted().constants),
    )
    found = solve(problem)
    change = next(change for change in found.changes if change.constant == "n")
    a = found.parameters["a"]
    by_a = 1 / np.hypot(a, 1) ** 3 + 1.5 / np.hypot(1 - a, 1) ** 3
    moved = 0.002 * (1 - a) / np.hypot(1 - a, 1) / by_a
    assert change.parameters["a"] == pytest.approx(moved, rel=1e-6)
    x = np.linspace(0.01, 0.99, 9) * a
    above = change.arcs[0].curve.evaluate("y", x)  # y = 1 - x/a
    assert above == pytest.approx(x / a**2 * moved, rel=1e-5)
    x = a + np.linspace(0.01, 0.99, 9) * (1 - a)
    below = change.arcs[1].curve.evaluate("y", x)  # y = -(x - a)/(1 - a)
    assert below == pytest.approx((1 - x) / (1 - a) ** 2 * moved, rel=1e-5)


def test_an_arc_of_several_pieces_changes_as_one():
    problem = stages(endpoints=["v(0) = 0", "m(0) = start", "m(t1-) = 400", "m(t1+) = m(t1-) - shell", "m(T) = 100",
                                "v(10) >= -1000"],
                     constants={"g": "9.81 m/s^2", "c": "2500 m/s +/- 2 m/s", "shell": "100 kg", "start": "1000 kg",
                                "rate": "1 kg/s"},
                     parameters={"t1": {"unit": "s", "within": [20, 50]}, "T": {"unit": "s"}})  # fmt: skip
    (change,) = solve(problem).changes
    assert [arc.name for arc in change.arcs] == ["first", "second"]
    t = np.array([5.0, 9.9, 10.1, 25.0])
    assert change.arcs[0].curve.evaluate("v", t) == pytest.approx(2 * np.log(1000 / (1000 - 20 * t)), rel=1e-6)
