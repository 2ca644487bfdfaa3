"""What is told of arcs: places in t, sides of junctions, prices that differences confirm, switches on their arc."""

from dataclasses import replace
from math import sqrt

import numpy as np
import pytest

from solvers.solution import Status, Verdict
from solvers.solve import solve
from tests.unit.service.assemble import stating
from tests.unit.solvers.arcs import refraction, stages, wall


@pytest.fixture(scope="module")
def staged():
    return solve(stages())


@pytest.fixture(scope="module")
def thrown():
    return solve(wall())


def test_arcs_follow_each_other_to_the_last_digit(staged):
    first, second = staged.arcs
    assert (first.name, second.name) == ("first", "second")
    assert first.curve.breaks[0] == 0.0
    assert first.curve.breaks[-1] == second.curve.breaks[0] == pytest.approx(staged.parameters["t1"], rel=1e-14)
    assert second.curve.breaks[-1] == pytest.approx(staged.parameters["T"], rel=1e-14)
    assert (np.diff(first.curve.breaks) > 0).all()


def test_a_jump_has_both_its_values(staged):
    first, second = (arc.curve for arc in staged.arcs)
    assert first.evaluate("m", first.breaks[-1:])[0] == pytest.approx(400, rel=1e-9)
    just_after = second.breaks[:1] + 1e-12
    assert second.evaluate("m", just_after)[0] == pytest.approx(300, rel=1e-9)
    assert first.evaluate("v", first.breaks[-1:]) == pytest.approx(second.evaluate("v", just_after), rel=1e-9)


def test_derivatives_are_those_in_t(staged):
    for arc in staged.arcs:
        inside = np.linspace(*arc.curve.breaks[[0, -1]], 7)[1:-1]
        for name in ("v", "m"):
            slope = arc.curve.evaluate(name, inside, 1)
            assert arc.curve.evaluate(name + "'", inside) == pytest.approx(slope, rel=1e-9)
    assert staged.arcs[0].curve.evaluate("m'", np.array([3.0]))[0] == pytest.approx(-20)
    assert staged.arcs[1].curve.evaluate("m'", np.array([33.0]))[0] == pytest.approx(-5)


def test_the_costate_jumps_by_the_price_of_what_is_asked_at_the_junction(staged):
    """Bryson, Ho (1975), Applied Optimal Control, section 3.7 (from memory): p(t1-) - p(t1+) is the multiplier."""
    first, second = (arc.costates for arc in staged.arcs)
    before, after = (c.evaluate("m", np.array([at]))[0] for c, at in ((first, 30.0), (second, 30.0 + 1e-12)))
    prices = {price.label: price.price for price in staged.prices}
    # the conditions m(t1-) = 400 and m(t1+) - m(t1-) + shell = 0 have slopes 1 and -1 in the mass before, 1 after
    jump, reached = prices["m(t1+) = m(t1-) - shell"], prices["m(t1-) = 400"]
    assert after == pytest.approx(jump, rel=1e-5)
    assert before == pytest.approx(jump - reached, rel=1e-5)


@pytest.mark.parametrize(
    ("label", "changed"),
    [
        ("m(t1-) = 400", {"endpoints": ["v(0) = 0", "m(0) = start", "m(t1-) = 401", "m(t1+) = m(t1-) - shell",
                                        "m(T) = 100"]}),
        ("m(0) = start", {"endpoints": ["v(0) = 0", "m(0) = 1001", "m(t1-) = 400", "m(t1+) = m(t1-) - shell",
                                        "m(T) = 100"]}),
        ("m(T) = 100", {"endpoints": ["v(0) = 0", "m(0) = start", "m(t1-) = 400", "m(t1+) = m(t1-) - shell",
                                      "m(T) = 101"]}),
    ],
)  # fmt: skip
def test_prices_are_what_differences_show(staged, label, changed):
    price = next(price.price for price in staged.prices if price.label == label)
    assert solve(stages(**changed)).value - staged.value == pytest.approx(price, rel=2e-2)


def test_a_limit_on_all_arcs_has_one_price(thrown):
    limited = solve(wall(constraints=["u^2 <= 6.25"]))
    prices = [price for price in limited.prices if price.pointer == "/constraints/0"]
    assert len(prices) == 1
    tighter = solve(wall(constraints=["u^2 <= 6.24"]))
    assert (limited.value - tighter.value) / 0.01 == pytest.approx(prices[0].price, rel=5e-2)


