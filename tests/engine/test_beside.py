"""Tasks beside each other: their outcomes do not depend on how many are done at once, and no task takes others down."""

import os
import signal
import time
from functools import partial
from pathlib import Path

import pytest

from service.engine.beside import Beside
from solvers.solution import Progress, Solution
from solvers.solve import solve
from solvers.starts.together import IN_TURN, Lost
from tests.unit.solvers.problems import shape


def sign(iteration=0):
    return Progress("iteration", 1, iteration, 10, 40)


def never(number, progress):
    return False


def valued(value, watch):
    watch(sign())
    return Solution(None, value=value)


def children():
    """The processes that this one has started, those that have died and wait to be heard of included."""
    tasks = Path("/proc/self/task").iterdir()
    return {child for task in tasks for child in (task / "children").read_text().split()}


def dying(watch):
    os.kill(os.getpid(), signal.SIGKILL)


def failing(watch):
    raise ValueError("of no use")


@pytest.mark.parametrize("processes", [1, 2, 5])
def test_the_outcomes_are_in_the_order_of_the_tasks(processes):
    seen = []
    tasks = [partial(valued, float(k)) for k in range(4)]
    outcomes = Beside(processes)(tasks, lambda number, progress: bool(seen.append(number)))
    assert [outcome.value for outcome in outcomes] == [0.0, 1.0, 2.0, 3.0]
    assert sorted(seen) == [0, 1, 2, 3]


@pytest.mark.parametrize("processes", [1, 2])
def test_a_task_that_dies_or_raises_costs_itself_only(processes):
    before = children()
    outcomes = Beside(processes)([dying, partial(valued, 1.0), failing, dying, partial(valued, 2.0)], never)
    died = Lost("its process died: signal 9 (SIGKILL)")
    assert [outcomes[0], outcomes[2], outcomes[3]] == [died, Lost("ValueError: of no use"), died]
    assert [outcomes[1].value, outcomes[4].value] == [1.0, 2.0]
    assert children() == before  # nothing is left behind


def test_a_stop_reaches_all_of_them_and_no_other_begins():
    def until_stopped(watch):
        began = time.monotonic()
        while not watch(sign()) and time.monotonic() - began < 60:
            time.sleep(0.01)
        return Solution(None, value=time.monotonic() - began)

    heard = []
    outcomes = Beside(2)([until_stopped] * 4, lambda number, progress: bool(heard.append(number)) or len(heard) > 5)
    assert all(outcome.value < 60 for outcome in outcomes[:2])
    assert outcomes[2:] == [None, None]


def test_several_starts_lead_to_the_same_however_many_are_made_at_once():
    problem = shape(endpoints=["y(0) = 0", "y(3) = 1"], solve={"starts": 3})
    told = []
    for together in (IN_TURN, Beside(1), Beside(3)):
        found = solve(problem, None, together)
        told.append((found.value, found.verdict, found.checks,
                     [(extremal.starts, extremal.solution.value) for extremal in found.extremals]))  # fmt: skip
    assert told[0] == told[1] == told[2]


def test_a_start_that_breaks_is_told_with_its_reason(monkeypatch):
    from solvers import solve as single

    solve_once = single._solve_once

    def breaking(problem, watch, **more):
        return solve_once(problem, watch, **more) if problem.start.label == "default guess" else dying(watch)

    monkeypatch.setattr(single, "_solve_once", breaking)
    found = solve(shape(endpoints=["y(0) = 0", "y(3) = 1"], solve={"starts": 2}), None, Beside(2))
    check = next(check for check in found.checks if check.name == "other starts")
    assert "1 ended by an error (y with 1 half wave up: its process died: signal 9 (SIGKILL))" in check.sentence


def test_where_every_start_breaks_the_reasons_are_raised(monkeypatch):
    from solvers import solve as single

    monkeypatch.setattr(single, "_solve_once", lambda problem, watch, **more: failing(watch))
    with pytest.raises(RuntimeError, match="default guess: ValueError: of no use"):
        solve(shape(endpoints=["y(0) = 0", "y(3) = 1"], solve={"starts": 2}), None, Beside(2))
