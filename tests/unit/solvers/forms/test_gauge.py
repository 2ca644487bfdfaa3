"""Integrands of linear growth in parametric form: the same integral for every parametrisation."""

import numpy as np
import pytest

from solvers.deadline import in_seconds
from solvers.forms.gauge import PARAMETER, SPEED, in_parametric_form
from solvers.formula.evaluate import REAL, evaluate
from solvers.formula.nodes import At, Call, Name, walk
from solvers.problem import Seek
from solvers.search.pursuit import pursue
from solvers.solution import Verdict
from solvers.solve import solve
from solvers.transcription.mesh import uniform
from tests.unit.solvers.problems import shape, solved_on

SIZES = {"x": 1.0, "y": 1.0, "z": 1.0}

LINEAR = [
    "sqrt(1 + y'^2)",
    "sqrt(y'^2 + 1)*y",
    "y*sqrt(1 + y'^2)/(1 + x^2)",
    "sqrt((1 + y'^2)/(2*g*y))",
    "sqrt((1 + y'^2)/y)*exp(-x) - 3*x*y",  # terms of different degrees
    "2*sqrt(1 + y'^2) - y*y' + x",
    "-sqrt(1 + y'^2)",
    "(1 + y'^2)^(1/2)",
    "(1 + y'^2)^0.5/y",
    "(x^2 + (y*y')^2)^0.5",
    "(1 + y'^2)/sqrt(4 + y'^2)",
    "y'^2/(1 + y')",
    "sqrt(1 + y'^2 + z'^2)",
    "z*sqrt(1 + y'^2) + y*z'",
    "y*ds",
    "slope*x + ds/y",
    "(1 + y'^4)^(1/4)",
    "sqrt(1 + (y' - z')^2)*hypot(x, y)",
    "hypot(1, y')*y",
    "y*hypot(y', 2)",
]


def flat(integrand, **members):
    """A problem of curves y(x) and z(x) without units."""
    holds_z = "z" in integrand
    given = {
        "independent": {"name": "x", "from": 0, "to": 1},
        "unknowns": {"y": {}} | ({"z": {}} if holds_z else {}),
        "constants": {"g": 9.81} if "g" in integrand else {},
        "where": ({"slope": "y'", "ds": "sqrt(1 + slope^2)"} if "ds" in integrand else {}),
        "functional": {"integrand": integrand},
        "endpoints": ["y(0) = 1", "y(1) = 2"] + (["z(0) = 0"] if holds_z else []),
    }
    return shape(**given | members)


def value_of(tree, values, where):
    def look_up(name, order):
        return evaluate(where[name], look_up, REAL) if name in where else values[name, order]

    return evaluate(tree, look_up, REAL)


@pytest.mark.parametrize("integrand", LINEAR)
def test_the_form_in_s_is_the_integrand_times_the_speed_of_x(integrand):
    problem = flat(integrand)
    gauged = in_parametric_form(problem, lambda: SIZES, squared=False)
    rng = np.random.default_rng(4)
    for _ in range(5):
        x, y, z, slope, twist, speed = rng.uniform(0.2, 2.0, 6)
        plain = {("x", 0): x, ("y", 0): y, ("z", 0): z, ("y", 1): slope, ("z", 1): twist, ("g", 0): 9.81}
        parametric = plain | {("x", 1): speed, ("y", 1): slope * speed, ("z", 1): twist * speed}
        expected = speed * value_of(problem.integrand, plain, dict(problem.where))
        found = value_of(gauged.problem.integrand, parametric, dict(gauged.problem.where))
        assert found == pytest.approx(expected, rel=1e-12)


@pytest.mark.parametrize("integrand", [text for text in LINEAR if "slope" not in text and text != "y'^2/(1 + y')"])
def test_the_form_in_s_lives_on_vertical_tangents(integrand):
    problem = flat(integrand)
    gauged = in_parametric_form(problem, lambda: SIZES, squared=False)
    upright = {("x", 0): 0.5, ("y", 0): 0.7, ("z", 0): 0.9, ("x", 1): 0.0, ("y", 1): 1.5, ("z", 1): 0.5, ("g", 0): 9.81}
    assert np.isfinite(value_of(gauged.problem.integrand, upright, dict(gauged.problem.where)))


