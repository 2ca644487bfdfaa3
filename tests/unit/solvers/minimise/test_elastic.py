"""The least violation: what conflicts, by how much, where; and nothing where nothing does."""

import numpy as np
import pytest

from solvers.deadline import in_seconds
from solvers.minimise.elastic import groups, least_violation
from solvers.minimise.ipopt import Outcome
from solvers.transcription.mesh import uniform
from tests.unit.solvers.problems import program_of, shape, start_of, stated

MESH = uniform(1, 5, 4)


def least(problem, mesh=MESH):
    program = program_of(problem, mesh)
    found = least_violation(program, start_of(problem, mesh) / program.scale, deadline=in_seconds(20))
    assert found.minimum.outcome is Outcome.SOLVED
    return program, found


def test_two_conditions_in_conflict_are_named_with_what_is_missing():
    """x' = u <= 1 from 0 reaches 1 after 1, not 3: two are missing at the end, or the control has to give 2 more."""
    problem = stated(constraints=["u <= 1"], endpoints=["x(0) = 0", "x(1) = 3"])
    _, found = least(problem)
    amounts = {finding.label: finding.amount for finding in found.findings}
    assert set(amounts) <= {"u <= 1", "x(0) = 0", "x(1) = 3"}
    assert sum(amounts.values()) == pytest.approx(2, rel=1e-5)
    assert found.total > 0.1


@pytest.mark.parametrize(
    "constraint, missing", [("x >= 1/2", 1 / 2 - np.exp(-1)), ("x^2 >= 1/4", 1 / 4 - np.exp(-2))], ids=("bound", "row")
)
def test_a_conflict_has_its_place_and_its_amount(constraint, missing):
    """x falls as exp(-t) whatever one does: less is missing at the end than the start would have to be raised."""
    problem = stated(
        unknowns={"x": {}, "y": {}, "u": {}},
        dynamics=["x' = -x", "y' = u"],
        constraints=[constraint],
        endpoints=["x(0) = 1", "y(0) = 0", "y(1) = 1"],
    )
    _, found = least(problem)
    (finding,) = found.findings
    assert (finding.label, finding.pointer) == (constraint, "/constraints/0")
    assert finding.place == pytest.approx(1)
    assert finding.amount == pytest.approx(missing, rel=1e-5)


def test_an_integral_condition_that_cannot_hold():
    """A hose shorter than the distance: 5 m between ends that are 5 m apart would do, 4 m lacks one."""
    problem = shape(functional={"integrand": "y"}, endpoints=["y(0) = 0", "y(3) = 4"],
                    constraints=["integral(sqrt(1 + y'^2)) = 4"])  # fmt: skip
    _, found = least(problem)
    labels = {finding.label for finding in found.findings}
    assert labels & {"integral(sqrt(1 + y'^2)) = 4"}
    finding = found.findings[0]
    assert finding.amount == pytest.approx(1, rel=1e-3)
    assert finding.pointer == "/constraints/0"


def test_the_curve_of_least_violation_still_moves_as_the_dynamics_say():
    problem = stated(constraints=["u <= 1"], endpoints=["x(0) = 0", "x(1) = 3"])
    program, found = least(problem)
    g = program.numbers.constraints(found.z)
    np.testing.assert_allclose(np.asarray(g)[: program.rows.pointwise], 0, atol=1e-8)


def test_what_can_be_met_is_met():
    problem = stated(
        unknowns={"x": {"within": [-1, 5]}, "u": {"within": [-9, 9]}},
        constraints=["x*u >= -4", "u^2 + x <= 60", "integral(u^2) <= 30"],
        endpoints=["x(0) = 0", "x(1) = 3"],
    )
    program, found = least(problem)
    assert found.total == 0
    assert found.findings == ()
    assert np.all(found.z >= program.lower - 1e-7)
    assert np.all(found.z <= program.upper + 1e-7)
    g = program.numbers.constraints(found.z)
    assert np.all(g >= program.row_lower - 1e-7)
    assert np.all(g <= program.row_upper + 1e-7)


def test_the_worst_comes_first():
    problem = stated(
        unknowns={"x": {}, "y": {}, "u": {}, "w": {}},
        dynamics=["x' = u", "y' = w"],
        functional={"integrand": "u^2 + w^2"},
        constraints=["u^2 <= -100", "w^2 <= -1"],
        endpoints=["x(0) = 0", "y(0) = 0", "x(1) = 20", "y(1) = 20"],
    )
    _, found = least(problem)
    labels = [finding.label for finding in found.findings]
    assert {"u^2 <= -100", "w^2 <= -1"} <= set(labels)


def test_groups_are_the_conditions_of_the_user():
    problem = stated(
        parameters={"k": {"within": [0, 2]}},
        unknowns={"x": {"within": [-1, 1]}, "u": {}},
        dynamics=["x' = k*u"],
        constraints=["u <= 3", "x*u <= 1", "integral(u) = 1"],
        endpoints=["x(0) = 0", "x(0) + x(1) = 1"],
    )
    program = program_of(problem, MESH)
    found = {group.label: group for group in groups(program)}
    assert list(found) == ["x*u <= 1", "x(0) + x(1) = 1", "integral(u) = 1", "x(0) = 0", "u <= 3",
                           "x within its bounds", "k within its bounds"]  # fmt: skip
    assert len(found["x*u <= 1"].rows) == MESH.points
    assert len(found["x(0) + x(1) = 1"].rows) == 1
    assert found["x within its bounds"].pointer == "/unknowns/x/within"
    assert len(found["k within its bounds"].variables) == 1


def test_lines_of_the_dynamics_never_give():
    program = program_of(stated(dynamics=["x'*exp(x') = u"]), MESH)
    assert all(group.label != "x'*exp(x') = u" for group in groups(program))
