"""Diagnoses: the reason as a word, the sentence in the terms of the problem, what to do."""

import pytest

from solvers.diagnosis import diagnose
from solvers.search.record import End, Pursuit
from solvers.solution import Finding
from tests.unit.solvers.problems import compiled, stated


def pursuit(end, *findings):
    problem = stated()
    return Pursuit(problem, compiled(problem), end, findings=findings)


@pytest.mark.parametrize("end", End)
def test_every_end_has_its_diagnosis_or_needs_none(end):
    found = diagnose(pursuit(end))
    if end in (End.CONVERGED, End.SETTLED):
        assert found is None
    else:
        assert found.reason == end.value
        assert found.sentence.endswith(".")


def without_curve(end, *broken):
    found = pursuit(end, *broken)
    found.broken = broken
    return found


def test_conflicts_are_named():
    findings = tuple(Finding(f"condition {k}", f"/constraints/{k}", 1.0) for k in range(5))
    found = diagnose(without_curve(End.INFEASIBLE, *findings))
    assert found.sentence.startswith("No curve satisfies all conditions together.")
    assert found.sentence.endswith("give: 'condition 0'; 'condition 1'; 'condition 2'.")
    assert found.findings == findings


def test_what_is_not_proved_is_not_excluded_and_the_least_violation_is_told_in_its_unit():
    problem = stated(unknowns={"x": {"unit": "m"}, "u": {"unit": "m/s", "within": [-1, 1]}},
                     independent={"name": "t", "unit": "s", "from": 0, "to": 1}, dynamics=["x' = u"],
                     functional={"integrand": "u^2"}, endpoints=["x(0) = 0", "x(1) = 3"])  # fmt: skip
    (condition,) = (c for c in problem.endpoints if c.label.startswith("x(1)"))
    found = Pursuit(problem, compiled(problem), End.NOWHERE)
    found.broken = (Finding(condition.label, condition.pointer, 2.0), Finding("no condition of the user", "", 1.0))
    sentence = diagnose(found).sentence
    assert sentence.startswith("No curve was found, from several starts, that satisfies all conditions together.")
    assert "near the best that was found: 'x(1) = 3' by 2 m; 'no condition of the user'." in sentence
    assert sentence.endswith("one elsewhere is not excluded.")


@pytest.mark.parametrize("end", [End.INFEASIBLE, End.NOWHERE, End.UNDEFINED])
def test_without_findings_no_sentence_announces_any(end):
    assert ":" not in diagnose(pursuit(end)).sentence


def test_the_smallest_conflicts_are_said_set_by_set():
    sets = (tuple(Finding(name, f"/constraints/{name}", 1.0) for name in "abc"), (Finding("d", "/constraints/d", 1.0),))
    found = pursuit(End.INFEASIBLE, *sets[0], *sets[1])
    found.conflicts = sets
    told = diagnose(found)
    assert told.sentence.startswith("No curve satisfies all of 'a', 'b' and 'c'. Nor 'd'. Without any one of them")
    found.conflicts = sets[1:]
    assert diagnose(found).sentence == "No curve satisfies 'd'."
    found.conflicts = (tuple(Finding(str(k), f"/constraints/{k}", 1.0) for k in range(9)),)
    assert "'4' and 4 more conditions" in diagnose(found).sentence


def test_what_is_undefined_is_shown_with_its_place():
    found = diagnose(pursuit(End.UNDEFINED, Finding("log(y)", "/where/w", None, 0.25, "with y = -2")))
    assert "'log(y)' at 0.25 (with y = -2)" in found.sentence
    somewhere = diagnose(pursuit(End.UNDEFINED, Finding("log(y)", "/where/w", None, None, "with y = -2")))
    assert "'log(y)' (with y = -2)" in somewhere.sentence


@pytest.mark.parametrize("end, advice", [(End.TIME, "solve.time_limit"), (End.POINTS, "solve.points")])
def test_limits_say_which_setting_to_raise(end, advice):
    assert f"`{advice}`" in diagnose(pursuit(end)).sentence
