"""First guesses on arcs: lines in t through what is known, cut where something jumps."""

import numpy as np
import pytest

from solvers.forms.arc_guess import with_sketches
from solvers.forms.beside import side_by_side
from tests.unit.service.assemble import stating
from tests.unit.solvers.arcs import stages


def drawn(problem):
    """The points of every copy by its name, and the guesses of parameters."""
    sketched = with_sketches(side_by_side(problem))
    return {u.name: np.array(u.guess) for u in sketched.unknowns}, {p.name: p.guess for p in sketched.parameters}


TWO = [{"name": "one", "from": 0, "to": 0.25}, {"name": "two", "from": 0.25, "to": 1}]


def test_a_line_goes_on_over_a_junction():
    copies, _ = drawn(stating.stated(arcs=TWO))
    assert copies["x on one"][[0, -1], 1] == pytest.approx([0.0, 0.25])
    assert copies["x on two"][[0, -1], 1] == pytest.approx([0.25, 1.0])
    assert copies["x on one"][[0, -1], 0] == pytest.approx([0.0, 1.0])


def test_each_side_of_a_jump_has_its_own_value():
    copies, parameters = drawn(stages(parameters={"t1": {"unit": "s", "within": [10, 20]},
                                                  "T": {"unit": "s", "within": [20, 40]}}))  # fmt: skip
    assert copies["m on first"][[0, -1], 1] == pytest.approx([1000, 400])
    assert copies["m on second"][-1, 1] == pytest.approx(100)
    assert 10 <= parameters["t1"] <= 20
    assert parameters["t1"] <= parameters["T"] <= 40


def test_a_guess_of_the_user_is_cut_at_the_junctions_with_its_slope():
    members = {"guess": {"x": "t^2"}, "dynamics": ["x'' = u"], "arcs": TWO}
    copies, _ = drawn(stating.stated(**members))
    assert copies["x on two"][[0, -1], 1] == pytest.approx([0.0625, 1.0])
    assert copies["x' on two"][16, 1] == pytest.approx(2 * 0.625, rel=1e-6)
    points = drawn(stating.stated(guess={"x": [[0, 0], [0.25, 3], [1, 1]]}, arcs=TWO))[0]
    assert points["x on one"][-1, 1] == pytest.approx(3.0)
    assert points["x on two"][-1, 1] == pytest.approx(1.0)


def test_free_junctions_without_a_guess_are_spread():
    arcs = [{"name": f"a{k}", "from": a, "to": b} for k, (a, b) in enumerate([(0, "p"), ("p", "q"), ("q", 3)])]
    problem = stating.stated(
        independent={"name": "t", "from": 0, "to": 3}, parameters={"p": {}, "q": {}}, arcs=arcs,
        endpoints=["x(0) = 0", "x(3) = 1"],
    )  # fmt: skip
    assert drawn(problem)[1] == {"p": pytest.approx(1.0), "q": pytest.approx(2.0)}
