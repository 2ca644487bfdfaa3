"""What a worker does with a run: a result document in the user's units, signs of life, a stop that is obeyed."""

import json
import math

import pytest

from service import jobs, samples
from service.assemble import assemble
from service.complaints import Refused
from service.engine import records
from service.spec import read
from solvers.problem import Place, Problem, Unknown
from solvers.solution import Diagnosis, Progress, Solution
from solvers.units import Unit

# Of all curves between two points the straight line makes the integral of the squared slope least: 4 mm^2/s here.
STRAIGHT = json.dumps(
    {
        "format": 1,
        "title": "straight",
        "independent": {"name": "t", "unit": "ms", "from": 0, "to": "D"},
        "constants": {"D": "1000 ms"},
        "unknowns": {"y": {"unit": "mm"}},
        "functional": {"seek": "minimum", "integrand": "y'^2"},
        "endpoints": ["y(0) = 0", "y(D) = 2"],
    }
)


def ignore(event):
    """For tests that need no progress."""


def never():
    return False


def test_a_document_becomes_a_result_in_the_users_units():
    result = jobs.perform(STRAIGHT, ignore, never, id="r")
    assert (result["id"], result["state"], result["problem"]["title"]) == ("r", "finished", "straight")
    assert result["value"] * _factor(result["value_unit"]) == pytest.approx(4e-6, rel=1e-6)
    assert result["reading"]["necessary"][0]["kind"] == "Euler-Lagrange"
    assert result["provenance"]["times"]["read"] > 0


def _factor(unit):
    return {"mm^2/ms": 1e-3, "mm^2/s": 1e-6}[unit]


def test_signs_of_life_are_json_in_the_users_units():
    events = []
    result = jobs.perform(STRAIGHT, events.append, never)
    assert json.loads(json.dumps(events, allow_nan=False)) == events
    assert {event["kind"] for event in events} == {"iteration", "mesh"}
    meshes = [event for event in events if event["kind"] == "mesh"]
    assert meshes[-1]["value"] == pytest.approx(result["value"], rel=1e-6)
    assert meshes[-1]["breaks"][0] == 0
    assert meshes[-1]["breaks"][-1] == pytest.approx(1000)


def test_a_bound_on_the_time_goes_before_the_documents_own(monkeypatch):
    seen = []
    monkeypatch.setattr(
        jobs,
        "solve_problem",
        lambda problem, watch, together: seen.append(problem.options.time_limit) or Solution(None),
    )
    jobs.perform(STRAIGHT, ignore, never, longest=7.0)
    jobs.perform(STRAIGHT, ignore, never, longest=1e6)
    assert seen == [7.0, 60.0]


def test_a_stop_reaches_the_solver_and_is_told_as_such(monkeypatch):
    def solver(problem, watch, together):
        assert watch(Progress("iteration", 1, 1, 8, 32)) is True
        return Solution(None, diagnosis=Diagnosis("stopped", "It was stopped."))

    monkeypatch.setattr(jobs, "solve_problem", solver)
    head, text = jobs.solve({"id": "r", "time_limit": 60}, STRAIGHT.encode(), ignore, lambda: True)
    assert head["stopped"] is True
    assert json.loads(text)["state"] == "stopped"


@pytest.mark.parametrize("sample", ["straight", "fin"])
def test_what_the_server_has_assembled_is_solved_as_its_document_is(monkeypatch, sample):
    seen = []
    monkeypatch.setattr(jobs, "solve_problem", lambda problem, watch, together: seen.append(problem) or Solution(None))
    text = STRAIGHT.encode() if sample == "straight" else samples.text(sample).encode()
    document = read(text)
    head = {"id": "r", "time_limit": 60}
    _, plain = jobs.solve(head, text, ignore, never)
    _, packed = jobs.solve({**head, "assembled": True}, records.packed((document, assemble(document))), ignore, never)
    assert seen[0] == seen[1]
    first, second = json.loads(plain), json.loads(packed)
    for result in (first, second):
        result["provenance"].pop("times")
    assert first == second


def test_the_real_solver_obeys_a_stop():
    seen = []

    def stop():
        return len(seen) >= 2

    assert jobs.perform(samples.text("hose"), seen.append, stop)["state"] == "stopped"
    assert len([event for event in seen if event["kind"] == "iteration"]) <= 3


def test_the_child_answers_with_the_figures_of_the_list():
    head, text = jobs.solve({"id": "r", "time_limit": 60}, STRAIGHT.encode(), ignore, never)
    result = json.loads(text)
    assert head["figures"] == {name: result[name] for name in ("verdict", "value", "value_error", "value_unit")}
    assert head["stopped"] is False


def test_an_error_in_the_symbols_costs_no_solution(monkeypatch):
    def fail(*_):
        raise RecursionError("too deep")

    monkeypatch.setattr(jobs, "with_necessary", fail)
    result = jobs.perform(STRAIGHT, ignore, never)
    assert result["value"] is not None
    assert "error in their derivation (RecursionError('too deep'))" in result["reading"]["notes"][-1]


def test_a_document_that_is_no_longer_valid_is_refused():
    with pytest.raises(Refused):
        jobs.perform('{"format": 1}', ignore, never)


@pytest.mark.parametrize("value", [math.nan, math.inf, None])
def test_what_is_no_number_is_told_as_null(value):
    problem = Problem("t", (Place(None, "0"), Place(None, "1")), (Unknown("y", 1),), value_unit=Unit("mm", 1e-3))
    event = jobs.progress_event(Progress("iteration", 1, 2, 8, 32, value, value), problem)
    assert event == {
        "kind": "iteration", "start": 1, "mesh": 1, "iteration": 2, "intervals": 8, "points": 32,
        "value": None, "infeasibility": None,
    }  # fmt: skip


def test_a_mesh_is_told_with_its_places_in_the_users_unit():
    problem = Problem("t", (Place(None, "0"), Place(None, "1")), (Unknown("y", 1),),
                      value_unit=Unit("mm", 1e-3), independent_unit=Unit("ms", 1e-3))  # fmt: skip
    event = jobs.progress_event(Progress("mesh", 2, 30, 2, 8, 0.004, 0.0, 1e-5, (0.0, 0.5, 1.0)), problem)
    assert event == {
        "kind": "mesh", "start": 1, "mesh": 2, "intervals": 2, "points": 8, "value": pytest.approx(4.0), "error": 1e-5,
        "breaks": [0.0, 500.0, 1000.0],
    }  # fmt: skip
