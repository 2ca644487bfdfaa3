"""No claim that is not so: problems chosen to lead a hasty solver to a wrong verdict.

All values are elementary; what is said beside them suffices to check them.
"""

from dataclasses import replace

import numpy as np
import pytest

from solvers.deadline import in_seconds
from solvers.evidence import with_evidence
from solvers.forms.choice import Found
from solvers.problem import Options
from solvers.search.pursuit import pursue
from solvers.solution import Status, Verdict
from solvers.solve import solve
from tests.unit.solvers.problems import shape, stated


def over_one(integrand=None, **members):
    functional = {"integrand": integrand} if integrand else {}
    return shape(independent={"name": "x", "from": 0, "to": 1}, functional=functional | members.pop("more", {}),
                 **members)  # fmt: skip


def test_an_integrand_that_is_negative_is_not_minimised_by_its_square():
    """sqrt(1 + y'^2) - 3 is least at y' = 0: -2, while its square could be made zero."""
    found = solve(over_one("sqrt(1 + y'^2) - 3", endpoints=["y(0) = 0"]))
    assert found.value == pytest.approx(-2, abs=1e-8)
    assert found.verdict is Verdict.GLOBAL_MINIMUM


def test_nor_is_one_that_changes_its_sign_with_the_slope():
    """Between fixed ends 2*y' adds a constant: the straight line stays the shortest, and the value is sqrt(2) - 2."""
    found = solve(over_one("sqrt(1 + y'^2) - 2*y'", endpoints=["y(0) = 0", "y(1) = 1"]))
    assert abs(found.value - (np.sqrt(2) - 2)) <= found.value_error < 1e-6
    np.testing.assert_allclose(found.curve.evaluate("y", [0.3]), 0.3, atol=1e-6)


@pytest.mark.parametrize("integrand", ["x*y'^2", "x*y'^2 + y^2"])
def test_a_value_that_is_only_approached_is_no_global_minimum(integrand):
    """y = log(1 + x/e)/log(1 + 1/e) brings the value as near to zero as one likes, slowly; no curve has it."""
    problem = over_one(integrand, endpoints=["y(0) = 1", "y(1) = 0"])
    found = solve(replace(problem, options=Options(time_limit=3)))
    assert found.verdict not in (Verdict.GLOBAL_MINIMUM, Verdict.LOCAL_MINIMUM)


def test_a_value_of_zero_has_its_root():
    found = solve(replace(over_one("sqrt(y'^2)", endpoints=["y(0) = 0", "y(1) = 0"]), options=Options(time_limit=1)))
    assert found.value is None or abs(found.value) <= 1e-6


CLOSED = {
    "anywhere": ["y(0) = y(1)", "z(0) = z(1)"],
    "through a point": ["y(0) = y(1)", "z(0) = z(1)", "y(0) = 1"],
    "from a point to itself": ["y(0) = 1", "y(1) = 1", "z(0) = 0", "z(1) = 0"],
}


@pytest.mark.parametrize("endpoints", CLOSED.values(), ids=CLOSED)
def test_a_closed_curve_shrinks_to_a_point(endpoints):
    """Length zero is the least there is, and every point has it; on a point the length has no derivative."""
    found = solve(over_one("sqrt(y'^2 + z'^2)", endpoints=endpoints, unknowns={"y": {}, "z": {}}))
    assert found.verdict is Verdict.GLOBAL_MINIMUM
    assert abs(found.value) <= found.value_error + 1e-12
    assert found.diagnosis is None
    if "y(0) = 1" in endpoints:
        assert found.curve.evaluate("y", np.linspace(0, 1, 9)) == pytest.approx(1)


TWO_ENDS = {
    "square": (["y(0)^2 = 1", "y(1) = 0"], 1.0),
    "cubic": (["y(0) = -1", "y(1)^3 - 3*y(1) = 10"], (1 + 2.6128878647) ** 2),
}