@pytest.mark.parametrize(
    "integrand",
    [
        "y'^2",  # grows faster
        "y'^2*sqrt(1 + y'^2)",
        "y^2 + x + atan(y')",  # does not grow
        "1/(1 + y'^2)",
        "y*exp(-y')",
        "y'^2 + sqrt(1 + y'^2)",
        "sqrt(1 + y'^2) + exp(y')",
        "sqrt(1 + y'^2)*sin(y')",
        "abs(y') + x",  # linear but for kinks: no bend holds the slope, upright or not
        "abs(x*y' - y)",
        "y + x*y'",
    ],
)
def test_other_growth_stays_as_it_is(integrand):
    assert in_parametric_form(flat(integrand), lambda: SIZES, squared=True) is None


@pytest.mark.parametrize(
    "members",
    [
        {"unknowns": {"y": {}, "u": {}}, "dynamics": ["y' = u"], "functional": {"integrand": "sqrt(1 + u^2)"}},
        {"functional": {"integrand": "sqrt(1 + y'^2) + y''^2"}, "endpoints": ["y(0) = 0", "y(1) = 2"]},
        {"functional": {"endpoint": "y(1)"}, "endpoints": ["y(0) = 1"], "constraints": ["y' >= -1"]},
        {"endpoints": ["y(0) = 1", "y(0.5) = 1", "y(1) = 2"]},
        {"constraints": ["integral(y'^2) <= 9"]},
    ],
    ids=("dynamics", "second order", "no integrand", "way point", "quadratic integral"),
)
def test_where_it_does_not_apply(members):
    assert in_parametric_form(flat("sqrt(1 + y'^2)", **members), lambda: SIZES, squared=False) is None


def test_the_greatest_of_a_negative_integrand_is_the_least_of_its_opposite():
    """Its square is minimised too, and the root is taken with the sign that it had."""
    gauged = in_parametric_form(flat("", functional={"seek": "maximum", "integrand": "-sqrt(1 + y'^2)"}),
                                lambda: SIZES, squared=True)  # fmt: skip
    assert gauged.squared
    assert gauged.problem.seek is Seek.MINIMUM
    assert gauged.value(4.0) == -2.0
    assert gauged.slope(4.0) == -0.25


@pytest.mark.parametrize(
    ("integrand", "members"),
    [
        ("sqrt(y'^2 + z'^2)", {}),
        ("(1 + y^2)*sqrt(y'^2 + z'^2)", {"constraints": ["y^2 + z^2 >= 0.04"]}),
        ("z*hypot(y', z')", {"where": {"r": "sqrt(y^2 + z^2)"}, "constraints": ["r <= 5"]}),
        ("(y*z' - z*y')/2", {"constraints": ["integral(sqrt(y'^2 + z'^2)) = 2"]}),
    ],
)
def test_what_is_the_same_for_every_parametrisation_only_gets_a_speed(integrand, members):
    problem = flat(integrand, **members)
    for squared in (True, False):
        gauged = in_parametric_form(problem, lambda: SIZES, squared)
        assert gauged.ways == ()
        assert not gauged.graph
        assert gauged.problem.independent == "x"
        assert gauged.problem.unknowns == problem.unknowns
        assert "the same for every parametrisation" in gauged.note


@pytest.mark.parametrize(
    ("integrand", "members"),
    [
        ("sqrt(y'^2 + z'^2)", {"constraints": ["y + x >= 0"]}),
        ("sqrt(y'^2 + z'^2)", {"constraints": ["integral(y) <= 9"]}),
        ("x*sqrt(y'^2 + z'^2)", {}),
        ("sqrt(y'^2 + z'^2) + z", {}),
        ("sqrt(y'^2)", {}),
    ],
    ids=("x in a constraint", "another integral", "x in the integrand", "a term of degree 0", "one unknown"),
)
def test_what_is_not_has_x_as_an_unknown(integrand, members):
    gauged = in_parametric_form(flat(integrand, **members), lambda: SIZES, squared=False)
    assert [way.x for way in gauged.ways] == ["x"]


