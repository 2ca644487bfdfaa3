"""The worker as it is shipped: the solver in a slot's child, its size while it waits, its answer to a stop."""

import asyncio
import json
import subprocess
import sys

import pytest

from service import samples
from service.run import State, new_run

MEGABYTE = 2**20
JOB = "service.jobs:solve"


@pytest.fixture
def solving(start):
    return start(job=JOB, memory_mb=1024)


def test_a_sample_is_solved_in_a_worker_that_stays_small(solving, ended):
    dispatcher, store = solving
    run = ended(store, dispatcher.submit(new_run("hose", ""), samples.text("hose")), 120)
    result = json.loads(store.result(run.id))
    assert (run.state, result["id"], result["state"]) == (State.FINISHED, run.id, "finished")
    assert (result["value"], result["value_unit"]) == (run.value, run.value_unit)
    assert result["reading"]["necessary"]
    process = dispatcher._engine._slots[0]._process
    assert 20 * MEGABYTE < process.own < 100 * MEGABYTE


def test_a_cancel_reaches_the_solver_between_two_iterations(solving, ended, until):
    dispatcher, store = solving
    run = dispatcher.submit(new_run("crucible", ""), samples.text("crucible"))
    until(lambda: dispatcher._progress._channels[run.id].number > 2, 60)
    pid = dispatcher._engine._slots[0]._process.pid
    dispatcher.cancel(run.id)
    assert ended(store, run, 30).state is State.STOPPED
    until(lambda: dispatcher.capacity().alive)
    if store.result(run.id) is not None:  # else it was in one iteration for longer than the grace, and was killed
        assert json.loads(store.result(run.id))["state"] == "stopped"
        assert dispatcher._engine._slots[0]._process.pid == pid


def test_the_composer_gets_the_conditions_in_symbols(solving):
    dispatcher, _ = solving
    reading = json.loads(asyncio.run(dispatcher.understand(samples.text("hose").encode())))
    assert any(condition["kind"] == "Euler-Lagrange" for condition in reading["necessary"])
    assert asyncio.run(dispatcher.understand(b"{}")) is None


def test_the_server_side_imports_nothing_that_only_workers_need():
    code = "import sys, service.dispatch, service.store; print([m for m in sys.modules if m in %r])"
    heavy = ("casadi", "scipy", "numpy", "alembic", "service.jobs")
    found = subprocess.run([sys.executable, "-c", code % (heavy,)], capture_output=True, text=True, check=True)
    assert found.stdout == "[]\n"