def test_checks_speak_of_places_in_t_and_of_sides(thrown):
    assert thrown.verdict is Verdict.LOCAL_MINIMUM
    for check in thrown.checks:
        assert check.status is not Status.FAILED
        assert "(start)" not in check.sentence
        assert "(end)" not in check.sentence
        assert check.place is None or 0.0 <= check.place <= 2.0
    free_ends = next(check for check in thrown.checks if check.name == "free ends")
    assert "the Hamiltonian is continuous where the place is free" in free_ends.sentence


def test_a_switch_is_told_on_its_arc():
    """To a stop on the way and on to the end in least time: each leg switches where its own limits say."""
    found = solve(
        stating.stated(
            independent={"name": "t", "from": 0, "to": "T"},
            parameters={"t1": {"within": [0.1, 20]}, "T": {"within": [0.1, 40]}},
            unknowns={"x": {}, "u": {}},
            dynamics=["x'' = u"],
            functional={"seek": "minimum", "endpoint": "T"},
            endpoints=["x(0) = 0", "x'(0) = 0", "x(t1) = 1", "x'(t1) = 0", "x(T) = 5", "x'(T) = 0"],
            arcs=[
                {"name": "first leg", "from": 0, "to": "t1", "constraints": ["-1 <= u <= 2"]},
                {"name": "second leg", "from": "t1", "to": "T", "constraints": ["-2 <= u <= 0.5"]},
            ],
        )
    )
    first, second = sqrt(1 / 3), sqrt(4 / 0.3125)  # the force turns after a: the way is 3 a^2, or 0.3125 a^2
    assert found.value == pytest.approx(3 * first + 1.25 * second, rel=1e-6)
    assert [s.place for s in found.switches] == pytest.approx([first, 3 * first + second], abs=1e-5)
    assert any(note.startswith("Switches were found") and "t = 0.57735" in note for note in found.notes)


def test_what_cannot_be_met_is_named_without_the_copies():
    problem = wall(unknowns={"x": {}, "u": {"within": [-0.5, 0.5]}})
    found = solve(replace(problem, options=replace(problem.options, time_limit=20)))
    assert found.verdict is Verdict.NOT_VERIFIED  # that is as it seems, but no argument of ours reaches across arcs
    assert found.diagnosis.reason == "no curve found"
    told = [finding.label for finding in found.diagnosis.findings]
    assert told
    assert not any(" on there" in label or " on back" in label for label in told)
    pointers = {finding.pointer for finding in found.diagnosis.findings}
    assert pointers <= {f"/endpoints/{k}" for k in range(6)} | {"/unknowns/u/within", "/parameters/h/within", ""}


def test_refraction_obeys_its_law():
    found = solve(refraction())
    x = found.parameters["a"]
    above, below = x / np.hypot(x, 1), (1 - x) / np.hypot(1 - x, 1)
    assert above == pytest.approx(1.5 * below, rel=1e-9)  # Snell's law, common practice


def test_a_sweep_and_its_slopes_are_told_for_arcs_too():
    swept = solve(stages(sweep={"shell": {"values": [80, 120]}}))
    assert [len(point.arcs) for point in swept.sweep] == [2, 2]
    for point, mass in zip(swept.sweep, (80, 120), strict=True):
        second = point.arcs[1].curve
        assert second.evaluate("m", second.breaks[:1] + 1e-9)[0] == pytest.approx(400 - mass, rel=1e-6)
    slope = next(slope.slope for slope in swept.slopes if slope.constant == "shell")
    low, high = (point.value for point in swept.sweep)
    assert (high - low) / 40 == pytest.approx(slope, rel=2e-2)


def test_what_switches_together_switches_once():
    """x' = u with u from -1 to 1, least integral of x^2 from 1 to 1, x >= 1/4 on the second arc.

    Closed form: down to x = 0 at t = 1, there until x has to rise to 1/4 at t = 3/2, along 1/4 until it has to rise to
    1 at t = 3.  At t = 9/4 both u and the limit of x change.  The value is that of the four pieces.
    """
    arcs = [{"name": "a", "from": 0, "to": 1.5}, {"name": "b", "from": 1.5, "to": 3, "constraints": ["x >= 0.25"]}]
    found = solve(
        stating.stated(
            independent={"name": "t", "from": 0, "to": 3},
            unknowns={"x": {}, "u": {"within": [-1, 1]}},
            dynamics=["x' = u"],
            functional={"seek": "minimum", "integrand": "x^2"},
            endpoints=["x(0) = 1", "x(3) = 1"],
            arcs=arcs,
        )
    )
    assert found.value == pytest.approx(1 / 3 + 0.25**3 / 3 + 0.75 / 16 + (1 - 0.25**3) / 3, abs=1e-7)
    assert [switch.place for switch in found.switches] == pytest.approx([1, 5 / 4, 9 / 4], abs=1e-6)
    assert found.switches[-1].of == {"x", "u"}