@pytest.mark.parametrize("length", [False, True], ids=["squared", "steady"])
def test_the_way_over_a_cylinder_is_a_helix_of_constant_speed(length):
    """Unrolled it is a straight line: of length sqrt(r^2 angle^2 + h^2) (common practice)."""
    more = {"constraints": ["integral(sqrt(4*y'^2 + z'^2)) <= 9"]} if length else {}
    problem = flat("sqrt(4*y'^2 + z'^2)", endpoints=["y(0) = 0", "z(0) = 0", "y(1) = 1", "z(1) = 3"], **more)
    found = solve(problem)
    assert found.value == pytest.approx(np.sqrt(13), rel=1e-8)
    assert found.verdict is Verdict.GLOBAL_MINIMUM
    x = np.linspace(0, 1, 11)
    assert found.curve.evaluate("z", x) == pytest.approx(3 * x, abs=1e-6)
    assert found.costates.evaluate("z", x) == pytest.approx(np.full(11, -3 / np.sqrt(13)), abs=1e-6)


def test_the_square_is_granted_only_where_it_is_right():
    """Where anything but the integral counts, its square has other extremals."""
    whole = "sqrt(1 + y'^2)"
    assert in_parametric_form(flat(whole), lambda: SIZES, squared=True).squared
    for members in (
        {"functional": {"seek": "stationary", "integrand": whole}},
        {"functional": {"integrand": whole, "endpoint": "y(1)^2"}, "endpoints": ["y(0) = 1"]},
        {"constraints": [f"integral({whole}) = 2"], "functional": {"integrand": f"y*{whole}"}},
    ):
        gauged = in_parametric_form(flat(whole, **members), lambda: SIZES, squared=True)
        assert not gauged.squared
        assert SPEED in {parameter.name for parameter in gauged.problem.parameters}


def test_names_and_ends_of_the_form():
    gauged = in_parametric_form(flat("sqrt(1 + y'^2)"), lambda: SIZES, squared=True)
    problem = gauged.problem
    assert problem.independent == PARAMETER
    assert [unknown.name for unknown in problem.unknowns] == ["x", "y"]
    assert [place.label for place in problem.places] == ["0", "1"]
    assert [condition.label for condition in problem.constraints] == ["x runs forward"]
    fixed = {(node.name, node.place.value) for c in problem.endpoints for node in walk(c.body) if isinstance(node, At)}
    assert fixed == {("x", 0), ("x", 1), ("y", 0), ("y", 1)}


def test_integral_conditions_are_integrals_over_s():
    problem = flat("y*sqrt(1 + y'^2)", constraints=["integral(sqrt(1 + y'^2)) = 2", "integral(y)*y(1) <= 9"])
    gauged = in_parametric_form(problem, lambda: SIZES, squared=False)
    values = {("x", 0): 0.3, ("y", 0): 1.4, ("x", 1): 0.8, ("y", 1): -0.6}
    found = [
        value_of(node.arguments[0], values, {})
        for condition in gauged.problem.integrals
        for node in walk(condition.body)
        if isinstance(node, Call) and node.function == "integral"
    ]
    assert found == pytest.approx([1.0, 0.8 * 1.4])


def test_a_free_end_stays_tied_to_its_parameter():
    problem = flat(
        "sqrt(1 + y'^2)",
        independent={"name": "x", "from": 0, "to": "b"},
        parameters={"b": {"within": [0.1, 9]}},
        endpoints=["y(0) = 1", "y(b) = 2*b - 3"],
    )
    gauged = in_parametric_form(problem, lambda: SIZES, squared=True)
    tied = [c for c in gauged.problem.endpoints if any(isinstance(n, Name) and n.name == "b" for n in walk(c.body))]
    assert len(tied) == 2
    path = solved_on(gauged.problem, uniform(1, 4, 4))
    assert path.value == pytest.approx(16 / 5, rel=1e-8)  # from (0, 1) straight to the line y = 2x - 3: 4/sqrt(5)