@pytest.mark.parametrize("endpoints, value", TWO_ENDS.values(), ids=TWO_ENDS)
def test_a_stationary_violation_is_no_proof_of_a_conflict(endpoints, value):
    """The default guess lies where the violation is stationary (y = 0, y = -1), and yet there are straight lines.

    2.6128878647 is the one real root of y^3 - 3 y = 10.
    """
    found = solve(over_one("y'^2", endpoints=endpoints))
    assert found.value == pytest.approx(value, rel=1e-8)
    assert found.verdict is Verdict.LOCAL_MINIMUM


def test_a_conflict_that_is_not_proved_is_said_with_care():
    """The polynomial is nowhere below -1/2, which neither convexity nor intervals tell."""
    found = solve(over_one("y'^2", endpoints=["y(0) = 0", "y(1)^4 - y(1)^3 + y(1) = -9"]))
    assert found.verdict is Verdict.NOT_VERIFIED
    assert found.value is None
    assert found.diagnosis.reason == "no curve found"
    assert "No curve was found" in found.diagnosis.sentence
    assert "not excluded" in found.diagnosis.sentence
    assert "y(1)^4 - y(1)^3 + y(1) = -9" in {finding.label for finding in found.diagnosis.findings}


@pytest.mark.parametrize("share, feasible", [(1.0001, True), (0.999, False)], ids=["room", "no room"])
@pytest.mark.filterwarnings("ignore:NLP is overconstrained")
def test_a_coarse_mesh_is_no_proof_of_a_conflict(share, feasible):
    """From rest to rest over 1 with -1 <= u <= 2: that takes sqrt(3) at least, with the switch after a third."""
    end = float(share * np.sqrt(3))
    problem = stated(
        independent={"name": "t", "from": 0, "to": end},
        constants={"T": end},
        dynamics=["x'' = u"],
        endpoints=["x(0) = 0", "x'(0) = 0", f"x({end!r}) = 1", f"x'({end!r}) = 0"],
        constraints=["-1 <= u <= 2"],
    )
    found = solve(problem)
    assert (found.verdict is Verdict.GLOBAL_MINIMUM) == feasible
    assert (found.verdict is Verdict.INFEASIBLE) != feasible
    if not feasible:
        assert found.diagnosis.sentence.startswith("No curve satisfies all of '-1 <= u <= 2', 'x(0) = 0'")
        assert len(found.diagnosis.findings) == 5  # without any one of them there would be room


SECOND_ORDER = {
    "conjugate point exactly at the end": ("y'^2 - (pi*y)^2", ["y(0) = 0", "y(1) = 0"], Verdict.STATIONARY),
    "before the end": ("y'^2 - 9.89*y^2", ["y(0) = 0", "y(1) = 0"], Verdict.NOT_A_MINIMUM),
    "beyond the end": ("y'^2 - 9.85*y^2", ["y(0) = 0", "y(1) = 0"], Verdict.LOCAL_MINIMUM),
    "focal point exactly at a free end": ("y'^2 - (pi*y/2)^2", ["y(0) = 0"], Verdict.STATIONARY),
    "before a free end": ("y'^2 - 2.6*y^2 + y^4", ["y(0) = 0"], Verdict.NOT_A_MINIMUM),
    "beyond a free end": ("y'^2 - 2.4*y^2 + y^4", ["y(0) = 0"], Verdict.LOCAL_MINIMUM),
}
"""y = 0 throughout; the least eigenvalues of -y'' are pi^2 = 9.8696 and (pi/2)^2 = 2.4674."""


def verdict_at_rest(problem):
    """What the curve y = 0 is called, to which the first guess leads; a solve would leave a saddle."""
    pursuit = pursue(problem, None, in_seconds(60))
    assert np.abs(pursuit.paths[-1].states).max() < 1e-6
    return with_evidence(problem, Found(pursuit, None), 0.0).verdict


@pytest.mark.parametrize("integrand, endpoints, verdict", SECOND_ORDER.values(), ids=SECOND_ORDER)
def test_conjugate_points_about_the_end(integrand, endpoints, verdict):
    assert verdict_at_rest(over_one(integrand, endpoints=endpoints, constraints=["-1 <= y <= 1"])) is verdict


