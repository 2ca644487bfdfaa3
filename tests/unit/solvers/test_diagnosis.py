"""Diagnoses: the reason as a word, the sentence in the terms of the problem, what to do."""

import pytest

from solvers.diagnosis import diagnose, with_feasibility
from solvers.minimise.elastic import broken
from solvers.minimise.ipopt import Minimum, Outcome
from solvers.search.attempt import make_program
from solvers.search.record import End, Pursuit
from solvers.solution import Check, Finding, MeshStep, Status
from solvers.starts.guess import first_guess
from solvers.transcription.layout import layout
from solvers.transcription.mesh import uniform
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
    assert "the others of a conflict can be met" in told.sentence
    found.conflicts = sets[:1]
    assert "Without any one of them the others can be met" in diagnose(found).sentence
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


def test_the_finest_mesh_is_said_to_be_the_finest():
    assert "as fine as numbers can tell" in diagnose(pursuit(End.FINEST)).sentence


def mesh(error, seconds=0.5):
    return MeshStep(8, 32, 4, 4, 1.0, error, 20, seconds)


@pytest.mark.parametrize(
    "errors, advice",
    [
        ([1e-2], "One mesh was solved, in 20 iterations, with a relative error of 1.0e-02: a `guess`"),
        ([1e-2, 1e-3, 1e-4], "fell 10 times from mesh to mesh and is 1.0e-04 now: about 2 more meshes would do"),
        ([0.9, 0.5], "The 2 meshes so far are too coarse for this curve (relative error 5.0e-01): raise"),
        ([1e-2, 9e-3, 8e-3], "hardly fallen over 3 meshes (1.0e-02, now 8.0e-03), so that more time alone"),
    ],
    ids=("one mesh", "falling", "too coarse", "hardly falling"),
)
def test_what_helps_is_what_was_seen(errors, advice):
    found = pursuit(End.TIME)
    found.paths.append(None)
    found.steps += [mesh(error) for error in errors]
    found.iterations = 20
    assert advice in diagnose(found).sentence


@pytest.mark.parametrize(
    "errors, fallen",
    [((0.09, 0.08, 0.07), "hardly fallen over 3 meshes"),
     ((0.09, 0.05, 0.02), "fallen 2.1 times from mesh to mesh at growing effort over 3 meshes")],
)  # fmt: skip
def test_what_is_out_of_reach_does_not_ask_for_more_time(errors, fallen):
    found = pursuit(End.FAR)
    found.paths.append(None)
    found.steps += [mesh(error) for error in errors]
    sentence = diagnose(found).sentence
    assert fallen in sentence
    assert "time_limit" not in sentence


def test_a_mesh_that_cannot_be_solved_does_not_blame_the_first_guesses():
    found = pursuit(End.FAILED)
    assert "default guesses" in diagnose(found).sentence
    found.paths.append(None)
    found.blocked = True
    sentence = diagnose(found).sentence
    assert "finer mesh could not be solved" in sentence
    assert "best curve so far is kept" in sentence
    assert "default guesses" not in sentence


def test_a_curve_that_is_not_feasible_yet_says_what_it_misses_and_by_how_much():
    """x' = u from x(0) = 1, with x <= 2: a start at rest at 3 breaks both, and x' = 2 is not met."""
    problem = stated(unknowns={"x": {"within": [None, 2]}, "u": {}}, endpoints=["x(0) = 1"])
    where = layout(made := compiled(problem), uniform(1, 2, 3))
    guess = first_guess(made, uniform(1, 2, 3), where).z
    program = make_program(made, uniform(1, 2, 3), where, guess)
    z = guess / program.scale
    z[where.nodes[:, 0]] = z[where.inner[:, 0]] = 3.0 / program.scale[where.nodes[0, 0]]
    z[where.controls[:, 0]] = 0.0
    findings, astray = broken(program, z)
    assert {finding.label: finding.amount for finding in findings} == pytest.approx(
        {"x(0) = 1": 2, "x within its bounds": 1}
    )
    assert astray == pytest.approx(0, abs=1e-12)
    z[where.controls[:, 0]] = 2.0 / program.scale[where.controls[0, 0]]
    assert broken(program, z)[1] > 0.1
    found = pursuit(End.TIME)
    found.last = program, Minimum(Outcome.TIME, z, 0.0, z, z, 1, 0.0, 0.0, "")
    assert "is not feasible; it misses 'x(0) = 1' by 2; 'x within its bounds' by 1; the dyn" in diagnose(found).sentence


def test_a_search_that_ended_on_a_feasible_curve_does_not_deny_it():
    """x = 1 at rest keeps x(0) = 1 and x' = u: a curve was reached, and none of them is the best yet."""
    problem = stated(endpoints=["x(0) = 1"])
    where = layout(made := compiled(problem), uniform(1, 2, 3))
    program = make_program(made, uniform(1, 2, 3), where, first_guess(made, uniform(1, 2, 3), where).z)
    z = 0.0 * program.scale
    z[where.nodes[:, 0]] = z[where.inner[:, 0]] = 1.0 / program.scale[where.nodes[0, 0]]
    found = pursuit(End.TIME)
    found.last = program, Minimum(Outcome.TIME, z, 0.0, z, z, 1, 0.0, 0.0, "")
    sentence = diagnose(found).sentence
    assert "No best curve had been found by then" in sentence
    assert "What was reached by then meets all conditions, but is not the best yet." in sentence


def test_a_kept_curve_that_fails_its_conditions_is_said_not_to_be_feasible_yet():
    exceeded = Check("limits", Status.FAILED, "'x' is exceeded by at most 2.0e-02 of its size.", 0.02)
    other = Check("stationarity", Status.FAILED, "The costates are off.", 1.0)
    unmade = Check("motion", Status.FAILED, "Not made: the time was over.")
    told = with_feasibility(diagnose(pursuit(End.TIME)), [exceeded, unmade, other])
    assert told.sentence.endswith("not feasible yet: 'x' is exceeded by at most 2.0e-02 of its size.")
    assert with_feasibility(told, [other]) is told
    assert with_feasibility(None, [exceeded]) is None