FALL = {
    "unknowns": {"y": {"within": [0, None]}},
    "constants": {"g": 9.81},
    "functional": {"integrand": "sqrt((1 + y'^2)/(2*g*y))"},
    "endpoints": ["y(0) = 0", "y(1) = 1"],
}


def at_rest(problem):
    return {(node.name, node.place.value) for c in problem.endpoints for node in walk(c.body)
            if isinstance(node, At) and node.order == 1}  # fmt: skip


def test_the_curve_is_at_rest_where_the_integrand_is_infinite():
    falling = in_parametric_form(flat("sqrt(1 + y'^2)", **FALL), lambda: SIZES, squared=True)
    assert at_rest(falling.problem) == {("x", 0.0), ("y", 0.0)}
    rising = flat("sqrt(1 + y'^2)", **FALL | {"endpoints": ["y(0) = 1", "y(1) = 0"]})
    assert at_rest(in_parametric_form(rising, lambda: SIZES, squared=True).problem) == {("x", 1.0), ("y", 1.0)}
    pushed = flat("sqrt(1 + y'^2)", **FALL | {"endpoints": ["y(0) = 1/2", "y(1) = 1"]})
    assert at_rest(in_parametric_form(pushed, lambda: SIZES, squared=True).problem) == set()


SAME = {
    "descent from rest": (FALL, 0.5828954631547426, 1e-6),  # the cycloid; catalogue A06
    "soap film": (
        {"functional": {"integrand": "y*sqrt(1 + y'^2)"}, "endpoints": ["y(0) = cosh(1/2)", "y(1) = cosh(1/2)"]},
        (1 + np.sinh(1.0)) / 2,  # the catenary y = cosh(x - 1/2)
        1e-8,
    ),
}


@pytest.mark.parametrize("name", SAME)
def test_both_gauges_give_the_same_value(name):
    members, value, tolerance = SAME[name]
    problem = flat("sqrt(1 + y'^2)", **members)
    found = []
    for squared in (True, False):
        gauged = in_parametric_form(problem, lambda: SIZES, squared)
        pursuit = pursue(gauged.problem, None, in_seconds(30), meshes=4)
        assert pursuit.solved
        found.append(np.sqrt(pursuit.paths[-1].value) if gauged.squared else pursuit.paths[-1].value)
    assert found[0] == pytest.approx(value, rel=tolerance)
    if name != "descent from rest":  # at constant speed the start of the fall stays singular
        assert found[1] == pytest.approx(value, rel=tolerance)
    else:
        assert found[1] == pytest.approx(value, rel=3e-2)


def test_a_guess_is_told_in_s():
    points = flat("sqrt(1 + y'^2)", independent={"name": "x", "from": 2, "to": 4},
                  endpoints=["y(2) = 1", "y(4) = 2"], guess={"y": [[2, 1], [3, 5], [4, 2]]})  # fmt: skip
    gauged = in_parametric_form(points, lambda: SIZES, squared=True)
    assert gauged.problem.unknowns[1].guess == ((0, 1), (0.5, 5), (1, 2))
    formula = flat("sqrt(1 + y'^2)", independent={"name": "x", "from": 2, "to": 4},
                   endpoints=["y(2) = 1", "y(4) = 2"], guess={"y": "x^2"})  # fmt: skip
    gauged = in_parametric_form(formula, lambda: SIZES, squared=True)
    assert value_of(gauged.problem.unknowns[1].guess, {(PARAMETER, 0): 0.5}, {}) == pytest.approx(9)


def test_the_guess_reaches_from_end_to_end_also_where_an_end_is_free():
    """A guess that stands still would be undefined everywhere."""
    problem = flat("sqrt(1 + y'^2)", independent={"name": "x", "from": 0, "to": "b"}, guess={"y": "x + b"},
                   parameters={"b": {"within": [0.1, 9]}}, endpoints=["y(0) = 1", "y(b) = 2*b - 3"])  # fmt: skip
    x, y = in_parametric_form(problem, lambda: SIZES, squared=True).problem.unknowns
    at = {(PARAMETER, 0): 0.25, ("b", 0): 4.0}
    assert value_of(x.guess, at, {}) == pytest.approx(1)
    assert value_of(y.guess, at, {}) == pytest.approx(5)