@pytest.mark.parametrize("share, verdict", [(39, Verdict.LOCAL_MINIMUM), (40, Verdict.NOT_A_MINIMUM)])
def test_an_integral_condition_moves_the_conjugate_point(share, verdict):
    """Among waves of mean zero the least eigenvalue is 4 pi^2 = 39.478."""
    problem = over_one(f"y'^2 - {share}*y^2 + y^4", endpoints=["y(0) = 0", "y(1) = 0"],
                       constraints=["integral(y) = 0"])  # fmt: skip
    assert verdict_at_rest(problem) is verdict


@pytest.mark.parametrize("more", ["p*q", "p^2 - q^2", "p^3", "-p^4"])
def test_a_saddle_of_parameters_is_no_minimum(more):
    problem = over_one("y'^2", more={"endpoint": more}, endpoints=["y(0) = 0", "y(1) = 1"],
                       parameters={name: {"within": [-1, 1]} for name in "pq" if name in more})  # fmt: skip
    found = solve(problem)
    at_corner = max(abs(value) for value in found.parameters.values()) > 0.9
    assert at_corner or found.verdict in (Verdict.STATIONARY, Verdict.NOT_A_MINIMUM)


def test_what_nothing_determines_is_not_looked_for_and_not_told_as_if_it_were():
    """From rest to rest over 1 in the time 1 with |u| <= 5, at no cost: 4 would suffice, so that u has room."""
    problem = stated(
        dynamics=["x'' = u"],
        unknowns={"x": {}, "u": {"within": [-5, 5]}},
        functional={"endpoint": "0"},
        endpoints=["x(0) = 0", "x'(0) = 0", "x(1) = 1", "x'(1) = 0"],
    )
    found = solve(problem)
    assert [one.name for one in found.undetermined] == ["u"]
    assert found.stretches == ()
    assert_proved(found, 0.0)


def test_parameters_of_which_only_the_sum_counts_fit_exactly():
    """y = x with a + b = 1 makes both squares zero."""
    problem = over_one("(y' - a - b)^2 + (y - x)^2", endpoints=["y(0) = 0"], parameters={"a": {}, "b": {}})
    found = solve(problem)
    assert {one.name for one in found.undetermined} == {"a", "b"}
    assert found.parameters["a"] + found.parameters["b"] == pytest.approx(1, abs=1e-6)
    assert_proved(found, 0.0)


def assert_proved(found, value):
    """Global, and no check failed beside that claim."""
    assert found.verdict is Verdict.GLOBAL_MINIMUM
    assert not [check.name for check in found.checks if check.status is Status.FAILED]
    assert abs(found.value - value) <= found.value_error < 1e-8
    assert len(found.meshes) < 12


def test_a_spike_between_the_points_of_a_mesh_approaches_nothing():
    """y^2*y'^2 from -1 to 1: with w = y*|y|/2 it is w'^2, so that 1/2 is the least, at y = sign(x)*sqrt(|x|).  A jump
    through y = 0 whose slope the points of the mesh do not see is no curve of less."""
    found = solve(shape(independent={"name": "x", "from": -1, "to": 1}, functional={"integrand": "y^2*y'^2"},
                        endpoints=["y(-1) = -1", "y(1) = 1"]))  # fmt: skip
    if found.value_error is None or found.value_error > 1e-3:  # what failed checks leave open is all
        assert found.verdict is Verdict.NOT_VERIFIED
        assert "approached" not in found.diagnosis.sentence
    else:
        assert abs(found.value - 1 / 2) <= found.value_error


def test_what_tends_to_a_jump_and_costs_nothing_there_is_approached():
    """Weierstrass's example: x^2*y'^2 from -1 to 1 has the infimum 0 (Weierstrass, 1870, from memory)."""
    found = solve(shape(independent={"name": "x", "from": -1, "to": 1}, functional={"integrand": "x^2*y'^2"},
                        endpoints=["y(-1) = -1", "y(1) = 1"]))  # fmt: skip
    assert found.verdict is Verdict.NO_OPTIMUM
    assert abs(found.value) <= found.value_error
