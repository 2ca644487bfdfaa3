"""Freedom: sound problems of every sort pass, and one condition more than that does not."""

import pytest

from service.complaints import Refused
from tests.unit.service.assemble.stating import shape, stated

PENDULUM = {
    "unknowns": {"x": {}, "y": {}, "s": {}},
    "dynamics": ["x'' = -s*x", "y'' = -s*y - 9.81"],
    "constraints": ["x^2 + y^2 = 1"],
    "functional": {"seek": "minimum", "integrand": "s^2"},
}
OSCILLATOR = {"unknowns": {"x": {}}, "dynamics": ["x'' = -x"], "functional": {"seek": "minimum", "integrand": "x^2"}}
EIGENVALUE = {
    **OSCILLATOR,
    "parameters": {"lambda": {"within": [1, 20]}},
    "dynamics": ["x'' = -lambda*x"],
    "functional": {"seek": "minimum", "endpoint": "lambda"},
}
FREE_TIME = {"independent": {"name": "t", "from": 0, "to": "T"}, "parameters": {"T": {"within": [0.1, 9]}}}


@pytest.mark.parametrize(
    ("members", "endpoints"),
    [
        (OSCILLATOR, ["x(0) = 0", "x(1) = 1"]),
        (OSCILLATOR, ["x(0.5) = 0", "x(1) = 1"]),
        (OSCILLATOR, ["x(0) = x(1)", "x'(0) - 2*x(0) = x'(1)^2"]),
        (EIGENVALUE, ["x(0) = 0", "x'(0) = 1", "x(1) = 0"]),
        ({**OSCILLATOR, **FREE_TIME}, ["x(0) = 0", "x'(0) = 1", "x(T) = 0.5"]),
        ({**OSCILLATOR, "constraints": ["integral(x) = 1"]}, ["x(0) = 1"]),
        (
            {"unknowns": {"x": {}}, "dynamics": ["x'*(1 + x'^2) = x"], "functional": OSCILLATOR["functional"]},
            ["x(0) = 1"],
        ),
    ],
)
def test_without_a_free_function_each_initial_value_and_parameter_takes_one_condition(members, endpoints):
    stated(**members, endpoints=endpoints)
    with pytest.raises(Refused) as refusal:
        stated(**members, endpoints=[*endpoints, "x(0)*x(1) = 7"])
    (complaint,) = refusal.value.complaints
    assert complaint.code == "too-many-conditions"
    assert all(condition in complaint.message for condition in endpoints)


def test_the_equation_that_took_the_freedom_is_named():
    """An equality of the user's among the constraints gives the whole course: its ends are given by it."""
    with pytest.raises(Refused) as refusal:
        shape(endpoints=["y(0) = 0", "y(3) = 1"], constraints=["0 <= y = 1"])
    (complaint,) = refusal.value.complaints
    assert complaint.message.endswith("“0 <= y = 1” gives the course of y.")


@pytest.mark.parametrize(
    "endpoints",
    [
        [],
        ["x(0) = 0", "x(0.2) = 1", "x(0.4) = 0", "x(1) = 3"],
        ["x(0) = x(1)"],
        ["x(0)^2 + x(1)^2 = 1"],
        ["x(0) = 1", "x(0)*x(1) = 4"],
    ],
)
def test_with_a_control_every_place_may_have_its_condition(endpoints):
    stated(endpoints=endpoints)


def test_a_closed_curve_with_a_fixed_length_and_area_is_sound():
    stated(
        unknowns={"x": {}, "y": {}},
        dynamics=["x'^2 + y'^2 = 4"],
        functional={"seek": "maximum", "integrand": "(x*y' - y*x')/2"},
        endpoints=["x(0) = 0", "y(0) = 0", "x(1) = 0", "y(1) = 0"],
    )


def test_a_mechanism_with_its_constraint_force_is_sound():
    stated(**PENDULUM, endpoints=["x(0) = 0.6", "y(0) = -0.8", "x'(0) = 0", "y'(0) = 0"])


def test_a_start_off_the_mechanism_is_refused():
    with pytest.raises(Refused) as refusal:
        stated(**PENDULUM, endpoints=["x(0) = 0.6", "y(0) = -0.9"])
    assert "x^2 + y^2 = 1" in refusal.value.complaints[0].message


def test_a_coupled_part_without_control_is_counted_by_itself():
    parts = {
        "unknowns": {"x": {}, "u": {}, "p": {}, "q": {}},
        "dynamics": ["x' = u + p", "p' = q", "q' = -p"],
    }
    stated(**parts, endpoints=["x(0) = 0", "x(1) = 1", "p(0) = 1", "q(1) = 0"])
    with pytest.raises(Refused) as refusal:
        stated(**parts, endpoints=["x(0) = 0", "x(1) = 1", "p(0) = 1", "q(1) = 0", "p(1) = 0"])
    assert "2 free numbers (p and q)" in refusal.value.complaints[0].message


@pytest.mark.parametrize(
    ("dynamics", "endpoints", "sound"),
    [
        (["x' = u"], ["u(1) = 0"], False),  # a control at a point
        (["x' = u"], ["x'(1) = 0"], False),  # what a control gives outright
        (["x' = u", "u' = w"], ["u(1) = 0"], True),  # a state by its own dynamics
        (["x' = u", "u' = w"], ["x'(1) = 0"], True),  # given by a state
        (["x' = u", "u' = w"], ["u'(1) = 0"], False),
        (["x'' + u*x' = u"], ["x''(0) = 0"], False),  # an implicit line with a control in it
        (["x' = -x*u", "u' = -u"], ["x'(1) = -1"], True),
    ],
)
def test_values_at_one_place_that_nothing_but_a_free_function_decides_are_refused(dynamics, endpoints, sound):
    names = {name for name in "xuw" if any(name in line for line in dynamics)}
    members = {"unknowns": {name: {} for name in sorted(names)}, "dynamics": dynamics, "endpoints": endpoints}
    if sound:
        stated(**members)
        return
    with pytest.raises(Refused) as refusal:
        stated(**members)
    assert [one.code for one in refusal.value.complaints] == ["free-derivative"]


def test_an_abbreviation_of_states_has_values_at_places():
    problem = stated(
        unknowns={"x": {}, "u": {}},
        dynamics=["x'' = u"],
        where={"energy": "x'^2/2 + 9.81*x"},
        endpoints=["x(0) = 0", "energy(0) = 2", "energy(1) <= 12"],
    )
    assert len(problem.endpoints) == 3


@pytest.mark.parametrize(
    ("members", "sound"),
    [
        ({"constraints": ["y >= 1"], "endpoints": ["y(0) = 1"]}, True),  # touching is allowed
        ({"constraints": ["y >= 1"], "endpoints": ["y(0) = 0.999"]}, False),
        ({"constraints": ["y >= 1 + (x - 3)^2"], "endpoints": ["y(3) = 1"]}, True),
        ({"constraints": ["y >= 1 + (x - 3)^2"], "endpoints": ["y(0) = 1"]}, False),
        ({"constraints": ["y >= 1"], "endpoints": ["y(0) - y(3) = 0", "2*y(3) = 1"]}, False),
        ({"constraints": ["h >= 1"], "where": {"h": "y - x"}, "endpoints": ["y(3) = 3"]}, False),
        ({"constraints": ["log(y) >= 1"], "endpoints": ["y(0) = -3"]}, True),  # no value there: seen when solving
        ({"endpoints": ["y(0) <= 1", "y(0) >= 1"]}, True),
        ({"endpoints": ["y(0) <= 1", "y(0) >= 1.001"]}, False),
        ({"endpoints": ["y(0) + y(3) <= 1", "2*y(3) + 2*y(0) >= 3"]}, False),
        ({"unknowns": {"y": {"within": [0, 0.1]}}, "endpoints": ["y(0) = 0.1"]}, True),
        ({"unknowns": {"y": {"within": [0, 0.1]}}, "endpoints": ["y(0) = 0.1 + 1e-6"]}, False),
    ],
)
def test_limits_and_fixed_values(members, sound):
    members = {"unknowns": {"y": {}}, "independent": {"name": "x", "from": 0, "to": 3}} | members
    if sound:
        shape(**members)
        return
    with pytest.raises(Refused):
        shape(**members)
